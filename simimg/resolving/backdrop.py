"""The background of a frame and its noise, from the pixels alone.

The frame is cut into square blocks. In each a plane is fitted to the pixels that stars and defects
leave alone (three clippings at three standard deviations), and the scatter about it is the noise;
a truncated Gaussian's scatter is low by 1.3 %, which is made up for. Level and noise are those of
the darkest quarter of the blocks, where stray light of stars counts least. What the background does
across the frame is read from the levels of all blocks.

In the frame's own counts; pixels count from 0 at the centre of the first.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import ceil, sqrt

import numpy as np
from scipy import ndimage

from simimg.arrays import AnyArray, FloatArray, frozen

_SIDES = (8, 64)  # least and greatest side of a block, pixels
_ACROSS = 10  # blocks along the shorter side of a frame, where there is room
_MOST = 256  # blocks that are looked at
_CLIP = 3.0
_TRUNCATED = 0.98657  # standard deviation of a Gaussian cut off at three of them
_FILLED = 0.5  # share of a block's pixels that must count
_EVEN = 3.0  # noises of a block's level within which the background counts as even


@dataclass(frozen=True, eq=False)
class Backdrop:
    """The background of a frame.

    Attributes
    ----------
    level : float
        Counts of a pixel without stars, where the frame is darkest.
    noise : float
        Standard deviation of a pixel there; 0 for a frame without noise.
    error : float
        Relative standard error of `noise`.
    slant : float
        How much the background differs across the frame (95th percentile less 5th of the blocks'
        levels), counts.
    levels : ndarray, shape (n, m)
        Of the blocks, gaps filled, smoothed.
    side : int
        Of a block, pixels.
    slope : (float, float)
        Of the plane that follows the levels best, counts to the pixel along x and y.
    """

    level: float
    noise: float
    error: float
    slant: float
    levels: FloatArray
    side: int
    slope: tuple[float, float] = (0.0, 0.0)

    @property
    def even(self) -> bool:
        """Whether the background is the same everywhere, as far as can be told."""
        return self.slant <= max(_EVEN * 1.3 * self.noise / self.side, 0.02 * self.noise)

    def rise(self, box: tuple[slice, slice], shape: tuple[int, int]) -> FloatArray:
        """The plane over a box, 0 in the middle of the frame, counts: for fits.

        A fit has a plane of its own; what bends at every block would trouble it.

        Parameters
        ----------
        box : (slice, slice)
            Rows and columns.
        shape : (rows, columns)
            Of the frame.
        """
        y = np.arange(*box[0].indices(shape[0])) - 0.5 * (shape[0] - 1)
        x = np.arange(*box[1].indices(shape[1])) - 0.5 * (shape[1] - 1)
        return np.asarray(self.slope[0] * x + self.slope[1] * y[:, None])

    def relief(self, box: tuple[slice, slice], shape: tuple[int, int]) -> FloatArray:
        """Background over a box less `level`, counts, linear between blocks: for finding.

        Parameters
        ----------
        box : (slice, slice)
            Rows and columns.
        shape : (rows, columns)
            Of the frame.
        """
        rows = np.arange(*box[0].indices(shape[0]))
        columns = np.arange(*box[1].indices(shape[1]))
        if min(self.levels.shape) < 2 or self.even:
            return np.zeros((rows.size, columns.size))
        places = [
            np.clip(np.interp(axis, self._middles(count, size), np.arange(count)), 0.0, count - 1.0)
            for axis, count, size in zip((rows, columns), self.levels.shape, shape)
        ]
        first, second = places
        below, left = (np.minimum(p.astype(int), n - 2) for p, n in zip(places, self.levels.shape))
        up, right = (first - below)[:, None], (second - left)[None, :]
        grid = self.levels - self.level
        lower = grid[np.ix_(below, left)] * (1.0 - right) + grid[np.ix_(below, left + 1)] * right
        upper = (
            grid[np.ix_(below + 1, left)] * (1.0 - right)
            + grid[np.ix_(below + 1, left + 1)] * right
        )
        return np.asarray(lower * (1.0 - up) + upper * up)

    def _middles(self, count: int, size: int) -> FloatArray:
        return _starts(size, self.side, count) + 0.5 * (self.side - 1)


def _starts(size: int, side: int, count: int) -> AnyArray:
    """First pixels of evenly spread blocks."""
    return np.rint(np.linspace(0, size - side, count)).astype(int)


def find_backdrop(counts: AnyArray, good: AnyArray) -> Backdrop:
    """Find the background of a frame.

    Parameters
    ----------
    counts : ndarray, shape (rows, columns)
    good : ndarray of bool, shape (rows, columns)
        Pixels that count.
    """
    rows, columns = counts.shape
    side = int(np.clip(min(rows, columns) // _ACROSS, *_SIDES))
    side = min(side, rows, columns)
    spread = max(1.0, sqrt(rows * columns / side**2 / _MOST))
    grid = tuple(max(1, ceil(size / side / spread)) for size in (rows, columns))
    down, along = (_starts(size, side, count) for size, count in zip(counts.shape, grid))
    windows = np.lib.stride_tricks.sliding_window_view(counts, (side, side))[np.ix_(down, along)]
    used = np.lib.stride_tricks.sliding_window_view(good, (side, side))[np.ix_(down, along)]
    data = windows.reshape(-1, side * side).astype(np.float64)
    used = used.reshape(-1, side * side) & np.isfinite(data)
    level, noise, kept = _planes(np.where(used, data, 0.0), used, side)
    filled = kept >= max(_FILLED * side * side, 6)
    if not filled.any():
        return _without_blocks(counts, good)
    levels = _smoothed(np.where(filled, level, np.nan).reshape(grid))
    chosen = np.flatnonzero(filled)
    chosen = chosen[np.argsort(level[chosen], kind="stable")][: max(4, chosen.size // 4)]
    variances = noise[chosen] ** 2
    middle = float(np.median(variances))
    variances = variances[variances <= 2.0 * middle] if middle > 0.0 else variances
    pixels = float(kept[chosen].sum())
    low, high = np.percentile(levels, [5.0, 95.0])
    backdrop = Backdrop(
        level=float(level[chosen].mean()),
        noise=float(np.sqrt(variances.mean())),
        error=1.0 / sqrt(2.0 * max(pixels, 2.0)),
        slant=float(high - low),
        levels=frozen(levels),
        side=side,
    )
    if min(grid) < 3 or backdrop.even:
        return backdrop
    return replace(backdrop, slope=_slope(levels, down, along))


def _slope(levels: FloatArray, down: AnyArray, along: AnyArray) -> tuple[float, float]:
    """Slope of the plane through the blocks' levels, those that stars raise left out."""
    y, x = np.meshgrid(down, along, indexing="ij")
    design = np.stack([np.ones(levels.size), x.ravel(), y.ravel()], axis=1).astype(np.float64)
    values = levels.ravel()
    keep = np.ones(values.size, dtype=bool)
    solution: FloatArray = np.zeros(3)
    for _ in range(10):
        solution = np.linalg.lstsq(design[keep], values[keep], rcond=None)[0]
        rest = values - design @ solution
        spread = 1.4826 * float(np.median(np.abs(rest[keep] - np.median(rest[keep]))))
        # Stars only raise a level: the high side is cut closer.
        new = (rest < 1.5 * spread) & (rest > -3.0 * spread)
        if spread == 0.0 or new.sum() < 6 or (new == keep).all():
            break
        keep = new
    return float(solution[1]), float(solution[2])


