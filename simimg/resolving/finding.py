"""Pairs found in a frame that nobody pointed out.

photutils finds what stands out; brightest first, each is fitted as a single star with the light of
those already fitted taken off (which also drops the rings and spikes of bright stars that a finder
takes for stars), twice over. What then shows a second star within two delivered FWHM, so good that
no single star of the whole frame is likely to look that double, is a pair; what two stars do not
explain, a galaxy say, is left out.

Electrons and detector pixels.
"""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from math import hypot

import numpy as np
from scipy.spatial import cKDTree

from simimg.arrays import AnyArray, FloatArray
from simimg.resolving.doubles import probability_single
from simimg.resolving.neighbours import CLEAR, PlacedStar, star_light
from simimg.resolving.observation import Observation
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.sighting import Sighting, look
from simimg.resolving.starfit import Cutout, Likelihood, StarFit, fit_stars

_THRESHOLD = 5.0  # standard deviations of the background at which a star is looked at
_ACCEPTED = 6.0  # standard errors of its electrons at which it is kept
_LIGHT = 8.0  # FWHM within which the light of another star is taken off
_MOST = 5000
_FALSE = 0.01  # chance that any single star of the frame passes for a pair
_FITS = 1.5  # reduced chi-square within a FWHM that two point sources may leave
_SHOWN = 10.0  # of a first screen's squared score: below this no fit can reach certainty


def find_pairs(
    observation: Observation, *, besides: Sequence[tuple[float, float]] = ()
) -> list[Sighting]:
    """Find the pairs of a frame.

    Parameters
    ----------
    observation : Observation
    besides : sequence of (x, y), optional
        Places already measured, left out.

    Returns
    -------
    list of Sighting
        By decreasing brightness of their first star.
    """
    stars = find_stars(observation)
    if not stars:
        return []
    fwhm = observation.fwhm
    tree = cKDTree(np.array([star[:2] for star in stars]))
    taken = [
        bool(besides) and min(hypot(s.x - x, s.y - y) for x, y in besides) < CLEAR * fwhm
        for s in stars
    ]
    pairs: list[Sighting] = []
    for index, star in enumerate(stars):
        if taken[index]:
            continue
        close = [i for i in tree.query_ball_point(star[:2], CLEAR * fwhm) if i != index]
        around = tree.query_ball_point(star[:2], (_LIGHT + 4.0) * fwhm)
        sighting = _pair_at(observation, stars, index, close, around)
        if sighting is None or sighting.double is None:
            continue
        pairs.append(sighting)
        for other in close:
            x, y = stars[other][:2]
            near = np.hypot(*(sighting.double.places - (x, y)).T).min() < 0.5 * fwhm
            taken[other] = taken[other] or bool(near)
    return pairs


def find_stars(observation: Observation) -> list[PlacedStar]:
    """Find the stars of a frame, each fitted alone with the light of the others taken off.

    Returns
    -------
    list of PlacedStar
        By decreasing electrons, at most 5,000.
    """
    places = _detect(observation)
    if not len(places):
        return []
    stars: list[PlacedStar | None] = [None] * len(places)
    tree = cKDTree(places)
    reach = _LIGHT * observation.fwhm
    for _ in range(2):
        for index, place in enumerate(places):
            around = [
                star
                for i in tree.query_ball_point(place, reach)
                if i != index and (star := stars[i]) is not None
            ]
            stars[index] = _fit_alone(observation, tuple(place), around)
    kept = sorted((star for star in stars if star is not None), key=lambda star: -star.electrons)
    single: list[PlacedStar] = []
    for star in kept:
        if all(hypot(star.x - s.x, star.y - s.y) > 0.5 * observation.fwhm for s in single[-200:]):
            single.append(star)
    return single


def _detect(observation: Observation) -> FloatArray:
    """Places that stand out, brightest first, shape (n, 2)."""
    from astropy.stats import sigma_clipped_stats
    from photutils.detection import DAOStarFinder
    from photutils.utils.exceptions import NoDetectionsWarning

    electrons, good = observation.flattened(), observation.usable()
    _, background, noise = sigma_clipped_stats(electrons, mask=~good, sigma=3.0, maxiters=5)
    # A frame without noise of its own still has that of counting.
    noise = max(float(noise), float(np.sqrt(max(background, 0.0) + observation.variance)), 0.3)
    finder = DAOStarFinder(
        fwhm=max(observation.fwhm, 1.2),
        threshold=_THRESHOLD * noise,
        n_brightest=_MOST,
        min_separation=0.5 * observation.fwhm,
    )
    filled = np.where(good, electrons - background, _bright(electrons - background, good))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", NoDetectionsWarning)
        table = finder(filled)
    if table is None:
        return np.empty((0, 2))
    x, y = (
        next(np.asarray(table[name]) for name in names if name in table.colnames)
        for names in (("x_centroid", "xcentroid"), ("y_centroid", "ycentroid"))
    )
    order = np.argsort(-np.asarray(table["peak"]), kind="stable")
    inside = [i for i in order if observation.holds(float(x[i]), float(y[i]))]
    return np.column_stack([x[inside], y[inside]]).astype(np.float64)


