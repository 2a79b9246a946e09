"""The phase that an adaptive mirror leaves: its power spectrum, its variance, its shares.

A mirror of n actuators across the aperture follows the wavefront up to the spatial frequency
1/(2d), d = aperture / n, in x and in y (Rigaut, Veran & Lai 1998; Jolissaint, Veran & Conan 2006);
beyond that square the turbulence stays as it is (*fitting*). Within it the mirror shows each layer
as it stood a lag ago, and as it lies before the guide star: displaced by ``s = h theta - v t``,
which leaves ``2 (1 - cos 2 pi f.s)`` of its power (*lag*, *anisoplanatism*). A laser shines from a
finite height H: at the pupil's place x it sees a layer displaced by ``x h / H`` more, whose mean
over the aperture puts ``2 J1(z) / z``, z = pi D f h / H, beside the cosine (*cone*; its variance
is the leading term of focal anisoplanatism, 1.18 (h/H)^(5/3) (D/r0)^(5/3)). A laser does not see
tilt either: a natural star does, for a layer displaced towards it (*tilt*); the tilt's share of
the spectrum is Zernike's, ``16 (J2(pi D f) / (pi D f))^2`` (Noll 1976). The sensor adds its
*noise*, and what it takes for low frequencies of those that it cannot tell apart from them
(*aliasing*): both go through the least-squares reconstruction of a wavefront from its mean slopes
over squares of side d.

Lengths in metres, phases in radians at one wavelength, frequencies in cycles per metre; spectra in
rad2 m2.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import inf, isfinite

import numpy as np
from scipy.special import j1, jv

from simimg.air.layers import Layer
from simimg.air.phasespectrum import phase_spectrum
from simimg.arrays import FloatArray

ALIASES = 4
"""Multiples of the sampling frequency, either way, whose power is taken for low frequencies."""


@dataclass(frozen=True, kw_only=True)
class Loop:
    """What a correction is made of.

    Attributes
    ----------
    diameter : float
        Of the aperture (m).
    pitch : float
        Distance d of the actuators (m).
    lag : float
        Time from measurement to correction (s), 0 or more.
    noise : float
        Variance of the phase difference across a subaperture that the sensor's noise makes (rad2).
    aliasing : bool
        Whether the sensor takes high frequencies for low ones.
    offset : (float, float)
        From the guide star to the star that is looked at, towards east and north (rad).
    laser_height : float
        Distance of the guide star along the line of sight (m); infinity for a natural one.
    tilt_offset : (float, float) or None
        From the tilt star to the star that is looked at (rad); None where the guide star shows
        tilt itself.
    """

    diameter: float
    pitch: float
    lag: float = 0.0
    noise: float = 0.0
    aliasing: bool = True
    offset: tuple[float, float] = (0.0, 0.0)
    laser_height: float = inf
    tilt_offset: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        good = self.diameter > 0.0 and self.pitch > 0.0 and self.laser_height > 0.0
        if not (good and isfinite(self.diameter) and isfinite(self.pitch)):
            raise ValueError("diameter, pitch and laser_height must be above 0")
        if not (isfinite(self.lag) and self.lag >= 0.0 and isfinite(self.noise + 0.0)):
            raise ValueError(f"lag and noise must be finite and not negative, got {self.lag!r}")

    @property
    def edge(self) -> float:
        """Frequency up to which the mirror follows, in x and in y."""
        return 0.5 / self.pitch


@dataclass(frozen=True, eq=False)
class Turbulence:
    """The turbulence along the line of sight.

    Attributes
    ----------
    r0 : float
        Fried's parameter at the wavelength in hand (m).
    outer_scale : float
    layers : tuple of Layer
        Shares adding up to 1; heights are distances along the line of sight.
    """

    r0: float
    outer_scale: float
    layers: tuple[Layer, ...]

    def spectrum(self, f: FloatArray) -> FloatArray:
        """Power spectrum of the phase at moduli of frequency above 0."""
        return np.asarray(self.r0 ** (-5.0 / 3.0) * phase_spectrum(f * f, self.outer_scale))


def residual_spectrum(
    fx: FloatArray, fy: FloatArray, turbulence: Turbulence, loop: Loop
) -> FloatArray:
    """Power spectrum of the phase that is left at frequencies within the square of control.

    Parameters
    ----------
    fx, fy : ndarray
        Towards east and north, of one shape; not both 0.
    turbulence : Turbulence
    loop : Loop
    """
    f = np.hypot(fx, fy)
    whole = turbulence.spectrum(f)
    left = _displaced(fx, fy, f, turbulence.layers, loop)
    if loop.tilt_offset is not None:
        tilt = tilt_share(f, loop.diameter)
        by_star = replace(loop, offset=loop.tilt_offset, laser_height=inf)
        left = (1.0 - tilt) * left + tilt * _displaced(fx, fy, f, turbulence.layers, by_star)
    power = whole * left
    if loop.noise > 0.0:
        power = power + noise_spectrum(fx, fy, loop)
    if loop.aliasing:
        power = power + aliased_spectrum(fx, fy, turbulence, loop.pitch)
    return np.asarray(power)


def displacement(layer: Layer, *, lag: float, offset: tuple[float, float]) -> tuple[float, float]:
    """How far (m; east, north) what a star shines through lies from what the mirror shows of it.

    The layer moves on while the correction is on its way: a star ahead of the guide star in the
    wind's direction sees what the guide star saw a moment ago.

    Parameters
    ----------
    layer : Layer
    lag : float
        Seconds.
    offset : (float, float)
        Of the star from the guide star, towards east and north (rad).
    """
    east, north = (
        layer.height * angle - speed * lag
        for speed, angle in zip(layer.velocity, offset, strict=True)
    )
    return east, north


def _displaced(
    fx: FloatArray, fy: FloatArray, f: FloatArray, layers: Sequence[Layer], loop: Loop
) -> FloatArray:
    """Share of the power that displaced layers leave, 0 to 2 of it and mostly below 1."""
    left = np.zeros_like(f)
    for layer in layers:
        if layer.height >= loop.laser_height:
            left += layer.share
            continue
        east, north = displacement(layer, lag=loop.lag, offset=loop.offset)
        # Twice the square of a sine keeps its digits where the displacement is small.
        half = np.pi * (fx * east + fy * north)
        stretch = loop.diameter * layer.height / loop.laser_height
        if stretch == 0.0:
            left += layer.share * 4.0 * np.sin(half) ** 2
            continue
        mean = _jinc(np.pi * stretch * f)
        left += layer.share * 2.0 * ((1.0 - mean) + 2.0 * mean * np.sin(half) ** 2)
    return left


def _jinc(z: FloatArray) -> FloatArray:
    """2 J1(z) / z, 1 at 0."""
    small = np.abs(z) < 1e-4
    safe = np.where(small, 1.0, z)
    return np.where(small, 1.0 - z * z / 8.0, 2.0 * j1(safe) / safe)


def tilt_share(f: FloatArray, diameter: float) -> FloatArray:
    """Share of the power at a frequency that is tilt over a round aperture (Noll 1976)."""
    z = np.pi * diameter * np.asarray(f, dtype=np.float64)
    small = z < 1e-3
    safe = np.where(small, 1.0, z)
    return np.where(small, 0.25 * z * z, 16.0 * (jv(2, safe) / safe) ** 2)


def beyond_piston(f: FloatArray, diameter: float) -> FloatArray:
    """Share of the power at a frequency that is no piston over a round aperture (Noll 1976)."""
    z = np.pi * diameter * np.asarray(f, dtype=np.float64)
    # One less a number close to 1 would lose the digits that a steep spectrum asks for.
    return np.where(z < 0.05, 0.25 * z * z * (1.0 - 5.0 * z * z / 48.0), 1.0 - _jinc(z) ** 2)


def _slope(fx: FloatArray, fy: FloatArray, pitch: float) -> tuple[FloatArray, FloatArray]:
    """Mean phase difference across a square of side d for a wave of unit height, over i."""
    mean = 2.0 * np.pi * pitch * np.sinc(fx * pitch) * np.sinc(fy * pitch)
    return fx * mean, fy * mean


def noise_spectrum(fx: FloatArray, fy: FloatArray, loop: Loop) -> FloatArray:
    """What white noise of the slopes becomes in the reconstructed wavefront."""
    gx, gy = _slope(fx, fy, loop.pitch)
    return np.asarray(loop.noise * loop.pitch**2 / (gx * gx + gy * gy))


def aliased_spectrum(
    fx: FloatArray, fy: FloatArray, turbulence: Turbulence, pitch: float
) -> FloatArray:
    """What slopes of frequencies beyond the sampling become in the reconstructed wavefront."""
    gx, gy = _slope(fx, fy, pitch)
    square = (gx * gx + gy * gy) ** 2
    power = np.zeros_like(fx)
    for m in range(-ALIASES, ALIASES + 1):
        for n in range(-ALIASES, ALIASES + 1):
            if m == 0 and n == 0:
                continue
            ax, ay = fx + m / pitch, fy + n / pitch
            hx, hy = _slope(ax, ay, pitch)
            power += (gx * hx + gy * hy) ** 2 / square * turbulence.spectrum(np.hypot(ax, ay))
    return power
