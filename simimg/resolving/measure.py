"""measure: what a frame says of its pairs, as an observer would find it out.

The pairs that a simulated frame's TRUTH names are measured as if they were unknown: TRUTH says
where to look and which star is called the first, and is quoted beside the answer. Places given by
the user are measured one record each, single or not; and a frame can be searched for pairs.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from math import hypot, isfinite, log10, nan
from typing import Any

from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.resolving.advice import advise
from simimg.resolving.judging import NamedPair, judge
from simimg.resolving.observation import Observation, observe
from simimg.resolving.pairlimits import PairLimits
from simimg.resolving.records import PairMeasurement, PairTruth
from simimg.resolving.sighting import Sighting, look

Place = tuple[float, float]
_Seen = tuple[Sighting, NamedPair | None]
_ADVISED = 16  # pairs for which it is worked out what would resolve them


def measure(frame: Frame, *, near: Sequence[Place] | None = None) -> list[PairMeasurement]:
    """Measure the pairs of a frame.

    Parameters
    ----------
    frame : Frame
        Made by simimg: its scene tells the PSF, the noise and the limits.
    near : sequence of (x, y), optional
        Places to measure, pixels from 0 at the centre of the first pixel; one record for each, in
        order, single or not. Without it the pairs of TRUTH that lie in the frame are measured; and
        where TRUTH names none, what is found.

    Returns
    -------
    list of PairMeasurement

    Raises
    ------
    InputError
        A frame without a scene, or a place off the frame.
    """
    named = [] if near is not None else named_pairs(frame)
    observation = _observe(frame, near or (), named)
    if near is None and not named:
        return _records(observation, _found(observation))
    return _records(observation, [*_named(observation, named), *_placed(observation, near or ())])


def measure_all(frame: Frame, *, near: Sequence[Place] | None = None) -> list[PairMeasurement]:
    """Measure the pairs of TRUTH and every place given, in order, then what is found besides.

    Parameters, errors and records as for `measure`.
    """
    places = list(near or ())
    named = named_pairs(frame)
    observation = _observe(frame, places, named)
    besides = [*places, *(place for pair in named for place in (pair.first, pair.second))]
    return _records(
        observation,
        [
            *_named(observation, named),
            *_placed(observation, places),
            *_found(observation, besides),
        ],
    )


def named_pairs(frame: Frame) -> list[NamedPair]:
    """List the pairs that a frame's TRUTH names and whose two stars lie in the frame."""
    table: Any = frame.truth
    if table is None or not {"kind", "partner", "x", "y", "separation"} <= set(table.colnames):
        return []
    rows, columns = frame.counts.shape
    pairs = []
    for row in range(len(table)):
        partner = int(table["partner"][row])
        if str(table["kind"][row]) != "pair" or not row < partner < len(table):
            continue
        places = [(float(table["x"][i]), float(table["y"][i])) for i in (row, partner)]
        if not all(-0.5 <= x <= columns - 0.5 and -0.5 <= y <= rows - 0.5 for x, y in places):
            continue
        light = [float(table["electrons"][i]) for i in (row, partner)]
        pairs.append(
            NamedPair(
                label=str(table["label"][row]),
                first=places[0],
                second=places[1],
                truth=PairTruth(
                    separation_arcsec=float(table["separation"][row]),
                    position_angle_deg=float(table["position_angle"][row]),
                    magnitude_difference=_magnitudes(*light),
                ),
            )
        )
    return pairs


def _magnitudes(first: float, second: float) -> float:
    return -2.5 * log10(second / first) if first > 0.0 and second > 0.0 else nan


def _observe(frame: Frame, places: Sequence[Place], named: Sequence[NamedPair]) -> Observation:
    """The frame's observation, its PSF wide enough for the widest pair; places checked."""
    widest = max(
        (hypot(p.second[0] - p.first[0], p.second[1] - p.first[1]) for p in named), default=0.0
    )
    observation = observe(frame, widest=widest)
    rows, columns = frame.counts.shape
    lines = [
        mistake(
            "frame",
            "near",
            f"the place {x:g},{y:g} is not on the frame",
            f"write x from 0 to {columns - 1} and y from 0 to {rows - 1}",
        )
        for x, y in places
        if not (isfinite(x) and isfinite(y) and observation.holds(x, y))
    ]
    if lines:
        raise InputError(*lines)
    return observation


def _named(observation: Observation, named: Sequence[NamedPair]) -> list[_Seen]:
    return [(look(observation, pair.first, other=pair.second), pair) for pair in named]


def _placed(observation: Observation, places: Sequence[Place]) -> list[_Seen]:
    return [(look(observation, place), None) for place in places]


def _found(observation: Observation, besides: Sequence[Place] = ()) -> list[_Seen]:
    from simimg.resolving.finding import find_pairs

    return [(sighting, None) for sighting in find_pairs(observation, besides=besides)]


def _records(observation: Observation, seen: Sequence[_Seen]) -> list[PairMeasurement]:
    """Judge what was seen; where there is much of it, with brief advice."""
    limits = PairLimits(observation.delivered, pairs=len(seen))
    records = []
    for sighting, pair in seen:
        judgement = judge(observation, sighting, limits, named=pair)
        advice = advise(observation, judgement, brief=len(seen) > _ADVISED)
        records.append(replace(judgement.record, advice=advice))
    return records
