"""All shapes by one door, and what each of them offers.

Every shape has unit light and is centred on the origin, in detector axes; lengths in radians,
frequencies in cycles per radian.
"""

from __future__ import annotations

from typing import Any, Protocol, runtime_checkable

from numpy.typing import ArrayLike

from simimg.arrays import AnyArray, FloatArray
from simimg.sky.disc import DiscShape
from simimg.sky.mosaic import PictureShape
from simimg.sky.phase import PhaseDiscShape
from simimg.sky.ring import RingShape
from simimg.sky.sersic import SersicShape

__all__ = [
    "DiscShape",
    "PhaseDiscShape",
    "PictureShape",
    "PointedShape",
    "RingShape",
    "SersicShape",
    "Shape",
]


@runtime_checkable
class Shape(Protocol):
    """A source of unit light with a transform."""

    def transform(self, u: ArrayLike, v: ArrayLike) -> AnyArray:
        """Transform at frequencies in cycles per radian, broadcasting; 1 at 0."""

    @property
    def radius(self) -> float:
        """Radians from the centre beyond which less than 1e-6 of the light is left."""

    def radius_for(self, fraction: float) -> float:
        """Radians from the centre beyond which at most `fraction` of the light is left."""

    def radius_below(self, level: float) -> float:
        """Radians from the centre beyond which the brightness (per steradian) is under a level."""


@runtime_checkable
class PointedShape(Shape, Protocol):
    """A shape that is given as points, each standing for a square (side 0: for itself)."""

    @property
    def pixel_side(self) -> Any:
        """Side of the square, radians."""

    @property
    def pixel_angle(self) -> Any:
        """Turn of the square from the detector's +x towards +y, radians."""

    def point_count(self, max_frequency: float) -> int:
        """How many points there are for a highest frequency."""

    def points(self, max_frequency: float) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Places (radians) and weights that are exact up to a frequency (cycles per radian)."""
