"""Round and elliptical discs, whole (full phase), with linear limb darkening.

The surface brightness is ``1 - c (1 - mu)`` with ``mu = sqrt(1 - r^2/R^2)`` (Schwarzschild 1906;
Milne 1921), ``c`` the linear coefficient. Its transform is a sum of ``J1(z)/z`` and
``J_3/2(z)/z^(3/2)``, ``z = 2 pi f R`` (Hanbury Brown et al. 1974). Radians and cycles per radian.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import j1

from simimg.arrays import FloatArray
from simimg.sky.geometry import (
    require,
    require_ellipse,
    require_positive,
    squeezed_frequency_squared,
)


def uniform_kernel(z: FloatArray) -> FloatArray:
    """``J1(z)/z`` for ``z >= 0``, with its limit 1/2 at 0."""
    safe = np.maximum(z, 1e-8)
    return np.asarray(j1(safe) / safe)


def darkened_kernel(z: FloatArray) -> FloatArray:
    """``(sin z - z cos z)/z^3`` for ``z >= 0``, with its limit 1/3 at 0.

    This is ``sqrt(pi/2) J_3/2(z)/z^(3/2)``. Below z = 0.3 the difference cancels, and the series
    to z^8 is exact to rounding.
    """
    safe = np.maximum(z, 0.3)
    closed = (np.sin(safe) - safe * np.cos(safe)) / safe**3
    t = np.minimum(z, 0.3) ** 2
    series = (1.0 - t / 10.0 * (1.0 - t / 28.0 * (1.0 - t / 54.0 * (1.0 - t / 88.0)))) / 3.0
    return np.where(z < 0.3, series, closed)


@dataclass(frozen=True)
class DiscShape:
    """A disc of unit light, uniform or limb-darkened, round or elliptical, seen at full phase.

    Parameters
    ----------
    diameter : float
        Along the major axis, radians, above 0.
    limb_darkening : float, optional
        Linear coefficient, 0 (uniform) to 1 (dark at the limb).
    axis_ratio : float, optional
        Minor over major axis, above 0, at most 1.
    angle : float, optional
        Major axis from the detector's +x towards +y, radians.

    Raises
    ------
    ValueError
        A value outside its range.
    """

    diameter: float
    limb_darkening: float = 0.0
    axis_ratio: float = 1.0
    angle: float = 0.0

    def __post_init__(self) -> None:
        require_positive("diameter", self.diameter)
        require(
            0.0 <= self.limb_darkening <= 1.0,
            f"limb_darkening must be 0 to 1, got {self.limb_darkening!r}",
        )
        require_ellipse(self.axis_ratio, self.angle)

    def transform(self, u: ArrayLike, v: ArrayLike) -> FloatArray:
        """Transform at frequencies `u`, `v` (cycles per radian, broadcasting); real, 1 at 0."""
        squared = squeezed_frequency_squared(u, v, axis_ratio=self.axis_ratio, angle=self.angle)
        z = np.sqrt(squared) * (math.pi * self.diameter)
        c = self.limb_darkening
        if c == 0.0:
            return np.asarray(2.0 * uniform_kernel(z))
        light = (1.0 - c) / 2.0 + c / 3.0
        return np.asarray(((1.0 - c) * uniform_kernel(z) + c * darkened_kernel(z)) / light)

    @property
    def radius(self) -> float:
        """Radius, radians, outside which there is no light."""
        return 0.5 * self.diameter

    def radius_for(self, fraction: float) -> float:
        """Radius along the major axis, radians, of the ellipse outside which `fraction` is left.

        The light inside a radius is ``((1 - c) (1 - mu^2)/2 + c (1 - mu^3)/3)`` over its total; for
        a limb-darkened disc the whole radius is given, which errs on the safe side.
        """
        require(0.0 < fraction < 1.0, f"fraction must be between 0 and 1, got {fraction!r}")
        if self.limb_darkening == 0.0:
            return self.radius * math.sqrt(1.0 - fraction)
        return self.radius

    def brightness(self, r: ArrayLike) -> FloatArray:
        """Surface brightness, per steradian of unit light, at radii `r` (radians, major axis)."""
        x = np.asarray(r, dtype=np.float64) / self.radius
        mu = np.sqrt(np.maximum(0.0, 1.0 - x * x))
        c = self.limb_darkening
        light = math.pi * self.axis_ratio * self.radius**2 * (1.0 - c / 3.0)
        return np.where(x <= 1.0, 1.0 - c * (1.0 - mu), 0.0) / light

    def radius_below(self, level: float) -> float:
        """Radius, radians, beyond which the brightness is under `level`: that of the disc."""
        require_positive("level", level)
        return self.radius
