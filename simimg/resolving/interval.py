"""Between what separations a pair lies, where a symmetric error would mislead.

Far below the width of the PSF a pair shows only as a stretched star: its first sign is the second
moment ``q (1 - q) separation^2`` (``q`` the fainter star's share of the light), and next to nothing
tells an equal pair from a wider, unequal one, nor which side the fainter star is on. The likelihood
of the separation is then lopsided and may have several maxima. The interval is that of the profile
likelihood: at each separation all else is fitted anew (the position angle, both ways round, any
share of the light), and the interval holds the separations whose deviance is within a *drop* of the
least.

With a regular likelihood a drop of 1, half a unit of the log-likelihood, gives an interval of
68.27 %, as the deviance's excess at the truth is a chi-square of one degree of freedom (Wilks 1938,
Ann. Math. Stat. 9, 60). Two things raise it here:

- At a given separation no pair shows more elongation than an equal one. Where more is seen, and the
  ratio of the light is told by nothing else, the held fit stands at that bound and leaves two
  quantities unfitted, the elongation and the lopsidedness: the excess has two degrees of freedom.
  Degrees of freedom by whether the bound holds the fit: Susko 2013, Biometrika 100, 1019.
- The second star may be elsewhere, and what was fitted a chance of the noise, which happens with
  ``probability_single``. The chance left for the drop is smaller by so much; where it is used up
  every separation is allowed, from 0 to as far as was looked.

Detector pixels.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import exp, hypot, inf, isfinite, log, sqrt

import numpy as np
from scipy.optimize import brentq
from scipy.special import chdtri

from simimg.arrays import FloatArray
from simimg.resolving.descent import covariance_of
from simimg.resolving.neighbours import CLEAR
from simimg.resolving.pairfit import (
    PairGeometry,
    PairSearch,
    PairState,
    inner_vector,
    pair_geometry,
    pair_starts,
)
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.starfit import Cutout, StarFit
from simimg.resolving.verdict import SURELY_DOUBLE

LEVEL = 0.6827
"""Chance that an interval holds the true separation: that of a standard error."""
ERRORS = 3.0
"""Standard errors below which a separation is too close to 0 for a symmetric one."""
ILL_TOLD = 0.3
"""Error of the magnitude difference (mag) from which the separation's is not to be trusted."""

_FARTHEST = 2.5  # FWHM beyond which each star is fitted at its own place
_DOUBT = 1e-3  # chance of a single star from which other places of the second one are tried
_ELSEWHERE = 0.15  # FWHM from which another place is one
_OPEN = 0.7  # natural logarithm of the stars' ratio: closer to 0 the pair is as good as equal
_NEARLY = 0.05  # the same, where a fit at the bound of the equal pair begins
_EXTREME = 13.0
_STEPS = 40
_ROUGH, _ENOUGH = 0.2, 1e-2  # deviance still to be won by each fit, by the best of them
_SHRINK, _LEAST = 0.5, 0.02  # of the separations tried downwards; of the least, in FWHM
_UPWARD = 6
_GIVEN_UP = 2  # separations tried in vain after which no other is
_PRECISE = 0.03  # of the distance from the best fit to an end


@dataclass(frozen=True)
class SeparationInterval:
    """The separations that the data allow with a chance of 68.27 %.

    Attributes
    ----------
    low, high : float
        Pixels; 0 where a single star is allowed.
    """

    low: float
    high: float


def is_lopsided(geometry: PairGeometry, *, chance: float, fwhm: float) -> bool:
    """Whether a pair's separation asks for an interval in place of a standard error.

    Parameters
    ----------
    geometry : PairGeometry
    chance : float
        That a single star looks so double.
    fwhm : float
        Of the PSF, pixels.
    """
    if geometry.separation > _FARTHEST * fwhm:
        return False
    error, _, spread = geometry.errors
    return not (
        geometry.separation >= ERRORS * error and spread <= ILL_TOLD and chance < SURELY_DOUBLE
    )


def separation_interval(
    cutouts: Sequence[Cutout], *, single: StarFit, double: StarFit, chance: float
) -> SeparationInterval:
    """Return the 68.27 % interval of the separation of two fitted stars.

    Parameters
    ----------
    cutouts : sequence of Cutout
        The data of the fits.
    single, double : StarFit
        The best single star, the best two.
    chance : float
        That a single star looks so double.

    Notes
    -----
    It covers between 0.66 and 0.80 of true separations, in simulated pairs of 0.1 to 0.8 FWHM, from
    those that a single star explains nearly as well to those that are certain.
    """
    fwhm = cutouts[0].psf.fwhm
    separation = hypot(*(double.places[1] - double.places[0]))
    certain = chance < SURELY_DOUBLE
    farthest = max(CLEAR * fwhm, separation + fwhm * certain)
    if chance >= 1.0 - LEVEL:
        return SeparationInterval(0.0, farthest)
    starts = [inner_vector(double)]
    if chance > _DOUBT:
        starts += _elsewhere(cutouts, single, double, chance)
    profile = _Profile(cutouts, starts, double.deviance, chance)
    below, above = _tried(separation, pair_geometry(double).errors[0], fwhm, farthest)
    at_zero = single.deviance - double.deviance - _drop(chance, 2)
    return SeparationInterval(
        low=_end(profile.excess, separation, below, (0.0, at_zero), certain=certain),
        high=_end(profile.excess, separation, above, (farthest, -inf), certain=certain),
    )


