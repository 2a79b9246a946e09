"""A cut of a PSF, sampled about its peak: width, first minimum, and the spline others work on.

A cut ``profile(t)`` is the PSF along a line, its peak near ``t = 0``, in any unit of length and
height; it may have rings, and may differ on its two sides. It is read at least 64 times to the
FWHM and interpolated by a quintic spline, good to 1e-8 of the peak for a band-limited PSF.

Lengths come back in the unit of ``t``.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from math import isfinite, nan

import numpy as np
from scipy import optimize
from scipy.interpolate import BSpline, make_interp_spline

from simimg.arrays import FloatArray

Profile = Callable[[FloatArray], FloatArray]

SAMPLES = 64  # to the FWHM


@dataclass(frozen=True, eq=False)
class SampledProfile:
    """A cut of a PSF, sampled about its peak, with the interpolation all criteria work on.

    Attributes
    ----------
    width : float
        Full width at half maximum.
    window : float
        Distance from a star within which its maximum must lie: half the FWHM, or up to the
        steepest slope where that lies farther out (PSFs with a flat top).
    symmetric : bool
        True when both sides agree to 1e-6 of the peak.
    step, extent : float
        How finely it is sampled, and how far on either side.
    source : callable
        What it was sampled from.
    """

    width: float
    window: float
    symmetric: bool
    step: float
    extent: float
    source: Profile
    _peak: float
    _value: BSpline
    _slope: BSpline
    _mirrored: bool = False

    def value(self, t: FloatArray | float) -> FloatArray:
        """Profile over its peak, `t` from the peak; 0 beyond the sampled extent."""
        return self._read(self._value, t, 1.0)

    def slope(self, t: FloatArray | float) -> FloatArray:
        """Derivative of `value`."""
        return self._read(self._slope, t, -1.0 if self._mirrored else 1.0)

    def bend(self, t: FloatArray | float) -> FloatArray:
        """Second derivative of `value`."""
        return self._read(self._slope.derivative(), t, 1.0)

    def _read(self, spline: BSpline, t: FloatArray | float, sign: float) -> FloatArray:
        t = np.asarray(t, dtype=np.float64)
        place = -t if self._mirrored else t
        inside = np.abs(place) <= self.extent
        height = spline(np.where(inside, place, 0.0))
        return np.asarray(np.where(inside, height * (sign / self._peak), 0.0))

    def mirrored(self) -> SampledProfile:
        """The same profile seen from the other side."""
        return replace(self, _mirrored=not self._mirrored)

    def extended(self, extent: float) -> SampledProfile:
        """The same profile sampled out to `extent` FWHMs."""
        wider = sample_profile(self.source, extent=extent)
        return replace(wider, _mirrored=self._mirrored)


def _half_maximum(profile: Profile) -> float:
    """Rough half width at half maximum of a profile of unknown scale."""
    peak = float(profile(np.zeros(1))[0])
    if not (isfinite(peak) and peak > 0.0):
        raise ValueError("a profile must be positive at its centre")
    t = 1e-15
    while float(profile(np.array([t]))[0]) > 0.5 * peak:
        t *= 2.0
        if t > 1e15:
            raise ValueError("a profile must fall below half of its peak")
    inner, outer = 0.5 * t, t
    for _ in range(20):
        middle = 0.5 * (inner + outer)
        if float(profile(np.array([middle]))[0]) > 0.5 * peak:
            inner = middle
        else:
            outer = middle
    return outer


def sample_profile(profile: Profile | SampledProfile, *, extent: float = 10.0) -> SampledProfile:
    """Sample a cut of a PSF about its peak.

    Parameters
    ----------
    profile : callable
        ``profile(t)`` on arrays of places, positive at 0, its peak within a FWHM of 0. One with an
        attribute ``band`` (highest frequency, cycles per unit of ``t``) is sampled as finely as
        that asks.
    extent : float, optional
        How far from the peak, in FWHMs.

    Raises
    ------
    ValueError
        When it is not positive at 0 or never falls below half of its peak.
    """
    if isinstance(profile, SampledProfile):
        return profile
    rough = 2.0 * _half_maximum(profile)
    step = rough / SAMPLES
    band = float(getattr(profile, "band", 0.0))
    if band > 0.0:
        step = max(min(step, 0.125 / band), rough / (4 * SAMPLES))
    near = np.arange(-2 * round(rough / step), 2 * round(rough / step) + 1) * step
    core = make_interp_spline(near, profile(near), k=5)
    centre, width, _ = _core(core, near)
    count = int(np.ceil(extent * width / step))
    t = np.arange(-count, count + 1) * step
    height = np.asarray(profile(t + centre), dtype=np.float64)
    spline = make_interp_spline(t, height, k=5)
    slope = spline.derivative()
    inner = t[np.abs(t) <= width]
    steepest = float(np.abs(inner[np.argmax(np.abs(slope(inner)))]))
    peak = float(spline(0.0))
    return SampledProfile(
        width=width,
        window=max(0.5 * width, 1.05 * steepest) if steepest > 0.49 * width else 0.5 * width,
        symmetric=bool(np.abs(height - height[::-1]).max() < 1e-6 * peak),
        step=step,
        extent=count * step,
        source=profile,
        _peak=peak,
        _value=spline,
        _slope=slope,
    )


def _core(spline: BSpline, t: FloatArray) -> tuple[float, float, float]:
    """Place of the peak, FWHM and peak height from a spline over the core, knots near `t`."""
    height = np.asarray(spline(t))
    top = min(max(int(np.argmax(height)), 1), t.size - 2)
    slope, fine = spline.derivative(), 1e-9 * float(t[1] - t[0])
    before, after = float(t[top - 1]), float(t[top + 1])
    if float(np.abs(height - height[::-1]).max()) < 1e-6 * float(height.max()):
        # The middle of a flat top is no matter of rounding errors.
        centre = 0.0
    elif float(slope(before)) > 0.0 > float(slope(after)):
        centre = float(optimize.brentq(lambda x: float(slope(x)), before, after, xtol=fine))
    else:
        centre = float(t[top])
    peak = float(spline(centre))
    ends = []
    for sign in (-1, 1):
        i = top
        while 0 < i < t.size - 1 and height[i] > 0.5 * peak:
            i += sign
        a, b = sorted((float(t[i - sign]), float(t[i])))
        if (float(spline(a)) - 0.5 * peak) * (float(spline(b)) - 0.5 * peak) > 0.0:
            raise ValueError("a profile must fall below half of its peak on both sides")
        ends.append(
            float(optimize.brentq(lambda x: float(spline(x)) - 0.5 * peak, a, b, xtol=fine))
        )
    return centre, ends[1] - ends[0], peak


def fwhm(profile: Profile | SampledProfile) -> float:
    """Full width of a profile at half of its maximum, between the crossings nearest its peak."""
    return sample_profile(profile, extent=3.0).width


def first_minimum(profile: Profile | SampledProfile) -> float:
    """Distance from the peak of the first minimum towards positive ``t``; NaN if there is none."""
    sampled = sample_profile(profile)
    t = np.linspace(0.0, sampled.extent, int(sampled.extent / sampled.width * 200))[1:]
    slope = sampled.slope(t)
    rises = np.flatnonzero((slope[:-1] < 0.0) & (slope[1:] >= 0.0))
    if rises.size == 0:
        return nan
    a, b = float(t[rises[0]]), float(t[rises[0] + 1])
    return float(optimize.brentq(lambda x: float(sampled.slope(x)), a, b, xtol=1e-9 * sampled.step))
