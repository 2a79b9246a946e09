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
from dataclasses import dataclass, replace
from math import hypot
from typing import Any, cast

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from simimg.arrays import AnyArray, FloatArray
from simimg.resolving.crew import crew_map
from simimg.resolving.doubles import probability_single
from simimg.resolving.neighbours import CLEAR, PlacedStar, star_light
from simimg.resolving.observation import Observation
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.sighting import Sighting, look
from simimg.resolving.starfit import Cutout, Likelihood, StarFit, fit_stars
from simimg.resolving.width import WidthFit, fit_width

_THRESHOLD = 5.0  # standard deviations of the background at which a star is looked at
_ACCEPTED = 6.0  # standard errors of its electrons at which it is kept
_LIGHT = 8.0  # FWHM within which the light of another star is taken off
_MOST = 5000
_FALSE = 0.01  # chance that any single star of the frame passes for a pair
_FITS = 1.5  # reduced chi-square within a FWHM that two point sources may leave
_DEARER = 4.0  # deviance that two parameters more must win (Akaike 1974)
_TILE = 512.0  # pixels of a side
_BATCH = 40  # groups that a process takes at a time
_COMPANY = 6  # neighbours fitted with a star
_SHOWN = 10.0  # of a first screen's squared score: below this no fit can reach certainty


@dataclass(frozen=True, eq=False)
class SingleStar:
    """A single object: its fit as a point and with a width, in the company of its neighbours."""

    point: StarFit
    wide: WidthFit


@dataclass(frozen=True, eq=False)
class FieldSearch:
    """What was found in a frame.

    Attributes
    ----------
    pairs : tuple of Sighting
        By decreasing brightness of their first star.
    singles : tuple of SingleStar
        All other stars, by decreasing brightness.
    """

    pairs: tuple[Sighting, ...]
    singles: tuple[SingleStar, ...]


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
    return list(search_field(observation, besides=besides, singles=False).pairs)


