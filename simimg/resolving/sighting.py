"""Looking at one place of a frame: one star or two, where, and how surely.

The place only says where to look. A single star is fitted to what stands there, a second one sought
over a disc about it (two delivered FWHM unless more is asked), both fitted together, and the stars
around are found in what is left and allowed for. Detector pixels and electrons.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot

import numpy as np

from simimg.arrays import FloatArray
from simimg.resolving.doubles import probability_single
from simimg.resolving.neighbours import (
    CLEAR,
    PlacedStar,
    find_neighbours,
    matched_filter,
    placed_stars,
    star_light,
)
from simimg.resolving.observation import Observation
from simimg.resolving.pairfit import PairFit, fit_pair
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.starfit import Cutout, StarFit, fit_stars
from simimg.resolving.verdict import SURELY_DOUBLE

_MARGIN = 2.0  # FWHM of sky shown beyond the farthest place of a second star
_OFF = 1.0  # FWHM by which a place may be off
_WIDE = 2.5  # FWHM beyond which two stars are looked up each at its own place
_ROUNDS = 3
_NO_STAR = 4.0  # standard errors of the electrons below which nothing stands out
NEXT = 4.0
"""FWHM within which a star that shows beside a single one is its companion."""


@dataclass(frozen=True, eq=False)
class Sighting:
    """What stands at a place.

    Attributes
    ----------
    cutouts : tuple of Cutout
        What was fitted; one holds both stars, or each its own.
    single : StarFit
    double : StarFit or None
    gain : float
        Fall of twice the negative log-likelihood from one star to two.
    probability_single : float
    neighbours : tuple of PlacedStar
        Other stars that were allowed for.
    place : (x, y)
        Where it was looked.
    """

    cutouts: tuple[Cutout, ...]
    single: StarFit
    double: StarFit | None
    gain: float
    probability_single: float
    neighbours: tuple[PlacedStar, ...]
    place: tuple[float, float]

    @property
    def empty(self) -> bool:
        """Whether no star stands out at all."""
        error = float(np.sqrt(self.single.covariance[2, 2]))
        return not float(self.single.electrons[0]) > _NO_STAR * error

    @property
    def stars(self) -> list[PlacedStar]:
        """The one or two stars that the data ask for."""
        surely = self.double is not None and self.probability_single < SURELY_DOUBLE
        return placed_stars(self.double if surely and self.double is not None else self.single)


def look(
    observation: Observation,
    place: tuple[float, float],
    *,
    other: tuple[float, float] | None = None,
    known: Sequence[PlacedStar] | None = None,
) -> Sighting:
    """Look at a place.

    Parameters
    ----------
    observation : Observation
    place : (x, y)
        Pixels; a FWHM off does no harm.
    other : (x, y), optional
        Where to look for the second star of a pair known to be one. Closer than 1.5 FWHM it is not
        used at all.
    known : sequence of PlacedStar, optional
        Stars around; by default they are found.
    """
    fwhm = observation.fwhm
    apart = 0.0 if other is None else hypot(other[0] - place[0], other[1] - place[1])
    if other is not None and apart > _WIDE * fwhm:
        return _look_twice(observation, place, other, known)
    radius = CLEAR * fwhm if apart <= 1.5 * fwhm else apart + fwhm
    neighbours: list[PlacedStar] = list(known or ())
    sighting = _look_once(observation, place, radius, neighbours)
    if known is not None:
        return _let_go(observation, sighting, radius)
    beyond = None if other is not None else _beyond(observation, sighting, radius)
    if beyond is not None:
        return beyond
    for _ in range(_ROUNDS):
        found = _around(observation, sighting, radius)
        if _same(found, neighbours):
            break
        neighbours = found
        sighting = _look_once(observation, place, radius, neighbours)
    if other is None and sighting.probability_single >= SURELY_DOUBLE:
        return _beside(observation, sighting) or sighting
    return _let_go(observation, sighting, radius)


def _beyond(observation: Observation, sighting: Sighting, radius: float) -> Sighting | None:
    """A companion just outside the disc, whose light holds the second star to the rim.

    Left there, it would pass for a neighbour, and the star at the rim for the companion.
    """
    double = sighting.double
    if double is None or not sighting.probability_single < SURELY_DOUBLE:
        return None
    if hypot(*(double.places[1] - double.places[0])) < 0.999 * radius:
        return None
    free = fit_stars(sighting.cutouts, places=double.places, electrons=double.electrons)
    apart = hypot(*(free.places[1] - free.places[0]))
    if not radius < apart <= NEXT * observation.fwhm or free.electrons.min() <= 0.0:
        return None
    places = [(float(x), float(y)) for x, y in free.places]
    if free.deviance > double.deviance or not all(observation.holds(*place) for place in places):
        return None
    wide = replace(_look_twice(observation, places[0], places[1], None), place=sighting.place)
    return wide if wide.probability_single < SURELY_DOUBLE else None


def _let_go(observation: Observation, sighting: Sighting, radius: float) -> Sighting:
    """A certain second star held back by the rim of its disc is allowed beyond it."""
    double = sighting.double
    if double is None or not sighting.probability_single < SURELY_DOUBLE:
        return sighting
    if hypot(*(double.places[1] - double.places[0])) < 0.999 * radius:
        return sighting
    free = fit_stars(sighting.cutouts, places=double.places, electrons=double.electrons)
    wide = hypot(*(free.places[1] - free.places[0])) > max(radius, NEXT * observation.fwhm)
    if wide or free.deviance > double.deviance or free.electrons.min() <= 0.0:
        return sighting
    gain = max(0.0, sighting.single.deviance - free.deviance)
    return replace(sighting, double=free, gain=gain)


def _around(observation: Observation, sighting: Sighting, radius: float) -> list[PlacedStar]:
    """Stars around what was seen; none about an empty place."""
    if sighting.empty:
        return []
    half = radius + 2.0 * _MARGIN * observation.fwhm
    return find_neighbours(observation, sighting.stars, half=half)


def _same(some: Sequence[PlacedStar], others: Sequence[PlacedStar]) -> bool:
    return len(some) == len(others) and all(
        hypot(a.x - b.x, a.y - b.y) < 0.05 and abs(a.electrons - b.electrons) < 0.01 * b.electrons
        for a, b in zip(some, others)
    )


def _look_once(
    observation: Observation,
    place: tuple[float, float],
    radius: float,
    neighbours: Sequence[PlacedStar],
) -> Sighting:
    """One star, then two, with the light of given neighbours allowed for."""
    cutout = observation.cutout(*place, radius + _MARGIN * observation.fwhm)
    if neighbours:
        cutout = cutout.with_known(star_light(neighbours, cutout))
    start = locate(cutout, place, _OFF * observation.fwhm)
    fit: PairFit = fit_pair([cutout], place=start, radius=radius)
    chance = probability_single(fit.gain, area=fit.scan.area, rim=fit.scan.rim)
    return Sighting((cutout,), fit.single, fit.double, fit.gain, chance, tuple(neighbours), place)


def locate(cutout: Cutout, place: tuple[float, float], reach: float) -> tuple[float, float]:
    """Return the pixel within reach of a place where a star's light stands out most."""
    counted = cutout.used > 0
    if not counted.any():
        return place
    rest = cutout.electrons - cutout.known
    background = float(np.median(rest[counted]))
    height = matched_filter(
        (rest - background) * cutout.used, cutout.used / (cutout.variance + 1.0), cutout.psf
    )
    rows, columns = height.shape
    x = cutout.x0 + np.arange(columns)
    y = cutout.y0 + np.arange(rows)[:, None]
    height = np.where(np.hypot(x - place[0], y - place[1]) <= max(reach, 1.0), height, -np.inf)
    row, column = np.unravel_index(int(np.argmax(height)), height.shape)
    return cutout.x0 + float(column), cutout.y0 + float(row)


