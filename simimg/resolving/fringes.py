"""The fringes of a pair in the mean power spectrum: separation, direction, brightness ratio.

A pair of separation s and brightness ratio q multiplies the power spectrum by
``1 + c cos(2 pi f s)``, ``c = 2 q / (1 + q^2)``. What is multiplied is that of a single star seen
through the same air (a reference star, or the model), times a smooth curve of the frequency's
modulus for air that was not quite the same. Each frequency weighs by the scatter of its power,
which is as great as the power itself. Errors come from the scatter among blocks of frames (by
leaving out one after the other), and so hold whatever the air did. Pixels and cycles a pixel.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.fft
from scipy.optimize import least_squares

from simimg.arrays import AnyArray, FloatArray
from simimg.resolving.specklesums import SpeckleSums

_RINGS = 24
_ROUNDS = 3
_FINER = 4
_CANDIDATES = 300


@dataclass(frozen=True)
class Band:
    """Frequencies that are fitted.

    Attributes
    ----------
    low, high : float
        Moduli between which the fringes are fitted (cycles a pixel): above the blur of a long
        exposure, below the telescope's limit.
    limit : float
        The telescope's limit.
    """

    low: float
    high: float
    limit: float


@dataclass(frozen=True)
class Fringes:
    """What the fringes say; first star at the origin, second at ``(dx, dy)`` or opposite.

    Attributes
    ----------
    dx, dy : float
        Pixels.
    contrast : float
        2 q / (1 + q^2).
    covariance : (3, 3) ndarray
        Of the three.
    trials : float
        Places that were looked at, in resolution elements.
    """

    dx: float
    dy: float
    contrast: float
    covariance: FloatArray
    trials: float


def frequencies(shape: tuple[int, int]) -> tuple[FloatArray, FloatArray]:
    """Frequencies (cycles a pixel) of a half-plane spectrum: u of shape (1, n), v of (m, 1)."""
    rows, columns = shape
    return np.arange(columns // 2 + 1)[None, :] / columns, np.fft.fftfreq(rows)[:, None]


def noise_level(power: FloatArray, shape: tuple[int, int], band: Band, known: float) -> float:
    """Power of photon and read noise, the same at all frequencies.

    Parameters
    ----------
    power : ndarray
        Mean power spectrum.
    shape : (rows, columns)
    band : Band
    known : float
        From gain and noise; it stands where pixels leave no frequency beyond the telescope's limit.
    """
    u, v = frequencies(shape)
    beyond = power[np.hypot(u, v) > 1.03 * band.limit]
    return float(beyond.mean()) if beyond.size >= 200 else known


def fit_fringes(
    sums: SpeckleSums, reference: FloatArray, *, band: Band, noise: float, reach: float
) -> Fringes:
    """Fit the fringes of a pair.

    Parameters
    ----------
    sums : SpeckleSums
    reference : ndarray
        Mean power spectrum of a single star, noise taken away, in any unit.
    band : Band
    noise : float
        Power of the noise, as known.
    reach : float
        Widest separation that is looked for (pixels).

    Raises
    ------
    ValueError
        Too few frequencies in the band.
    """
    u, v = frequencies(sums.shape)
    modulus = np.hypot(u, v)
    # Frequencies of the first column stand twice in a half plane.
    twice = (u == 0.0) & (v < 0.0)
    inside = (modulus > band.low) & (modulus < band.high) & (reference > 0.0) & ~twice
    if inside.sum() < 50:
        raise ValueError("the frames hold too few frequencies above the seeing's")
    spectrum = _Spectrum(
        np.broadcast_to(u, inside.shape)[inside],
        np.broadcast_to(v, inside.shape)[inside],
        modulus[inside] / band.limit,
        np.asarray(reference[inside]),
        sums.shape[1],
    )

    def data(without: int | None) -> tuple[FloatArray, float]:
        power = sums.mean(without=without)
        level = noise_level(power, sums.shape, band, noise)
        return power[inside] - level, level

    values, level = data(None)
    start = spectrum.search(values, level, inside, closest=0.4 / band.limit, reach=reach)
    whole = spectrum.fit(values, level, start)
    count = len(sums.frames)
    several = np.array([spectrum.fit(*data(one), whole, rounds=1)[:3] for one in range(count)])
    spread = several - several.mean(axis=0)
    covariance = (count - 1) / count * (spread.T @ spread)
    trials = max(0.5 * np.pi * reach**2 * band.limit**2, 1.0)
    dx, dy, contrast = (float(one) for one in whole[:3])
    return Fringes(dx, dy, contrast, covariance, trials)


class _Spectrum:
    """The frequencies of the band, as lists."""

    def __init__(
        self, u: AnyArray, v: AnyArray, rho: AnyArray, reference: AnyArray, columns: int
    ) -> None:
        self._u, self._v, self._reference, self._columns = u, v, reference, columns
        self._curve = np.stack([np.ones_like(rho), rho, rho**2], axis=1)
        edges = np.linspace(rho.min(), rho.max() * 1.0001, _RINGS + 1)
        self._ring = np.digitize(rho, edges) - 1

    def _by_ring(self, values: AnyArray, weight: AnyArray) -> AnyArray:
        """Weighted mean of each frequency's ring."""
        sums = np.bincount(self._ring, weight * values, _RINGS)
        return np.asarray(
            (sums / np.maximum(np.bincount(self._ring, weight, _RINGS), 1e-300))[self._ring]
        )

    def search(
        self, values: AnyArray, level: float, inside: AnyArray, *, closest: float, reach: float
    ) -> FloatArray:
        """The separation whose fringes fit best, with every ring's mean free."""
        ratio = values / self._reference
        mean = np.maximum(self._by_ring(ratio, self._reference), 1e-6 * np.abs(ratio).max())
        weight = (1.0 + level / (self._reference * mean)) ** -2.0
        ratio = ratio / mean
        ratio = ratio - self._by_ring(ratio, weight)
        best, found = -1.0, (closest, 0.0, 0.0)
        for dx, dy in self._promising(weight * ratio, inside, closest=closest, reach=reach):
            wave = np.cos(2.0 * np.pi * (self._u * dx + self._v * dy))
            wave -= self._by_ring(wave, weight)
            norm = float((weight * wave * wave).sum())
            inner = float((weight * wave * ratio).sum())
            if inner > 0.0 and inner * inner > best * norm:
                best, found = inner * inner / norm, (dx, dy, inner / norm)
        gain = np.log(max(float(np.median(mean)), 1e-300))
        return np.array([found[0], found[1], min(found[2], 0.95), gain, 0.0, 0.0])

    def _promising(
        self, weighted: AnyArray, inside: AnyArray, *, closest: float, reach: float
    ) -> list[tuple[float, float]]:
        """Separations where fringes and data go together most, of all on a fine grid."""
        rows, columns = _FINER * inside.shape[0], _FINER * 2 * (inside.shape[1] - 1)
        spectrum = np.zeros((rows, columns // 2 + 1))
        down, across = np.nonzero(inside)
        # Rows of negative frequency stand at the end of the finer grid, too.
        down = np.where(down > inside.shape[0] // 2, down + rows - inside.shape[0], down)
        spectrum[down, across] = weighted
        together = scipy.fft.irfft2(spectrum, s=(rows, columns))
        dy = np.fft.fftfreq(rows, 1.0 / inside.shape[0])[:, None]
        # An odd width has a frequency less than its even neighbour.
        dx = np.fft.fftfreq(columns, 1.0 / self._columns)[None, :]
        distance = np.hypot(dx, dy)
        half = (dy > 0.0) | ((dy == 0.0) & (dx > 0.0))
        allowed = half & (distance >= closest) & (distance <= reach)
        score = np.where(allowed, together, -np.inf).ravel()
        most = min(_CANDIDATES, int(allowed.sum()))
        order = np.argpartition(-score, most - 1)[:most]
        y, x = np.unravel_index(np.sort(order), together.shape)
        return [(float(dx[0, i]), float(dy[j, 0])) for j, i in zip(y, x, strict=True)]

    def fit(
        self, values: AnyArray, level: float, start: FloatArray, *, rounds: int = _ROUNDS
    ) -> FloatArray:
        """Separation, contrast and the curve's three coefficients."""
        found = np.array(start, dtype=np.float64)
        for _ in range(rounds):
            sigma = np.maximum(self._model(found), 0.0) + level

            def misfit(some: FloatArray, sigma: AnyArray = sigma) -> FloatArray:
                return np.asarray((self._model(some) - values) / sigma)

            found = least_squares(misfit, found, x_scale="jac", method="lm", max_nfev=60).x
        return np.asarray(found)

    def _model(self, some: FloatArray) -> FloatArray:
        wave = np.cos(2.0 * np.pi * (self._u * some[0] + self._v * some[1]))
        curve = np.exp(np.clip(self._curve @ some[3:6], -700.0, 700.0))
        return np.asarray(self._reference * curve * (1.0 + some[2] * wave))


def lopsidedness(sums: SpeckleSums, dx: float, dy: float) -> float:
    """By how many errors the brighter star is the one at the origin, and the other at `dx`, `dy`.

    Negative where it is the other way round. The error comes from the scatter among blocks.
    """
    u, v = frequencies(sums.shape)
    # Twice the real part over half a plane, but for the first and the last column.
    double = np.full(u.shape, 2.0)
    double[0, 0] = 1.0
    if sums.shape[1] % 2 == 0:
        double[0, -1] = 1.0
    turn = np.sin(2.0 * np.pi * (u * dx + v * dy)) * double
    each = (sums.lopsided.imag * turn).sum(axis=(1, 2))
    weight = sums.frames / sums.frames.sum()
    mean = float((weight * each).sum())
    error = float(np.std(each, ddof=1) / np.sqrt(each.size))
    return mean / error if error > 0.0 else 0.0
