"""Where a share that only trials can tell crosses a level, and how surely.

The share of successes is taken to follow a normal distribution function of the place, ``Phi(a + b
u)`` (probit analysis: Finney 1971, Probit Analysis, 3rd ed.), fitted by maximum likelihood to
binomial counts. The interval of the crossing is that of the profile likelihood, which holds where
the curve is steep and few trials fall on its slope; with none on it, it is the gap between what
never and what always succeeds.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import nan

import numpy as np
from scipy.optimize import brentq, minimize_scalar
from scipy.special import log_ndtr, ndtri

from simimg.arrays import FloatArray

_DROP = 0.5 * 3.841458820694124  # of the log-likelihood at the ends of a 95 % interval
_STEEPEST = 1e6


@dataclass(frozen=True)
class Tried:
    """Trials at one place."""

    place: float
    count: int
    resolved: int


@dataclass(frozen=True)
class Crossing:
    """Where the share crosses.

    Attributes
    ----------
    place, low, high : float
        With its 95 % interval.
    sure : bool
        False where all trials lie on one side of the level.
    """

    place: float
    low: float
    high: float
    sure: bool

    @property
    def error(self) -> float:
        """Half of the interval."""
        return 0.5 * (self.high - self.low)


def fit_crossing(tried: Sequence[Tried], level: float) -> Crossing:
    """Fit the curve, and find where it crosses a level.

    Parameters
    ----------
    tried : sequence of Tried
    level : float
        Between 0 and 1.
    """
    place = np.array([one.place for one in tried], dtype=np.float64)
    count = np.array([one.count for one in tried], dtype=np.float64)
    won = np.array([one.resolved for one in tried], dtype=np.float64)
    order = np.argsort(place)
    place, count, won = place[order], count[order], won[order]
    share = won / count
    if not (share.min() < level < share.max()):
        return Crossing(nan, nan, nan, sure=False)
    rising = float(np.polyfit(place, share, 1, w=np.sqrt(count))[0]) > 0.0
    if not rising:
        mirrored = _fit(-place[::-1], count[::-1], won[::-1], level)
        return Crossing(-mirrored.place, -mirrored.high, -mirrored.low, mirrored.sure)
    return _fit(place, count, won, level)


def _fit(place: FloatArray, count: FloatArray, won: FloatArray, level: float) -> Crossing:
    """For a share that rises."""
    share = won / count
    # Between what falls short everywhere below and what exceeds everywhere above.
    low, high = _bracket(place, share, level)
    quantile = float(ndtri(level))
    span = max(float(place[-1] - place[0]), 1e-12)

    def best(crossing: float) -> float:
        """Log-likelihood at a crossing, the slope being free."""

        def minus(log_slope: float) -> float:
            z = quantile + np.exp(log_slope) * (place - crossing)
            terms = won * log_ndtr(z) + (count - won) * log_ndtr(-z)
            return -float(terms.sum())

        found = minimize_scalar(
            minus,
            bounds=(np.log(0.1 / span), np.log(_STEEPEST / span)),
            method="bounded",
            options={"xatol": 1e-6},
        )
        return -float(found.fun)

    wide = high - low + 0.5 * span
    grid = np.linspace(low - wide, high + wide, 81)
    values = np.array([best(one) for one in grid])
    top = int(values.argmax())
    step = float(grid[1] - grid[0])
    peak = minimize_scalar(
        lambda one: -best(one),
        bounds=(grid[top] - step, grid[top] + step),
        method="bounded",
        options={"xatol": 1e-9},
    )
    middle, most = float(peak.x), max(-float(peak.fun), float(values.max()))
    ends = []
    for side in (-1.0, 1.0):
        outer = middle
        while best(outer) > most - _DROP and abs(outer - middle) < 4.0 * (wide + span):
            outer += side * 0.25 * step
        inner = outer - side * 0.25 * step
        if best(outer) > most - _DROP:
            ends.append(outer)
            continue
        ends.append(
            float(brentq(lambda one: best(one) - (most - _DROP), *sorted((inner, outer))))
            if inner != middle or best(inner) > most - _DROP
            else outer
        )
    if high > low and not ((share > 0.0) & (share < 1.0)).any():
        # No trial fell on the slope: all that is known is the gap.
        return Crossing(0.5 * (low + high), low, high, sure=True)
    return Crossing(middle, min(ends), max(ends), sure=True)


def _bracket(place: FloatArray, share: FloatArray, level: float) -> tuple[float, float]:
    """The last place below the level and the first above it, or the place where they mix."""
    below, above = place[share < level], place[share > level]
    low, high = float(below.max()), float(above.min())
    return (low, high) if low <= high else (high, low)
