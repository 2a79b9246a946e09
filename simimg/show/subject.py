"""What a figure is about: the pair whose stars are to be told apart, or the brightest object.

Places and lengths in pixels, from 0 at the centre of the first pixel; directions in radians from
the detector's +x towards its +y.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, cos, floor, isfinite, radians, sin
from typing import TYPE_CHECKING, Any

import numpy as np

from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.show.compass import Compass, frame_compass
from simimg.show.signal import Light

if TYPE_CHECKING:
    from simimg.resolving.records import PairMeasurement

_POINT_FWHMS = 4.0  # from a star to the end of its strip
_PLAIN_REACH = 16.0  # pixels, where neither PSF nor size is known
_LONGEST = 3  # sides of a panel, longer over shorter
# How far an object's strip reaches, in what unit of size, and where its axis lies from its
# position angle.
_EXTENTS: dict[str, tuple[str, float, float]] = {
    "galaxy": ("effective_radius", 3.0, 0.0),
    "disc": ("diameter", 1.5, 0.0),
    "ring": ("outer_diameter", 0.75, 0.0),
    "picture": ("width", 0.5, 90.0),
}


@dataclass(frozen=True, eq=False)
class Subject:
    """What a figure is about.

    Attributes
    ----------
    kind : str
        "pair", an object's kind, or "source" for the brightest of an unknown frame.
    label : str
    x, y : float
        Origin of the strip: the first star, or the object's centre.
    second : (float, float) or None
        Place of a pair's second star.
    angle : float
        Direction of the strip.
    position_angle : float or None
        The same on the sky, degrees, north through east.
    reach : float
        From the origin (a pair: from either star) to the end of the strip.
    compass : Compass
        Directions and scale there.
    window : (int, int, int, int)
        First and past-the-last column and row of the picture.
    row : int
        Row of the object in TRUTH; -1 where it has none.
    measurement : PairMeasurement or None
    """

    kind: str
    label: str
    x: float
    y: float
    second: tuple[float, float] | None
    angle: float
    position_angle: float | None
    reach: float
    compass: Compass
    window: tuple[int, int, int, int]
    row: int
    measurement: PairMeasurement | None


def choose_pair(pairs: Sequence[PairMeasurement], pair: str | int | None) -> PairMeasurement | None:
    """The measurement that a figure shows: the first, or the one of a label or a number from 0.

    Raises
    ------
    InputError
        No such pair.
    """
    if pair is None:
        return pairs[0] if pairs else None
    labels = [one.label for one in pairs]
    if isinstance(pair, int) and 0 <= pair < len(pairs):
        return pairs[pair]
    if isinstance(pair, str) and pair in labels:
        return pairs[labels.index(pair)]
    known = ", ".join(labels[:12]) or "none"
    raise InputError(mistake("figure", "pair", f"no pair {pair!r}", f"the frame has: {known}"))


def has_pairs(frame: Frame) -> bool:
    """Whether the frame's truth names a pair."""
    return frame.truth is not None and bool(np.any(np.asarray(frame.truth["kind"]) == "pair"))


def pair_subject(frame: Frame, measurement: PairMeasurement, *, fwhm: float | None) -> Subject:
    """The subject of a measured pair (or of one star, where no second was found).

    Parameters
    ----------
    fwhm : float or None
        Of the PSF (pixels); None where it is not known.
    """
    x, y = float(measurement.x), float(measurement.y)
    compass = frame_compass(frame, x, y)
    position_angle = float(measurement.position_angle_deg)
    separation = float(measurement.separation_arcsec) / (compass.scale or 1.0)
    double = isfinite(position_angle) and isfinite(separation)
    angle = compass.direction(radians(position_angle)) if double else 0.0
    second = (x + separation * cos(angle), y + separation * sin(angle)) if double else None
    reach = _POINT_FWHMS * fwhm if fwhm is not None else _PLAIN_REACH
    centre = (x, y) if second is None else (0.5 * (x + second[0]), 0.5 * (y + second[1]))
    half = max(reach, 6.0) + (0.5 * separation if double else 0.0)
    return Subject(
        kind="pair",
        label=measurement.label or f"pair at {x:.1f}, {y:.1f}",
        x=x,
        y=y,
        second=second,
        angle=angle,
        position_angle=position_angle if double else None,
        reach=max(reach, 6.0),
        compass=compass,
        window=_window(frame, centre, half),
        row=_truth_row(frame, measurement.label),
        measurement=measurement,
    )


