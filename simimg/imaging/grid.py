"""The sampling plan: how fine a grid, how wide a margin, and how many tiles.

Fine cells are an integer division of the detector pixel, small enough that what the transfer
function has left beyond the grid's Nyquist frequency, weighted below it by the gridding kernel's
own error, stays under a share of the peak. A margin takes in the stars outside whose wings show,
and a padding keeps the periodic grid from wrapping light into the frame. Where one grid would need
more memory than allowed the frame is painted in tiles; where even that cannot be, the plan refuses
before anything is taken. Lengths are in detector pixels, frequencies in cycles per radian.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil

import numpy as np
import scipy.fft

from simimg.arrays import FloatArray
from simimg.errors import InputError
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.kernel import WIDTH, alias_error
from simimg.imaging.sources import PlacedShape, Sources
from simimg.imaging.spread import HIGHEST, stamp_cells

# Shares of the brightest peak: what sampling may cost, what wrapped light may, and what a star
# outside may add unseen. Together they stay below the promised 1e-5.
SAMPLING_SHARE = 2.0e-6
WRAP_SHARE = 2.0e-6
OUTSIDE_SHARE = 1.0e-5
# Electrons a pixel that a star outside may add unseen.
OUTSIDE_ELECTRONS = 0.01
# Above this many cells single precision is used: its rounding is 1e-7 of the brightest star.
SINGLE_PRECISION_CELLS = 4_200_000
_FINEST = 64
_NEGLIGIBLE = 1.0e-10
_SMALLEST_TILE = 64
_TAILS = 20_000


@dataclass(frozen=True)
class Tile:
    """One piece of the frame and the grid on which it is painted.

    Attributes
    ----------
    column, row : int
        First pixel of the piece.
    columns, rows : int
        Its size.
    margins : tuple of int
        Pixels to the left, right, bottom and top that the grid adds for what lies outside.
    length_x, length_y : int
        Periodic lengths of the grid in pixels, even.
    """

    column: int
    row: int
    columns: int
    rows: int
    margins: tuple[int, int, int, int]
    length_x: int
    length_y: int


@dataclass(frozen=True)
class GridPlan:
    """How an image is painted: cells a pixel, tiles, and the levels that decide what counts.

    Attributes
    ----------
    subdivision : int
        Fine cells along a pixel's side.
    tiles : tuple of Tile
        They cover the frame once.
    level : float
        Electrons a pixel below which light from outside a tile is left out.
    wrap : int
        Pixels between the frame and its periodic copy.
    bytes : int
        Most memory that a tile takes, with the image.
    """

    subdivision: int
    tiles: tuple[Tile, ...]
    level: float
    wrap: int
    bytes: int


def band_edge(transfer: Transfer) -> float:
    """Frequency (cycles/rad) beyond which the transfer function is nothing to double precision."""
    f = np.linspace(0.0, transfer.band_limit, 4097)
    value = np.abs(transfer.modulus(f))
    above = np.flatnonzero(value > _NEGLIGIBLE)
    return float(f[min(int(above[-1]) + 1, f.size - 1)]) if above.size else float(f[-1])


def _half_plane(transfer: Transfer, nodes: int = 192) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Midpoint samples of ``|T|`` over the half plane within the band edge."""
    edge = band_edge(transfer)
    u = (np.arange(nodes) + 0.5) * (edge / nodes)
    v = (np.arange(2 * nodes) + 0.5) * (edge / nodes) - edge
    value = np.abs(transfer(u[None, :], v[:, None]))
    return u, v, np.asarray(value, dtype=np.float64)


def subdivision(basis: PsfBasis, pixel_scale: float) -> int:
    """Fewest fine cells a pixel's side that keep the sampling error below its share of the peak.

    The error is bounded by the transfer function's own integral: where the kernel errs by a share
    a(u), the image errs by at most ``int |T| (a(u) + a(v)) / int |T|`` of the peak.

    Raises
    ------
    InputError
        When more than 64 cells a pixel would be needed.
    """
    planes = [_half_plane(member) for member in basis.members]
    for count in range(1, _FINEST + 1):
        cell = pixel_scale / count
        worst = 0.0
        for u, v, value in planes:
            across, along = alias_error(u * cell), alias_error(v * cell)
            error = np.minimum(across[None, :] + along[:, None], 1.0)
            worst = max(worst, float((value * error).sum() / value.sum()))
        if worst <= SAMPLING_SHARE:
            return count
    edge = max(band_edge(member) for member in basis.members)
    raise InputError(
        f"the pixel is {pixel_scale * edge * 2:.0f} times as wide as the finest detail of the "
        f"image (Nyquist), and at most {_FINEST / 2:.0f} times can be computed; use a smaller pixel"
    )


