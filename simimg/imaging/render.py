"""Expected electrons: the sources seen through the PSFs, before any photon is counted.

Points and shapes are spread on the fine grid, carried to the Fourier plane by a real FFT,
multiplied there by the transfer function (optics, air, pixel) and brought back. Only the
frequencies inside the band are kept, and the spectrum is folded on itself before the way back, so
that the inverse FFT gives the detector's pixels and nothing else. Electrons a pixel, ``[y, x]``.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from math import ceil

import numpy as np
import scipy.fft

from simimg.arrays import AnyArray, FloatArray
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.grid import (
    GridPlan,
    Tile,
    band_edge,
    grid_dtype,
    plan_grid,
    reach_pixels,
    shape_radius,
)
from simimg.imaging.kernel import kernel_transform
from simimg.imaging.sources import Points, Sources, one_point
from simimg.imaging.spread import add_stamp, shape_stamp, spread_points

DEFAULT_MEMORY = 2 * 2**30
_ROW_BLOCK = 128
_TABLE = 1 << 15
_FAR_NODES = 5


def expected_image(
    basis: PsfBasis,
    sources: Sources,
    *,
    columns: int,
    rows: int,
    pixel_scale: float,
    memory_bytes: int | None = None,
    threads: int = 1,
) -> AnyArray:
    """Expected electrons of the sources in every pixel.

    Exact to 1e-5 of the brightest peak. Light that falls outside the frame is lost; stars outside
    add their wings as far as these show.

    Parameters
    ----------
    basis : PsfBasis
        PSFs with the pixel's response.
    sources : Sources
        What is up there.
    columns, rows : int
        Size of the image.
    pixel_scale : float
        Side of a pixel (rad).
    memory_bytes : int, optional
        Most memory to take; 2 GiB unless given.
    threads : int, optional
        Threads for the transforms; the result is the same, bit for bit, for any number.

    Returns
    -------
    ndarray, shape (rows, columns)
        Electrons, never negative; float32 for large images, float64 for small ones.

    Raises
    ------
    InputError
        When it does not fit into the memory even in tiles.
    """
    allowed = DEFAULT_MEMORY if memory_bytes is None else memory_bytes
    plan = plan_grid(
        basis, sources, columns=columns, rows=rows, pixel_scale=pixel_scale, memory_bytes=allowed
    )
    cells = columns * rows * plan.subdivision**2
    image = np.zeros((rows, columns), dtype=grid_dtype(cells))
    for tile in plan.tiles:
        piece = image[tile.row : tile.row + tile.rows, tile.column : tile.column + tile.columns]
        _paint(piece, tile, plan, basis, sources, pixel_scale, threads)
    np.maximum(image, 0.0, out=image)
    return image


def _paint(
    piece: AnyArray,
    tile: Tile,
    plan: GridPlan,
    basis: PsfBasis,
    sources: Sources,
    pixel_scale: float,
    threads: int,
) -> None:
    """Paint one tile into its piece of the image."""
    points = sources.points
    outside_x = np.maximum(tile.column - points.x, points.x - (tile.column + tile.columns - 1))
    outside_y = np.maximum(tile.row - points.y, points.y - (tile.row + tile.rows - 1))
    distance = np.hypot(np.maximum(outside_x, 0.0), np.maximum(outside_y, 0.0))
    seen = distance <= reach_pixels(basis, points.electrons, plan.level, pixel_scale)
    if not seen.all():
        _add_far_field(piece, tile, basis, points.chosen(~seen), pixel_scale)
        points = points.chosen(seen)
    if not len(points) and not sources.shapes:
        return
    weights = basis.weights(points)
    folded: AnyArray = np.zeros(0)
    for k, member in enumerate(basis.members):
        grid = spread_sources(tile, plan, basis, sources, points, weights[:, k], k, pixel_scale)
        spectrum = _forward(grid, tile, member, pixel_scale, threads)
        del grid
        _multiply(spectrum, tile, plan, member, pixel_scale, threads)
        part = fold_spectrum(spectrum, tile, plan)
        folded = folded + part if k else part
    periodic = scipy.fft.irfft2(
        folded, s=(tile.length_y, tile.length_x), workers=threads, overwrite_x=True
    )
    left, _, bottom, _ = tile.margins
    piece += periodic[bottom : bottom + tile.rows, left : left + tile.columns]


def _add_far_field(
    piece: AnyArray, tile: Tile, basis: PsfBasis, far: Points, pixel_scale: float
) -> None:
    """Add the faint smooth light of stars too far away to be painted, by the wings' mean law."""
    nodes_x = np.linspace(0.0, tile.columns - 1.0, _FAR_NODES)
    nodes_y = np.linspace(0.0, tile.rows - 1.0, _FAR_NODES)
    level = np.empty((_FAR_NODES, _FAR_NODES))
    for j, y in enumerate(nodes_y):
        for i, x in enumerate(nodes_x):
            distance = np.hypot(far.x - tile.column - x, far.y - tile.row - y) * pixel_scale
            level[j, i] = far.electrons @ basis.wings.mean(distance)
    level *= pixel_scale**2
    across = np.array([np.interp(np.arange(tile.columns), nodes_x, row) for row in level])
    for row in range(tile.rows):
        place = min(row / max(tile.rows - 1, 1) * (_FAR_NODES - 1), _FAR_NODES - 1.0)
        node = min(int(place), _FAR_NODES - 2)
        piece[row] += (1.0 - place + node) * across[node] + (place - node) * across[node + 1]


