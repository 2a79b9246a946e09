"""The likelihood of a pixel: a Poisson number of electrons plus Gaussian read noise.

A pixel holds a Poisson number of mean ``mu`` (objects, sky and dark signal together) plus Gaussian
noise of variance ``v`` (read noise and the converter's rounding). Its density is used

- as it stands where few electrons are expected, the sum over the electrons being a polynomial in
  ``mu`` whose coefficients the datum fixes::

      p(d | mu) = exp(-mu) sum_k mu^k / k!  exp(-(d - k)^2 / 2v) / sqrt(2 pi v)

- by the saddle-point approximation (Daniels 1954, Ann. Math. Stat. 25, 631; for detectors Snyder,
  Helstrom, Lanterman, Faisal & White 1995, J. Opt. Soc. Am. A 12, 272) elsewhere, where it is right
  to a part in a thousand::

      ln p = mu (e^s - 1) + v s^2 / 2 - s d - ln(2 pi (mu e^s + v)) / 2,   mu e^s + v s = d

- as plain Poisson, shifted by ``v``, where the Gaussian part is too small to blur whole electrons.

A Gaussian of the same variance would do for the errors; the odds of a rare excess, on which the
verdict "not a single star" hangs, need the right skewness. Electrons throughout.
"""

from __future__ import annotations

from functools import lru_cache
from math import ceil, lgamma, log, pi, sqrt
from typing import Any

import numpy as np

from simimg.arrays import AnyArray, FloatArray

_SHARP = 0.05  # Gaussian variance (electrons squared) below which it is only a shift
_FAINT = (1.5, 12.0)  # upper ends of the two groups of pixels whose sum is taken in full
_SOLVED = 3  # Newton steps for the saddle point


