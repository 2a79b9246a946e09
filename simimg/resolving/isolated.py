"""Stars of a frame that stand alone, bright and whole: those a PSF is taken from and judged by.

Peaks of the smoothed image are measured for their width at half maximum. Most stars of a frame
have one width; blends, galaxies and hot pixels have others and are passed over, as are stars with
company, at the edge, or with a pixel missing. Electrons above the background and detector pixels,
from 0 at the centre of the first.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import ceil, hypot, log, sqrt

import numpy as np
from scipy import ndimage
from scipy.spatial import cKDTree

from simimg.arrays import AnyArray, FloatArray

_PEAK = 6.0  # standard deviations of the smoothed background at which a peak is looked at
_MOST_PEAKS = 4000
_MEASURED = 400  # of them, the brightest, whose width is measured
_WIDEST = 60  # pixels from a peak to where it must have fallen to half
_SIGNALS = (30.0, 12.0)  # signal to noise that a star must have; the second where none has
_SPREAD = 0.22  # natural logarithm by which a star's width may differ from the most common
_SHARP = 0.12  # mean of a hot pixel's four neighbours over it: a star has more
_EDGE = 2.5  # FWHM to the frame's edge
_WHOLE, _FILLED = 1.5, 0.85  # FWHM within which this share of the pixels must count
# Peaks of a neighbour over the star's own that are put up with, within 2.5 FWHM (rings of the PSF
# itself have peaks there) and 5 FWHM; the later rows where too few stars are left.
_COMPANY = ((0.04, 0.01), (0.08, 0.03), (0.15, 0.1))
_ENOUGH = 5


@dataclass(frozen=True, eq=False)
class StarField:
    """A frame as a search for stars needs it.

    Attributes
    ----------
    electrons : ndarray, shape (rows, columns)
        Above the background; filled in from around where `good` is false.
    good : ndarray of bool
    background : float
        Variance of a pixel without stars, electrons squared, above 0.
    """

    electrons: FloatArray
    good: AnyArray
    background: float


@dataclass(frozen=True)
class Candidate:
    """A star that stands alone.

    Attributes
    ----------
    x, y : float
        Of its brightest pixel.
    electrons : float
        Roughly.
    width : float
        FWHM, roughly, pixels.
    """

    x: int
    y: int
    electrons: float
    width: float


def isolated_stars(
    field: StarField,
    *,
    apart: Sequence[tuple[float, float]] = (),
    most: int = 25,
    width: float | None = None,
) -> list[Candidate]:
    """Find the stars of a frame that stand alone, brightest first.

    Parameters
    ----------
    field : StarField
    apart : sequence of (x, y), optional
        What stands within two FWHM of these is left out.
    most : int, optional
    width : float, optional
        FWHM of stars, pixels; the most common width by default.
    """
    blur = 1.0 if width is None else max(1.0, width / 3.0)
    smooth, peaks = _peaks(field, blur)
    measured = _measured(field, peaks, smooth, blur)
    for _ in range(2):
        if width is not None or not measured:
            break
        common = _common(measured)
        if common < 4.5 * blur:
            width = common
            break
        # Wide stars have many peaks of noise each: look again, more smoothly.
        blur = common / 3.0
        smooth, peaks = _peaks(field, blur)
        measured = _measured(field, peaks, smooth, blur)
    if width is None:
        if not measured:
            return []
        width = _common(measured)
    alike = [
        one
        for one in measured
        if abs(log(one.width / width)) < _SPREAD
        and _whole(field, one, width)
        and all(hypot(one.x - x, one.y - y) > 2.0 * width for x, y in apart)
    ]
    alike.sort(key=lambda one: -one.electrons)
    if not alike:
        return []
    tree = cKDTree(peaks[:, :2])
    for near, far in _COMPANY:
        alone = [one for one in alike if _alone(one, peaks, tree, width, near, far)]
        if len(alone) >= _ENOUGH or (near, far) == _COMPANY[-1]:
            break
    return alone[:most]


def _peaks(field: StarField, blur: float) -> tuple[FloatArray, FloatArray]:
    """The smoothed frame, and its maxima (x, y, height), brightest first, shape (n, 3)."""
    weight = ndimage.gaussian_filter(field.good.astype(np.float32), blur, mode="constant")
    smooth = ndimage.gaussian_filter(field.electrons.astype(np.float32), blur, mode="constant")
    smooth /= np.maximum(weight, 0.1)
    noise = sqrt(field.background) / (2.0 * sqrt(np.pi) * blur)
    side = 2 * ceil(blur) + 1
    top = (smooth == ndimage.maximum_filter(smooth, side)) & (smooth > _PEAK * noise)
    y, x = np.nonzero(top & field.good)
    height = smooth[y, x].astype(np.float64)
    order = np.argsort(-height, kind="stable")[:_MOST_PEAKS]
    peaks = np.column_stack([x[order], y[order], height[order]]).astype(np.float64)
    return smooth, peaks


def _measured(
    field: StarField, peaks: FloatArray, smooth: FloatArray, blur: float
) -> list[Candidate]:
    """The brightest peaks with their widths, hot pixels and faint ones left out."""
    rows, columns = field.electrons.shape
    # Narrow stars are measured as they are; wide ones smoothed, and the smoothing taken off again.
    wide = blur > 1.0
    light, blurred = (smooth, 8.0 * log(2.0) * blur**2) if wide else (field.electrons, 0.0)
    found = []
    for x, y, _ in peaks[:_MEASURED]:
        column, row = int(x), int(y)
        if not (1 <= column < columns - 1 and 1 <= row < rows - 1):
            continue
        patch = light[row - 1 : row + 2, column - 1 : column + 2]
        row, column = row + int(np.argmax(patch)) // 3 - 1, column + int(np.argmax(patch)) % 3 - 1
        if not (1 <= column < columns - 1 and 1 <= row < rows - 1):
            continue
        height = float(light[row, column])
        beside = light[[row, row, row - 1, row + 1], [column - 1, column + 1, column, column]]
        if height <= 0.0 or float(beside.mean()) < _SHARP * height:
            continue
        seen = _width(light, row, column)
        if seen is None or seen**2 <= 1.2 * blurred:
            continue
        width = sqrt(seen**2 - blurred)
        electrons = 1.13 * height * seen**2
        noise = sqrt(electrons + 2.3 * width**2 * field.background)
        if electrons > _SIGNALS[-1] * noise:
            found.append((electrons / noise, Candidate(column, row, electrons, width)))
    bright = [one for signal, one in found if signal > _SIGNALS[0]]
    return bright or [one for _, one in found]


def _width(light: FloatArray, row: int, column: int) -> float | None:
    """FWHM of a peak from its falls to half along rows and columns; None where it has none."""
    half = 0.5 * float(light[row, column])
    reaches = []
    for down, along in ((0, 1), (0, -1), (1, 0), (-1, 0)):
        before = 2.0 * half
        for step in range(1, _WIDEST + 1):
            i, j = row + down * step, column + along * step
            if not (0 <= i < light.shape[0] and 0 <= j < light.shape[1]):
                return None
            here = float(light[i, j])
            if here <= half:
                reaches.append(step - 1 + (before - half) / (before - here))
                break
            before = here
        else:
            return None
    return 0.5 * sum(reaches)


def _common(stars: Sequence[Candidate]) -> float:
    """The width that holds most of the light: stars are brighter than cosmic rays and noise.

    Each counts with the root of its electrons, within a factor of `_SPREAD` either way.
    """
    widths = np.log([one.width for one in stars])
    weights = np.sqrt([one.electrons for one in stars])
    near = np.abs(widths[:, None] - widths) < 0.7 * _SPREAD
    best = near[int(np.argmax(near @ weights))]
    return float(np.exp(np.average(widths[best], weights=weights[best])))


def _whole(field: StarField, one: Candidate, width: float) -> bool:
    """Whether a star is clear of the edge and has nearly all its inner pixels."""
    rows, columns = field.good.shape
    edge, reach = _EDGE * width, ceil(_WHOLE * width)
    if not (edge <= one.x <= columns - 1 - edge and edge <= one.y <= rows - 1 - edge):
        return False
    box = field.good[
        max(0, one.y - reach) : one.y + reach + 1, max(0, one.x - reach) : one.x + reach + 1
    ]
    return bool(box.mean() >= _FILLED and field.good[one.y, one.x])


def _alone(
    one: Candidate, peaks: FloatArray, tree: cKDTree, width: float, near: float, far: float
) -> bool:
    """Whether no neighbour of a star is brighter than a share of it."""
    around = tree.query_ball_point((one.x, one.y), 5.0 * width)
    distance = np.hypot(peaks[around, 0] - one.x, peaks[around, 1] - one.y)
    height = peaks[around, 2]
    own = float(height[distance <= 2.0].max(initial=0.0))
    other = distance > max(2.0, 0.6 * width)
    limit = np.where(distance < 2.5 * width, near, far) * own
    return not bool((other & (height > limit)).any())


def star_at(field: StarField, x: float, y: float) -> Candidate | None:
    """The star at a place, whether alone or not; None where none stands out.

    Parameters
    ----------
    field : StarField
    x, y : float
        Pixels; one or two off does no harm.
    """
    rows, columns = field.electrons.shape
    left, bottom = max(0, round(x) - 2), max(0, round(y) - 2)
    patch = field.electrons[bottom : min(rows, round(y) + 3), left : min(columns, round(x) + 3)]
    down, along = np.unravel_index(int(np.argmax(patch)), patch.shape)
    column, row = left + int(along), bottom + int(down)
    left, bottom = max(0, column - _WIDEST - 8), max(0, row - _WIDEST - 8)
    box = slice(bottom, row + _WIDEST + 9), slice(left, column + _WIDEST + 9)
    near = StarField(field.electrons[box], field.good[box], field.background)
    peak = np.array([[column - left, row - bottom, 0.0]])
    for blur in (1.0, 2.0, 4.0):
        smooth, _ = _peaks(near, blur)
        found = _measured(near, peak, smooth, blur)
        if found:
            return replace(found[0], x=found[0].x + left, y=found[0].y + bottom)
    return None


def company(field: StarField, star: Candidate, box: tuple[slice, slice], width: float) -> AnyArray:
    """Pixels of a box that belong to other stars than the one it is about."""
    blur = max(1.0, width / 3.0)
    light = ndimage.gaussian_filter(field.electrons[box].astype(np.float64), blur)
    noise = sqrt(field.background) / (2.0 * sqrt(np.pi) * blur)
    y, x = np.indices(light.shape)
    distance = np.hypot(x + box[1].start - star.x, y + box[0].start - star.y)
    side = 2 * ceil(blur) + 1
    top = (light == ndimage.maximum_filter(light, side)) & (distance > 1.2 * width)
    own = float(light[distance <= 2.0].max(initial=0.0))
    limit = np.where(distance < 2.5 * width, _COMPANY[0][0], 0.5 * _COMPANY[0][1]) * own
    top &= light > np.maximum(limit, _PEAK * noise)
    away = ndimage.distance_transform_edt(~top) if top.any() else np.full(light.shape, np.inf)
    return np.asarray((away < 1.5 * width) & (distance > 0.8 * width))