def _bright(electrons: FloatArray, good: AnyArray) -> float:
    """What stands for pixels that do not count: a saturated star is still a star."""
    return float(electrons[good].max(initial=0.0)) if good.any() else 0.0


def _fit_alone(
    observation: Observation, place: tuple[float, float], around: Sequence[PlacedStar]
) -> PlacedStar | None:
    """One star near a place; None when no star is left there."""
    cutout = observation.cutout(*place, 1.2 * observation.fwhm)
    if cutout.used.sum() < 9:
        return None
    cutout = cutout.with_known(star_light(around, cutout))
    fit = fit_stars([cutout], places=[place])
    x, y = (float(value) for value in fit.places[0])
    error = float(np.sqrt(fit.covariance[2, 2]))
    if not float(fit.electrons[0]) > _ACCEPTED * error or not observation.holds(x, y):
        return None
    if hypot(x - place[0], y - place[1]) > observation.fwhm:
        return None
    return PlacedStar(x, y, float(fit.electrons[0]))


def _pair_at(
    observation: Observation,
    stars: Sequence[PlacedStar],
    index: int,
    close: Sequence[int],
    around: Sequence[int],
) -> Sighting | None:
    """The pair that a star belongs to, or None."""
    star = stars[index]
    known = [stars[i] for i in around if i != index and i not in close]
    if not close and not _looks_double(observation, star, known, len(stars)):
        return None
    sighting = look(observation, star[:2], known=known)
    if sighting.double is None or not sighting.probability_single < _FALSE / len(stars):
        return None
    apart = hypot(*(sighting.double.places[1] - sighting.double.places[0]))
    if apart > 0.999 * CLEAR * observation.fwhm:
        return None
    return sighting if _explained(sighting) else None


def _looks_double(
    observation: Observation, star: PlacedStar, known: Sequence[PlacedStar], count: int
) -> bool:
    """A quick look whether a fit of two stars could be worth its time."""
    cutout = observation.cutout(star.x, star.y, 3.0 * observation.fwhm)
    cutout = cutout.with_known(star_light(known, cutout))
    fit = fit_stars([cutout], places=[star[:2]])
    scan = scan_second_star([cutout], fit, radius=CLEAR * observation.fwhm, geometry=False)
    # The scan's places are coarse and its score is to first order only: ask for half.
    best = max(scan.highest, 0.0) ** 2
    rough = probability_single(2.0 * best, area=40.0, rim=22.0)
    return best > _SHOWN and rough < _FALSE / count


def _explained(sighting: Sighting) -> bool:
    """Whether two point sources leave no more than noise within a FWHM of either."""
    fit = sighting.double
    assert fit is not None
    total, degrees = 0.0, 0
    for index, cutout in enumerate(sighting.cutouts):
        value, count = _chi_square(cutout, fit, index)
        total, degrees = total + value, degrees + count
    return degrees < 8 or total < _FITS * degrees


def _chi_square(cutout: Cutout, fit: StarFit, index: int) -> tuple[float, int]:
    """Pearson's chi-square of the pixels within a FWHM of a fitted star, and their number."""
    model = Likelihood([cutout], len(fit.places)).jacobian(fit.own(index), 0)[0]
    rows, columns = cutout.electrons.shape
    x = cutout.x0 + np.arange(columns)
    y = cutout.y0 + np.arange(rows)[:, None]
    inside = np.zeros((rows, columns), dtype=bool)
    for place in fit.places:
        inside |= np.hypot(x - place[0], y - place[1]) <= cutout.psf.fwhm
    inside &= cutout.used > 0
    expected = model.reshape(rows, columns)
    variance = np.maximum(expected, 0.0) + max(cutout.variance, 1e-3)
    deviation = (cutout.electrons - expected) ** 2 / variance
    return float(deviation[inside].sum()), int(inside.sum())
