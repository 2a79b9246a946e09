"""When two stars count as resolved: the criteria of Rayleigh and Sparrow for any cut of a PSF.

A pair is the PSF's cut ``profile(t)`` along the line that joins the two stars, plus
``10^(-0.4 dm)`` times the same shifted by the separation.

- Rayleigh (Rayleigh 1879, Phil. Mag. 8, 261) for diffraction: the second star on the first dark
  ring of the first. A blurred PSF has no dark ring; there the criterion is the depth of saddle that
  the clear aperture gives at its first dark ring, `SADDLE` of the peaks. With a central obstruction
  that lies beyond the dark ring even without blur.
- Sparrow (Sparrow 1916, Astrophys. J. 44, 76): the separation at which the saddle just vanishes;
  for unequal pairs see `simimg.resolving.scan`.

Lengths come back in the unit of ``t``.
"""

from __future__ import annotations

from math import isfinite, nan, pi

import numpy as np
from scipy import optimize, special

from simimg.arrays import FloatArray
from simimg.resolving.cut import (
    Profile,
    SampledProfile,
    first_minimum,
    fwhm,
    sample_profile,
)
from simimg.resolving.scan import (
    SparrowCurve,
    sample_far_enough,
    sparrow,
    sparrow_curve,
    sparrow_equal,
)

__all__ = [
    "SADDLE",
    "Profile",
    "SampledProfile",
    "SparrowCurve",
    "first_dark_ring",
    "first_minimum",
    "fwhm",
    "rayleigh_saddle",
    "saddle_ratio",
    "sample_far_enough",
    "sample_profile",
    "sparrow",
    "sparrow_curve",
    "sparrow_equal",
]


def first_dark_ring(obstruction: float = 0.0) -> float:
    """Radius of the first dark ring of an annular aperture, in wavelengths over diameters.

    Parameters
    ----------
    obstruction : float
        Diameter of the central obstruction over that of the aperture, from 0 to below 1.

    Returns
    -------
    float
        1.2197 for a clear aperture (Airy 1835), less with an obstruction: the first zero of
        ``J1(x) - e J1(e x)``, ``x = pi r`` (Born & Wolf, Principles of Optics, ch. 8.6).

    Raises
    ------
    ValueError
        For an obstruction outside its range.
    """
    if not 0.0 <= obstruction < 1.0:
        raise ValueError(f"obstruction must be at least 0 and below 1, got {obstruction}")

    def amplitude(x: float) -> float:
        # Over 1 - e, so that the zero stays well defined as e nears 1.
        difference = special.j1(x) - obstruction * special.j1(obstruction * x)
        return float(difference / (1.0 - obstruction))

    # Between the zero of a thin ring (J0) and that of the clear aperture (J1).
    return float(optimize.brentq(amplitude, 2.3, 3.9, xtol=1e-14)) / pi


def _rayleigh_depth() -> float:
    x = 0.5 * pi * first_dark_ring()
    return float(2.0 * (2.0 * special.j1(x) / x) ** 2)


SADDLE = _rayleigh_depth()
"""Saddle over peaks of an equal pair, clear aperture, at its first dark ring: 0.735."""


def saddle_ratio(
    profile: Profile | SampledProfile, separation: float, *, magnitude_difference: float = 0.0
) -> float:
    """Lowest point between two stars over the lower of their two maxima.

    Parameters
    ----------
    profile : callable
        Cut of the PSF along the line from the first star to the second.
    separation : float
        Distance of the second star from the first, above 0.
    magnitude_difference : float, optional
        Second minus first.

    Returns
    -------
    float
        1 where the two have merged, 0 with dark between them.
    """
    if not (isfinite(separation) and separation > 0.0):
        raise ValueError(f"separation must be above 0, got {separation}")
    ratio = 10.0 ** (-0.4 * magnitude_difference)
    return _saddle(sample_profile(profile), separation, ratio, 1201)


def _saddle(sampled: SampledProfile, separation: float, ratio: float, count: int) -> float:
    """`saddle_ratio` by the light at `count` places on the line."""
    reach = sampled.window
    t = np.linspace(-reach, separation + reach, count)
    first, second = sampled.value(t), ratio * sampled.value(t - separation)
    total = first + second
    near_first = np.flatnonzero((np.abs(t) <= reach) & (first >= second))
    near_second = np.flatnonzero((np.abs(t - separation) <= reach) & (second >= first))
    if near_first.size == 0 or near_second.size == 0:
        return 1.0
    i = int(near_first[np.argmax(total[near_first])])
    j = int(near_second[np.argmax(total[near_second])])
    if j <= i + 1:
        return 1.0
    k = i + int(np.argmin(total[i : j + 1]))
    return min(1.0, _vertex(total, k) / min(_vertex(total, i), _vertex(total, j)))


def _vertex(values: FloatArray, i: int) -> float:
    """Height of the parabola's vertex through sample `i` and its neighbours."""
    if not 0 < i < values.size - 1:
        return float(values[i])
    a, b, c = (float(v) for v in values[i - 1 : i + 2])
    bend = a - 2.0 * b + c
    if bend == 0.0 or abs(a - c) > abs(2.0 * bend):
        return b
    return b - (a - c) ** 2 / (8.0 * bend)


def rayleigh_saddle(profile: Profile | SampledProfile) -> float:
    """Separation of an equal pair beyond which its saddle is never above `SADDLE` of its peaks.

    1.2197 lambda/D for a clear aperture, 1.1888 FWHM for a Gaussian (1.1899 if the heights at the
    stars' places stand for the peaks, which lie closer together); NaN where the saddle stays
    higher out to 4 FWHM.
    """
    sampled = sample_profile(profile)
    grid = sampled.width * np.arange(0.4, 4.0, 1.0 / 32.0)
    ratios = np.array([_saddle(sampled, float(s), 1.0, 241) for s in grid])
    above = np.flatnonzero(ratios > SADDLE)
    if above.size == 0 or above[-1] == grid.size - 1:
        return nan

    def excess(s: float) -> float:
        return _saddle(sampled, s, 1.0, 1201) - SADDLE

    # A step of room on either side: the coarse scan is right to less than that.
    low, high = float(grid[max(above[-1] - 1, 0)]), float(grid[min(above[-1] + 2, grid.size - 1)])
    if not excess(low) > 0.0 > excess(high):
        return nan
    return float(optimize.brentq(excess, low, high, xtol=1e-9 * sampled.width))
