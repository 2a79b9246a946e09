"""A picture as a source: every pixel of a surface-brightness map is a square of even light.

A square pixel's light is a point convolved with a square, so that the picture is points (spread
like stars) times one transform of the square, ``sinc(a u') sinc(a v')``. Radians and cycles per
radian.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import ComplexArray, FloatArray
from simimg.sky.geometry import points_transform, require, require_positive


@dataclass(frozen=True, eq=False)
class PictureShape:
    """A picture of unit light.

    Parameters
    ----------
    values : array_like, shape (rows, columns)
        Surface brightness, any scale; row 0 at the bottom. What is negative counts as 0.
    pixel_side : float
        Side of a picture pixel on the sky, radians, above 0.
    angle : float, optional
        Turn of the picture from the detector's +x towards +y, radians: at 0 the picture's up is
        the detector's +y.
    mirrored : bool, optional
        Flip the picture left to right before the turn. Unflipped, its right is the detector's +x.

    Raises
    ------
    ValueError
        No light, NaN or infinity in the values, or an argument outside its range.
    """

    values: FloatArray
    pixel_side: float
    angle: float = 0.0
    mirrored: bool = False

    def __post_init__(self) -> None:
        given = np.asarray(self.values, dtype=np.float64)
        require(given.ndim == 2 and given.size > 0, "values must be a 2-D array that is not empty")
        require(bool(np.isfinite(given).all()), "values must be finite")
        light = np.maximum(given, 0.0)
        brightest = float(light.max())
        require(brightest > 0.0, "values must hold some light")
        light /= brightest
        light /= light.sum()
        light.setflags(write=False)
        object.__setattr__(self, "values", light)
        require_positive("pixel_side", self.pixel_side)
        require(math.isfinite(self.angle), f"angle must be finite, got {self.angle!r}")

    @property
    def pixel_angle(self) -> float:
        """Turn of the pixels' sides from the detector's +x towards +y, radians."""
        return self.angle

    def _axes(self) -> tuple[FloatArray, FloatArray]:
        """Places of the columns and of the rows from the middle, in the picture's axes, radians."""
        rows, columns = self.values.shape
        right = (np.arange(columns) - 0.5 * (columns - 1)) * self.pixel_side
        up = (np.arange(rows) - 0.5 * (rows - 1)) * self.pixel_side
        return (-right if self.mirrored else right), up

    def points(self, max_frequency: float = 0.0) -> tuple[FloatArray, FloatArray, FloatArray]:  # noqa: ARG002 (same call as for discs)
        """Centres of the lit pixels and their light.

        Parameters
        ----------
        max_frequency : float, optional
            Of no effect: the points times the square are exact at every frequency.

        Returns
        -------
        dx, dy, weight : ndarray, shape (n,)
            Places from the picture's middle along the detector's axes, radians, and light; the
            weights sum to 1.
        """
        right, up = self._axes()
        cosine, sine = math.cos(self.angle), math.sin(self.angle)
        lit = self.values > 0.0
        dx = np.subtract.outer(-sine * up, -cosine * right)[lit]
        dy = np.add.outer(cosine * up, sine * right)[lit]
        return dx, dy, self.values[lit]

    def point_count(self, max_frequency: float = 0.0) -> int:  # noqa: ARG002 (same call as for discs)
        """How many points `points` will give."""
        return int(np.count_nonzero(self.values))

    def transform(self, u: ArrayLike, v: ArrayLike) -> ComplexArray:
        """Transform at frequencies `u`, `v` (cycles per radian, broadcasting), by the plain sum.

        Complex, about the picture's middle; 1 at 0. For an image spread `points` instead.
        """
        fx, fy = np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64)
        cosine, sine = math.cos(self.angle), math.sin(self.angle)
        square = np.sinc(self.pixel_side * (cosine * fx + sine * fy)) * np.sinc(
            self.pixel_side * (cosine * fy - sine * fx)
        )
        return np.asarray(points_transform(*self.points(), fx, fy) * square)

    @cached_property
    def radius(self) -> float:
        """Radius about the middle, radians, outside which there is no light."""
        right, up = self._axes()
        half = 0.5 * self.pixel_side
        corner = np.hypot.outer(np.abs(up) + half, np.abs(right) + half)
        return float(corner[self.values > 0.0].max())

    def radius_for(self, fraction: float) -> float:
        """Radius, radians, outside which at most `fraction` is left: that of the lit pixels."""
        require(0.0 < fraction < 1.0, f"fraction must be between 0 and 1, got {fraction!r}")
        return self.radius

    def radius_below(self, level: float) -> float:
        """Radius, radians, beyond which the brightness is under `level`: that of the picture."""
        require_positive("level", level)
        return self.radius
