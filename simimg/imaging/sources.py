"""What the engine paints: points and shapes with their electrons, in detector pixels.

Places are in pixels, from 0 at the centre of the first pixel, x along columns and y along rows, and
may lie outside the frame. Electrons are those of one exposure over the whole PSF. A shape brings
its own Fourier transform or its own quadrature points in radians about its centre.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen


@dataclass(frozen=True)
class Points:
    """Point sources, each array of shape ``(N,)``.

    Attributes
    ----------
    x, y : ndarray
        Places in pixels.
    electrons : ndarray
        Of one exposure, over the whole PSF.
    kind : ndarray of int
        Which kind of source each is (spectrum, tracked or not), as the PSFs' rule understands it;
        0 unless given.
    """

    x: FloatArray
    y: FloatArray
    electrons: FloatArray
    kind: AnyArray = field(default_factory=lambda: np.zeros(0, dtype=np.int64))

    def __post_init__(self) -> None:
        for name in ("x", "y", "electrons"):
            object.__setattr__(
                self, name, frozen(np.atleast_1d(np.asarray(getattr(self, name), float)))
            )
        if not self.x.shape == self.y.shape == self.electrons.shape:
            raise ValueError("x, y and electrons of points must have one shape")
        kind = np.asarray(self.kind, dtype=np.int64)
        kind = np.zeros(self.x.shape, dtype=np.int64) if kind.size == 0 else kind
        if kind.shape != self.x.shape:
            raise ValueError("kind of points must have the shape of x")
        object.__setattr__(self, "kind", frozen(kind))

    def __len__(self) -> int:
        return int(self.x.size)

    def chosen(self, rows: AnyArray) -> Points:
        """The points picked by a boolean mask or indices `rows`."""
        return Points(self.x[rows], self.y[rows], self.electrons[rows], self.kind[rows])


def no_points() -> Points:
    """An empty set of points."""
    return Points(np.empty(0), np.empty(0), np.empty(0))


def one_point(x: float, y: float, electrons: float, kind: int = 0) -> Points:
    """A single point."""
    return Points(np.array([x]), np.array([y]), np.array([electrons]), np.array([kind]))


class SkyShape(Protocol):
    """A shape of unit light, known by its Fourier transform.

    One that has no transform in closed form brings ``points(max_frequency)`` instead: places (rad,
    from the centre) and weights that sum to 1, with ``pixel_side`` and ``pixel_angle`` of the
    square that each of them stands for.
    """

    @property
    def radius(self) -> float:
        """Angle (rad) from the centre beyond which next to no light lies."""
        ...

    def radius_below(self, level: float) -> float:
        """Angle (rad) beyond which less than `level` per steradian is left."""
        ...

    def transform(self, u: FloatArray, v: FloatArray) -> AnyArray:
        """Transform at frequencies `u`, `v` (cycles/rad), broadcast together; 1 at the origin."""
        ...


@dataclass(frozen=True)
class PlacedShape:
    """A shape with its place (pixels), its electrons and its kind (as of points)."""

    x: float
    y: float
    electrons: float
    shape: SkyShape
    kind: int = 0


@dataclass(frozen=True)
class Sources:
    """Everything that is up there: points and shapes."""

    points: Points
    shapes: tuple[PlacedShape, ...] = ()

    @property
    def total_electrons(self) -> float:
        """Electrons of all sources together, on the frame or off it."""
        return float(self.points.electrons.sum() + sum(s.electrons for s in self.shapes))
