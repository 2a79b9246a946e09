"""Light onto the fine grid: points by the gridding kernel, shapes by their transforms.

What lands on the grid is each source convolved with the kernel of `imaging.kernel`, whose transform
the engine divides out again. Shapes are convolved on a stamp of their own that holds them whole, so
that the PSF which follows is never cut. The grid is periodic; places are in its cells.
"""

from __future__ import annotations

from math import ceil

import numpy as np
import scipy.fft

from simimg.arrays import AnyArray, FloatArray
from simimg.imaging.kernel import WIDTH, kernel, kernel_transform
from simimg.imaging.sources import PlacedShape

# Stars a chunk: their 64 cells each stay in the processor's cache.
_CHUNK = 8192
# Modulus of the highest frequency of a grid, at the corner of the square (cycles a cell).
HIGHEST = 0.7072


def spread_points(grid: AnyArray, x: FloatArray, y: FloatArray, electrons: FloatArray) -> None:
    """Add points to a periodic grid, in place.

    Parameters
    ----------
    grid : ndarray, shape (rows, columns)
        C-contiguous, float32 or float64.
    x, y : ndarray, shape (N,)
        Places in cells, from 0 at the centre of the first cell.
    electrons : ndarray, shape (N,)
        Weights.
    """
    rows, columns = grid.shape
    flat = grid.reshape(-1)
    # Neighbours in memory are added together; the order is fixed, so the sums are too.
    order = np.argsort(np.floor(y), kind="stable")
    taps = np.arange(WIDTH)
    for start in range(0, order.size, _CHUNK):
        pick = order[start : start + _CHUNK]
        first_x = np.ceil(x[pick] - WIDTH / 2).astype(np.int64)
        first_y = np.ceil(y[pick] - WIDTH / 2).astype(np.int64)
        offset_x = ((first_x - x[pick])[:, None] + taps) * (2.0 / WIDTH)
        offset_y = ((first_y - y[pick])[:, None] + taps) * (2.0 / WIDTH)
        across = kernel(offset_x.astype(grid.dtype))
        along = kernel(offset_y.astype(grid.dtype)) * electrons[pick, None].astype(grid.dtype)
        column = (first_x[:, None] + taps) % columns
        row = ((first_y[:, None] + taps) % rows) * columns
        cells = row[:, :, None] + column[:, None, :]
        np.add.at(flat, cells.reshape(-1), (along[:, :, None] * across[:, None, :]).reshape(-1))


def _fast_even(length: float) -> int:
    return 2 * int(scipy.fft.next_fast_len(ceil(length / 2.0), real=True))


def stamp_cells(radius_cells: float) -> int:
    """Side (cells) of the stamp that holds a shape of this radius and the kernel around it."""
    return _fast_even(2.0 * radius_cells + 2.0 * WIDTH)


def shape_stamp(
    placed: PlacedShape, *, x: float, y: float, cell: float, radius: float
) -> tuple[FloatArray, int, int]:
    """A shape convolved with the kernel, on a stamp of its own.

    Parameters
    ----------
    placed : PlacedShape
        The shape and its electrons.
    x, y : float
        Its centre in cells.
    cell : float
        Side of a cell (rad).
    radius : float
        Angle (rad) that the stamp must hold.

    Returns
    -------
    stamp : ndarray, shape (n, n)
        Electrons a cell (before the kernel is divided out).
    left, bottom : int
        Cell of the grid on which the stamp's first cell falls.
    """
    n = stamp_cells(radius / cell)
    left, bottom = round(x) - n // 2, round(y) - n // 2
    k_x = np.arange(n // 2 + 1) / n
    k_y = np.fft.fftfreq(n)
    shape = placed.shape
    if not hasattr(shape, "points"):
        spectrum: AnyArray = np.asarray(
            shape.transform(k_x[None, :] / cell, k_y[:, None] / cell), complex
        )
        spectrum *= np.exp(-2j * np.pi * k_x * (x - left))[None, :] * kernel_transform(k_x)[None, :]
        spectrum *= np.exp(-2j * np.pi * k_y * (y - bottom))[:, None]
        spectrum *= kernel_transform(k_y)[:, None]
        return placed.electrons * scipy.fft.irfft2(spectrum, s=(n, n)), left, bottom
    dx, dy, weight = shape.points(HIGHEST / cell)
    stamp = np.zeros((n, n))
    spread_points(stamp, x - left + dx / cell, y - bottom + dy / cell, placed.electrons * weight)
    side = getattr(shape, "pixel_side", 0.0) / cell
    if side:
        turn = getattr(shape, "pixel_angle", 0.0)
        cos, sin = np.cos(turn), np.sin(turn)
        along = k_x[None, :] * cos + k_y[:, None] * sin
        across = -k_x[None, :] * sin + k_y[:, None] * cos
        spectrum = scipy.fft.rfft2(stamp) * np.sinc(side * along) * np.sinc(side * across)
        stamp = scipy.fft.irfft2(spectrum, s=(n, n))
    return stamp, left, bottom


def add_stamp(
    grid: AnyArray, stamp: FloatArray, left: int, bottom: int, *, used: tuple[int, int]
) -> None:
    """Add a stamp to the grid; cells outside the `used` (rows, columns) of the grid are dropped."""
    rows, columns = used
    # The kernel's half width may hang over the used part: those cells wrap into the padding.
    y = np.arange(bottom, bottom + stamp.shape[0])
    x = np.arange(left, left + stamp.shape[1])
    keep_y = (y >= -WIDTH) & (y < rows + WIDTH)
    keep_x = (x >= -WIDTH) & (x < columns + WIDTH)
    if keep_y.any() and keep_x.any():
        block = stamp[np.ix_(keep_y, keep_x)].astype(grid.dtype)
        grid[np.ix_(y[keep_y] % grid.shape[0], x[keep_x] % grid.shape[1])] += block
