"""The limits of several frames together: those of the sum of their PSFs.

What a stack of frames would show is the mean of their PSFs, each with the light that its frame
adds. Directions are those of the first frame; lengths are radians.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import atan2, cos, pi, sin

import numpy as np

from simimg.arrays import FloatArray
from simimg.resolving.criteria import SampledProfile, sample_far_enough
from simimg.resolving.pairlimits import Cuts


@dataclass(frozen=True, eq=False)
class _MeanCut:
    """The weighted mean of cuts, each per steradian through its own peak."""

    sources: tuple[SampledProfile, ...]
    weights: tuple[float, ...]

    def __call__(self, t: FloatArray | float) -> FloatArray:
        parts = [
            weight * np.asarray(one.source(np.asarray(t, dtype=np.float64)))
            for one, weight in zip(self.sources, self.weights)
        ]
        return np.asarray(sum(parts))


class StackedDirections:
    """The cuts of the mean of several PSFs.

    Parameters
    ----------
    cuts : sequence of Cuts
        Of each frame.
    weights : sequence of float
        Light that each frame adds.
    turns : sequence of ndarray, shape (2, 2)
        From steps in the first frame to steps in each.
    """

    def __init__(
        self, cuts: Sequence[Cuts], *, weights: Sequence[float], turns: Sequence[FloatArray]
    ) -> None:
        self._cuts = tuple(cuts)
        total = float(sum(weights))
        self._weights = tuple(weight / total for weight in weights)
        self._turns = tuple(turns)
        self.even = all(one.even for one in cuts)

    def profile(self, angle: float, magnitude_difference: float = 0.0) -> SampledProfile:
        """The mean PSF along `angle`, sampled as far out as a companion that much fainter asks."""
        key = angle % (pi if self.even else 2.0 * pi)
        sources = []
        for one, turn in zip(self._cuts, self._turns):
            dx, dy = turn @ np.array([cos(key), sin(key)])
            sources.append(one.profile(atan2(float(dy), float(dx))))
        ratio = 10.0 ** (-0.4 * abs(magnitude_difference))
        return sample_far_enough(_MeanCut(tuple(sources), self._weights), ratio)