def brightest_subject(frame: Frame, light: Light, *, fwhm: float | None) -> Subject:
    """The brightest object that the truth of a frame has inside it, or its brightest pixel."""
    point_reach = _POINT_FWHMS * fwhm if fwhm is not None else _PLAIN_REACH
    row = _brightest_row(frame)
    if frame.truth is None or row < 0:
        shown = np.where(np.isfinite(light.values), light.values, -np.inf)
        y, x = (float(i) for i in np.unravel_index(int(np.argmax(shown)), shown.shape))
        return Subject(
            kind="source",
            label="brightest pixel",
            x=x,
            y=y,
            second=None,
            angle=0.0,
            position_angle=None,
            reach=point_reach,
            compass=frame_compass(frame, x, y),
            window=_most_of(frame, (x, y)),
            row=-1,
            measurement=None,
        )
    one: Any = frame.truth[row]
    x, y, kind = float(one["x"]), float(one["y"]), str(one["kind"])
    compass = frame_compass(frame, x, y)
    angle, position_angle, reach = 0.0, None, point_reach
    if kind in _EXTENTS and compass.scale is not None:
        size, factor, turn = _EXTENTS[kind]
        position_angle = (float(one["position_angle"]) + turn) % 360.0
        angle = compass.direction(radians(position_angle))
        reach += factor * float(one[size]) / compass.scale
        if kind == "picture":
            reach = max(reach - point_reach, point_reach)
    return Subject(
        kind=kind,
        label=str(one["label"]),
        x=x,
        y=y,
        second=None,
        angle=angle,
        position_angle=position_angle,
        reach=reach,
        compass=compass,
        window=_most_of(frame, (x, y)),
        row=row,
        measurement=None,
    )


def shows_field(frame: Frame) -> bool:
    """Whether a frame's brightest object is a star: many sources then, rather than one shape."""
    row = _brightest_row(frame)
    return frame.truth is None or row < 0 or str(frame.truth["kind"][row]) in ("star", "pair")


def _brightest_row(frame: Frame) -> int:
    """Row of the object that gives the frame the most light; -1 where there is none in it."""
    if frame.truth is None or len(frame.truth) == 0:
        return -1
    light = np.asarray(frame.truth["electrons_in_frame"], dtype=np.float64)
    inside = np.asarray(frame.truth["inside"], dtype=bool) & np.isfinite(light)
    if not inside.any():
        return -1
    return int(np.argmax(np.where(inside, light, -np.inf)))


def _truth_row(frame: Frame, label: str) -> int:
    """First row of a label in the truth; -1 where there is none."""
    if frame.truth is None:
        return -1
    found = np.flatnonzero(np.asarray(frame.truth["label"]).astype(str) == label)
    return int(found[0]) if found.size else -1


def _most_of(frame: Frame, centre: tuple[float, float]) -> tuple[int, int, int, int]:
    """The whole frame, or of a long and narrow one what a panel has room for."""
    rows, columns = frame.counts.shape
    side = _LONGEST * min(rows, columns)
    left, right = _about(centre[0], min(columns, side), columns)
    bottom, top = _about(centre[1], min(rows, side), rows)
    return left, right, bottom, top


def _about(place: float, side: int, size: int) -> tuple[int, int]:
    """First and past-the-last pixel of a stretch about a place, pushed into the frame."""
    first = min(max(floor(place + 0.5) - side // 2, 0), size - side)
    return first, first + side


def _window(frame: Frame, centre: tuple[float, float], half: float) -> tuple[int, int, int, int]:
    """A square window about a place, pushed into the frame and cut where it is too large."""
    rows, columns = frame.counts.shape
    side = 2 * ceil(half) + 1
    left, right = _about(centre[0], min(side, columns), columns)
    bottom, top = _about(centre[1], min(side, rows), rows)
    return left, right, bottom, top
