"""Areas: what part of each square of a lattice lies within a disc or a polygon.

Exact, by integrals in closed form, for any size and place of the figure; a figure thinner than a
square counts as its area. A lattice is given by the corners of its columns and of its rows, evenly
spaced, in any unit of length. Arrays are ``[y, x]``.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray

_ROUNDING = 1e-12


def disc_coverage(x: FloatArray, y: FloatArray, radius: float) -> FloatArray:
    """Part of each square within a disc about the origin.

    Parameters
    ----------
    x : (n + 1,) ndarray
        Corners of the columns, increasing.
    y : (m + 1,) ndarray
        Corners of the rows, increasing.
    radius : float
        Above 0.

    Returns
    -------
    (m, n) ndarray of float64
        From 0 to 1.
    """
    across, along = x[np.newaxis, :] / radius, y[:, np.newaxis] / radius
    left, below = np.clip(across, -1.0, 1.0), np.clip(along, -1.0, 1.0)

    def under(t: FloatArray) -> FloatArray:
        """Area between the axis and the unit circle, from 0 to t."""
        return np.asarray(0.5 * (t * np.sqrt((1.0 - t) * (1.0 + t)) + np.arcsin(t)))

    under_x, under_y = under(left), under(below)
    # Area of the disc to the left of and below a corner, for a corner in the disc or out of it.
    cumulative = np.where(
        across * across + along * along <= 1.0,
        0.25 * np.pi + across * along + under_x + under_y,
        np.where(
            across > 0.0,
            np.where(along > 0.0, 2.0 * (under_x + under_y), 0.5 * np.pi + 2.0 * under_y),
            np.where(along > 0.0, 0.5 * np.pi + 2.0 * under_x, 0.0),
        ),
    )
    area = np.diff(np.diff(cumulative, axis=0), axis=1)
    square = (across[0, 1] - across[0, 0]) * (along[1, 0] - along[0, 0])
    return np.asarray(np.clip(area / square, 0.0, 1.0))


def polygon_coverage(x: FloatArray, y: FloatArray, vertices: ArrayLike) -> FloatArray:
    """Part of each square within a polygon that does not cross itself.

    Each side takes the area between it and the right-hand end of every row's squares; the areas of
    all sides, counted upwards or downwards, add up to the polygon (Green's theorem).

    Parameters
    ----------
    x : (n + 1,) ndarray
        Corners of the columns, increasing and evenly spaced.
    y : (m + 1,) ndarray
        Corners of the rows, increasing and evenly spaced.
    vertices : (k, 2) array_like
        Corners ``(x, y)`` of the polygon in turn, either way round.

    Returns
    -------
    (m, n) ndarray of float64
        From 0 to 1.

    Raises
    ------
    ValueError
        If there are fewer than three vertices or one is not finite.
    """
    corners = np.asarray(vertices, dtype=np.float64)
    if corners.ndim != 2 or corners.shape[1:] != (2,) or corners.shape[0] < 3:
        raise ValueError(f"a polygon needs at least three vertices (x, y), got {corners.shape}")
    if not np.all(np.isfinite(corners)):
        raise ValueError("the vertices of a polygon must be finite")
    result = np.zeros((y.size - 1, x.size - 1))
    first_column, last_column = _window(x, corners[:, 0])
    first_row, last_row = _window(y, corners[:, 1])
    if first_column >= last_column or first_row >= last_row:
        return result
    ends = x[first_column : last_column + 1]
    part = np.zeros((last_row - first_row, last_column - first_column))
    for start, stop in zip(corners, np.roll(corners, -1, axis=0)):
        if start[1] == stop[1]:
            continue
        lower, upper = (start, stop) if start[1] < stop[1] else (stop, start)
        low, high = _window(y, np.array([lower[1], upper[1]]))
        low, high = max(low, first_row), min(high, last_row)
        if low >= high:
            continue
        edges = np.clip(y[low : high + 1], lower[1], upper[1])
        slope = (upper[0] - lower[0]) / (upper[1] - lower[1])
        places = lower[0] + slope * (edges - lower[1])
        area = _right_of(ends, places[:-1, np.newaxis], places[1:, np.newaxis])
        area = np.diff(area, axis=1) * np.diff(edges)[:, np.newaxis]
        part[low - first_row : high - first_row] += area if start[1] < stop[1] else -area
    square = (x[1] - x[0]) * (y[1] - y[0])
    part = np.abs(part) / square
    # What rounding leaves beside the polygon would count as light.
    part[part < _ROUNDING] = 0.0
    result[first_row:last_row, first_column:last_column] = np.minimum(part, 1.0)
    return result


def _window(corners: FloatArray, places: FloatArray) -> tuple[int, int]:
    """First square that reaches beyond the smallest place, and the one after the largest."""
    step = corners[1] - corners[0]
    first = int(np.clip(np.floor((places.min() - corners[0]) / step), 0, corners.size - 1))
    last = int(np.clip(np.ceil((places.max() - corners[0]) / step), 0, corners.size - 1))
    return first, last


def _right_of(x: FloatArray, start: FloatArray, stop: FloatArray) -> FloatArray:
    """Mean of max(x - place, 0) for places evenly spread from ``start`` to ``stop``."""
    one, two = x - start, x - stop
    larger, smaller = np.maximum(one, two), np.minimum(one, two)
    span = np.where(larger > smaller, larger - smaller, 1.0)
    crossed = np.maximum(larger, 0.0) ** 2 / (2.0 * span)
    return np.asarray(np.where(smaller >= 0.0, 0.5 * (one + two), crossed))
