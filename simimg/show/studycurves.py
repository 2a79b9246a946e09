"""A study of one key as curves: what is delivered, and how well the pair is measured.

Above what is delivered against what diffraction allows; below it the Cramer-Rao bound, the signal
to noise, or how often trials resolve the pair.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.show.canvas import BLACK, BLUE, COLUMN, GREEN, VERMILION, sheet
from simimg.show.studysheet import (
    BOTTOM,
    LEFT,
    RIGHT,
    SECOND,
    TOP,
    column_of,
    draw_heading,
    inward,
    key_axis,
    key_words,
    logarithmic,
    panel_height,
    places,
)
from simimg.study.sweep import Sweep, Varied

_LEGEND = 11.0  # mm above curves
_GAP = 3.0

_CURVES = (
    ("diffraction_rayleigh", "Rayleigh, diffraction", BLACK, ":"),
    ("delivered_fwhm", "FWHM, delivered", GREEN, "-."),
    ("delivered_rayleigh", "Rayleigh, delivered", BLUE, "-"),
    ("delivered_sparrow", "Sparrow, delivered", VERMILION, "--"),
    ("separation", "the pair", "0.5", "-"),
)
_SHARES = (
    ("fraction_rayleigh", "by Rayleigh", BLUE, "o"),
    ("fraction_sparrow", "by Sparrow", VERMILION, "s"),
)


def draw_curves(made: Sweep, *, width: float = COLUMN) -> Any:
    """Two panels over one another along the varied key, as a matplotlib figure of a width (mm)."""
    one = made.varied[0]
    paired = bool(np.isfinite(column_of(made, "bound_separation")).any())
    below = paired or bool(np.isfinite(column_of(made, "snr")).any())
    top = TOP + _LEGEND
    tall = panel_height(width)
    height = top + tall + BOTTOM + (_GAP + 0.8 * tall if below else 0.0)
    figure = sheet(width, height)
    draw_heading(figure, made.scene.title or "", width, height)
    wide = (width - LEFT - RIGHT) / width
    upper = figure.add_axes((LEFT / width, 1.0 - (top + tall) / height, wide, tall / height))
    x = places(one)
    for name, words, colour, style in _CURVES:
        y = column_of(made, name)
        if np.isfinite(y).any():
            mark = "" if len(x) > 12 else "."
            upper.plot(x, y, style, color=colour, label=words, marker=mark, gid=name)
    upper.set_ylabel(f"separation ({SECOND})")
    upper.legend(
        loc="lower left",
        bbox_to_anchor=(-0.02, 1.0),
        ncols=2,
        frameon=False,
        borderaxespad=0.2,
        handlelength=2.2,
        columnspacing=0.8,
        labelspacing=0.25,
    )
    axes = [upper]
    if below:
        lower = figure.add_axes(
            (LEFT / width, BOTTOM / height, wide, 0.8 * tall / height), sharex=upper
        )
        (_draw_shares if made.trials else _draw_bound)(lower, made, x, paired)
        upper.tick_params(labelbottom=False)
        axes.append(lower)
    _scale_axis(axes, one, x)
    axes[-1].set_xlabel(key_words(one))
    for panel in axes:
        inward(panel)
    return figure


def _scale_axis(axes: list[Any], one: Varied, x: FloatArray) -> None:
    key_axis(axes[-1].xaxis, one, x)
    values = _tall(axes[0])
    if values.size and values.min() > 0.0 and values.max() > 15.0 * values.min():
        logarithmic(axes[0].yaxis)
    else:
        axes[0].set_ylim(bottom=0.0)


def _tall(panel: Any) -> FloatArray:
    lines = [np.asarray(line.get_ydata(), dtype=np.float64) for line in panel.get_lines()]
    every = np.concatenate(lines) if lines else np.zeros(0)
    return every[np.isfinite(every)]


def _draw_shares(axes: Any, made: Sweep, x: FloatArray, paired: bool) -> None:  # noqa: ARG001
    """Shares resolved, with their intervals."""
    for name, words, colour, mark in _SHARES:
        share = column_of(made, name)
        low, high = column_of(made, f"{name}_low"), column_of(made, f"{name}_high")
        axes.fill_between(x, low, high, color=colour, alpha=0.2, linewidth=0.0, gid=f"{name}-range")
        axes.plot(x, share, color=colour, marker=mark, markersize=2.8, label=words, gid=name)
    axes.set_ylim(-0.04, 1.04)
    axes.set_ylabel("share resolved")
    axes.legend(loc="best", frameon=True, framealpha=0.9, edgecolor="none")


def _draw_bound(axes: Any, made: Sweep, x: FloatArray, paired: bool) -> None:
    """How well the pair is measured at best, or the object's signal to noise."""
    name = "bound_separation" if paired else "snr"
    y = column_of(made, name)
    axes.plot(x, y, color=BLACK, marker="" if len(x) > 12 else ".", gid=name)
    finite = y[np.isfinite(y)]
    if finite.size and finite.min() > 0.0 and finite.max() > 5.0 * finite.min():
        logarithmic(axes.yaxis)
    else:
        axes.set_ylim(bottom=0.0)
    axes.set_ylabel(f"error at best ({SECOND})" if paired else "signal to noise")
