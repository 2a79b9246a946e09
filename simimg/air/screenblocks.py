"""The finer part of a phase screen: blocks by FFT, joined without a seam and without an end.

Frequencies beyond a square about the origin lie on a lattice whose period is eight apertures. Each
of its waves has the power of its own cell of the spectrum and of that cell's aliases, so that the
samples have the statistics of points of the turbulence, not of a smoothed copy. A block serves for
a stretch of the way that the aperture makes through the screen; before it ends the next fades in,
both weighted so that the sum of the squares is 1. The waves here are short against a stretch, and
what they have in common over an aperture is kept to some thousandths. Nothing comes back: each
block is drawn anew when it is reached. Lengths are in samples; phases are for r0 = 1 sample.
"""

from __future__ import annotations

from functools import lru_cache
from math import floor, pi, sqrt

import numpy as np
import scipy.fft

from simimg.air.phasespectrum import SPECTRUM, phase_spectrum
from simimg.arrays import AnyArray, FloatArray, frozen

PERIODS = 8
"""Side of a block over that of the aperture."""

LOWEST = 8
"""Waves of at most so many periods to a block, along both axes, are left to `screenwaves`."""


def block_side(samples: int) -> int:
    """Side of a block in samples: even, `PERIODS` apertures or a little more, of small factors."""
    return 2 * int(scipy.fft.next_fast_len(PERIODS * samples // 2))


_FINE_CELLS = 24
_ALIASES = 2


@lru_cache(maxsize=4)
def block_amplitudes(size: int, outer_scale: float) -> FloatArray:
    """Amplitude (rad, r0 = 1 sample) of every wave of a block, shape ``(size, size)``.

    Parameters
    ----------
    size : int
        Side of the block in samples, even.
    outer_scale : float
        L0 in samples, or infinity.
    """
    half = size // 2
    k = np.arange(half + 1, dtype=np.float64)
    power = np.zeros((half + 1, half + 1))
    for down in range(-_ALIASES, _ALIASES + 1):
        for across in range(-_ALIASES, _ALIASES + 1):
            x, y = k[None, :] / size + across, k[:, None] / size + down
            f2 = x * x + y * y
            if across == 0 and down == 0:
                f2[0, 0] = np.inf
            power += phase_spectrum(f2, outer_scale)
    # All aliases farther out, as an integral over the plane beyond the square summed above.
    power += SPECTRUM * 2.0 * pi * 0.6 * ((2 * _ALIASES + 1) / sqrt(pi)) ** (-5.0 / 3.0)
    # Near the origin the spectrum curves within a cell: its mean there, by Gauss-Legendre.
    near = min(_FINE_CELLS, half)
    nodes, weights = np.polynomial.legendre.leggauss(4)
    centre = phase_spectrum(_square_sum(k[:near] / size), outer_scale) if near else power
    mean = np.zeros((near, near))
    for dx, wx in zip(nodes / 2.0, weights / 2.0, strict=True):
        for dy, wy in zip(nodes / 2.0, weights / 2.0, strict=True):
            x, y = (k[:near] + dx) / size, (k[:near] + dy) / size
            mean += wx * wy * phase_spectrum(x[None, :] ** 2 + y[:, None] ** 2, outer_scale)
    power[:near, :near] += mean - centre
    power[: LOWEST + 1, : LOWEST + 1] = 0.0
    folded = np.abs(np.fft.fftfreq(size, 1.0 / size)).astype(np.int64)
    return frozen(np.sqrt(power[np.ix_(folded, folded)]).astype(np.float32) / size)


def _square_sum(k: FloatArray) -> FloatArray:
    total = k[None, :] ** 2 + k[:, None] ** 2
    if total[0, 0] == 0.0:
        total[0, 0] = np.inf
    return total


class Blocks:
    """The finer part of one layer's screen.

    Parameters
    ----------
    samples : int
        Side of the aperture's square.
    outer_scale : float
        L0 in samples, or infinity.
    direction : (float, float)
        Unit vector (x, y) in which the aperture moves through the screen.
    key : tuple of int
        Names this layer among all that one seed serves.
    entropy : sequence of int
        Of the random numbers.
    """

    def __init__(
        self,
        samples: int,
        *,
        outer_scale: float,
        direction: tuple[float, float],
        key: tuple[int, ...],
        entropy: tuple[int, ...],
    ) -> None:
        self._samples = samples
        self._size = block_side(samples)
        self._outer_scale = outer_scale
        self._direction = direction
        self._key, self._entropy = key, entropy
        self._stretch = self._size / 2.0 - (0.5 + sqrt(0.5)) * samples - 2.0
        from_centre = np.arange(samples) - (samples - 1) / 2.0
        ahead = np.add.outer(from_centre * direction[1], from_centre * direction[0])
        self._ahead = (ahead / self._stretch).astype(np.float32)
        self._reach = float(self._ahead.max())
        self._pairs: dict[int, AnyArray] = {}

    def patch(self, x: int, y: int) -> FloatArray:
        """Phase over the aperture's square with its middle at sample `x`, `y` of the screen.

        Returns
        -------
        ndarray, shape (samples, samples)
            In rad for r0 = 1 sample.
        """
        here = (x * self._direction[0] + y * self._direction[1]) / self._stretch
        first, last = floor(here - self._reach) - 1, floor(here + self._reach)
        total = np.zeros((self._samples, self._samples), dtype=np.float32)
        for k in range(first, last + 1):
            part = self._ahead + np.float32(here - (k + 1))
            np.clip(part, -1.0, 1.0, out=part)
            part *= 0.5 * pi
            np.cos(part, out=part)
            part *= self._cut(k, x, y)
            total += part
        for pair in [pair for pair in self._pairs if pair < first // 2]:
            del self._pairs[pair]
        return total

    def _cut(self, k: int, x: int, y: int) -> AnyArray:
        middle = (k + 1) * self._stretch
        corner = self._size // 2 - self._samples // 2
        column = corner + x - round(middle * self._direction[0])
        row = corner + y - round(middle * self._direction[1])
        block = self._block(k)
        return block[row : row + self._samples, column : column + self._samples]

    def _block(self, k: int) -> AnyArray:
        pair = k // 2
        if pair not in self._pairs:
            self._pairs[pair] = self._drawn(pair)
        both = self._pairs[pair]
        return both.imag if k % 2 else both.real

    def _drawn(self, pair: int) -> AnyArray:
        # Real and imaginary part of one transform are two independent blocks.
        named = (*self._key, 2 * abs(pair) + (pair < 0))
        rng = np.random.default_rng(np.random.SeedSequence(self._entropy, spawn_key=named))
        shape = (self._size, self._size)
        waves = np.empty(shape, dtype=np.complex64)
        waves.real = rng.standard_normal(shape, dtype=np.float32)
        waves.imag = rng.standard_normal(shape, dtype=np.float32)
        waves *= block_amplitudes(self._size, self._outer_scale)
        return np.asarray(scipy.fft.ifft2(waves, norm="forward", overwrite_x=True))
