"""How often a single star would look double: the tail of the best second star's likelihood ratio.

The statistic is the fall of twice the negative log-likelihood from one star to the best two, the
second anywhere in a disc about the first and of positive electrons. A second star of no light has
no place, and no light is the edge of what is allowed, so the statistic is not chi-square. For a
single star it is, to first order, the square of the maximum of a smooth Gaussian field of unit
variance over the search region, whose tail is the expected Euler characteristic of the region
above a level (Adler & Taylor 2007, Random Fields and Geometry, ch. 12)::

    E(u) = L0 Q(u) + L1 exp(-u^2/2) / (2 pi) + L2 u exp(-u^2/2) / (2 pi)^(3/2)

with ``L2`` the region's area and ``L1`` half the length of its rim in the field's own metric. The
region is a disc whose origin is blown up into a circle with opposite directions identified (see
`simimg.resolving.secondstar`), a Moebius band: its Euler characteristic ``L0`` is 0. Excursions
being rare and far apart they are nearly Poisson, so the probability of one or more is
``1 - exp(-E)`` (Aldous 1989), which also holds it below 1 where E is no longer small.
"""

from __future__ import annotations

import numpy as np

_LEAST_LOG = -690.0  # natural logarithm of about 1e-300


def probability_single(gain: float, *, area: float, rim: float) -> float:
    """Return the probability that a single star shows so good a second star in the disc.

    Parameters
    ----------
    gain : float
        Fall of twice the negative log-likelihood from one star to two, 0 or more.
    area, rim : float
        Area of the search disc and length of its rim in the metric of the scores
        (`SecondStarScan.area`, `SecondStarScan.rim`).

    Returns
    -------
    float
        Between 1e-300 and 1; 1 for no gain.
    """
    if not gain > 0.0:
        return 1.0
    # The expectation rises at first with the level; a probability must not.
    a, b = area / (2.0 * np.pi) ** 1.5, rim / (4.0 * np.pi)
    level = np.sqrt(gain)
    if a > 0.0:
        level = max(level, (-b + np.sqrt(b * b + 4.0 * a * a)) / (2.0 * a))
    log_expected = -0.5 * level**2 + np.log(a * level + b)
    if log_expected < -30.0:
        return float(np.exp(max(log_expected, _LEAST_LOG)))
    return float(-np.expm1(-np.exp(log_expected)))