def peak_share(transfer: Transfer, pixel_scale: float) -> float:
    """Share of a star's light that falls on the pixel at its centre."""
    u, v, _ = _half_plane(transfer)
    value = np.real(transfer(u[None, :], v[:, None]))
    area = float((u[1] - u[0]) * (v[1] - v[0]))
    return float(2.0 * value.sum() * area * pixel_scale**2)


def _precision(cells: int) -> int:
    return 4 if cells > SINGLE_PRECISION_CELLS else 8


def grid_dtype(cells: int) -> type[np.float32] | type[np.float64]:
    """Precision of a grid of so many cells."""
    return np.float32 if _precision(cells) == 4 else np.float64


def _even_length(pixels: int) -> int:
    return 2 * int(scipy.fft.next_fast_len(ceil(pixels / 2), real=True))


def _tile_bytes(length_x: int, length_y: int, count: int) -> int:
    cells = length_x * length_y * count * count
    # The grid, its spectrum (at most as large again), and a block of each in work.
    return int(cells * _precision(cells) * 2.2) + length_x * length_y * _precision(cells) * 2


def _stamp_bytes(placed: PlacedShape, level: float, pixel_scale: float, count: int) -> int:
    side = stamp_cells(shape_radius(placed, level, pixel_scale) / pixel_scale * count)
    # Shapes made of points hold some arrays of them at a time.
    points = getattr(placed.shape, "point_count", lambda _: 0)(HIGHEST * count / pixel_scale)
    return 40 * side * side + 100 * int(points)