def _planes(
    data: FloatArray, used: AnyArray, side: int
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Clipped planes of many blocks: level in the middle, scatter, pixels kept; shapes (n,)."""
    axis = np.arange(side) - 0.5 * (side - 1)
    across, along = np.broadcast_arrays(axis, axis[:, None])
    design = np.stack([np.ones(side * side), across.ravel(), along.ravel()])
    products = (design[:, None] * design).reshape(9, -1)
    counted = used.sum(axis=1, keepdims=True)
    ordered = np.where(used, data, np.nan)
    empty = counted[:, 0] == 0
    ordered[empty] = 0.0
    middle = np.nanmedian(ordered, axis=1, keepdims=True)
    spread = 1.4826 * np.nanmedian(np.abs(ordered - middle), axis=1, keepdims=True)
    spread = np.where(spread > 0.0, spread, np.nanstd(ordered, axis=1, keepdims=True))
    keep = used & (np.abs(data - middle) <= 4.0 * spread)
    level, noise = middle[:, 0], spread[:, 0]
    for _ in range(3):
        weight = keep.astype(np.float64)
        normal = (weight @ products.T).reshape(-1, 3, 3) + 1e-9 * side**2 * np.eye(3)
        right = (weight * (data - middle)) @ design.T
        plane = np.linalg.solve(normal, right[..., None])[..., 0]
        rest = data - middle - plane @ design
        freedom = np.maximum(weight.sum(axis=1) - 3.0, 1.0)
        noise = np.sqrt((weight * rest**2).sum(axis=1) / freedom)
        level = middle[:, 0] + plane[:, 0]
        keep = used & (np.abs(rest) <= _CLIP / _TRUNCATED * noise[:, None])
    return level, noise / _TRUNCATED, keep.sum(axis=1).astype(np.float64)


def _smoothed(levels: FloatArray) -> FloatArray:
    """Levels of blocks with their gaps filled from the nearest, smoothed by a median of nine."""
    gaps = np.isnan(levels)
    if gaps.any():
        nearest = ndimage.distance_transform_edt(gaps, return_distances=False, return_indices=True)
        levels = levels[tuple(nearest)]
    return np.asarray(ndimage.median_filter(levels, 3, mode="nearest"))


def _without_blocks(counts: AnyArray, good: AnyArray) -> Backdrop:
    """The background where no block has enough pixels: of all that count."""
    values = np.asarray(counts[good & np.isfinite(counts)], dtype=np.float64)
    middle = float(np.median(values)) if values.size else 0.0
    noise = 1.4826 * float(np.median(np.abs(values - middle))) if values.size else 0.0
    return Backdrop(
        level=middle,
        noise=noise,
        error=1.0 / sqrt(2.0 * max(values.size, 2)),
        slant=0.0,
        levels=frozen(np.full((1, 1), middle)),
        side=min(counts.shape),
    )
