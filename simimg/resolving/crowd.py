"""Pairs in company: a star and all that stand within four FWHM of it, fitted together.

Three stars close together are three pairs, and a fit of two of them is wrong about both. The star
and its company are therefore fitted at once, each with a free place and free electrons; one more
star may hide in the light of the first and is sought in what is left. A companion is judged against
the fit of all the others without it. What comes out is the pair with the errors of the joint fit
(the company's own errors are in them), and cutouts in which the company's light is known.

Electrons and detector pixels.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot

import numpy as np

from simimg.arrays import frozen
from simimg.resolving.doubles import probability_single
from simimg.resolving.layout import Layout
from simimg.resolving.neighbours import CLEAR, PlacedStar, placed_stars, star_light
from simimg.resolving.observation import Observation
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.sighting import Sighting
from simimg.resolving.starfit import Cutout, StarFit, fit_stars
from simimg.resolving.suspect import DEARER, FALSE, explained, worth_a_fit
from simimg.resolving.width import fit_width

REACH = 2.0 * CLEAR
"""FWHM within which other stars are fitted along."""
_HALF = REACH + 1.5  # FWHM from the star to the cutout's edge
_NEAREST = 0.05  # FWHM below which two fitted places are one


@dataclass(frozen=True, eq=False)
class Crowd:
    """A star and its company as fitted together.

    Attributes
    ----------
    stars : tuple of PlacedStar
        The star, its company in the order given, then one that was hidden, if any.
    pairs : tuple of (int, Sighting)
        Number of the companion among `stars`, and the pair that the star makes with it.
    """

    stars: tuple[PlacedStar, ...]
    pairs: tuple[tuple[int, Sighting], ...]


def look_among(
    observation: Observation,
    star: PlacedStar,
    company: Sequence[PlacedStar],
    *,
    wanted: Sequence[int],
    known: Sequence[PlacedStar],
    count: int,
) -> Crowd | None:
    """Fit a star with its company, and say with which of it the star is a pair.

    Parameters
    ----------
    observation : Observation
    star : PlacedStar
    company : sequence of PlacedStar
        Within four FWHM.
    wanted : sequence of int
        Members of the company that are tried as companions; a hidden star always is.
    known : sequence of PlacedStar
        Other stars whose light is allowed for.
    count : int
        Stars of the frame, all of which could pass for pairs.

    Returns
    -------
    Crowd or None
        None where point sources do not explain the light.
    """
    fwhm = observation.fwhm
    cutout = observation.cutout(star.x, star.y, _HALF * fwhm)
    if cutout.used.sum() < 9 + 3 * len(company):
        return None
    cutout = cutout.with_known(star_light(known, cutout))
    fit = fit_stars([cutout], places=[one[:2] for one in (star, *company)])
    tried = [number + 1 for number in wanted]
    if worth_a_fit(cutout, fit, count=count):
        more = _hidden(cutout, fit)
        hidden = len(more.places) - 1
        if more is not fit and _sighting(cutout, more, hidden, known, star, count) is not None:
            fit = more
            tried.append(hidden)
    if not _sound(cutout, fit) or not explained([cutout], fit, about=CLEAR * fwhm):
        return None
    pairs = []
    for number in tried:
        sighting = _sighting(cutout, fit, number, known, star, count)
        if sighting is not None:
            pairs.append((number, sighting))
    return Crowd(tuple(placed_stars(fit)), tuple(pairs))


def _hidden(cutout: Cutout, fit: StarFit) -> StarFit:
    """The fit with one star more near the first, where a start for it leads to a better one."""
    scan = scan_second_star([cutout], fit, radius=CLEAR * cutout.psf.fwhm, geometry=False)
    best = fit
    for index in np.argsort(-scan.scores)[:3]:
        place = fit.places[0] + scan.offsets[index]
        trial = fit_stars([cutout], places=[*fit.places, place])
        if trial.deviance < best.deviance and _sound(cutout, trial):
            best = trial
    return best


def _sound(cutout: Cutout, fit: StarFit) -> bool:
    """Whether all stars are bright, apart, and where the cutout shows them."""
    rows, columns = cutout.electrons.shape
    x, y = fit.places[:, 0] - cutout.x0, fit.places[:, 1] - cutout.y0
    if not (fit.converged and np.isfinite(fit.covariance).all() and fit.electrons.min() > 0.0):
        return False
    if x.min() < -0.5 or y.min() < -0.5 or x.max() > columns - 0.5 or y.max() > rows - 0.5:
        return False
    apart = np.hypot(x[:, None] - x, y[:, None] - y) + 1e9 * np.eye(len(x))
    return bool(apart.min() > _NEAREST * cutout.psf.fwhm)


def _sighting(
    cutout: Cutout,
    fit: StarFit,
    number: int,
    known: Sequence[PlacedStar],
    star: PlacedStar,
    count: int,
) -> Sighting | None:
    """The pair of the first star with another, or None where the other may be no star."""
    fwhm = cutout.psf.fwhm
    if hypot(*(fit.places[number] - fit.places[0])) > 0.999 * CLEAR * fwhm:
        return None
    rest = [i for i in range(len(fit.places)) if i != number]
    single = fit_stars([cutout], places=fit.places[rest])
    gain = max(0.0, single.deviance - fit.deviance)
    scan = scan_second_star([cutout], single, radius=CLEAR * fwhm)
    chance = probability_single(gain, area=scan.area, rim=scan.rim)
    if not chance < FALSE / count:
        return None
    if fit_width(cutout, single).deviance < fit.deviance + DEARER:
        return None
    stars = placed_stars(fit)
    company = [stars[i] for i in rest if i > 0]
    own = cutout.with_known(cutout.known + star_light(company, cutout))
    return Sighting(
        cutouts=(own,),
        single=_part(single, cutout, [0]),
        double=_part(fit, cutout, [0, number]),
        gain=gain,
        probability_single=chance,
        neighbours=(*known, *company),
        place=star[:2],
    )


def _part(fit: StarFit, cutout: Cutout, numbers: Sequence[int]) -> StarFit:
    """Some stars of a fit, with the errors that all of it leaves them."""
    kept = [3 * i + k for i in numbers for k in range(3)]
    kept += range(3 * len(fit.places), len(fit.covariance))
    return replace(
        fit,
        places=frozen(fit.places[list(numbers)]),
        electrons=frozen(fit.electrons[list(numbers)]),
        covariance=frozen(fit.covariance[np.ix_(kept, kept)]),
        layout=Layout(len(numbers), [cutout.tilted], [0]),
    )
