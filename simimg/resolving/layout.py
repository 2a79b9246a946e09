"""Where the parameters of a fit stand: stars, backgrounds, slopes, and how each frame sees them.

Several frames of one field show the same stars, each through its own air and on its own pixels. A
star at ``p`` of the first frame stands in another at ``turn p + origin + shift`` and gives
``factor exp(tau)`` times its electrons; turn, origin and factor are known (from coordinates, or
from a first fit), the small shift and tau are free. The first frame has neither: it fixes what
place and brightness mean.

The background of a cutout is one level, or a plane where the cutout says so: the level in its
middle and the rise from there to its edges along x and y.

The vector of parameters holds, in this order: x, y and electrons of each star; the level of each
cutout; the two rises of each cutout whose background is a plane; the shift in x and y and tau of
each frame but the first. Detector pixels and electrons.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen


def _unturned() -> FloatArray:
    return frozen(np.eye(2))


def _nowhere() -> FloatArray:
    return frozen(np.zeros(2))


@dataclass(frozen=True, eq=False)
class View:
    """How a frame sees the stars whose places are given in the first frame's pixels.

    Attributes
    ----------
    number : int
        Of the frame, 0 for the first, whose turn is 1 and origin 0.
    turn : ndarray, shape (2, 2)
    origin : ndarray, shape (2,)
        A star at ``p`` stands at ``turn @ p + origin``, and a free shift from there.
    factor : float
        Electrons in this frame for each in the first, but for what is free, above 0.
    free : bool
        Whether a small shift and the transparency are to be fitted.
    """

    number: int = 0
    turn: FloatArray = field(default_factory=_unturned)
    origin: FloatArray = field(default_factory=_nowhere)
    factor: float = 1.0
    free: bool = True

    def place(self, x: float, y: float) -> tuple[float, float]:
        """Where a star stands in this frame, but for the free shift."""
        seen = self.turn @ np.array([x, y]) + self.origin
        return float(seen[0]), float(seen[1])


FIRST = View()
"""The first frame, or the only one."""


class Layout:
    """Indices into the vector of parameters.

    Parameters
    ----------
    stars : int
    tilted : sequence of bool
        For each cutout, whether its background is a plane.
    numbers : sequence of int
        For each cutout, the number of its frame; 0 where its shift and transparency are known.

    Attributes
    ----------
    size : int
        Of the vector.
    level : tuple of int
        Index of each cutout's level.
    rise : tuple of (int or None)
        Index of the first of each cutout's two rises.
    view : tuple of (int or None)
        Index of the first of the three (shift in x, in y, tau) of each cutout's frame.
    own : tuple of tuple of int
        All that a cutout depends on: stars, level, rises, view.
    """

    def __init__(self, stars: int, tilted: Sequence[bool], numbers: Sequence[int]) -> None:
        begin = 3 * stars
        self.stars = stars
        self.level = tuple(range(begin, begin + len(tilted)))
        after = begin + len(tilted)
        rise: list[int | None] = []
        for plane in tilted:
            rise.append(after if plane else None)
            after += 2 * plane
        self.rise = tuple(rise)
        others = sorted({number for number in numbers if number > 0})
        self.view = tuple(
            after + 3 * others.index(number) if number > 0 else None for number in numbers
        )
        self.size = after + 3 * len(others)
        self._views = after
        self.own = tuple(
            (
                *range(begin),
                self.level[index],
                *(() if self.rise[index] is None else self._run(self.rise[index], 2)),
                *(() if self.view[index] is None else self._run(self.view[index], 3)),
            )
            for index in range(len(tilted))
        )

    @staticmethod
    def _run(first: int | None, count: int) -> range:
        assert first is not None
        return range(first, first + count)

    def shift(self, vector: FloatArray, index: int) -> tuple[float, float, float]:
        """Shift in x and in y (pixels) and transparency of a cutout's frame."""
        first = self.view[index]
        if first is None:
            return 0.0, 0.0, 1.0
        return float(vector[first]), float(vector[first + 1]), float(np.exp(vector[first + 2]))

    def longest(self, step: FloatArray, reach: float) -> float:
        """Longest move of any frame in a step, over ``reach`` pixels or half a magnitude."""
        views = step[self._views :].reshape(-1, 3)
        moves = np.hypot(views[:, 0], views[:, 1]).max(initial=0.0) / reach
        return float(max(moves, 2.0 * np.abs(views[:, 2]).max(initial=0.0)))


def plane(rows: int, columns: int) -> FloatArray:
    """Rise of one electron from the middle of a cutout to its edge, along x and along y.

    Returns
    -------
    ndarray, shape (2, rows * columns)
    """
    x = 2.0 * (np.arange(columns) - 0.5 * (columns - 1)) / max(columns - 1, 1)
    y = 2.0 * (np.arange(rows) - 0.5 * (rows - 1)) / max(rows - 1, 1)
    across, along = np.broadcast_arrays(x, y[:, None])
    return np.stack([across.ravel(), along.ravel()])


def turned(planes: AnyArray, turn: FloatArray) -> FloatArray:
    """Derivatives by a star's place in the first frame, from those by its place in its own.

    Parameters
    ----------
    planes : ndarray, shape (1, ...), (3, ...) or (6, ...)
        Value; by x, y; by xx, xy, yy.
    turn : ndarray, shape (2, 2)
    """
    (a, b), (c, d) = turn
    result = np.array(planes, dtype=np.float64)
    if len(planes) > 1:
        result[1] = a * planes[1] + c * planes[2]
        result[2] = b * planes[1] + d * planes[2]
    if len(planes) > 3:
        xx, xy, yy = planes[3:]
        result[3] = a * a * xx + 2.0 * a * c * xy + c * c * yy
        result[4] = a * b * xx + (a * d + b * c) * xy + c * d * yy
        result[5] = b * b * xx + 2.0 * b * d * xy + d * d * yy
    return result