class PixelNoise:
    """The data of a set of pixels, ready to judge any expectation of them.

    Parameters
    ----------
    electrons : ndarray, shape (n,)
        The data, electrons above the bias; finite.
    used : ndarray, shape (n,)
        1 for pixels that count, 0 for those that do not.
    variance : float
        Of the Gaussian part, electrons squared, 0 or more.
    guess : ndarray, shape (n,)
        Rough expectation of each pixel, which settles how its density is worked out.
    """

    def __init__(
        self, electrons: FloatArray, used: FloatArray, variance: float, guess: FloatArray
    ) -> None:
        self.variance = variance
        self._electrons = electrons
        self._used = used
        self._sharp = variance < _SHARP
        self._own: FloatArray | None = None
        self._sums: list[_FullSum] = []
        if self._sharp:
            y = electrons + variance
            self._own = np.where(y > 0, y * np.log(np.where(y > 0, y, 1.0)), 0.0) - y
            return
        low = -np.inf
        for high in _FAINT:
            chosen = np.flatnonzero((guess >= low) & (guess < high))
            if chosen.size:
                self._sums.append(_FullSum(chosen, electrons[chosen], variance, high))
            low = high
        bright = guess >= low
        self._bright: Any = slice(None) if bright.all() else np.flatnonzero(bright)
        self._any_bright = bool(bright.any())

    def judge(self, expectation: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        """Judge an expectation (electrons of the Poisson part), shape (n,).

        Returns
        -------
        deviance : float
            Minus twice the log-likelihood, up to a constant that the data fix.
        slope : ndarray, shape (n,)
            Half its derivative by each expectation; 0 for pixels that do not count.
        weight : ndarray, shape (n,)
            Fisher information of each expectation; 0 for pixels that do not count.
        """
        if self._sharp:
            return self._judge_sharp(expectation)
        minus_log = np.empty(expectation.size)
        slope = np.empty(expectation.size)
        weight = np.empty(expectation.size)
        for one in self._sums:
            minus_log[one.chosen], slope[one.chosen] = one.judge(expectation[one.chosen])
            weight[one.chosen] = information(expectation[one.chosen], self.variance)
        if self._any_bright:
            mean = np.maximum(expectation[self._bright], 1e-3)
            minus_log[self._bright], slope[self._bright] = _saddle_point(
                self._electrons[self._bright], mean, self.variance
            )
            weight[self._bright] = 1.0 / (mean + self.variance)
        slope *= self._used
        weight *= self._used
        return 2.0 * float(self._used @ minus_log), slope, weight

    def _judge_sharp(self, expectation: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        assert self._own is not None
        mean = np.maximum(expectation + self.variance, 1e-6)
        shifted = self._electrons + self.variance
        minus_log = self._own + mean - shifted * np.log(mean)
        weight = self._used / mean
        return 2.0 * float(self._used @ minus_log), weight * (mean - shifted), weight


class _FullSum:
    """The density of faint pixels, every number of electrons summed."""

    def __init__(
        self, chosen: AnyArray, electrons: FloatArray, variance: float, high: float
    ) -> None:
        self.chosen = chosen
        self._least = -0.25 * variance if variance > 1.0 else 1e-3
        most = ceil(high + 8.0 * sqrt(high) + 10.0)
        counts = np.arange(most + 1.0)[:, None]
        power = -((electrons - counts) ** 2) / (2.0 * variance)
        self._log_scale = power.max(axis=0)
        factorials = np.array([lgamma(k + 1.0) for k in range(most + 1)])[:, None]
        self._coefficients = np.exp(power - self._log_scale - factorials)
        self._constant = 0.5 * log(2.0 * pi * variance) - self._log_scale

    def judge(self, mean: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Minus the log-density and its derivative.

        The polynomial goes on smoothly a little below a mean of 0, where an estimate of a dark
        sky's background may stray; beyond, and under a sharp Gaussian at once, it would swing
        below 0, and the logarithm goes on along its tangent.
        """
        wanted, mean = mean, np.maximum(mean, self._least)
        density = self._coefficients[-1].copy()
        derivative = np.zeros(mean.size)
        for coefficient in self._coefficients[-2::-1]:
            derivative *= mean
            derivative += density
            density *= mean
            density += coefficient
        np.maximum(density, 1e-290, out=density)
        slope = 1.0 - derivative / density
        minus_log = mean - np.log(density) + self._constant
        return minus_log + slope * (wanted - mean), slope


def _saddle_point(
    electrons: FloatArray, mean: FloatArray, variance: float
) -> tuple[FloatArray, FloatArray]:
    """Minus the log-density by the saddle point, and its derivative by the mean."""
    total = mean + variance
    tilt = np.log(np.maximum((electrons + variance) / total, 0.03))
    for _ in range(_SOLVED):
        raised = mean * np.exp(tilt)
        tilt -= (raised + variance * tilt - electrons) / (raised + variance)
    excess = np.expm1(tilt)
    spread = mean * (excess + 1.0) + variance
    minus_log = tilt * (electrons - 0.5 * variance * tilt) - mean * excess
    minus_log += 0.5 * np.log(2.0 * pi * spread)
    return minus_log, 0.5 * variance * (excess + 1.0) / spread**2 - excess


def information(mean: FloatArray, variance: float) -> FloatArray:
    """Fisher information of a pixel's Poisson mean.

    Parameters
    ----------
    mean : ndarray
        Electrons expected; below 0 taken as 0.
    variance : float
        Of the Gaussian part, electrons squared, 0 or more.

    Returns
    -------
    ndarray
        ``1 / (mean + variance)`` and up to ``exp(1 / variance) - 1`` where hardly any electrons
        are expected and the read noise can tell one from none.
    """
    plain = 1.0 / np.maximum(np.maximum(mean, 0.0) + variance, 1e-6)
    if variance < _SHARP or variance > 1e3:
        return np.asarray(plain)
    nodes, factors = _information_table(variance)
    return np.asarray(plain * np.interp(np.sqrt(np.maximum(mean, 0.0)), nodes, factors))


@lru_cache(maxsize=64)
def _information_table(variance: float) -> tuple[FloatArray, FloatArray]:
    """Information over ``1 / (mean + variance)``, by quadrature, against the mean's root."""
    roots = sqrt(2.0 * _FAINT[-1]) * np.linspace(0.0, 1.0, 100) ** 2
    most = ceil(2.0 * _FAINT[-1] + 40.0)
    counts = np.arange(most + 1)
    step = min(0.25, 0.25 * sqrt(variance))
    data = np.arange(-9.0 * sqrt(variance), most + 9.0 * sqrt(variance), step)
    kernel = np.exp(-((data[:, None] - counts) ** 2) / (2.0 * variance))
    kernel *= step / sqrt(2.0 * pi * variance)
    factorials = np.array([lgamma(k + 1.0) for k in counts])
    factors = np.empty(roots.size)
    for i, root in enumerate(roots):
        mean = root * root
        chance = np.exp(counts * log(mean) - mean - factorials) if mean > 0 else 1.0 * (counts == 0)
        density = np.maximum(kernel @ chance, 1e-300)
        ahead = kernel[:, 1:] @ chance[:-1]
        factors[i] = (float((ahead**2 / density).sum()) - 1.0) * (mean + variance)
    return roots, factors