def plan_grid(
    basis: PsfBasis,
    sources: Sources,
    *,
    columns: int,
    rows: int,
    pixel_scale: float,
    memory_bytes: int,
) -> GridPlan:
    """Plan the grid and the tiles for an image.

    Parameters
    ----------
    basis : PsfBasis
        PSFs, pixel response included.
    sources : Sources
        What is painted.
    columns, rows : int
        Size of the image.
    pixel_scale : float
        Side of a pixel (rad).
    memory_bytes : int
        Most that painting may take, the image included.

    Raises
    ------
    InputError
        When no tiling fits into the memory; the line says how many bytes would do.
    """
    count = subdivision(basis, pixel_scale)
    peak = max(peak_share(member, pixel_scale) for member in basis.members)
    points = sources.points
    brightest = float(points.electrons.max()) if len(points) else 0.0
    brightest = max([brightest, *(placed.electrons for placed in sources.shapes)])
    peak_electrons = brightest * peak
    level = max(min(OUTSIDE_SHARE * peak_electrons, OUTSIDE_ELECTRONS), 1.0e-30)
    wings = basis.wings
    wrap_level = WRAP_SHARE * peak / pixel_scale**2
    wrap = max(ceil(float(wings.reach(wrap_level)) / pixel_scale), 4 * WIDTH)
    # Many faint tails add up. What is left out is put back as a smooth far field, right to some
    # tenths; so the level need only sink until the tails' mean is no more than a share of the peak.
    if len(points) > 1:
        # Of very many stars every so manieth speaks for its neighbours: an estimate is enough.
        stride = max(1, len(points) // _TAILS)
        some = points.electrons[::stride]
        for _ in range(20):
            share = level / np.maximum(some, 1e-300) / pixel_scale**2
            tails = stride * some * wings.light_beyond(wings.reach(share))
            if tails.sum() / (columns * rows) <= OUTSIDE_SHARE * peak_electrons:
                break
            level *= 0.5

    image_bytes = columns * rows * 8 + max(
        [_stamp_bytes(s, level, pixel_scale, count) for s in sources.shapes], default=0
    )
    smallest = 0
    for across, along in _splits(columns, rows):
        tiles = _tiles(sources, basis, level, wrap, columns, rows, across, along, pixel_scale)
        need = image_bytes + max(_tile_bytes(t.length_x, t.length_y, count) for t in tiles)
        smallest = need if smallest == 0 else min(smallest, need)
        if need <= memory_bytes:
            return GridPlan(count, tiles, level, wrap, need)
    raise InputError(
        f"the image needs {smallest} bytes of memory even in its smallest tiles and only "
        f"{memory_bytes} are allowed; allow more memory or use fewer pixels"
    )


def _splits(columns: int, rows: int) -> list[tuple[int, int]]:
    """Numbers of tiles across and along, from one tile to the smallest ones, near squares."""
    splits = [(1, 1)]
    across, along = 1, 1
    while columns / across > _SMALLEST_TILE or rows / along > _SMALLEST_TILE:
        if columns / across >= rows / along:
            across *= 2
        else:
            along *= 2
        splits.append((across, along))
    return splits


def reach_pixels(
    basis: PsfBasis, electrons: FloatArray, level: float, pixel_scale: float
) -> FloatArray:
    """How far (pixels) a star of so many electrons adds more than `level` electrons a pixel."""
    share = level / np.maximum(electrons, 1e-300) / pixel_scale**2
    return np.asarray(basis.wings.reach(share) / pixel_scale, dtype=np.float64)


def shape_radius(placed: PlacedShape, level: float, pixel_scale: float) -> float:
    """Angle (rad) to which a shape is painted: where it sinks below `level` electrons a pixel."""
    share = level / max(placed.electrons, 1e-300) / pixel_scale**2
    return max(min(placed.shape.radius, placed.shape.radius_below(share)), pixel_scale)


def _tiles(
    sources: Sources,
    basis: PsfBasis,
    level: float,
    wrap: int,
    columns: int,
    rows: int,
    across: int,
    along: int,
    pixel_scale: float,
) -> tuple[Tile, ...]:
    points = sources.points
    reach = reach_pixels(basis, points.electrons, level, pixel_scale)
    shapes = [
        (
            s.x,
            s.y,
            shape_radius(s, level, pixel_scale) / pixel_scale,
            float(reach_pixels(basis, np.array(s.electrons), level, pixel_scale)),
        )
        for s in sources.shapes
    ]
    x_edges = np.linspace(0, columns, across + 1).astype(int)
    y_edges = np.linspace(0, rows, along + 1).astype(int)
    tiles = []
    for row, row_end in zip(y_edges[:-1], y_edges[1:], strict=True):
        for column, column_end in zip(x_edges[:-1], x_edges[1:], strict=True):
            outside_x = np.maximum(np.maximum(column - points.x, points.x - (column_end - 1)), 0.0)
            outside_y = np.maximum(np.maximum(row - points.y, points.y - (row_end - 1)), 0.0)
            seen = np.hypot(outside_x, outside_y) <= reach
            x, y = points.x[seen], points.y[seen]
            margins = [0.0, 0.0, 0.0, 0.0]
            if x.size:
                margins = [
                    column - x.min(),
                    x.max() - column_end + 1,
                    row - y.min(),
                    y.max() - row_end + 1,
                ]
            for sx, sy, radius, far in shapes:
                beyond = [
                    column - sx + radius,
                    sx + radius - column_end + 1,
                    row - sy + radius,
                    sy + radius - row_end + 1,
                ]
                if max(beyond) - 2 * radius <= far:
                    margins = [max(m, min(b, far)) for m, b in zip(margins, beyond, strict=True)]
            left, right, bottom, top = (max(ceil(m), 0) for m in margins)
            tiles.append(
                Tile(
                    int(column),
                    int(row),
                    int(column_end - column),
                    int(row_end - row),
                    (left, right, bottom, top),
                    _even_length(
                        int(column_end - column) + left + right + _padding(left, right, wrap)
                    ),
                    _even_length(int(row_end - row) + bottom + top + _padding(bottom, top, wrap)),
                )
            )
    return tuple(tiles)


def _padding(before: int, after: int, wrap: int) -> int:
    """Pixels added so that neither the frame nor what lies in a margin wraps into the frame."""
    return max(wrap - min(before, after), 2 * WIDTH)
