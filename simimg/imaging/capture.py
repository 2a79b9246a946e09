"""How much of a star's light a frame holds, wherever the star stands.

A frame holds the sum of the PSF's samples over its pixels. The PSF, painted once in the middle of a
window, is summed from its lower left corner; the sum at a frame's four corners, seen from the star,
then gives the share by inclusion and exclusion. Between whole pixels the sum is interpolated by
cubic splines. Light beyond the window, less than a thousandth, counts as held where the frame is
larger than the window. Places in pixels.
"""

from __future__ import annotations

import numpy as np
from scipy.ndimage import map_coordinates, spline_filter

from simimg.arrays import AnyArray, FloatArray
from simimg.imaging.basis import PsfBasis
from simimg.imaging.render import expected_image
from simimg.imaging.sources import Points, Sources, one_point

_WIDEST_WINDOW = 400


def share_in_frame(
    basis: PsfBasis, points: Points, *, columns: int, rows: int, pixel_scale: float
) -> FloatArray:
    """Share of each point's light that falls on the pixels of a frame, 0 to 1.

    Parameters
    ----------
    basis : PsfBasis
        PSFs with the pixel's response.
    points : Points
        Stars, inside the frame or outside; shape ``(N,)``.
    columns, rows : int
        Size of the frame.
    pixel_scale : float
        Side of a pixel (rad).

    Returns
    -------
    ndarray, shape (N,)
        Right to about 1e-3.
    """
    half = min(max(columns, rows), _WIDEST_WINDOW)
    weights = basis.weights(points)
    share = np.zeros(len(points))
    for k, member in enumerate(basis.members):
        psf = expected_image(
            PsfBasis((member,)),
            Sources(one_point(half, half, 1.0)),
            columns=2 * half + 1,
            rows=2 * half + 1,
            pixel_scale=pixel_scale,
        )
        if max(columns, rows) > half:
            psf = psf / psf.sum()
        total = np.pad(psf.cumsum(0).cumsum(1), ((1, 0), (1, 0)))
        smooth = spline_filter(total, order=3, mode="nearest")

        def summed(to_x: FloatArray, to_y: FloatArray, smooth: FloatArray = smooth) -> FloatArray:
            """Light at or below offsets `to_x`, `to_y` from the star."""
            at = np.clip(np.stack([to_y, to_x]) + half + 1.0, 0.0, 2.0 * half + 1.0)
            return np.asarray(map_coordinates(smooth, at, order=3, prefilter=False, mode="nearest"))

        held = np.ones(len(points))
        near = _near_an_edge(psf, points, columns, rows)
        left, right = -1.0 - points.x[near], columns - 1.0 - points.x[near]
        bottom, top = -1.0 - points.y[near], rows - 1.0 - points.y[near]
        held[near] = (
            summed(right, top) - summed(left, top) - summed(right, bottom) + summed(left, bottom)
        )
        share += weights[:, k] * held
    return np.clip(share, 0.0, 1.0)


def _near_an_edge(psf: AnyArray, points: Points, columns: int, rows: int) -> AnyArray:
    """Points so near to an edge, or outside, that more than 1e-4 of their light may be lost."""
    half = psf.shape[0] // 2
    if max(columns, rows) <= half:
        return np.ones(len(points), dtype=bool)
    # Light beyond so many pixels to one side, the worse of the two axes.
    beyond = np.maximum(*(psf.sum(axis)[half:][::-1].cumsum()[::-1] for axis in (0, 1)))
    safe = int(np.searchsorted(-beyond, -1e-4))
    inside = (points.x > safe) & (points.x < columns - 1 - safe)
    inside &= (points.y > safe) & (points.y < rows - 1 - safe)
    return ~inside
