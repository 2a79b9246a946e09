"""Moving air over an aperture: the phase of the wavefront, instant by instant.

Each layer is a screen of Kolmogorov or von Karman turbulence which the wind carries past unchanged
(Taylor's frozen flow). A screen has two parts: coarse plane waves (`screenwaves`), right down to
the lowest frequencies, and blocks of finer ones (`screenblocks`). Both are drawn as the wind brings
them up and nothing repeats, however long one looks; memory stays the same. The way is rounded to
whole samples for the finer part alone, so that no interpolation smooths it: at every instant the
statistics are exact, and a ripple arrives on time to half a sample over the wind's speed.

All stars share one wavefront: right within the isoplanatic angle. Metres, seconds, radians.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from simimg.air.screenblocks import Blocks
from simimg.air.screenwaves import ORDERS, Waves
from simimg.arrays import FloatArray, frozen


@dataclass(frozen=True)
class Flow:
    """One layer as the aperture sees it.

    Attributes
    ----------
    share : float
        Of the turbulence, of all shares together.
    velocity : (float, float)
        Of the layer along the aperture's x and y (m/s).
    """

    share: float
    velocity: tuple[float, float] = (0.0, 0.0)


class Screens:
    """Turbulent layers over a square of samples about the aperture.

    Parameters
    ----------
    flows : sequence of Flow
        At least one with a share.
    r0 : float
        Fried's parameter of all layers together, at the wavelength of the phase (m).
    outer_scale : float
        L0 (m), or infinity.
    samples : int
        Side of the square, even.
    step : float
        Distance of samples (m).
    rng : Generator
        Seeds the screens; a few numbers are drawn from it at once and none later.

    Raises
    ------
    ValueError
        Lengths that are not positive, an odd or too small number of samples, no share.
    """

    def __init__(
        self,
        flows: Sequence[Flow],
        *,
        r0: float,
        outer_scale: float = np.inf,
        samples: int,
        step: float,
        rng: np.random.Generator,
    ) -> None:
        for name, value in (("r0", r0), ("step", step)):
            if not (np.isfinite(value) and value > 0.0):
                raise ValueError(f"{name} must be finite and above 0, got {value}")
        if not outer_scale > 0.0:
            raise ValueError(f"outer_scale must be above 0, got {outer_scale}")
        if samples < 8 or samples % 2:
            raise ValueError(f"samples must be even and at least 8, got {samples}")
        whole = sum(flow.share for flow in flows)
        if not whole > 0.0:
            raise ValueError("no layer has a share of the turbulence")
        entropy = tuple(int(word) for word in rng.integers(0, 2**32, size=4))
        self._step = step
        self._layers: list[tuple[Flow, float, Blocks, Waves]] = []
        for number, flow in enumerate(flows):
            if flow.share <= 0.0:
                continue
            # Shares are of r0^(-5/3), and so of the variance.
            strength = np.sqrt(flow.share / whole) * (step / r0) ** (5.0 / 6.0)
            scale = outer_scale / step
            direction = _against(flow.velocity)
            blocks = Blocks(
                samples, outer_scale=scale, direction=direction, key=(number, 0), entropy=entropy
            )
            waves = Waves(
                samples, outer_scale=scale, direction=direction, key=(number, 1), entropy=entropy
            )
            self._layers.append((flow, float(strength), blocks, waves))
        z = (2.0 * np.arange(samples) + 1.0) / samples - 1.0
        self._legendre = frozen(np.polynomial.legendre.legvander(z, ORDERS - 1))
        self._samples = samples

    def phase(self, time: float) -> FloatArray:
        """Phase over the square at a time.

        Parameters
        ----------
        time : float
            In s. Blocks that the wind has carried past are forgotten, and drawn anew, the same,
            where time runs back.

        Returns
        -------
        ndarray of float32, shape (samples, samples)
            In rad at the wavelength of r0, ``[y, x]``; its constant is of no meaning.
        """
        coarse = np.zeros((ORDERS, ORDERS))
        fine = np.zeros((self._samples, self._samples), dtype=np.float32)
        for flow, strength, blocks, waves in self._layers:
            x, y = (-speed * time / self._step for speed in flow.velocity)
            coarse += strength * waves.coefficients(x, y)
            fine += np.float32(strength) * blocks.patch(round(x), round(y))
        # Sums in a fixed order (no BLAS), so that threads change no bit.
        rows = np.einsum("ai,ij->aj", self._legendre, coarse)
        fine += np.einsum("aj,bj->ab", rows, self._legendre)
        return fine


def _against(velocity: tuple[float, float]) -> tuple[float, float]:
    """Unit vector in which an aperture moves through a layer of this velocity."""
    speed = float(np.hypot(*velocity))
    return (-velocity[0] / speed, -velocity[1] / speed) if speed > 0.0 else (1.0, 0.0)
