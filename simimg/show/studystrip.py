"""The frames of a study side by side along the varied key: the same field, one stretch.

Each panel is the same piece of sky about the same object, in electrons above the background, so
that what changes from one to the next is what the key does. Sized for two columns of a page
(180 mm) unless another width is asked for; in a narrow one the panels stand in rows.
"""

from __future__ import annotations

import os
from dataclasses import dataclass
from math import isfinite
from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.errors import InputError, mistake
from simimg.exposure import expose
from simimg.frame import Frame
from simimg.scene.file import requirements_to_expose
from simimg.show.canvas import (
    PAGE,
    TWO_ABREAST,
    beside,
    check_width,
    drawable,
    figure_format,
    grouped,
    look,
    save,
    sheet,
)
from simimg.show.compass import Compass, frame_compass, round_number
from simimg.show.framepanel import COLOUR_MAP
from simimg.show.marks import draw_arrows, draw_scale_bar
from simimg.show.signal import Light, frame_light
from simimg.show.stretch import choose_stretch
from simimg.show.studysheet import value_words
from simimg.study.sweep import Plan, Sweep

MOST_FRAMES = 6
"""Most frames side by side; of more points some are chosen, evenly."""

_ABREAST = 3  # frames in a row of a narrow figure
_LEFT, _RIGHT, _TOP, _BOTTOM, _BETWEEN = 2.0, 17.0, 8.0, 9.0, 1.5
_AROUND = 2.2  # FWHM of free sky about the object
_TICKS = 3.3  # mm between two ticks of the colour bar
_SECOND = "\N{DOUBLE PRIME}"


@dataclass(frozen=True, eq=False)
class _View:
    """One frame's piece of sky."""

    light: Light
    values: FloatArray
    extent: tuple[float, float, float, float]
    compass: Compass
    words: str


def write_study_strip(
    planned: Plan,
    made: Sweep,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    width: float = PAGE,
) -> str:
    """Draw the frames of a study of one key side by side.

    Parameters
    ----------
    planned : Plan
    made : Sweep
        The same study, made.
    path : path
        Ends in .png, .pdf or .svg.
    overwrite : bool, optional
        Whether a file of that name may be replaced.
    width : float, optional
        Of the figure, 80 to 400 mm; two columns of a page unless given.

    Returns
    -------
    str
        The caption.

    Raises
    ------
    InputError
        Another ending, a file that exists or cannot be written, a scene that lacks what an exposure
        needs.
    RunError
        The system refused; no part of the file is left behind.
    ValueError
        A width that is out of range.
    """
    check_width(width)
    file_format = figure_format(path, overwrite=overwrite)
    views = _views(planned, made)
    one = planned.varied[0]
    title = drawable(planned.scene.title or "untitled", longest=200)
    caption = (
        f"Simulated: {title.rstrip('.')}, as {one.key} goes over "
        f"{', '.join(view.words for view in views)}. The same piece of sky on one stretch, "
        "electrons above the background. Estimates for planning, to be confirmed with the "
        "observatory."
    )
    with look():
        figure = _draw(views, planned, width)
        save(
            figure,
            path,
            format=file_format,
            title=drawable(f"Simulated frames: {title}", longest=200),
            description=caption,
            overwrite=overwrite,
        )
    return caption


def _views(planned: Plan, made: Sweep) -> list[_View]:
    wide = max(
        (_half_width(row) for row in made.rows if isfinite(row["delivered_fwhm"])), default=5.0
    )
    count = len(planned.points)
    chosen = np.unique(np.round(np.linspace(0, count - 1, min(count, MOST_FRAMES))).astype(int))
    views = []
    for number in chosen:
        scene = planned.scenes[number]
        missing = requirements_to_expose(scene)
        if missing:
            raise InputError(*missing)
        frame = expose(scene)
        x, y = _centre(frame, planned.asked.pair)
        views.append(_cut(frame, x, y, wide, value_words(planned.varied[0], number)))
    return views


def _half_width(row: dict[str, float]) -> float:
    """Arcseconds from the object to the edge."""
    apart = row["separation"] if isfinite(row["separation"]) else 0.0
    return 0.5 * apart + _AROUND * row["delivered_fwhm"]


