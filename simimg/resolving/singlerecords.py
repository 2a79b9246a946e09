"""Records of single objects: of one frame, or of several frames of a field together.

Several frames add what they know of an object: its electrons, brought to the first frame's scale
by the objects that both show, and its intrinsic variance are means weighted by their errors, and
what the frames' likelihoods win by that variance is the sum of what each wins, less what they
disagree (to second order the joint fit, as the frames' noise is independent). Electrons of the
first frame, arcseconds, pixels of the first frame.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import copysign, hypot, inf, sqrt
from typing import Any

import numpy as np
from scipy.spatial import cKDTree

from simimg.arrays import AnyArray
from simimg.resolving.alignment import transferred
from simimg.resolving.fieldsingles import SingleStar
from simimg.resolving.neighbours import CLEAR
from simimg.resolving.observation import Observation
from simimg.resolving.psfquality import PsfQuality, star_power
from simimg.resolving.records import SingleMeasurement
from simimg.resolving.width import EXTENDED

Place = tuple[float, float]


@dataclass(frozen=True)
class Seen:
    """What one frame knows of a single object.

    Attributes
    ----------
    place : (x, y)
        Pixels of the first frame.
    point, wide : (float, float)
        Electrons and their error, as a point and with a width.
    variance, error : float
        Intrinsic variance along each axis and its error, square arcseconds.
    significance : float
        Of that variance, standard deviations.
    misfit : float
        Deviance that the PSF itself may leave.
    """

    place: Place
    point: tuple[float, float]
    wide: tuple[float, float]
    variance: float
    error: float
    significance: float
    misfit: float


def single_records(
    observation: Observation, stars: Sequence[SingleStar], *, quality: PsfQuality
) -> tuple[SingleMeasurement, ...]:
    """Turn fitted single stars of a frame into records, with TRUTH's labels.

    Parameters
    ----------
    observation : Observation
    stars : sequence of SingleStar
    quality : PsfQuality
        Tells what the PSF itself leaves in a star.
    """
    label = _labels(observation)
    return tuple(_record([seen(observation, star, quality=quality)], label) for star in stars)


def seen(observation: Observation, star: SingleStar, *, quality: PsfQuality) -> Seen:
    """What a frame, for the time being the first, knows of a single object."""
    light, background = float(star.point.electrons[0]), float(star.point.background[0])
    wide, scale, excess = star.wide, observation.arcsec**2, observation.excess
    place = wide.place if wide.extended else star.point.places[0]
    error = float(np.sqrt(star.point.covariance[2, 2]))
    floor = quality.floor_at(place, observation.sourced)
    return Seen(
        place=(float(place[0]), float(place[1])),
        point=(light * excess, error * excess),
        wide=(wide.electrons * excess, wide.electrons_error * excess),
        variance=wide.variance * scale,
        error=wide.variance_error * scale,
        significance=wide.significance,
        misfit=floor * star_power(observation, light, background),
    )


def joint_singles(
    observations: Sequence[Observation],
    stars: Sequence[Sequence[SingleStar]],
    *,
    qualities: Sequence[PsfQuality],
    apart: Sequence[Place],
) -> tuple[SingleMeasurement, ...]:
    """Records of the single objects of a field, from all its frames.

    Parameters
    ----------
    observations : sequence of Observation
    stars : sequence of sequence of SingleStar
        Of each frame.
    qualities : sequence of PsfQuality
        Of each frame's PSF.
    apart : sequence of (x, y)
        Places of pairs in the first frame: what one frame takes for single there is none.
    """
    first = observations[0]
    objects: list[dict[int, Seen]] = []
    for number, (observation, found, quality) in enumerate(zip(observations, stars, qualities)):
        tree = cKDTree([next(iter(one.values())).place for one in objects]) if objects else None
        for star in found:
            one = seen(observation, star, quality=quality)
            place = transferred(one.place, observation.frame, first.frame)
            if place is None or any(
                hypot(place[0] - x, place[1] - y) < CLEAR * first.fwhm for x, y in apart
            ):
                continue
            away, index = (inf, -1) if tree is None else tree.query(place)
            if away < first.fwhm and number not in objects[int(index)]:
                objects[int(index)][number] = one
            else:
                objects.append({number: _moved(one, place)})
    scales = [1.0, *(_scale(objects, number) for number in range(1, len(observations)))]
    label = _labels(first)
    records = [
        _record([_dimmed(one, scales[number]) for number, one in seen_by.items()], label)
        for seen_by in objects
    ]
    return tuple(sorted(records, key=lambda record: -record.electrons))


def _moved(one: Seen, place: Place) -> Seen:
    return Seen(**{**vars(one), "place": place})


def _dimmed(one: Seen, scale: float) -> Seen:
    """In electrons of the first frame."""
    point, wide = ((a / scale, b / scale) for a, b in (one.point, one.wide))
    return Seen(**{**vars(one), "point": point, "wide": wide})


def _scale(objects: Sequence[dict[int, Seen]], number: int) -> float:
    """Electrons in a frame for each in the first, by what both show."""
    both = [(one[0].point[0], one[number].point[0]) for one in objects if {0, number} <= set(one)]
    light = sum(a for a, _ in both)
    return sum(b for _, b in both) / light if light > 0.0 else 1.0


def _record(seen_by: Sequence[Seen], label: Callable[[Place], str]) -> SingleMeasurement:
    """One object from the frames that show it."""
    variance, error = _mean([(one.variance, one.error) for one in seen_by])
    apart = sum(((one.variance - variance) / one.error) ** 2 for one in seen_by)
    gain = sum(one.significance * abs(one.significance) for one in seen_by)
    if len(seen_by) > 1:
        gain = copysign(max(0.0, sum(one.significance**2 for one in seen_by) - apart), variance)
    misfit = sum(one.misfit for one in seen_by)
    # What the PSF leaves shifts the statistic; its noise comes on top.
    extended = gain > (EXTENDED + sqrt(misfit)) ** 2
    light, light_error = _mean([one.wide if extended else one.point for one in seen_by])
    held = max(variance, 0.0)
    return SingleMeasurement(
        x=seen_by[0].place[0],
        y=seen_by[0].place[1],
        electrons=light,
        electrons_error=light_error,
        verdict="extended" if extended else "point",
        width_arcsec=sqrt(held),
        width_error_arcsec=sqrt(held + error) - sqrt(held),
        label=label(seen_by[0].place),
    )


def _mean(values: Sequence[tuple[float, float]]) -> tuple[float, float]:
    """Mean of values weighted by their errors, and its error."""
    if len(values) == 1:
        return values[0]
    weights = [error**-2 for _, error in values]
    total = sum(weights)
    return sum(w * value for w, (value, _) in zip(weights, values)) / total, total**-0.5


def _nameless(_: Place) -> str:
    return ""


def _labels(observation: Observation) -> Callable[[Place], str]:
    """The label that TRUTH gives what stands at a place; empty where it names nothing."""
    table: Any = observation.frame.truth
    if table is None or not len(table) or not {"label", "x", "y"} <= set(table.colnames):
        return _nameless
    at: AnyArray = np.column_stack([np.asarray(table["x"]), np.asarray(table["y"])])
    finite = np.flatnonzero(np.isfinite(at).all(axis=1))
    if not finite.size:
        return _nameless
    tree, reach = cKDTree(at[finite]), 0.5 * observation.fwhm

    def label(place: Place) -> str:
        away, nearest = tree.query(place)
        return str(table["label"][int(finite[int(nearest)])]) if away < reach else ""

    return label