def spread_sources(
    tile: Tile,
    plan: GridPlan,
    basis: PsfBasis,
    sources: Sources,
    points: Points,
    weights: FloatArray,
    member: int,
    pixel_scale: float,
) -> AnyArray:
    """The sources on the tile's grid, each with its weight for one member of the basis."""
    count = plan.subdivision
    n_x, n_y = tile.length_x * count, tile.length_y * count
    grid = np.zeros((n_y, n_x), dtype=grid_dtype(n_x * n_y))
    left, right, bottom, top = tile.margins
    origin_x, origin_y = tile.column - left, tile.row - bottom
    spread_points(
        grid,
        (points.x - origin_x) * count,
        (points.y - origin_y) * count,
        points.electrons * weights,
    )
    used = ((tile.rows + bottom + top) * count, (tile.columns + left + right) * count)
    for placed in sources.shapes:
        weight = basis.weights(one_point(placed.x, placed.y, placed.electrons, placed.kind))[
            0, member
        ]
        stamp, stamp_left, stamp_bottom = shape_stamp(
            placed,
            x=(placed.x - origin_x) * count,
            y=(placed.y - origin_y) * count,
            cell=pixel_scale / count,
            radius=shape_radius(placed, plan.level, pixel_scale),
        )
        add_stamp(grid, weight * stamp, stamp_left, stamp_bottom, used=used)
    return grid


def _forward(
    grid: AnyArray, tile: Tile, member: Transfer, pixel_scale: float, threads: int
) -> AnyArray:
    """The grid's spectrum, columns beyond the band left out: shape ``(n_y, kept)``."""
    n_y, n_x = grid.shape
    edge = band_edge(member) * pixel_scale
    kept = min(n_x // 2, ceil(edge * tile.length_x) + 1) + 1
    kind = np.complex64 if grid.dtype == np.float32 else np.complex128
    spectrum = np.empty((n_y, kept), dtype=kind)
    for start in range(0, n_y, 4 * _ROW_BLOCK):
        block = grid[start : start + 4 * _ROW_BLOCK]
        spectrum[start : start + 4 * _ROW_BLOCK] = scipy.fft.rfft(block, axis=1, workers=threads)[
            :, :kept
        ]
    return np.asarray(scipy.fft.fft(spectrum, axis=0, workers=threads, overwrite_x=True))


def _multiply(
    spectrum: AnyArray,
    tile: Tile,
    plan: GridPlan,
    member: Transfer,
    pixel_scale: float,
    threads: int,
) -> None:
    """Multiply by the transfer function and divide the gridding kernel out, in place."""
    n_y, kept = spectrum.shape
    n_x = tile.length_x * plan.subdivision
    real = np.float32 if spectrum.dtype == np.complex64 else np.float64
    k_x = np.arange(kept)
    k_y = np.rint(np.fft.fftfreq(n_y, 1.0 / n_y)).astype(int)
    u = k_x / (tile.length_x * pixel_scale)
    v = k_y / (tile.length_y * pixel_scale)
    across = np.sinc(u * member.box) / kernel_transform(k_x / n_x)
    along = np.sinc(v * member.box) / kernel_transform(k_y / n_y)
    edge = band_edge(member)
    modulus = _modulus_table(member, edge, real)

    def block(start: int) -> None:
        part = slice(start, start + _ROW_BLOCK)
        if np.abs(v[part]).min() >= edge:
            spectrum[part] = 0.0
            return
        value = modulus(u[None, :], v[part, None])
        for factor in member.planar:
            value = value * factor(u[None, :], v[part, None])
        value *= across.astype(real)[None, :]
        value *= along[part, None].astype(real)
        spectrum[part] *= value

    starts = range(0, n_y, _ROW_BLOCK)
    if threads > 1:
        with ThreadPoolExecutor(threads) as pool:
            list(pool.map(block, starts))
    else:
        for start in starts:
            block(start)


def _modulus_table(
    member: Transfer, edge: float, real: type[np.float32] | type[np.float64]
) -> Callable[[FloatArray, FloatArray], AnyArray]:
    """The radial factors by linear interpolation in a table so fine that its error is 1e-8."""
    nodes = np.linspace(0.0, edge, _TABLE + 1)
    table = member.modulus(nodes)
    table[-1] = 0.0
    table = np.append(table, 0.0).astype(real)
    steps = np.diff(table, append=real(0.0))
    scale = _TABLE / edge

    def value(u: FloatArray, v: FloatArray) -> AnyArray:
        place = np.sqrt(np.square((u * scale).astype(real)) + np.square((v * scale).astype(real)))
        np.minimum(place, real(_TABLE), out=place)
        node = place.astype(np.int32)
        place -= node
        place *= steps[node]
        place += table[node]
        return np.asarray(place)

    return value


def fold_spectrum(spectrum: AnyArray, tile: Tile, plan: GridPlan) -> AnyArray:
    """Fold the fine grid's spectrum on the detector's: decimation to pixels, done in frequency."""
    count, length_x, length_y = plan.subdivision, tile.length_x, tile.length_y
    kept = spectrum.shape[1]
    rows = spectrum[:length_y]
    for i in range(1, count):
        rows += spectrum[i * length_y : (i + 1) * length_y]
    half = length_x // 2
    if kept == half + 1:
        return rows
    folded = np.zeros((length_y, half + 1), dtype=spectrum.dtype)
    mirrored = (-np.arange(length_y)) % length_y
    for segment in range(0, ceil(kept / half)):
        start = segment * half
        part = rows[:, start : min(start + half + 1, kept)]
        if segment % 2 == 0:
            folded[:, : part.shape[1]] += part
        else:
            stop = half + 1
            folded[:, stop - part.shape[1] : stop] += np.conj(part[mirrored])[:, ::-1]
    return folded
