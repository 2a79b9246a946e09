"""The coarser part of a phase screen: single plane waves, down to any frequency.

The square of frequencies that the blocks of `screenblocks` leave is cut into cells, ever smaller
towards the origin (three by three, as Lane, Glindemann & Dainty 1992 cut it). Their fixed waves err
by the choice of each cell's middle; here every wave's frequency is drawn within its cell as the
spectrum lies in it, with the cell's own power, so that the mean over draws is the spectrum itself
(after Charnotskii 2013). Waves of a cell are drawn anew after a way of some periods, the old fading
into the new with weights whose squares add up to 1.

Over the aperture such waves are smooth: each is a product of two series of Legendre polynomials
whose coefficients are spherical Bessel functions, so that an instant costs one small sum. The
constant term is left out: no image depends on it. Lengths are in samples; phases for r0 = 1 sample.

References
----------
Lane, R. G., Glindemann, A. & Dainty, J. C. 1992, Waves in Random Media 2, 209.
Charnotskii, M. 2013, J. Opt. Soc. Am. A 30, 479.
"""

from __future__ import annotations

from math import floor, pi

import numpy as np
from scipy.special import spherical_jn

from simimg.air.phasespectrum import phase_spectrum
from simimg.air.screenblocks import LOWEST, block_side
from simimg.arrays import AnyArray, FloatArray

ORDERS = 14
"""Legendre polynomials along an axis; the finest wave's series errs by 1e-8 of its amplitude."""

LEVELS = 20
"""Times that the middle cell is cut again by three. Without an outer scale what is left out is
1.24 (f r)^(1/3) = 0.06 % of the structure function at the aperture's diameter."""

RENEWAL = 4.0
"""Way after which the waves of a cell are drawn anew, in periods of the cell's side."""

_STRATA = 8


def cells(samples: int, outer_scale: float) -> list[tuple[float, FloatArray]]:
    """The cells of half a plane: for each level the side (cycles a sample) and middles ``(N, 2)``.

    With an outer scale the cutting ends well below it, and the last level has the middle cell too.
    """
    side = 1.0 / block_side(samples)
    levels = [(side, side * _half_plane(LOWEST, hole=1)), (side, side * _half_plane(1, hole=0))]
    for _ in range(LEVELS):
        if side * outer_scale < 0.1:
            break
        side /= 3.0
        levels.append((side, side * _half_plane(1, hole=0)))
    if np.isfinite(outer_scale):
        # The middle cell is its own mirror image: a quarter of its side off, each wave stands for
        # one half of it.
        levels.append((side, np.array([[0.0, 0.0]])))
    return levels


def _half_plane(most: int, *, hole: int) -> FloatArray:
    return np.array(
        [
            (x, y)
            for y in range(0, most + 1)
            for x in range(-most, most + 1)
            if (y > 0 or x > 0) and max(abs(x), abs(y)) > hole
        ],
        dtype=np.float64,
    )


class Waves:
    """The coarser part of one layer's screen.

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
        self._outer_scale = outer_scale
        self._direction = direction
        self._key, self._entropy = key, entropy
        self._levels = cells(samples, outer_scale)
        self._sides = np.array([side for side, _ in self._levels])
        self._held: tuple[int, ...] | None = None

    def coefficients(self, x: float, y: float) -> FloatArray:
        """Legendre coefficients over the aperture's square with its middle at `x`, `y`.

        Returns
        -------
        ndarray, shape (ORDERS, ORDERS)
            ``[y, x]``, in rad for r0 = 1 sample; the constant is 0.
        """
        way = (x * self._direction[0] + y * self._direction[1]) * self._sides / RENEWAL
        # Levels are drawn anew at different places of the way.
        way = way + np.linspace(0.0, 1.0, way.size, endpoint=False)
        drawn = tuple(floor(one) for one in way)
        if drawn != self._held:
            self._draw(drawn)
        angle = 0.5 * pi * (way - np.array(drawn))
        weight = np.where(self._new, np.sin(angle)[self._level], np.cos(angle)[self._level])
        turn = weight * np.exp(2j * pi * (self._fx * x + self._fy * y))
        total = np.einsum("w,wk->k", turn.real, self._real)
        total -= np.einsum("w,wk->k", turn.imag, self._imaginary)
        total[0] = 0.0
        return np.asarray(total.reshape(ORDERS, ORDERS))

    def _draw(self, drawn: tuple[int, ...]) -> None:
        parts = [
            (level, new, *self._cell_waves(level, drawn[level] + new))
            for level in range(len(drawn))
            for new in (0, 1)
        ]
        self._level = np.concatenate([np.full(p[2].shape[0], p[0]) for p in parts])
        self._new = np.concatenate([np.full(p[2].shape[0], bool(p[1])) for p in parts])
        frequency = np.concatenate([p[2] for p in parts])
        amplitude = np.concatenate([p[3] for p in parts])
        self._fx, self._fy = frequency[:, 0], frequency[:, 1]
        across, up = (_legendre(pi * self._samples * f) for f in (self._fx, self._fy))
        series = (amplitude[:, None, None] * up[:, :, None] * across[:, None, :]).reshape(
            amplitude.size, -1
        )
        self._real = np.ascontiguousarray(series.real)
        self._imaginary = np.ascontiguousarray(series.imag)
        self._held = drawn

    def _cell_waves(self, level: int, draw: int) -> tuple[FloatArray, AnyArray]:
        """Frequencies ``(W, 2)`` and complex amplitudes of one draw of one level."""
        named = (*self._key, level, 2 * abs(draw) + (draw < 0))
        rng = np.random.default_rng(np.random.SeedSequence(self._entropy, spawn_key=named))
        side, middle = self._levels[level]
        count = middle.shape[0]
        # One candidate in each of 64 parts of a cell; one is taken, with the odds of its power,
        # and has the mean power of all. Averaged over draws that is the spectrum's own integral.
        place = (np.arange(_STRATA) / _STRATA)[:, None, None]
        jitter = rng.random((2, count, _STRATA, _STRATA)) / _STRATA - 0.5
        fx = middle[:, 0, None, None] + side * (place[:, :, 0].T + jitter[0])
        fy = middle[:, 1, None, None] + side * (place[:, :, 0] + jitter[1])
        power = phase_spectrum(fx * fx + fy * fy, self._outer_scale).reshape(count, -1)
        odds = np.cumsum(power, axis=1)
        taken = (odds < rng.random((count, 1)) * odds[:, -1:]).sum(axis=1)
        # Both halves of the plane; the middle cell is whole already.
        halves = 1.0 if not middle.any() else 2.0
        size = np.sqrt(halves * power.mean(axis=1)) * side
        rows = np.arange(count)
        frequency = np.stack(
            [fx.reshape(count, -1)[rows, taken], fy.reshape(count, -1)[rows, taken]], axis=1
        )
        normal = rng.standard_normal((2, count))
        return frequency, size * (normal[0] - 1j * normal[1])


def _legendre(k: FloatArray) -> AnyArray:
    """Coefficients of exp(i k z), -1 < z < 1, in Legendre polynomials; shape ``(W, ORDERS)``."""
    order = np.arange(ORDERS)
    bessel = spherical_jn(order, np.abs(k)[:, None]) * np.sign(k + (k == 0))[:, None] ** order
    return np.asarray((2 * order + 1) * 1j**order * bessel)
