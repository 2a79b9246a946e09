"""Sparrow's limit by scan: where the fainter star of a pair last fails to show as a maximum.

Sparrow (1916, Astrophys. J. 44, 76) calls an equal pair resolved when the saddle between its stars
has just appeared. For an unequal pair the limit is here the smallest separation beyond which the
sum of the two always keeps a maximum, within half a FWHM of the fainter star, at which that star
gives most of the light, so that a ring of the brighter star is no companion. Where rings are seen
the limit jumps and is not monotonic in the magnitude difference; it is found by a scan of all
separations, and only its edge by bisection.

Lengths come back in the unit of the profile's ``t``.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

import numpy as np
from scipy import optimize

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.resolving.cut import SAMPLES, Profile, SampledProfile, sample_profile

_FARTHEST = 256.0  # FWHMs: a companion lost farther out than this is called never resolved
_FINE = 257  # places within the window where a maximum is looked for
_CLEAR = 1.2  # ratio of their light from which one star clearly outshines the other
_MARGIN = 1e-5  # by which a star must outshine the other at its maximum: above rounding


def sparrow_equal(profile: Profile | SampledProfile) -> float:
    """Separation beyond which an equal pair always shows both its stars as maxima.

    0.9472 lambda/D for a clear aperture, 0.8493 FWHM for a Gaussian.
    """
    sampled = sample_profile(profile)
    limit = float(_scan(sampled, np.ones(1))[0])
    if not sampled.symmetric:
        limit = max(limit, float(_scan(sampled.mirrored(), np.ones(1))[0]))
    else:
        # There the middle turns from a peak into a dip: two inflexions meet.
        near = 0.002 * sampled.width
        if (
            float(sampled.bend(0.5 * (limit - near)))
            < 0.0
            < float(sampled.bend(0.5 * (limit + near)))
        ):
            limit = float(
                optimize.brentq(
                    lambda s: float(sampled.bend(0.5 * s)),
                    limit - near,
                    limit + near,
                    xtol=1e-6 * near,
                )
            )
    # Stars with flat tops that overlap keep small maxima of their own beside a bright middle.
    step = sampled.width / 48.0
    grid = limit + step * np.arange(1, 49)
    merged = np.flatnonzero([_merged(sampled, float(s), 481) for s in grid])
    if merged.size == 0 or merged[-1] == grid.size - 1:
        return limit
    low = float(grid[merged[-1]])
    high = low + step
    while high - low > 1e-5 * sampled.width:
        middle = 0.5 * (low + high)
        low, high = (middle, high) if _merged(sampled, middle, 4801) else (low, middle)
    return 0.5 * (low + high)


def _merged(sampled: SampledProfile, separation: float, count: int) -> bool:
    """Whether an equal pair is nowhere brighter than where its stars give equal light."""
    t = np.linspace(-sampled.window, separation + sampled.window, count)
    first, second = sampled.value(t), sampled.value(t - separation)
    total = first + second
    even = np.flatnonzero(np.diff(np.sign(first - second)))
    equal = np.maximum(total[even], total[even + 1])
    left, right = total[first >= second].max(initial=0.0), total[second >= first].max(initial=0.0)
    return bool(equal.size and min(left, right) <= equal.max() * (1.0 + 1e-9))


def sparrow(profile: Profile | SampledProfile, magnitude_difference: float) -> float:
    """Sparrow's limit of an unequal pair (the rule stands at the head of this module).

    Parameters
    ----------
    profile : callable
        Cut of the PSF along the line from the first star to the second.
    magnitude_difference : float
        Second minus first, between -12 and 12; the sense matters for an asymmetric profile.

    Returns
    -------
    float
        The separation; infinite where the fainter star is lost at any separation within 250 FWHM.

    Raises
    ------
    ValueError
        For a magnitude difference out of range.
    """
    if not abs(magnitude_difference) <= 12.0:
        raise ValueError(f"magnitude difference must be within 12, got {magnitude_difference}")
    if magnitude_difference == 0.0:
        return sparrow_equal(profile)
    ratio = 10.0 ** (-0.4 * abs(magnitude_difference))
    sampled = sample_far_enough(profile, ratio)
    if magnitude_difference < 0.0:
        sampled = sampled.mirrored()
    return float(_scan(sampled, np.array([ratio]))[0])


@dataclass(frozen=True, eq=False)
class SparrowCurve:
    """Sparrow's limit as a function of the magnitude difference, tabulated.

    Attributes
    ----------
    magnitude_differences : ndarray, shape (n,)
        Second star minus first, increasing.
    separations : ndarray, shape (n,)
        The limit for each, in the profile's unit of length.
    """

    magnitude_differences: FloatArray
    separations: FloatArray

    def __call__(self, magnitude_difference: FloatArray | float) -> FloatArray:
        """Limit for any differences, between the table's; its ends hold beyond it.

        Linear in the power of 2/3, with which the limit rises from that of the equal pair: where
        one maximum splits into two, the edge of the split is a cusp.
        """
        table = _along_cusp(self.magnitude_differences)
        return np.asarray(np.interp(_along_cusp(magnitude_difference), table, self.separations))


def _along_cusp(difference: FloatArray | float) -> FloatArray:
    return np.asarray(np.sign(difference) * np.abs(difference) ** (2.0 / 3.0))


def sparrow_curve(
    profile: Profile | SampledProfile, *, largest: float = 8.0, step: float = 0.05
) -> SparrowCurve:
    """Tabulate Sparrow's limit for magnitude differences from ``-largest`` to ``largest``.

    Parameters
    ----------
    profile : callable
        Cut of the PSF along the line from the first star to the second.
    largest, step : float, optional
        End of the table (at most 12) and its step, magnitudes.
    """
    if not (0.0 < step <= largest <= 12.0):
        raise ValueError(f"a table to {largest} magnitudes by steps of {step} cannot be made")
    differences = np.linspace(0.0, largest, int(np.ceil(largest / step)) + 1)
    ratios = 10.0 ** (-0.4 * differences)
    sampled = sample_far_enough(profile, float(ratios[-1]))
    forward = _scan(sampled, ratios, precision=1e-5)
    backward = forward if sampled.symmetric else _scan(sampled.mirrored(), ratios, precision=1e-5)
    # Both stars must show where they are equal.
    forward[0] = backward[0] = sparrow_equal(sampled)
    return SparrowCurve(
        magnitude_differences=frozen(np.concatenate([-differences[:0:-1], differences])),
        separations=frozen(np.concatenate([backward[:0:-1], forward])),
    )


def sample_far_enough(profile: Profile | SampledProfile, ratio: float) -> SampledProfile:
    """Sample a profile out to where nothing of it can hide a companion of `ratio`."""
    sampled = sample_profile(profile)
    extent = sampled.extent / sampled.width
    while extent < _FARTHEST and _hiding_place(sampled, ratio) >= sampled.extent:
        extent *= 2.0
        sampled = sampled.extended(extent)
    return sampled


def _hiding_place(sampled: SampledProfile, ratio: float) -> float:
    """Separation beyond which a companion of `ratio` shows without a scan.

    There the other star is nowhere near as steep as the companion's flanks nor as bright.
    """
    t = np.arange(0.0, sampled.extent, sampled.width / SAMPLES)
    steepest = float(np.abs(sampled.slope(t[t <= sampled.window])).max())
    strong = np.zeros(t.size, dtype=bool)
    for one in (sampled, sampled.mirrored()):
        strong |= np.abs(one.slope(t)) > 0.3 * ratio * steepest
        strong |= one.value(t) > 0.3 * ratio
    return float(t[np.flatnonzero(strong)[-1]]) + 1.1 * sampled.window


def _scan(sampled: SampledProfile, ratios: FloatArray, *, precision: float = 1e-7) -> FloatArray:
    """Last separation at which a companion of each ratio (1 or less) is lost.

    A scan over all separations finds the last that fails, bisection (to `precision` FWHM) the edge.
    """
    step = sampled.step
    half = int(np.ceil(sampled.window / step))
    top = int(sampled.extent / step)
    place = step * np.arange(-half, top + half + 1)
    value, slope = sampled.value(place), sampled.slope(place)
    own_value, own_slope = value[: 2 * half + 1], slope[: 2 * half + 1]
    values = np.lib.stride_tricks.sliding_window_view(value, 2 * half + 1)
    slopes = np.lib.stride_tricks.sliding_window_view(slope, 2 * half + 1)
    lost = np.empty(ratios.size)
    for i, ratio in enumerate(ratios):
        last = int(np.ceil(_hiding_place(sampled, float(ratio)) / step))
        count = min(last, top)
        slope_here = ratio * own_slope + slopes[:count]
        row, column, part = _maxima(slope_here)
        ours = ratio * _between(own_value[None], np.zeros_like(row), column, part)
        theirs = _between(values, row, column, part)
        shown = np.zeros(count, dtype=bool)
        shown[row[ours > _CLEAR * theirs]] = True
        # Where neither star clearly wins, the maximum must be placed exactly.
        close = (ours <= _CLEAR * theirs) & (_CLEAR * ours > theirs)
        row, column, part = row[close], column[close], part[close]
        crossing = slope_here[row, column] > 0.0
        cell = (column - half) * step
        ahead = _ahead(sampled, np.full(row.size, ratio), row * step, cell, step, part, crossing)
        shown[row[ahead]] = True
        lost[i] = step * float(np.flatnonzero(~shown)[-1]) if last <= top else inf
    known = np.isfinite(lost)
    low, high = lost[known], lost[known] + step
    while low.size and step > precision * sampled.width:
        step *= 0.5
        middle = 0.5 * (low + high)
        shown = _shown(sampled, ratios[known], middle)
        low, high = np.where(shown, low, middle), np.where(shown, middle, high)
    lost[known] = 0.5 * (low + high)
    return lost


def _shown(sampled: SampledProfile, ratios: FloatArray, separations: FloatArray) -> AnyArray:
    """Whether each companion shows at its separation."""
    count = max(_FINE, 4 * int(np.ceil(sampled.window / sampled.step)) + 1)
    offset = np.linspace(-sampled.window, sampled.window, count)
    slope = ratios[:, None] * sampled.slope(offset) + sampled.slope(separations[:, None] + offset)
    row, column, part = _maxima(slope)
    spacing = float(offset[1] - offset[0])
    crossing = slope[row, column] > 0.0
    ahead = _ahead(sampled, ratios[row], separations[row], offset[column], spacing, part, crossing)
    shown = np.zeros(separations.size, dtype=bool)
    shown[row[ahead]] = True
    return shown


def _ahead(
    sampled: SampledProfile,
    ratio: FloatArray,
    apart: FloatArray,
    cell: FloatArray,
    spacing: float,
    part: FloatArray,
    crossing: AnyArray,
) -> AnyArray:
    """Whether the companion outshines the other star at each maximum, placed by bisection.

    Parameters
    ----------
    ratio, apart : ndarray, shape (n,)
        Companion's light over the other star's, and their separation.
    cell, spacing, part, crossing : ndarray, shape (n,), and float
        The maximum lies `part` of `spacing` beyond `cell` (from the companion); the slope falls
        through zero within that cell where `crossing`, is only close to it elsewhere.
    """
    place = cell + spacing * part
    low, high = np.where(crossing, cell, place), np.where(crossing, cell + spacing, place)
    for _ in range(16):
        place = 0.5 * (low + high)
        rising = ratio * sampled.slope(place) + sampled.slope(apart + place) > 0.0
        low, high = np.where(rising & crossing, place, low), np.where(rising, high, place)
    return ratio * sampled.value(place) > (1.0 + _MARGIN) * sampled.value(apart + place)


def _maxima(slope: FloatArray) -> tuple[AnyArray, AnyArray, FloatArray]:
    """Places where a slope, sampled along the last axis, falls through zero.

    Returns
    -------
    row, column : ndarray of int
        Each place lies between this sample and the next.
    part : ndarray
        How far, from 0 to 1.
    """
    before, after = slope[:, :-1], slope[:, 1:]
    row, column = np.nonzero((before > 0.0) & (after <= 0.0))
    up, down = before[row, column], after[row, column]
    part = up / (up - down)
    # A rise too short to touch a sample: the vertex of a parabola through three falling samples.
    left, middle, right = slope[:, :-2], slope[:, 1:-1], slope[:, 2:]
    low, place = np.nonzero((middle <= 0.0) & (middle >= left) & (middle >= right))
    bend = 2.0 * middle[low, place] - left[low, place] - right[low, place]
    swing = right[low, place] - left[low, place]
    rises = 8.0 * middle[low, place] * bend + swing**2 > 0.0
    low, place, shift = low[rises], place[rises] + 1, 0.5 * swing[rises] / bend[rises]
    behind = shift < 0.0
    return (
        np.concatenate([row, low]),
        np.concatenate([column, place - behind]),
        np.concatenate([part, shift + behind]),
    )


def _between(table: FloatArray, row: AnyArray, column: AnyArray, part: FloatArray) -> FloatArray:
    """Linear interpolation along the rows of a table."""
    return np.asarray(table[row, column] * (1.0 - part) + table[row, column + 1] * part)