def _centre(frame: Frame, pair: int | None) -> tuple[float, float]:
    """Middle of the pair, or the brightest object's place, pixels."""
    truth = frame.truth
    assert truth is not None
    partner = np.asarray(truth["partner"])
    x, y = np.asarray(truth["x"], dtype=float), np.asarray(truth["y"], dtype=float)
    firsts = [row for row, other in enumerate(partner) if other > row]
    if pair is not None and pair < len(firsts):
        row = firsts[pair]
        other = int(partner[row])
        return 0.5 * float(x[row] + x[other]), 0.5 * float(y[row] + y[other])
    if len(x) == 0:
        return 0.5 * (frame.counts.shape[1] - 1), 0.5 * (frame.counts.shape[0] - 1)
    row = int(np.argmax(np.asarray(truth["electrons_in_frame"], dtype=float)))
    return float(x[row]), float(y[row])


def _cut(frame: Frame, x: float, y: float, half: float, words: str) -> _View:
    """The piece of a frame within `half` arcseconds of a place."""
    light = frame_light(frame)
    compass = frame_compass(frame, x, y)
    scale = compass.scale
    if scale is None:
        raise InputError(mistake("frame", "", "says no pixel scale", "give camera.pixel_scale"))
    reach = half / scale
    rows, columns = light.values.shape
    left, right = max(round(x - reach), 0), min(round(x + reach) + 1, columns)
    bottom, top = max(round(y - reach), 0), min(round(y + reach) + 1, rows)
    values = light.values[bottom:top, left:right]
    if values.size == 0:
        raise InputError(
            mistake("frame", "", "does not hold the object", "place it inside the frame")
        )
    edges = np.array([left - 0.5 - x, right - 0.5 - x, bottom - 0.5 - y, top - 0.5 - y]) * scale
    extent = (float(edges[0]), float(edges[1]), float(edges[2]), float(edges[3]))
    return _View(light, values, extent, compass, words)


def _draw(views: list[_View], planned: Plan, page: float = PAGE) -> Any:
    from matplotlib.colors import AsinhNorm

    count = len(views) if page >= TWO_ABREAST else min(len(views), _ABREAST)
    rows = -(-len(views) // count)
    side = min((page - _LEFT - _RIGHT - (count - 1) * _BETWEEN) / count, 60.0)
    width = _LEFT + count * side + (count - 1) * _BETWEEN + _RIGHT
    step = side + _BOTTOM
    height = _TOP + rows * step
    figure = sheet(width, height)
    half = max(max(abs(edge) for edge in view.extent) for view in views)
    every = np.concatenate([view.values.ravel() for view in views])
    noise = float(np.median([view.light.noise for view in views]))
    stretch = choose_stretch(every, noise=noise)
    norm = AsinhNorm(stretch.softening, vmin=stretch.low, vmax=stretch.high)
    for number, view in enumerate(views):
        row, column = divmod(number, count)
        left, bottom = _LEFT + column * (side + _BETWEEN), (rows - 1 - row) * step + _BOTTOM
        axes = figure.add_axes((left / width, bottom / height, side / width, side / height))
        picture = axes.imshow(
            view.values,
            origin="lower",
            extent=view.extent,
            cmap=COLOUR_MAP,
            norm=norm,
            interpolation="nearest",
            gid=f"frame-{number}",
        )
        axes.set_facecolor("0.5")
        axes.set_xlim(-half, half)
        axes.set_ylim(-half, half)
        axes.set_xticks([])
        axes.set_yticks([])
        axes.set_xlabel(drawable(view.words, ems=min(14.0, side / 2.7)))
        square = (-half, half, -half, half)
        draw_arrows(axes, view.compass, square, [], suffix=f"-{number}")
        if number == 0:
            length = round_number(0.6 * half)
            draw_scale_bar(axes, square, length, f"{length:.6g}{_SECOND}")
        if number == count - 1:
            last = axes
    bar = figure.colorbar(picture, cax=last.inset_axes(beside(last, gap=1.0, wide=1.4)))
    ticks = stretch.ticks(apart=max(_TICKS / side, 0.085))
    bar.set_ticks(ticks, labels=[grouped(tick) for tick in ticks])
    bar.ax.minorticks_off()
    bar.outline.set_linewidth(0.6)
    bar.set_label(f"{views[0].light.unit}s per pixel")
    top = 1.0 - 0.5 * _TOP / height
    title = drawable(
        f"{planned.varied[0].key}: {planned.scene.title or ''}", ems=(width - 39.0) / 3.0
    )
    figure.text(_LEFT / width, top, title, va="center", weight="bold", parse_math=False)
    figure.text(1.0 - _RIGHT / width, top, "simulated", va="center", ha="right", gid="simulated")
    return figure