def _look_twice(
    observation: Observation,
    place: tuple[float, float],
    other: tuple[float, float],
    known: Sequence[PlacedStar] | None,
) -> Sighting:
    """A wide pair, each star at its own place."""
    fwhm = observation.fwhm
    neighbours: list[PlacedStar] = list(known or ())
    for attempt in range(2):
        cutouts = [
            cutout.with_known(star_light(neighbours, cutout)) if neighbours else cutout
            for cutout in observation.cutouts(place, other, (_MARGIN + 1.0) * fwhm)
        ]
        starts = [
            locate(cutouts[0], place, _OFF * fwhm),
            locate(cutouts[-1], other, _OFF * fwhm),
        ]
        double = fit_stars(cutouts, places=starts)
        if known is not None:
            break
        if attempt == 0:
            stars = placed_stars(double)
            half = (CLEAR + 2.0 * _MARGIN) * fwhm
            neighbours = find_neighbours(observation, stars, half=half)
            neighbours += [
                star
                for star in find_neighbours(observation, stars[::-1], half=half)
                if all(hypot(star.x - one.x, star.y - one.y) > fwhm for one in neighbours)
            ]
            if not neighbours:
                break
    brighter = int(np.argmax(double.electrons))
    single = fit_stars(cutouts, places=[double.places[brighter]])
    gain = max(0.0, single.deviance - double.deviance)
    apart = hypot(*(double.places[1] - double.places[0]))
    own = cutouts[min(brighter, len(cutouts) - 1)]
    chance = _chance_within(observation, own, single, gain, apart + fwhm)
    return Sighting(tuple(cutouts), single, double, gain, chance, tuple(neighbours), place)


def _beside(observation: Observation, sighting: Sighting) -> Sighting | None:
    """A single star and the brightest neighbour just outside its disc, as a pair."""
    fwhm = observation.fwhm
    star = sighting.stars[0]
    near = [
        one for one in sighting.neighbours if hypot(one.x - star.x, one.y - star.y) <= NEXT * fwhm
    ]
    if not near or sighting.empty:
        return None
    companion = max(near, key=lambda one: one.electrons)
    rest = [one for one in sighting.neighbours if one is not companion]
    cutouts = [
        cutout.with_known(star_light(rest, cutout))
        for cutout in observation.cutouts(star[:2], companion[:2], (_MARGIN + 1.0) * fwhm)
    ]
    double = fit_stars(cutouts, places=[star[:2], companion[:2]])
    single = fit_stars(cutouts, places=[star[:2]])
    gain = max(0.0, single.deviance - double.deviance)
    chance = _chance_within(observation, cutouts[0], single, gain, NEXT * fwhm)
    if not chance < SURELY_DOUBLE:
        return None
    return Sighting(tuple(cutouts), single, double, gain, chance, tuple(rest), sighting.place)


def _chance_within(
    observation: Observation, cutout: Cutout, single: StarFit, gain: float, radius: float
) -> float:
    """Probability that a single star has so good a second one within a wide radius.

    The disc of two FWHM is measured; beyond it the field's metric hardly changes.
    """
    inner = CLEAR * observation.fwhm
    scan = scan_second_star([cutout], _again(single, cutout), radius=inner)
    growth = max(1.0, radius / inner)
    return probability_single(gain, area=scan.area * growth**2, rim=scan.rim * growth)


def _again(fit: StarFit, cutout: Cutout) -> StarFit:
    """A single star's fit made anew on one cutout, from where it stands."""
    places: FloatArray = fit.places[:1]
    return fit_stars([cutout], places=places)
