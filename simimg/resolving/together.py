"""Several frames of one field, fitted together as if they were one.

The stars of a pair have one separation, angle and magnitude difference for all frames. Each frame
keeps its own PSF, its own noise and background, and, the first excepted, a small shift and a
transparency of its own, so that frames taken through different air, on other pixels or in poor
register add what they know and no more. Places are those of the first frame.

Detector pixels and electrons.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot

import numpy as np

from simimg.arrays import frozen
from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.resolving.advice import advise
from simimg.resolving.alignment import frame_view, transferred
from simimg.resolving.doubles import probability_single
from simimg.resolving.fieldsingles import SingleStar
from simimg.resolving.finding import search_field
from simimg.resolving.given import Given
from simimg.resolving.judging import NamedPair, judge
from simimg.resolving.layout import FIRST, View
from simimg.resolving.measure import FrameMeasurement, checked_places, named_pairs
from simimg.resolving.neighbours import CLEAR, PlacedStar, find_neighbours, star_light
from simimg.resolving.observation import Observation, observe
from simimg.resolving.pairfit import fit_pair
from simimg.resolving.pairlimits import PairLimits
from simimg.resolving.psfquality import PsfReport, judge_psf, psf_warnings
from simimg.resolving.psfsource import PsfChoice
from simimg.resolving.records import PairMeasurement
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.sighting import Sighting, locate, look
from simimg.resolving.singlerecords import joint_singles
from simimg.resolving.stackedcut import StackedDirections
from simimg.resolving.starfit import Cutout, StarFit, fit_stars

Place = tuple[float, float]
_MARGIN = 3.0  # FWHM of sky about the stars
_REGISTER = 2.0  # FWHM within which a star is sought in a frame whose register is unsure
_SEEN = 10.0  # standard errors of a star's electrons from which a frame can be shifted by itself
_WIDE = 2.5  # FWHM beyond which two stars are looked up each at its own place


@dataclass(frozen=True, eq=False)
class Together:
    """What frames say together, and each by itself.

    Attributes
    ----------
    answer : FrameMeasurement
        Of all frames; its PSF is that of the first.
    psfs : tuple of PsfReport
        Of each frame.
    """

    answer: FrameMeasurement
    psfs: tuple[PsfReport, ...]


def measure_together(
    frames: Sequence[Frame],
    *,
    near: Sequence[Place] | None = None,
    given: Given | None = None,
    psf: PsfChoice | None = None,
    names: Sequence[str] = (),
) -> Together:
    """Measure the pairs of a field in several frames of it.

    Parameters
    ----------
    frames : sequence of Frame, at least two
    near : sequence of (x, y), optional
        Places to measure, pixels of the first frame.
    given : Given, optional
        What goes before the frames' own headers.
    psf : PsfChoice, optional
        Where each frame's PSF is to come from; stars are named in the first frame.
    names : sequence of str, optional
        Of the frames, for messages.

    Raises
    ------
    InputError
        As `measure`, each line with the name of its frame; frames that do not overlap.
    """
    if len(frames) < 2:
        raise ValueError("at least two frames are measured together")
    first = frames[0]
    names = tuple(names) or tuple(f"frame {number}" for number in range(1, len(frames) + 1))
    places = checked_places(first, near or ())
    named = named_pairs(first)
    known = [*places, *(place for pair in named for place in (pair.first, pair.second))]
    observations = _observations(frames, known, named, given, psf, names)
    found, alone = _found(observations, known)
    targets: list[tuple[Place, NamedPair | None]] = [
        *((pair.first, pair) for pair in named),
        *((place, None) for place in places),
        *((place, None) for place in found),
    ]
    seen = [(_look(observations, place, pair), pair, place) for place, pair in targets]
    records: list[PairMeasurement] = []
    for joint, pair, _ in seen:
        whole = replace(observations[0], delivered=joint.delivered)
        judgement = judge(whole, joint.sighting, PairLimits(joint.delivered), named=pair)
        advice = advise(whole, judgement, brief=True)
        records.append(replace(judgement.record, advice=advice))
    psfs, warnings, qualities = [], [], []
    for number, (observation, name) in enumerate(zip(observations, names)):
        apart = [p for one in known if (p := transferred(one, first, frames[number])) is not None]
        quality = judge_psf(observation, apart=apart)
        looked = [
            (record.label or f"x {record.x:.5g}, y {record.y:.5g}", joint.sighting)
            for record, (joint, _, _) in zip(records, seen)
        ]
        psfs.append(quality.report)
        qualities.append(quality)
        doubts = psf_warnings(observation, quality, looked)
        warnings += [f"{name}: {text}" for text in (*observation.notes, *doubts)]
    answer = FrameMeasurement(
        pairs=tuple(records),
        psf=psfs[0],
        warnings=tuple(warnings),
        singles=joint_singles(observations, alone, qualities=qualities, apart=[*known, *found]),
    )
    return Together(answer, tuple(psfs))


def _observations(
    frames: Sequence[Frame],
    known: Sequence[Place],
    named: Sequence[NamedPair],
    given: Given | None,
    psf: PsfChoice | None,
    names: Sequence[str],
) -> list[Observation]:
    """Every frame's observation; what is wrong with any is said at once."""
    widest = max(
        (hypot(p.second[0] - p.first[0], p.second[1] - p.first[1]) for p in named), default=0.0
    )
    observations, lines = [], []
    for frame, name in zip(frames, names):
        apart = [p for one in known if (p := transferred(one, frames[0], frame)) is not None]
        choice = psf
        if psf is not None and psf.stars:
            stars = [transferred(star, frames[0], frame) for star in psf.stars]
            choice = replace(psf, stars=tuple(star for star in stars if star is not None))
        try:
            observations.append(observe(frame, widest=widest, given=given, psf=choice, apart=apart))
        except InputError as error:
            lines += [f"{name}: {line.removeprefix('frame: ')}" for line in error.lines]
            continue
        rows, columns = frames[0].counts.shape
        middle = transferred((0.5 * (columns - 1), 0.5 * (rows - 1)), frames[0], frame)
        corners = [(0.0, 0.0), (columns - 1.0, 0.0), (0.0, rows - 1.0), (columns - 1.0, rows - 1.0)]
        seen = [middle, *(transferred(corner, frames[0], frame) for corner in corners)]
        if not any(one is not None and observations[-1].holds(*one) for one in seen):
            what = f"shows another field than {names[0]}"
            lines.append(mistake(name, "", what, "measure it by itself"))
    if lines:
        raise InputError(*lines)
    return observations


