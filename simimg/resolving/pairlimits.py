"""Delivered limits of measured pairs: along each pair's own line, for its own brightness ratio.

A few pairs have their limits worked out one by one; of many, those whose lines are within a few
degrees share one tabulated curve. Radians.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import inf, pi
from typing import Protocol

import numpy as np

from simimg.arrays import FloatArray
from simimg.resolving.criteria import (
    SampledProfile,
    SparrowCurve,
    rayleigh_saddle,
    sparrow,
    sparrow_curve,
)
from simimg.resolving.resolution import BRIGHTEST_DIFFERENCE

_MANY = 16
_SHARED = pi / 36.0  # directions that share a curve: 5 degrees
_STEPS = 120


class Cuts(Protocol):
    """The cuts of an effective PSF: of a transfer function, or of an image of it."""

    @property
    def even(self) -> bool:
        """Whether opposite directions show the same cut."""

    def profile(self, angle: float, magnitude_difference: float = 0.0) -> SampledProfile:
        """The PSF along `angle` (rad), as far out as a companion that much fainter asks."""


@dataclass(frozen=True, eq=False)
class PairLimit:
    """Limits of one pair.

    Attributes
    ----------
    rayleigh : float
        Separation at which an equal pair's saddle is 0.735 of its peaks.
    sparrow : float
        For the pair's own magnitude difference.
    sparrow_for : callable
        Sparrow's limit for an array of magnitude differences near the pair's.
    """

    rayleigh: float
    sparrow: float
    sparrow_for: Callable[[FloatArray], FloatArray]


class PairLimits:
    """The limits of one PSF for any pair.

    Parameters
    ----------
    delivered : Cuts
        Of the effective PSF.
    pairs : int, optional
        How many will be asked for; of more than 16, neighbouring directions share their curves.
    """

    def __init__(self, delivered: Cuts, *, pairs: int = 1) -> None:
        self._delivered = delivered
        self._many = pairs > _MANY
        self._kept: dict[int, tuple[float, SparrowCurve]] = {}

    def of(self, angle: float, difference: float, reach: float) -> PairLimit:
        """Work out the limits of a pair.

        Parameters
        ----------
        angle : float
            Direction of the second star, from the detector's +x towards +y.
        difference : float
            Magnitude difference, second minus first.
        reach : float
            How far from it Sparrow's limit will be asked, magnitudes.
        """
        own = float(np.clip(difference, -BRIGHTEST_DIFFERENCE, BRIGHTEST_DIFFERENCE))
        if self._many:
            rayleigh, curve = self._shared(angle)
            closest = float(curve(own))
        else:
            largest = float(np.clip(abs(own) + reach, 0.1, BRIGHTEST_DIFFERENCE))
            profile = self._delivered.profile(angle, largest)
            rayleigh = rayleigh_saddle(profile)
            curve = sparrow_curve(profile, largest=largest, step=largest / _STEPS)
            closest = sparrow(profile, own)
        if abs(difference) > BRIGHTEST_DIFFERENCE:
            closest = inf

        def sparrow_for(differences: FloatArray) -> FloatArray:
            beyond = np.abs(differences) > BRIGHTEST_DIFFERENCE
            return np.where(beyond, inf, curve(differences))

        return PairLimit(rayleigh, closest, sparrow_for)

    def _shared(self, angle: float) -> tuple[float, SparrowCurve]:
        key = round((angle % (2.0 * pi)) / _SHARED)
        if self._delivered.even:
            key %= round(pi / _SHARED)
        if key not in self._kept:
            profile = self._delivered.profile(key * _SHARED, 8.0)
            curve = sparrow_curve(profile, largest=8.0, step=0.1)
            self._kept[key] = rayleigh_saddle(profile), curve
        return self._kept[key]
