"""A figure as matplotlib's objects, and what a referee would look for in it."""

from __future__ import annotations

import itertools

import numpy as np

from simimg.show.canvas import look
from simimg.show.figure import draw_figure, figure_parts


def figure(frame, **choices):
    """The figure of a frame, laid out."""
    light, subject, profile, _ = figure_parts(frame, **choices)
    with look():
        made = draw_figure(frame, light, subject, profile)
        made.canvas.draw()
    return made


def artist(figure, gid):
    """The one artist of that name."""
    (found,) = figure.findobj(lambda one: one.get_gid() == gid)
    return found


def texts(figure):
    """Every text that shows."""
    from matplotlib.text import Text

    return [
        one
        for one in figure.findobj(Text)
        if one.get_visible() and one.get_text().strip() and not _off_axis(one)
    ]


def _off_axis(text):
    """Tick labels beyond an axis' ends are made, and not drawn."""
    for axes in text.figure.findobj(lambda one: hasattr(one, "get_xticklabels")):
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
                if text in (tick.label1, tick.label2):
                    return not low <= tick.get_loc() <= high
    return False


def overlaps(figure):
    """Pairs of texts that cover one another."""
    boxes = [(one.get_text(), one.get_window_extent()) for one in texts(figure)]
    return [
        (a, b) for (a, one), (b, other) in itertools.combinations(boxes, 2) if one.overlaps(other)
    ]


def outside(figure):
    """Texts that the figure's edge cuts."""
    width, height = figure.canvas.get_width_height()
    cut = []
    for one in texts(figure):
        box = one.get_window_extent()
        if box.x0 < 0 or box.y0 < 0 or box.x1 > width or box.y1 > height:
            cut.append(one.get_text())
    return cut


def direction(annotation):
    """Unit vector from the tail to the tip of an arrow, in data."""
    step = np.subtract(annotation.xy, annotation.xyann)
    return step / np.hypot(*step)