def _found(
    observations: Sequence[Observation], known: Sequence[Place]
) -> tuple[list[Place], list[Sequence[SingleStar]]]:
    """Places of pairs that any of the frames shows, in the first's pixels; each frame's singles."""
    first = observations[0]
    found: list[Place] = []
    alone: list[Sequence[SingleStar]] = []
    for observation in observations:
        there = [
            p
            for one in (*known, *found)
            if (p := transferred(one, first.frame, observation.frame)) is not None
        ]
        field = search_field(observation, besides=there)
        alone.append(field.singles)
        for sighting in field.pairs:
            if sighting.double is None:
                continue
            x, y = (float(value) for value in sighting.double.places[0])
            back = transferred((x, y), observation.frame, first.frame)
            apart = CLEAR * first.fwhm
            if back is not None and all(
                hypot(back[0] - p[0], back[1] - p[1]) > apart for p in (*known, *found)
            ):
                found.append(back)
    return found, alone


@dataclass(frozen=True, eq=False)
class _Joint:
    """A sighting in all frames, and the PSF that the limits are of."""

    sighting: Sighting
    delivered: StackedDirections


def _look(observations: Sequence[Observation], place: Place, named: NamedPair | None) -> _Joint:
    """Look at a place in all frames together."""
    first = observations[0]
    other = None if named is None else named.second
    alone = look(first, place, other=other)
    stars = alone.stars
    if named is None and len(stars) == 2:
        place, other = stars[0][:2], stars[1][:2]
    apart = 0.0 if other is None else hypot(other[0] - place[0], other[1] - place[1])
    views, weights = _views(observations, alone)
    groups = [
        _cutouts(observation, view, stars, other if apart > _WIDE * first.fwhm else None)
        for observation, view in zip(observations, views)
        if view is not None
    ]
    cutouts = [cutout for group in groups for cutout in group]
    kept = [index for index, view in enumerate(views) if view is not None]
    delivered = StackedDirections(
        [observations[i].delivered for i in kept],
        weights=[weights[i] for i in kept],
        turns=[view.turn for view in views if view is not None],
    )
    fwhm = max(observations[i].fwhm for i in kept)
    start = tuple(float(v) for v in alone.single.places[0])
    if other is not None and apart > _WIDE * first.fwhm:
        sighting = _wide(cutouts, alone, place, other, apart + fwhm, CLEAR * fwhm)
    else:
        radius = CLEAR * fwhm if apart <= 1.5 * fwhm else apart + fwhm
        fit = fit_pair(cutouts, place=start, radius=radius)
        chance = probability_single(fit.gain, area=fit.scan.area, rim=fit.scan.rim)
        sighting = Sighting(
            tuple(cutouts), fit.single, fit.double, fit.gain, chance, alone.neighbours, place
        )
    return _Joint(sighting, delivered)


