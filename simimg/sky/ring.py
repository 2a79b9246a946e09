"""Flat rings of uniform brightness, tilted to the line of sight.

A flat annulus seen at an inclination is the difference of two similar ellipses, and its transform
the difference of two of ``2 J1(z)/z`` (Airy 1835). Radians and cycles per radian.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray
from simimg.sky.disc import uniform_kernel
from simimg.sky.geometry import require, require_positive, squeezed_frequency_squared


@dataclass(frozen=True)
class RingShape:
    """A flat uniform ring of unit light.

    Parameters
    ----------
    inner_diameter, outer_diameter : float
        Along the major axis, radians; 0 <= inner < outer.
    inclination : float, optional
        Of the ring's axis to the line of sight, radians: 0 face on, pi/2 edge on (then a line).
    angle : float, optional
        Major axis from the detector's +x towards +y, radians.

    Raises
    ------
    ValueError
        A value outside its range.
    """

    inner_diameter: float
    outer_diameter: float
    inclination: float = 0.0
    angle: float = 0.0

    def __post_init__(self) -> None:
        require_positive("outer_diameter", self.outer_diameter)
        require(
            0.0 <= self.inner_diameter < self.outer_diameter,
            f"inner_diameter must be 0 to below outer_diameter ({self.outer_diameter!r}), got "
            f"{self.inner_diameter!r}",
        )
        require(
            0.0 <= self.inclination <= 0.5 * math.pi + 1e-12,
            f"inclination must be 0 to pi/2 radians, got {self.inclination!r}",
        )
        require(math.isfinite(self.angle), f"angle must be finite, got {self.angle!r}")

    def transform(self, u: ArrayLike, v: ArrayLike) -> FloatArray:
        """Transform at frequencies `u`, `v` (cycles per radian, broadcasting); real, 1 at 0."""
        ratio = max(0.0, math.cos(self.inclination))
        frequency = np.sqrt(squeezed_frequency_squared(u, v, axis_ratio=ratio, angle=self.angle))
        outer, inner = self.outer_diameter**2, self.inner_diameter**2
        total = outer * uniform_kernel(frequency * (math.pi * self.outer_diameter))
        total -= inner * uniform_kernel(frequency * (math.pi * self.inner_diameter))
        return np.asarray(total * (2.0 / (outer - inner)))

    @property
    def radius(self) -> float:
        """Radius, radians, outside which there is no light."""
        return 0.5 * self.outer_diameter

    def radius_for(self, fraction: float) -> float:
        """Radius along the major axis, radians, of the ellipse outside which `fraction` is left."""
        require(0.0 < fraction < 1.0, f"fraction must be between 0 and 1, got {fraction!r}")
        inside = self.inner_diameter**2
        return 0.5 * math.sqrt(inside + (1.0 - fraction) * (self.outer_diameter**2 - inside))

    def radius_below(self, level: float) -> float:
        """Radius, radians, beyond which the brightness is under `level`: that of the ring."""
        require_positive("level", level)
        return self.radius