def _elsewhere(
    cutouts: Sequence[Cutout], single: StarFit, double: StarFit, chance: float
) -> list[FloatArray]:
    """Inner vectors of other places of the second star that the drop may allow."""
    fwhm = cutouts[0].psf.fwhm
    search = PairSearch(cutouts, max(CLEAR * fwhm, hypot(*(double.places[1] - double.places[0]))))
    scan = scan_second_star(cutouts, single, radius=search.radius, geometry=False)
    found: list[FloatArray] = []
    for start in pair_starts(single, scan, fwhm):
        state = search.run(PairState(start, search.expand(start), 1e-3), _STEPS, _ENOUGH)
        if state.now.deviance > double.deviance + _drop(chance, 2):
            continue
        places = [other[3:5] for other in (inner_vector(double), *found)]
        nearest = min(hypot(*(state.vector[3:5] - place)) for place in places)
        if nearest > _ELSEWHERE * fwhm:
            found.append(state.vector)
    return found


def _tried(
    separation: float, error: float, fwhm: float, farthest: float
) -> tuple[list[float], list[float]]:
    """Separations at which an end is looked for, downwards and upwards."""
    below: list[float] = []
    length = _SHRINK * separation
    while length > _LEAST * fwhm:
        below.append(length)
        length *= _SHRINK
    # Closer steps close by.
    steps = np.linspace(0.0, 1.0, _UPWARD + 1)[1:] ** 1.5
    above = [float(length) for length in separation + (farthest - separation) * steps]
    # Where the likelihood is nearly regular, the ends are not far off.
    near = separation - 2.0 * error, separation + 2.0 * error
    if near[0] > _SHRINK * separation:
        below.insert(0, near[0])
    if near[1] < above[0]:
        above.insert(0, near[1])
    return below, above


def _end(
    excess: Callable[[float], float],
    best: float,
    lengths: Sequence[float],
    last: tuple[float, float],
    *,
    certain: bool,
) -> float:
    """How far from the best separation the excess stays below 0.

    Where the second star is not certain, separations beyond a gap are allowed, too.
    """
    inside, outside, vain = best, None, 0
    for length in lengths:
        if excess(length) <= 0.0:
            inside, outside, vain = length, None, 0
            continue
        outside = length if outside is None else outside
        vain += 1
        if certain or vain == _GIVEN_UP:
            break
    if outside is None:
        if last[1] <= 0.0:
            return last[0]
        # Between the least separation tried and none at all.
        return 0.5 * (inside + last[0])
    if excess(inside) > 0.0:
        return inside
    width = max(abs(outside - best), 1e-6)
    return float(brentq(excess, inside, outside, xtol=_PRECISE * width, rtol=1e-6))


class _Profile:
    """The deviance of the best pair at a given separation, over what is allowed."""

    def __init__(
        self,
        cutouts: Sequence[Cutout],
        starts: Sequence[FloatArray],
        least: float,
        chance: float,
    ) -> None:
        self._cutouts = cutouts
        self._starts = starts
        self._least = least
        self._chance = chance
        self._known: dict[float, float] = {}

    def excess(self, length: float) -> float:
        """Deviance over the least, minus the drop that is allowed."""
        if length not in self._known:
            self._known[length] = self._excess(float(length))
        return self._known[length]

    def _excess(self, length: float) -> float:
        search = PairSearch(self._cutouts, length, held=True)
        states = [
            search.run(PairState(vector, search.expand(vector), 1e-3), _STEPS, _ROUGH)
            for start in self._starts
            for vector in _at(start, length)
        ]
        best = min(states, key=lambda state: state.now.deviance)
        best = search.run(best, _STEPS, _ENOUGH)
        drop = _drop(self._chance, 2 if _held_by_bound(search, best) else 1)
        return best.now.deviance - self._least - drop


def _at(start: FloatArray, length: float) -> list[FloatArray]:
    """A pair brought to a separation: of the same elongation if it can be, both ways round."""
    half = 0.5 * abs(start[5])
    own = hypot(start[3], start[4])
    # The ratio's logarithm is 2 arcosh of the separation over that of the equal pair.
    over = length / own * (exp(half) + exp(-half)) / 2.0
    ratio = 2.0 * log(over + sqrt(over * over - 1.0)) if over > 1.0 else 0.0
    ratio = min(max(ratio, _NEARLY), _EXTREME)
    sign = 1.0 if start[5] >= 0.0 else -1.0
    vectors = []
    for way in (sign, -sign):
        vector = start.copy()
        vector[3:5] *= length / own
        vector[5] = way * ratio
        vectors.append(vector)
    return vectors if over > 1.0 else vectors[:1]


def _held_by_bound(search: PairSearch, state: PairState) -> bool:
    """Whether the pair is as good as equal, and the data do not tell that it is."""
    if abs(state.vector[5]) >= _OPEN:
        return False
    _, held = search.along_rim(state.vector, state.now)
    error = sqrt(float(covariance_of(held.information)[4, 4]))
    return not (isfinite(error) and error <= _OPEN)


def _drop(chance: float, freedom: int) -> float:
    """The deviance's excess that is surpassed at the truth with what the level leaves."""
    left = 1.0 - LEVEL - chance
    return float(chdtri(freedom, left)) if left > 0.0 else inf