def _wide(
    cutouts: Sequence[Cutout],
    alone: Sighting,
    place: Place,
    other: Place,
    radius: float,
    inner: float,
) -> Sighting:
    """Two stars far apart, each at its own place."""
    double = fit_stars(cutouts, places=[place, other])
    brighter = int(np.argmax(double.electrons))
    single = fit_stars(cutouts, places=[double.places[brighter]])
    gain = max(0.0, single.deviance - double.deviance)
    scan = scan_second_star(cutouts, single, radius=inner)
    growth = max(1.0, radius / inner)
    chance = probability_single(gain, area=scan.area * growth**2, rim=scan.rim * growth)
    return Sighting(tuple(cutouts), single, double, gain, chance, alone.neighbours, alone.place)


def _views(
    observations: Sequence[Observation], alone: Sighting
) -> tuple[list[View | None], list[float]]:
    """How each frame sees the surroundings of a star, and the light that it adds.

    Where the star shows well in a frame by itself, the frame is put in register by it.
    """
    first, star = observations[0], alone.single
    x, y = (float(value) for value in star.places[0])
    seen = _shows(star)
    views: list[View | None] = [FIRST]
    weights = [max(float(star.electrons[0]), 1.0)]
    for number, observation in enumerate(observations[1:], start=1):
        view = frame_view(number, (x, y), first.frame, observation.frame)
        if view is None or not observation.holds(*view.place(x, y)):
            views.append(None)
            weights.append(0.0)
            continue
        here = _star_near(observation, view.place(x, y))
        light = weights[0] * observation.gain / first.gain
        if here is not None and seen:
            offset = here.places[0] - np.array(view.place(x, y))
            light = float(here.electrons[0])
            view = replace(view, origin=frozen(view.origin + offset), factor=light / weights[0])
        else:
            view = replace(view, factor=light / weights[0], free=False)
        views.append(view)
        weights.append(light)
    return views, weights


def _shows(fit: StarFit) -> bool:
    return bool(float(fit.electrons[0]) > _SEEN * float(np.sqrt(fit.covariance[2, 2])))


def _star_near(observation: Observation, place: Place) -> StarFit | None:
    """The star nearest to where one is expected; None where none shows well."""
    reach = _REGISTER * observation.fwhm
    cutout = observation.cutout(*place, reach + 2.0 * observation.fwhm)
    if cutout.used.sum() < 9:
        return None
    fit = fit_stars([cutout], places=[locate(cutout, place, reach)])
    away = hypot(*(fit.places[0] - np.array(place)))
    return fit if _shows(fit) and away <= 1.5 * reach else None


def _cutouts(
    observation: Observation, view: View, stars: Sequence[PlacedStar], other: Place | None
) -> list[Cutout]:
    """What a frame shows about a pair, the light of neighbours allowed for."""
    fwhm = observation.fwhm
    here = [PlacedStar(*view.place(star.x, star.y), star.electrons * view.factor) for star in stars]
    half = (CLEAR + 2.0 * _MARGIN) * fwhm
    neighbours = find_neighbours(observation, here, half=half)
    if other is None:
        middle = np.mean([star[:2] for star in here], axis=0)
        spread = max(hypot(*(np.array(star[:2]) - middle)) for star in here)
        x, y = float(middle[0]), float(middle[1])
        cut = [observation.cutout(x, y, (CLEAR + _MARGIN) * fwhm + spread)]
    else:
        margin = _MARGIN * fwhm
        cut = observation.cutouts(here[0][:2], view.place(*other), margin)
    return [replace(cutout.with_known(star_light(neighbours, cutout)), view=view) for cutout in cut]
