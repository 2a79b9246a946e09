"""measure: what a frame says of its pairs, as an observer would find it out.

The pairs that a simulated frame's TRUTH names are measured as if they were unknown: TRUTH says
where to look and which star is called the first, and is quoted beside the answer. Places given by
the user are measured one record each, single or not; and a frame can be searched for pairs. Frames
that simimg did not make are measured alike: `simimg.resolving.observation` says with what.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot, isfinite, log10, nan
from typing import Any

from simimg.arrays import AnyArray
from simimg.errors import InputError, mistake
from simimg.frame import Frame, PsfImage
from simimg.resolving.advice import advise
from simimg.resolving.asked import as_choice, as_frame
from simimg.resolving.fieldcheck import confirmed
from simimg.resolving.finding import search_field
from simimg.resolving.given import Given
from simimg.resolving.judging import NamedPair, judge
from simimg.resolving.observation import Observation, observe
from simimg.resolving.ownpsfs import OwnPsfs
from simimg.resolving.pairlimits import Cuts, PairLimits
from simimg.resolving.psfquality import PsfReport, judge_psf, psf_warnings
from simimg.resolving.psfsource import PsfChoice
from simimg.resolving.records import PairMeasurement, PairTruth, SingleMeasurement
from simimg.resolving.sighting import Sighting, look
from simimg.resolving.singlerecords import single_records

Place = tuple[float, float]
_Seen = tuple[Sighting, NamedPair | None]
_ADVISED = 16  # pairs for which it is worked out what would resolve them


@dataclass(frozen=True, kw_only=True)
class FrameMeasurement:
    """All that a frame says.

    Attributes
    ----------
    pairs : tuple of PairMeasurement
        TRUTH's pairs and the places given, in order, then what was found.
    psf : PsfReport
    warnings : tuple of str
        What was assumed, and what is not to be trusted.
    singles : tuple of SingleMeasurement
        What was found and is no pair, by decreasing brightness.
    """

    pairs: tuple[PairMeasurement, ...]
    psf: PsfReport
    warnings: tuple[str, ...]
    singles: tuple[SingleMeasurement, ...] = ()


def measure(
    image: Frame | AnyArray,
    *,
    near: Sequence[Place] | None = None,
    psf: PsfImage | AnyArray | str | None = None,
    psf_oversampling: int = 1,
    psf_stars: Sequence[Place] = (),
    gain: float | None = None,
    read_noise: float | None = None,
    pixel_scale_arcsec: float | None = None,
    saturation: float | None = None,
    bias: float | None = None,
    mask: AnyArray | None = None,
) -> list[PairMeasurement]:
    """Measure the pairs of a frame.

    Parameters
    ----------
    image : Frame or array_like, shape (rows, columns)
        Of simimg, whose scene tells PSF, noise and limits; or of anyone.
    near : sequence of (x, y), optional
        Places to measure, pixels from 0 at the centre of the first pixel; one record for each, in
        order, single or not. Without it the pairs of TRUTH that lie in the frame are measured; and
        where TRUTH names none, what is found.
    psf : PsfImage, array_like or str, optional
        The effective PSF as an image (optics, air and pixel, the star in the middle), or where it
        is to come from: "scene", "extension" or "profile" (a Moffat profile of the frame's single
        stars). By default the first of these that there is.
    psf_oversampling : int, optional
        Samples to the pixel of `psf`, where it is an array.
    psf_stars : sequence of (x, y), optional
        Single stars that the PSF is to be measured from.
    gain : float, optional
        Electrons to the count. This and what follows goes before the header.
    read_noise : float, optional
        Electrons.
    pixel_scale_arcsec : float, optional
        Side of a pixel.
    saturation, bias : float, optional
        Counts of a full pixel, and of one without electrons.
    mask : array_like of bool, optional
        True for pixels that do not count.

    Returns
    -------
    list of PairMeasurement

    Raises
    ------
    InputError
        A place off the frame, no pixel scale, no PSF to be had, or what is no image.
    """
    frame = as_frame(image, mask=mask)
    given = Given(
        gain=gain,
        read_noise=read_noise,
        pixel_scale_arcsec=pixel_scale_arcsec,
        saturation=saturation,
        bias=bias,
    )
    choice = as_choice(psf, oversampling=psf_oversampling, stars=psf_stars)
    named = [] if near is not None else named_pairs(frame)
    observation = _observe(frame, near or (), named, given=given, psf=choice)
    own = OwnPsfs(observation)
    if near is None and not named:
        found = confirmed(own, search_field(observation, singles=False, psf_at=own.psf_at))
        return _records(own, [(sighting, None) for sighting in found.pairs])
    return _records(own, [*_named(own, named), *_placed(own, near or ())])


def measure_all(frame: Frame, *, near: Sequence[Place] | None = None) -> list[PairMeasurement]:
    """Measure the pairs of TRUTH and every place given, in order, then what is found besides.

    Parameters, errors and records as for `measure`.
    """
    return list(measure_frame(frame, near=near).pairs)


def measure_frame(
    frame: Frame,
    *,
    near: Sequence[Place] | None = None,
    given: Given | None = None,
    psf: PsfChoice | None = None,
    workers: int = 1,
) -> FrameMeasurement:
    """Measure the pairs of TRUTH and every place given, then what is found; judge the PSF.

    Parameters
    ----------
    frame : Frame
    near : sequence of (x, y), optional
    given : Given, optional
        What goes before the frame's own header.
    psf : PsfChoice, optional
        Where the PSF is to come from.
    workers : int, optional
        Processes at most for a field of many stars; the result does not depend on it.

    Raises
    ------
    InputError
        As for `measure`.
    """
    places = list(near or ())
    named = named_pairs(frame)
    observation = _observe(frame, places, named, given=given, psf=psf)
    besides = [*places, *_places(named)]
    own = OwnPsfs(observation)
    field = search_field(observation, besides=besides, workers=workers, psf_at=own.psf_at)
    field = confirmed(own, field)
    seen: list[_Seen] = [
        *_named(own, named),
        *_placed(own, places),
        *((sighting, None) for sighting in field.pairs),
    ]
    records = _records(own, seen)
    quality = judge_psf(observation, apart=besides)
    names = [record.label or f"x {record.x:.5g}, y {record.y:.5g}" for record in records]
    doubts = psf_warnings(
        observation, quality, [(name, one) for name, (one, _) in zip(names, seen)]
    )
    return FrameMeasurement(
        pairs=tuple(records),
        psf=quality.report,
        warnings=(*observation.notes, *own.notes(named), *doubts),
        singles=single_records(observation, field.singles, quality=quality),
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


def _places(named: Sequence[NamedPair]) -> list[Place]:
    return [place for pair in named for place in (pair.first, pair.second)]


def _observe(
    frame: Frame,
    places: Sequence[Place],
    named: Sequence[NamedPair],
    *,
    given: Given | None = None,
    psf: PsfChoice | None = None,
) -> Observation:
    """The frame's observation, its PSF wide enough for the widest pair; places checked."""
    widest = max(
        (hypot(p.second[0] - p.first[0], p.second[1] - p.first[1]) for p in named), default=0.0
    )
    checked_places(frame, places)
    apart = [*places, *_places(named)]
    return observe(frame, widest=widest, given=given, psf=psf, apart=apart)


