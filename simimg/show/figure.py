"""The proposal figure: a frame, the profile along its pair's axis, and a caption with the verdict.

On request the frame stands beside a restored view of itself, with the profile below. Sized for two
columns of a page (180 mm) unless another width is asked for; below 170 mm the panels stand over one
another. PNG, PDF or SVG; the same frame gives the same bytes.
"""

from __future__ import annotations

import os
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from simimg.frame import Frame
from simimg.show.canvas import (
    PAGE,
    TWO_ABREAST,
    check_width,
    drawable,
    figure_format,
    look,
    save,
    sheet,
)
from simimg.show.caption import figure_caption, panel_titles
from simimg.show.framepanel import draw_frame
from simimg.show.profile import Profile, subject_profile
from simimg.show.profilepanel import draw_profile
from simimg.show.restored import REMARK, Restored, draw_restored, restore
from simimg.show.setup import Setup, frame_setup
from simimg.show.signal import Light, frame_light
from simimg.show.subject import (
    Subject,
    brightest_subject,
    choose_pair,
    has_pairs,
    pair_subject,
)

if TYPE_CHECKING:
    from simimg.resolving.records import PairMeasurement
    from simimg.study.tally import Tally

_LEFT, _RIGHT, _LOW, _HIGH = 13.0, 2.0, 11.0, 10.0  # margins of the page, mm: labels and titles
_BAR = 23.0  # to the right of a frame: its colour bar, mm
_AXIS = 15.0  # to the left of a profile: its labels, mm
_BETWEEN = _LOW + _HIGH + 1.0  # panels over one another, mm
_WIDEST = 90.0  # side of a frame that stands over its profile, mm
_LEAST = 46.0  # of a profile's height, mm: its labels need so much
_RESIDUAL = 13.0  # of the profile's height, mm

_Box = tuple[float, float, float, float]


@dataclass(frozen=True)
class _Page:
    """Where the panels stand: left, bottom, width, height in mm."""

    width: float
    height: float
    plate: _Box
    profile: _Box
    restored: _Box | None = None


def _page(width: float, *, restored: bool) -> _Page:
    """The places of the panels on a page of a width (mm)."""
    if width < TWO_ABREAST:
        side = min(width - _LEFT - _BAR, _WIDEST)
        tall = max(0.8 * side, _LEAST)
        left = _AXIS + 2.0
        profile = (left, _LOW, width - left - _RIGHT, tall)
        steps = [_LOW + tall + _BETWEEN + number * (side + _BETWEEN) for number in range(2)]
        boxes = [(_LEFT, bottom, side, side) for bottom in steps[::-1]]
        if not restored:
            return _Page(width, steps[0] + side + _HIGH, boxes[1], profile)
        return _Page(width, steps[1] + side + _HIGH, boxes[0], profile, boxes[1])
    if not restored:
        # A frame takes as much of the page as a profile does.
        side = 0.5 * (width - _LEFT - _BAR - _AXIS - _RIGHT)
        plate = (_LEFT, _LOW, side, side)
        right = width - side - _RIGHT
        return _Page(width, _LOW + side + _HIGH, plate, (right, _LOW, side, side))
    side = 0.5 * width - _LEFT - _BAR
    tall = 0.8 * side
    bottom = _LOW + tall + _BETWEEN
    return _Page(
        width,
        bottom + side + _HIGH,
        (_LEFT, bottom, side, side),
        (_AXIS, _LOW, width - _AXIS - _RIGHT, tall),
        (0.5 * width + _LEFT, bottom, side, side),
    )


