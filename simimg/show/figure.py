"""The proposal figure: a frame, the profile along its pair's axis, and a caption with the verdict.

On request the frame stands beside a restored view of itself, with the profile below. Sized for two
columns of a page (180 mm), as PNG, PDF or SVG; the same frame gives the same bytes.
"""

from __future__ import annotations

import os
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from simimg.frame import Frame
from simimg.show.canvas import MILLIMETRE, drawable, figure_format, look, save
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

_WIDTH = 180.0  # mm
_RESIDUAL = 13.0  # of the profile's height, mm

_Box = tuple[float, float, float, float]


@dataclass(frozen=True)
class _Page:
    """Where the panels stand: left, bottom, width, height in mm."""

    height: float
    plate: _Box
    profile: _Box
    restored: _Box | None = None


_PLAIN = _Page(83.0, (13.0, 11.0, 62.0, 62.0), (113.0, 11.0, 65.0, 62.0))
_WITH_RESTORED = _Page(
    150.0, (13.0, 80.0, 60.0, 60.0), (16.0, 11.0, 161.0, 50.0), (98.0, 80.0, 60.0, 60.0)
)


def write_figure(
    frame: Frame,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    pair: str | int | None = None,
    measurement: PairMeasurement | None = None,
    restored: int | None = None,
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
    """
    file_format = figure_format(path, overwrite=overwrite)
    light, subject, profile, setup = figure_parts(frame, pair=pair, measurement=measurement)
    view = None if restored is None else restore(frame, subject, iterations=restored)
    caption = figure_caption(
        frame, subject, profile, setup, iterations=restored, remark="" if view is None else REMARK
    )
    with look():
        figure = draw_figure(frame, light, subject, profile, view)
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
) -> Any:
    """The figure as a matplotlib object; to be called within `simimg.show.canvas.look`."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    page = _PLAIN if restored is None else _WITH_RESTORED
    figure = Figure(figsize=(_WIDTH * MILLIMETRE, page.height * MILLIMETRE))
    FigureCanvasAgg(figure)

    def panel(left: float, bottom: float, width: float, height: float) -> Any:
        place = (left / _WIDTH, bottom / page.height, width / _WIDTH, height / page.height)
        return figure.add_axes(place)

    left_title, right_title = panel_titles(frame, subject)
    plate = panel(*page.plate)
    plate.set_anchor("W")
    draw_frame(plate, light, subject, profile, simulated=frame.simulated)
    plate.set_title(left_title, loc="left", parse_math=False)
    if restored is not None and page.restored is not None:
        sharp = panel(*page.restored)
        sharp.set_anchor("W")
        draw_restored(sharp, restored, subject)
        sharp.set_title(f"Richardson-Lucy, {restored.iterations} iterations:\n{REMARK}", loc="left")
    left, bottom, width, height = page.profile
    if profile.residuals is None:
        upper, below = panel(left, bottom, width, height), None
    else:
        below = panel(left, bottom, width, _RESIDUAL)
        gap = 1.5
        upper = panel(left, bottom + _RESIDUAL + gap, width, height - _RESIDUAL - gap)
    draw_profile(upper, below, profile, subject, unit=light.unit)
    upper.set_title(right_title, loc="left", parse_math=False)
    return figure
