"""Discs in part phase: the lit part of a sphere (or spheroid) seen from the side of its light.

The lit part lies between the bright limb and the terminator, half an ellipse whose minor semi-axis
is ``cos(phase angle)`` of the radius; the lit fraction of the area is ``(1 + cos(phase angle))/2``
(Meeus, Astronomical Algorithms, ch. 41). Its brightness is uniform, or darkened towards the limb as
seen from here, ``1 - c (1 - mu)``; the darkening towards the terminator is not modelled.

There is no closed transform, so the lit part becomes points. In the angles of the sphere
(``x = cos(latitude) cos(theta)``, ``y = sin(latitude)``, theta from the limb to the terminator) the
integrand is analytic up to its ends, and Gauss-Legendre points in both angles converge faster than
any power once they resolve the highest frequency asked for.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import roots_legendre

from simimg.arrays import ComplexArray, FloatArray
from simimg.sky.geometry import (
    points_transform,
    require,
    require_ellipse,
    require_positive,
)


def _count(phase: float) -> int:
    """Gauss-Legendre points for ``exp(i phase t)``, t in [-1, 1], to 1e-6.

    An n-point rule is exact to degree 2n - 1; the Chebyshev coefficients of the exponential are
    Bessel functions of the phase, which vanish beyond an order of about phase + 7 phase^(1/3).
    """
    return math.ceil(0.5 * phase + 3.5 * math.cbrt(phase) + 7.0)


@dataclass(frozen=True)
class PhaseDiscShape:
    """The lit part of a disc, of unit light.

    Parameters
    ----------
    diameter : float
        Of the whole disc along its major axis, radians, above 0.
    limb_darkening : float, optional
        Linear coefficient, 0 to 1.
    phase_angle : float, optional
        Sun - object - observer angle, radians: 0 is full, pi/2 half lit; below pi.
    axis_ratio : float, optional
        Minor over major axis of the whole disc, above 0, at most 1. The major axis lies along
        `angle`: a flattened planet is lit along its equator.
    angle : float, optional
        Direction of the middle of the bright limb from the detector's +x towards +y, radians.

    Raises
    ------
    ValueError
        A value outside its range; at a phase angle of pi nothing is lit.
    """

    diameter: float
    limb_darkening: float = 0.0
    phase_angle: float = 0.0
    axis_ratio: float = 1.0
    angle: float = 0.0

    # Points have no size of their own.
    pixel_side = 0.0
    pixel_angle = 0.0

    def __post_init__(self) -> None:
        require_positive("diameter", self.diameter)
        require(
            0.0 <= self.limb_darkening <= 1.0,
            f"limb_darkening must be 0 to 1, got {self.limb_darkening!r}",
        )
        require(
            0.0 <= self.phase_angle < math.pi and math.cos(self.phase_angle) > -1.0 + 1e-9,
            "phase_angle must be 0 (full) to below 180 degrees (new, nothing lit), got "
            f"{math.degrees(self.phase_angle):.6g} degrees",
        )
        require_ellipse(self.axis_ratio, self.angle)

    @property
    def lit_fraction(self) -> float:
        """Lit area over the area of the whole disc, ``(1 + cos(phase angle))/2``."""
        return 0.5 * (1.0 + math.cos(self.phase_angle))

    @property
    def radius(self) -> float:
        """Radius about the centre of the whole disc, radians, outside which there is no light."""
        return 0.5 * self.diameter

    def _counts(self, max_frequency: float) -> tuple[int, int]:
        require(
            math.isfinite(max_frequency) and max_frequency >= 0.0,
            f"max_frequency must be finite and not negative, got {max_frequency!r}",
        )
        z = math.pi * self.diameter * max_frequency
        return _count(z * math.pi / 2.0), _count(z * (math.pi - self.phase_angle) / 2.0)

    def point_count(self, max_frequency: float) -> int:
        """How many points `points` will give, so that a caller can refuse before they are made."""
        latitudes, longitudes = self._counts(max_frequency)
        return latitudes * longitudes

    def points(self, max_frequency: float) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Points that stand for the lit part up to a frequency.

        Parameters
        ----------
        max_frequency : float
            Highest frequency, cycles per radian, up to which the transform of the points equals
            that of the lit part to 1e-6.

        Returns
        -------
        dx, dy, weight : ndarray, shape (n,)
            Places from the centre of the whole disc along the detector's axes, radians, and light;
            the weights sum to 1.
        """
        latitudes, longitudes = self._counts(max_frequency)
        t, wt = roots_legendre(latitudes)
        s, ws = roots_legendre(longitudes)
        latitude = 0.5 * math.pi * t[:, np.newaxis]
        theta = 0.5 * (math.pi - self.phase_angle) * (s + 1.0)
        mu = np.cos(latitude) * np.sin(theta)
        c = self.limb_darkening
        weight = wt[:, np.newaxis] * ws * np.cos(latitude) * mu * (1.0 - c * (1.0 - mu))
        weight /= weight.sum()
        along = self.radius * np.cos(latitude) * np.cos(theta)
        across = self.radius * self.axis_ratio * np.broadcast_to(np.sin(latitude), along.shape)
        cosine, sine = math.cos(self.angle), math.sin(self.angle)
        dx = (cosine * along - sine * across).ravel()
        dy = (sine * along + cosine * across).ravel()
        return dx, dy, weight.ravel()

    def transform(self, u: ArrayLike, v: ArrayLike) -> ComplexArray:
        """Transform at frequencies `u`, `v` (cycles per radian, broadcasting), by the plain sum.

        Complex, about the centre of the whole disc; 1 at 0. For large discs spread `points`
        instead.
        """
        highest = float(np.sqrt(np.max(np.square(u)) + np.max(np.square(v))))
        return points_transform(*self.points(highest), u, v)

    def radius_for(self, fraction: float) -> float:
        """Radius, radians, outside which at most `fraction` is left: that of the whole disc."""
        require(0.0 < fraction < 1.0, f"fraction must be between 0 and 1, got {fraction!r}")
        return self.radius

    def radius_below(self, level: float) -> float:
        """Radius, radians, beyond which the brightness is under `level`: that of the disc."""
        require_positive("level", level)
        return self.radius