def write_figure(
    frame: Frame,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    pair: str | int | None = None,
    measurement: PairMeasurement | None = None,
    restored: int | None = None,
    trials: Tally | None = None,
    width: float = PAGE,
) -> str:
    """Draw a frame and the profile along its pair's axis, and write the figure to a file.

    Parameters
    ----------
    frame : Frame
    path : path
        Ends in .png, .pdf or .svg.
    overwrite : bool, optional
        Whether a file of that name may be replaced.
    pair : str or int, optional
        Label or number (from 0) of the measured pair to show; the first unless given. A frame
        whose truth names no pair is shown whole, with a profile of its brightest object.
    measurement : PairMeasurement, optional
        What `simimg.measure` said of the pair; measured here unless given.
    restored : int, optional
        Iterations of a restored view beside the frame; none unless given.
    trials : Tally, optional
        What many noise draws say of the pair; the caption then gives the probability of a split,
        which one draw does not tell.
    width : float, optional
        Of the figure, 80 to 400 mm; two columns of a page unless given.

    Returns
    -------
    str
        The caption: the set-up, what is drawn, and the verdict.

    Raises
    ------
    InputError
        Another ending, a file that exists or cannot be written, no such pair; a restored view of a
        frame whose PSF is not to be had.
    RunError
        The system refused; no part of the file is left behind.
    ValueError
        A width that is out of range.
    """
    check_width(width)
    file_format = figure_format(path, overwrite=overwrite)
    light, subject, profile, setup = figure_parts(frame, pair=pair, measurement=measurement)
    view = None if restored is None else restore(frame, subject, iterations=restored)
    caption = figure_caption(
        frame,
        subject,
        profile,
        setup,
        iterations=restored,
        remark="" if view is None else REMARK,
        over=width < TWO_ABREAST,
        trials=trials,
    )
    with look():
        figure = draw_figure(frame, light, subject, profile, view, width=width)
        title = ("Simulated: " if frame.simulated else "") + (str(frame.value("OBJECT") or "frame"))
        save(
            figure,
            path,
            format=file_format,
            title=drawable(title, longest=200),
            description=caption,
            overwrite=overwrite,
        )
    return caption


def figure_parts(
    frame: Frame,
    *,
    pair: str | int | None = None,
    measurement: PairMeasurement | None = None,
) -> tuple[Light, Subject, Profile, Setup | None]:
    """What a figure shows, worked out: arguments as for `write_figure`."""
    setup, light = frame_setup(frame), frame_light(frame)
    if measurement is None and (pair is not None or has_pairs(frame)):
        from simimg.resolving.measure import measure

        measurement = choose_pair(measure(frame), pair)
    fwhm = None if setup is None else setup.psf_fwhm(0.0)
    if measurement is not None:
        subject = pair_subject(frame, measurement, fwhm=fwhm)
    else:
        subject = brightest_subject(frame, light, fwhm=fwhm)
    return light, subject, subject_profile(frame, light, subject, setup), setup


def draw_figure(
    frame: Frame,
    light: Light,
    subject: Subject,
    profile: Profile,
    restored: Restored | None = None,
    *,
    width: float = PAGE,
) -> Any:
    """The figure as a matplotlib object; to be called within `simimg.show.canvas.look`."""
    page = _page(width, restored=restored is not None)
    figure = sheet(page.width, page.height)

    def panel(left: float, bottom: float, wide: float, tall: float) -> Any:
        place = (left / page.width, bottom / page.height, wide / page.width, tall / page.height)
        return figure.add_axes(place)

    left_title, right_title = panel_titles(frame, subject)
    plate = panel(*page.plate)
    plate.set_anchor("W")
    draw_frame(plate, light, subject, profile, simulated=frame.simulated)
    plate.set_title(left_title, loc="left", parse_math=False)
    if restored is not None and page.restored is not None:
        sharp = panel(*page.restored)
        sharp.set_anchor("W")
        draw_restored(sharp, restored, subject, simulated=frame.simulated)
        sharp.set_title(f"Richardson-Lucy, {restored.iterations} iterations:\n{REMARK}", loc="left")
    left, bottom, wide, tall = page.profile
    if profile.residuals is None:
        upper, below = panel(left, bottom, wide, tall), None
    else:
        below = panel(left, bottom, wide, _RESIDUAL)
        gap = 1.5
        upper = panel(left, bottom + _RESIDUAL + gap, wide, tall - _RESIDUAL - gap)
    draw_profile(upper, below, profile, subject, unit=light.unit)
    upper.set_title(right_title, loc="left", parse_math=False)
    return figure
