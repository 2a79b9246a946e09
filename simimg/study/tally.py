"""What many trials say together: shares with their intervals, bias and scatter.

Arcseconds, degrees and magnitudes, as the names say; NaN where there is nothing to say it of.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import nan, sqrt

import numpy as np

from simimg.arrays import FloatArray
from simimg.resolving.bound import PairPrecision
from simimg.resolving.records import PairMeasurement, PairTruth
from simimg.resolving.verdict import SURELY_DOUBLE

_NORMAL = 1.959963984540054  # standard deviations that hold 95 %


@dataclass(frozen=True, kw_only=True)
class Fraction:
    """A share of the trials, with the 95 % interval of the probability behind it.

    Attributes
    ----------
    fraction_resolved : float
    low, high : float
        Wilson's interval (Wilson 1927, J. Am. Stat. Assoc. 22, 209).
    """

    fraction_resolved: float
    low: float
    high: float


@dataclass(frozen=True, kw_only=True)
class Geometry:
    """Three figures of a pair: bias, scatter or error of its separation, angle and difference."""

    separation_arcsec: float
    position_angle_deg: float
    magnitude_difference: float


@dataclass(frozen=True, kw_only=True)
class Tally:
    """What trials of one pair say together.

    Attributes
    ----------
    trials : int
    measured : int
        Trials in which two stars were fitted; bias, scatter and error are of these.
    double : Fraction
        Share in which a single star is ruled out (``probability_single`` below 0.01).
    rayleigh, sparrow : Fraction
        Share whose verdict is ``resolved``.
    bias : Geometry
        Mean of measured minus true.
    scatter : Geometry
        Standard deviation.
    error : Geometry
        Median of the errors that `measure` quotes.
    bound : PairPrecision
        Cramer-Rao bounds.
    """

    trials: int
    measured: int
    double: Fraction
    rayleigh: Fraction
    sparrow: Fraction
    bias: Geometry
    scatter: Geometry
    error: Geometry
    bound: PairPrecision


FIGURES = 9
"""Length of what is kept of a trial."""


def kept(record: PairMeasurement) -> FloatArray:
    """What a tally needs of a record: geometry, errors, three answers as 0 or 1."""
    return np.array(
        [
            record.separation_arcsec,
            record.position_angle_deg,
            record.magnitude_difference,
            record.separation_error_arcsec,
            record.position_angle_error_deg,
            record.magnitude_difference_error,
            float(record.probability_single < SURELY_DOUBLE),
            float(record.rayleigh.verdict == "resolved"),
            float(record.sparrow.verdict == "resolved"),
        ]
    )


def tally(trials: FloatArray, *, truth: PairTruth, bound: PairPrecision) -> Tally:
    """Put the trials of one pair together.

    Parameters
    ----------
    trials : ndarray, shape (n, 9)
        From `kept`.
    truth : PairTruth
    bound : PairPrecision
    """
    true = [truth.separation_arcsec, truth.position_angle_deg, truth.magnitude_difference]
    two = trials[np.isfinite(trials[:, :3]).all(axis=1)]
    off = two[:, :3] - true
    off[:, 1] = (off[:, 1] + 180.0) % 360.0 - 180.0
    count = len(trials)
    double, rayleigh, sparrow = (
        fraction(int(trials[:, column].sum()), count) for column in (6, 7, 8)
    )
    return Tally(
        trials=count,
        measured=len(two),
        double=double,
        rayleigh=rayleigh,
        sparrow=sparrow,
        bias=_geometry([float(column.mean()) if len(two) else nan for column in off.T]),
        scatter=_geometry([float(column.std(ddof=1)) if len(two) > 1 else nan for column in off.T]),
        error=_geometry([float(np.median(column)) if len(two) else nan for column in two.T[3:6]]),
        bound=bound,
    )


def fraction(resolved: int, trials: int) -> Fraction:
    """A share with Wilson's 95 % interval.

    Parameters
    ----------
    resolved : int
        From 0 to `trials`.
    trials : int
        1 or more.
    """
    share = resolved / trials
    square = _NORMAL**2
    middle = (share + square / (2.0 * trials)) / (1.0 + square / trials)
    half = sqrt(share * (1.0 - share) / trials + square / (4.0 * trials**2)) * _NORMAL
    half /= 1.0 + square / trials
    return Fraction(
        fraction_resolved=share,
        low=max(0.0, middle - half) if resolved > 0 else 0.0,
        high=min(1.0, middle + half) if resolved < trials else 1.0,
    )


def _geometry(figures: Sequence[float]) -> Geometry:
    separation, angle, difference = figures
    return Geometry(
        separation_arcsec=separation,
        position_angle_deg=angle,
        magnitude_difference=difference,
    )
