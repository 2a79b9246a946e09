"""The stars of a frame: what stands out, each fitted as a point source.

photutils finds what stands out; brightest first, each is fitted as a single star with the light of
those already fitted taken off (which also drops the rings and spikes of bright stars that a finder
takes for stars), twice over.

Electrons and detector pixels.
"""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from math import hypot

import numpy as np
from scipy.spatial import cKDTree

from simimg.arrays import AnyArray, FloatArray
from simimg.resolving.crew import crew_map
from simimg.resolving.neighbours import PlacedStar, star_light
from simimg.resolving.observation import Observation
from simimg.resolving.starfit import fit_stars

LIGHT = 8.0
"""FWHM within which the light of another star is taken off."""
ACCEPTED = 6.0
"""Standard errors of its electrons at which a star is kept."""
_THRESHOLD = 5.0  # standard deviations of the background at which a star is looked at
_MOST = 5000
_TILE = 512.0  # pixels of a side


def find_stars(observation: Observation, *, workers: int = 1) -> list[PlacedStar]:
    """Find the stars of a frame, each fitted alone with the light of the others taken off.

    Returns
    -------
    list of PlacedStar
        By decreasing electrons, at most 5,000.
    """
    places = _detect(observation)
    if not len(places):
        return []
    reach = LIGHT * observation.fwhm
    tiles = np.floor(places / _TILE).astype(np.int64)
    tasks = []
    for column, row in sorted({(int(a), int(b)) for a, b in tiles}):
        inside = (tiles[:, 0] == column) & (tiles[:, 1] == row)
        low = np.array([column, row]) * _TILE - reach
        near = ((places >= low) & (places < low + _TILE + 2.0 * reach)).all(axis=1)
        tasks.append((places[near], inside[near]))
    parts = crew_map(_fit_tile, observation, tasks, workers=workers, stars=len(places))
    kept = sorted((star for part in parts for star in part), key=lambda star: -star.electrons)
    single: list[PlacedStar] = []
    for star in kept:
        if all(hypot(star.x - s.x, star.y - s.y) > 0.5 * observation.fwhm for s in single[-200:]):
            single.append(star)
    return single


def _fit_tile(observation: Observation, task: tuple[FloatArray, AnyArray]) -> list[PlacedStar]:
    """Fit the stars of a tile and of its rim, and return its own."""
    places, inside = task
    stars: list[PlacedStar | None] = [None] * len(places)
    tree = cKDTree(places)
    reach = LIGHT * observation.fwhm
    for _ in range(2):
        for index, place in enumerate(places):
            around = [
                star
                for i in tree.query_ball_point(place, reach)
                if i != index and (star := stars[i]) is not None
            ]
            stars[index] = _fit_alone(observation, (place[0], place[1]), around)
    return [star for star, own in zip(stars, inside) if own and star is not None]


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
    if not float(fit.electrons[0]) > ACCEPTED * error or not observation.holds(x, y):
        return None
    if hypot(x - place[0], y - place[1]) > observation.fwhm:
        return None
    return PlacedStar(x, y, float(fit.electrons[0]))
