"""One star of a frame under suspicion: is it a pair, and do two point sources explain it.

A quick score of a second star settles whether a fit is worth its time; a pair is accepted where no
single star of the whole frame is likely to look that double, where two point sources leave no more
than noise, and where they explain the light better than a round width does.

Electrons and detector pixels.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import hypot

import numpy as np

from simimg.arrays import FloatArray
from simimg.resolving.doubles import probability_single
from simimg.resolving.neighbours import CLEAR, PlacedStar, star_light
from simimg.resolving.observation import Observation
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.sighting import Sighting, look
from simimg.resolving.starfit import Cutout, Likelihood, StarFit, fit_stars
from simimg.resolving.width import fit_width

FALSE = 0.01
"""Chance that any single star of the frame passes for a pair."""
DEARER = 4.0
"""Deviance that two parameters more must win (Akaike 1974)."""
_FITS = 1.5  # reduced chi-square within a FWHM that point sources may leave
_WITHIN = 0.999  # of the search disc: a star on its rim is held back by it
_SHOWN = 10.0  # of a first screen's squared score: below this no fit can reach certainty


def pair_at(
    observation: Observation,
    star: PlacedStar,
    *,
    close: int,
    known: Sequence[PlacedStar],
    count: int,
) -> Sighting | None:
    """The pair that a star belongs to, or None.

    Parameters
    ----------
    observation : Observation
    star : PlacedStar
    close : int
        Stars within two FWHM that may be its companion.
    known : sequence of PlacedStar
        Other stars whose light is allowed for.
    count : int
        Stars of the frame, all of which could pass for pairs.
    """
    if not close and not _looks_double(observation, star, known, count):
        return None
    sighting = look(observation, star[:2], known=known)
    if sighting.double is None or not is_certain(sighting, count=count, fwhm=observation.fwhm):
        return None
    if not explained(sighting.cutouts, sighting.double):
        return None
    if len(sighting.cutouts) == 1:
        # A second star must explain the light better than a round width does.
        wide = fit_width(
            sighting.cutouts[0], fit_stars(sighting.cutouts, places=sighting.single.places)
        )
        if wide.deviance < sighting.double.deviance + DEARER:
            return None
    return sighting


def is_certain(sighting: Sighting, *, count: int, fwhm: float) -> bool:
    """Whether no single star of a field is likely to look so double, within two FWHM.

    Parameters
    ----------
    sighting : Sighting
    count : int
        Stars of the frame, 1 or more.
    fwhm : float
        Of the PSF, pixels.
    """
    double = sighting.double
    if double is None or not sighting.probability_single < FALSE / count:
        return False
    return hypot(*(double.places[1] - double.places[0])) <= _WITHIN * CLEAR * fwhm


def _looks_double(
    observation: Observation, star: PlacedStar, known: Sequence[PlacedStar], count: int
) -> bool:
    """A quick look whether a fit of two stars could be worth its time."""
    cutout = observation.cutout(star.x, star.y, 3.0 * observation.fwhm)
    cutout = cutout.with_known(star_light(known, cutout))
    return worth_a_fit(cutout, fit_stars([cutout], places=[star[:2]]), count=count)


def worth_a_fit(cutout: Cutout, fit: StarFit, *, count: int) -> bool:
    """Whether a second star about the first of a fit could reach certainty.

    Parameters
    ----------
    cutout : Cutout
    fit : StarFit
        The star, and others fitted with it.
    count : int
        Stars of the frame.
    """
    scan = scan_second_star([cutout], fit, radius=CLEAR * cutout.psf.fwhm, geometry=False)
    # The scan's places are coarse and its score is to first order only: ask for half.
    best = max(scan.highest, 0.0) ** 2
    rough = probability_single(2.0 * best, area=40.0, rim=22.0)
    return best > _SHOWN and rough < FALSE / count


def explained(cutouts: Sequence[Cutout], fit: StarFit, *, about: float = np.inf) -> bool:
    """Whether point sources leave no more than noise within a FWHM of any of them.

    Parameters
    ----------
    cutouts : sequence of Cutout
    fit : StarFit
    about : float, optional
        Only sources within this of the first are asked, pixels.
    """
    away = np.hypot(*(fit.places - fit.places[0]).T)
    total, degrees = 0.0, 0
    for index, cutout in enumerate(cutouts):
        value, count = _chi_square(cutout, fit, index, fit.places[away <= about])
        total, degrees = total + value, degrees + count
    return degrees < 8 or total < _FITS * degrees


def _chi_square(cutout: Cutout, fit: StarFit, index: int, places: FloatArray) -> tuple[float, int]:
    """Pearson's chi-square of the pixels within a FWHM of places, and their number."""
    model = Likelihood([cutout], len(fit.places)).jacobian(fit.own(index), 0)[0]
    rows, columns = cutout.electrons.shape
    x = cutout.x0 + np.arange(columns)
    y = cutout.y0 + np.arange(rows)[:, None]
    inside = np.zeros((rows, columns), dtype=bool)
    for place in places:
        inside |= np.hypot(x - place[0], y - place[1]) <= cutout.psf.fwhm
    inside &= cutout.used > 0
    expected = model.reshape(rows, columns)
    variance = np.maximum(expected, 0.0) + max(cutout.variance, 1e-3)
    deviation = (cutout.electrons - expected) ** 2 / variance
    return float(deviation[inside].sum()), int(inside.sum())