def search_field(
    observation: Observation,
    *,
    besides: Sequence[tuple[float, float]] = (),
    singles: bool = True,
    workers: int = 1,
) -> FieldSearch:
    """Find the pairs of a frame, and fit what is single.

    Parameters
    ----------
    observation : Observation
    besides : sequence of (x, y), optional
        Places already measured, left out.
    singles : bool, optional
        Whether single stars are fitted, too.
    workers : int, optional
        Processes at most; the result does not depend on it.
    """
    stars = find_stars(observation, workers=workers)
    if not stars:
        return FieldSearch((), ())
    fwhm, count = observation.fwhm, len(stars)
    tree = cKDTree(np.array([star[:2] for star in stars]))
    taken = [
        bool(besides) and min(hypot(s.x - x, s.y - y) for x, y in besides) < CLEAR * fwhm
        for s in stars
    ]
    groups = _groups(tree, CLEAR * fwhm, count)
    tasks = []
    for group in groups:
        around = sorted(
            {j for i in group for j in tree.query_ball_point(stars[i][:2], (_LIGHT + 4.0) * fwhm)}
        )
        own = [around.index(i) for i in group]
        tasks.append(
            _Group([stars[i] for i in around], own, [taken[i] for i in group], count, singles)
        )
    size = max(1, min(_BATCH, len(tasks) // 8))
    batches = [tasks[i : i + size] for i in range(0, len(tasks), size)]
    pairs: list[tuple[int, Sighting]] = []
    alone: list[tuple[int, SingleStar]] = []
    answers = crew_map(_search_groups, observation, batches, workers=workers, stars=count)
    for group, (seen, single) in zip(groups, (one for answer in answers for one in answer)):
        pairs += [(group[i], _psf_of(sighting, observation.psf)) for i, sighting in seen]
        alone += [(group[i], star) for i, star in single]
    return FieldSearch(
        tuple(sighting for _, sighting in sorted(pairs, key=lambda one: one[0])),
        tuple(star for _, star in sorted(alone, key=lambda one: one[0])),
    )


def _groups(tree: Any, reach: float, count: int) -> list[list[int]]:
    """Stars linked by distances within reach, each group in order, by their first."""
    links = tree.query_pairs(reach, output_type="ndarray")
    ones = np.ones(len(links))
    matrix = coo_matrix((ones, (links[:, 0], links[:, 1])), shape=(count, count))
    _, names = connected_components(matrix, directed=False)
    groups: dict[int, list[int]] = {}
    for index, name in enumerate(names):
        groups.setdefault(int(name), []).append(index)
    return list(groups.values())


@dataclass(frozen=True, eq=False)
class _Group:
    """Stars close together, with all whose light reaches them."""

    stars: list[PlacedStar]
    own: list[int]
    taken: list[bool]
    count: int
    singles: bool


_Found = tuple[list[tuple[int, Sighting]], list[tuple[int, SingleStar]]]


def _search_groups(observation: Observation, groups: Sequence[_Group]) -> list[_Found]:
    return [_search_group(observation, group) for group in groups]


def _search_group(observation: Observation, group: _Group) -> _Found:
    """Pairs and singles of a group, by their number in it."""
    fwhm, stars = observation.fwhm, group.stars
    taken = list(group.taken)
    pairs: list[tuple[int, Sighting]] = []
    places = {i: number for number, i in enumerate(group.own)}
    for number, index in enumerate(group.own):
        if taken[number]:
            continue
        star = stars[index]
        close = [
            i
            for i in group.own
            if i != index and hypot(stars[i].x - star.x, stars[i].y - star.y) <= CLEAR * fwhm
        ]
        sighting = _pair_at(observation, stars, index, close, range(len(stars)), count=group.count)
        if sighting is None or sighting.double is None:
            continue
        pairs.append((number, _psf_of(sighting, None)))
        taken[number] = True
        for other in close:
            x, y = stars[other][:2]
            near = np.hypot(*(sighting.double.places - (x, y)).T).min() < 0.5 * fwhm
            taken[places[other]] = taken[places[other]] or bool(near)
    if not group.singles:
        return pairs, []
    paired = [star for _, sighting in pairs for star in sighting.stars]
    replaced = {i for number, i in enumerate(group.own) if taken[number] != group.taken[number]}
    others = [star for i, star in enumerate(stars) if i not in replaced] + paired
    alone = []
    for number, index in enumerate(group.own):
        if not taken[number]:
            single = _single_at(observation, stars[index], others)
            if single is not None:
                alone.append((number, single))
    return pairs, alone


def _single_at(
    observation: Observation, star: PlacedStar, others: Sequence[PlacedStar]
) -> SingleStar | None:
    """A star fitted as a point and with a width, those within two FWHM fitted with it."""
    fwhm = observation.fwhm
    away = [hypot(one.x - star.x, one.y - star.y) for one in others]
    close = [one for one, far in zip(others, away) if 0.0 < far <= CLEAR * fwhm][:_COMPANY]
    known = [one for one, far in zip(others, away) if far > 0.0 and one not in close]
    half = 3.0 * fwhm
    for _ in range(2):
        cutout = observation.cutout(star.x, star.y, half)
        cutout = cutout.with_known(star_light(known, cutout))
        point = fit_stars([cutout], places=[one[:2] for one in (star, *close)])
        if not point.electrons[0] > 0.0:
            return None
        wide = fit_width(cutout, point)
        wanted = 3.0 * fwhm + 2.5 * wide.width
        if not wide.extended or wanted < half + fwhm:
            break
        half = wanted
    return SingleStar(point, wide)


def _psf_of(sighting: Sighting, psf: PsfModel | None) -> Sighting:
    """The sighting with another PSF in its cutouts: none on its way between processes."""
    cutouts = tuple(replace(one, psf=cast(PsfModel, psf)) for one in sighting.cutouts)
    return replace(sighting, cutouts=cutouts)


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
    reach = _LIGHT * observation.fwhm
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
    reach = _LIGHT * observation.fwhm
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
    *,
    count: int,
) -> Sighting | None:
    """The pair that a star belongs to, or None."""
    star = stars[index]
    known = [stars[i] for i in around if i != index and i not in close]
    if not close and not _looks_double(observation, star, known, count):
        return None
    sighting = look(observation, star[:2], known=known)
    if sighting.double is None or not sighting.probability_single < _FALSE / count:
        return None
    apart = hypot(*(sighting.double.places[1] - sighting.double.places[0]))
    if apart > 0.999 * CLEAR * observation.fwhm:
        return None
    if not _explained(sighting):
        return None
    if len(sighting.cutouts) == 1:
        # A second star must explain the light better than a round width does.
        wide = fit_width(
            sighting.cutouts[0], fit_stars(sighting.cutouts, places=sighting.single.places)
        )
        if wide.deviance < sighting.double.deviance + _DEARER:
            return None
    return sighting


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
