"""From a fit to a verdict: how probable it is that a pair lies beyond a limit.

The separation has a flat prior above zero; with the magnitude difference it has the joint Gaussian
error of the fit. Rayleigh's delivered limit is one number, Sparrow's depends on the magnitude
difference, so that its uncertainty counts, too: near the equal pair, whose limit is the least and
rises steeply to either side (with the power of 2/3), it is most of what is uncertain. Of stars that
are known to be exactly equal, which no prior says here, the probability is therefore too low. Any
unit of length, the same throughout.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from scipy.special import log_ndtr, ndtr

from simimg.arrays import FloatArray

CERTAIN = 0.95
"""Probability above which a pair is resolved."""
UNLIKELY = 0.05
"""Probability below which it is unresolved."""
SURELY_DOUBLE = 0.01
"""Probability of a single star below which there is a second star."""

_NODES = 241
_WIDTH = 6.0  # standard errors of the magnitude difference to either side

Limit = Callable[[FloatArray], FloatArray]


def probability_beyond(
    limit: float | Limit,
    *,
    separation: float,
    magnitude_difference: float,
    covariance: Sequence[Sequence[float]],
) -> float:
    """Return the probability that a pair's true separation is beyond a limit.

    Parameters
    ----------
    limit : float or callable
        The limit, or the limit for each of an array of magnitude differences; infinite where no
        separation resolves.
    separation, magnitude_difference : float
        As fitted.
    covariance : 2 x 2
        Of the two.

    Returns
    -------
    float
        From 0 to 1; NaN when the errors are not finite.

    Notes
    -----
    The part of the Gaussian at negative separations is cut off, as the prior demands, and the rest
    renormalised. Within half a percent of a limit that is no more than its own uncertainty there.
    """
    errors = np.sqrt(np.maximum([covariance[0][0], covariance[1][1]], 0.0))
    if not (np.isfinite(errors).all() and np.isfinite([separation, magnitude_difference]).all()):
        return float("nan")
    sigma, spread = float(errors[0]), float(errors[1])
    if sigma == 0.0:
        sigma = 1e-12 * max(separation, 1.0)
    steps = np.linspace(-_WIDTH, _WIDTH, _NODES) if spread > 0.0 else np.zeros(1)
    weights = np.exp(-0.5 * steps**2)
    weights /= weights.sum()
    differences = magnitude_difference + spread * steps
    # The separation for a given magnitude difference.
    slope = covariance[0][1] / spread if spread > 0.0 else 0.0
    centre = separation + slope * steps
    narrow = np.sqrt(max(sigma**2 - slope**2, (1e-6 * sigma) ** 2))
    limits = limit(differences) if callable(limit) else np.full(steps.size, float(limit))
    limits = np.where(np.isnan(limits), np.inf, np.maximum(limits, 0.0))
    beyond = float(weights @ ndtr((centre - limits) / narrow))
    allowed = float(weights @ ndtr(centre / narrow))
    if allowed <= 0.0:
        # All of it at negative separations: compare the tails.
        return float(
            np.exp(np.max(log_ndtr((centre - limits) / narrow) - log_ndtr(centre / narrow)))
        )
    return min(1.0, beyond / allowed)


def verdict(probability: float, *, probability_single: float) -> str:
    """Return ``"resolved"``, ``"borderline"`` or ``"unresolved"``.

    Parameters
    ----------
    probability : float
        That the pair lies beyond the limit; NaN when the fit cannot tell.
    probability_single : float
        That a single star would look this double.
    """
    if not probability_single < SURELY_DOUBLE:
        return "unresolved"
    if probability > CERTAIN:
        return "resolved"
    return "unresolved" if probability < UNLIKELY else "borderline"
