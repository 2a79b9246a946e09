"""A study of two keys as a map: one column in shades, and the lines of a chosen value.

Of several such lines all are drawn, white on a dark rim so that they show on every shade.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.show.canvas import COLUMN, beside, sheet
from simimg.show.marks import inked
from simimg.show.studysheet import (
    BOTTOM,
    LEFT,
    TOP,
    column_of,
    draw_heading,
    key_axis,
    key_words,
    places,
)
from simimg.study.point import COLUMNS, TRIAL_COLUMNS
from simimg.study.sweep import Sweep, Varied

_BAR = 20.0  # mm for the scale of a map
MAP_COLOURS = "cividis"
"""Even in lightness, so that it survives grey printing and colour-blind eyes."""


def draw_map(made: Sweep, column: str, level: float | None, *, width: float = COLUMN) -> Any:
    """One column over two keys, in shades, as a matplotlib figure of a width (mm)."""
    from matplotlib.patheffects import Normal, withStroke

    first, second = made.varied
    values = column_of(made, column).reshape(len(first.steps.values), len(second.steps.values)).T
    height = TOP + 0.8 * width - _BAR + BOTTOM
    figure = sheet(width, height)
    draw_heading(figure, made.scene.title or "", width, height)
    tall = height - TOP - BOTTOM
    wide = width - LEFT - _BAR
    axes = figure.add_axes((LEFT / width, BOTTOM / height, wide / width, tall / height))
    x, y = places(first), places(second)
    share = column.startswith("fraction")
    shades = np.ma.masked_invalid(values)
    norm = _norm(shades, share=share)
    picture = axes.pcolormesh(
        _edges(x, first), _edges(y, second), shades, cmap=MAP_COLOURS, norm=norm, gid="map"
    )
    axes.set_facecolor("0.6")
    if level is not None and min(values.shape) > 1 and _crossed(shades, level):
        # Lines through holes of the map are not drawn.
        lines = axes.contour(x, y, shades, levels=[level], colors=["white"], linewidths=[1.4])
        lines.set_path_effects([withStroke(linewidth=2.4, foreground="black"), Normal()])
        for text in axes.clabel(lines, fmt=f"{level:g}", fontsize=6.5):
            inked(text)
    key_axis(axes.xaxis, first, x)
    key_axis(axes.yaxis, second, y)
    axes.set_xlabel(key_words(first))
    axes.set_ylabel(key_words(second))
    axes.tick_params(direction="out")
    bar = figure.colorbar(picture, cax=axes.inset_axes(beside(axes)))
    bar.outline.set_linewidth(0.6)
    bar.set_label(column_words(column))
    if level is not None and _crossed(shades, level):
        bar.ax.axhline(level, color="white", linewidth=1.4)
    return figure


def column_words(column: str) -> str:
    """A column's meaning and unit, for an axis."""
    unit, says = (dict(COLUMNS) | dict(TRIAL_COLUMNS))[column]
    named = column.replace("_", " ") if column.startswith("bound") else says
    return f"{named} ({unit})" if unit else named


def _norm(shades: Any, *, share: bool) -> Any:
    from matplotlib.colors import LogNorm, Normalize

    if share:
        return Normalize(0.0, 1.0)
    known = shades.compressed()
    if known.size and known.min() > 0.0 and known.max() > 10.0 * known.min():
        return LogNorm(float(known.min()), float(known.max()))
    return Normalize()


def _crossed(shades: Any, level: float) -> bool:
    known = shades.compressed()
    return bool(known.size and known.min() < level < known.max())


def _edges(at: FloatArray, one: Varied) -> FloatArray:
    """Edges of the cells about the values; they meet half way."""
    scale = np.log(at) if one.steps.spacing == "log" else at
    if len(scale) == 1:
        half = 0.5 * abs(scale[0]) or 0.5
        edges = np.array([scale[0] - half, scale[0] + half])
    else:
        middle = 0.5 * (scale[1:] + scale[:-1])
        edges = np.concatenate(
            [[2.0 * scale[0] - middle[0]], middle, [2.0 * scale[-1] - middle[-1]]]
        )
    return np.asarray(np.exp(edges) if one.steps.spacing == "log" else edges)