def checked_places(frame: Frame, places: Sequence[Place]) -> list[Place]:
    """The places, all of them on the frame.

    Raises
    ------
    InputError
        One line for each that is not.
    """
    rows, columns = frame.counts.shape
    lines = [
        mistake(
            "frame",
            "near",
            f"the place {x:g},{y:g} is not on the frame",
            f"write x from 0 to {columns - 1} and y from 0 to {rows - 1}",
        )
        for x, y in places
        if not (
            isfinite(x) and isfinite(y) and -0.5 <= x <= columns - 0.5 and -0.5 <= y <= rows - 0.5
        )
    ]
    if lines:
        raise InputError(*lines)
    return list(places)


def _named(own: OwnPsfs, named: Sequence[NamedPair]) -> list[_Seen]:
    return [(look(own.pair(pair), pair.first, other=pair.second), pair) for pair in named]


def _placed(own: OwnPsfs, places: Sequence[Place]) -> list[_Seen]:
    return [(look(own.place(place), place), None) for place in places]


def _records(own: OwnPsfs, seen: Sequence[_Seen]) -> list[PairMeasurement]:
    """Judge what was seen; where there is much of it, with brief advice."""
    limits: dict[Cuts, PairLimits] = {}
    records = []
    for sighting, pair in seen:
        observation = own.of(sighting.cutouts[0].psf)
        cuts = observation.delivered
        if cuts not in limits:
            limits[cuts] = PairLimits(cuts, pairs=len(seen))
        judgement = judge(observation, sighting, limits[cuts], named=pair)
        advice = advise(observation, judgement, brief=len(seen) > _ADVISED)
        records.append(replace(judgement.record, advice=advice))
    return records
