"""A study as a picture: curves along one varied key, or a map of two with its boundary.

Curves: what is delivered against what diffraction allows, and below it how well the pair is
measured, or how often trials resolve it. A map shows one column in shades, and the lines on which
it has a chosen value; of several such lines all are drawn. Sized for one column of a page (88 mm).
"""

from __future__ import annotations

import os
from math import isfinite
from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.show.canvas import (
    BLACK,
    BLUE,
    GREEN,
    MILLIMETRE,
    VERMILION,
    drawable,
    figure_format,
    look,
    save,
)
from simimg.show.marks import inked
from simimg.study.point import COLUMNS, TRIAL_COLUMNS
from simimg.study.sweep import Sweep, Varied

_WIDTH = 88.0  # mm
_SECOND = "\N{DOUBLE PRIME}"
_TOP, _BOTTOM, _LEFT, _RIGHT = 9.0, 10.5, 14.0, 4.0  # mm
_LEGEND = 11.0  # mm above curves
_PANEL = 44.0
_GAP = 3.0
_BAR = 16.0  # mm for the scale of a map
MAP_COLOURS = "cividis"
"""Even in lightness, so that it survives grey printing and colour-blind eyes."""

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


def write_study_plot(
    made: Sweep,
    path: str | os.PathLike[str],
    *,
    column: str | None = None,
    level: float | None = None,
    overwrite: bool = False,
) -> str:
    """Draw a study and write it to a file.

    Parameters
    ----------
    made : Sweep
        Of one key or two.
    path : path
        Ends in .png, .pdf or .svg.
    column : str, optional
        What a map shows; the share resolved by Sparrow, or without trials the bound on the
        separation, unless given.
    level : float, optional
        Value of the boundary in a map; 0.5 of a share unless given.
    overwrite : bool, optional
        Whether a file of that name may be replaced.

    Returns
    -------
    str
        The caption.

    Raises
    ------
    InputError
        Another ending, or a file that exists or cannot be written.
    RunError
        The system refused; no part of the file is left behind.
    """
    file_format = figure_format(path, overwrite=overwrite)
    if len(made.varied) == 1:
        caption = _curves_caption(made)
    else:
        column = column or ("fraction_sparrow" if made.trials else "bound_separation")
        if level is None and column.startswith("fraction"):
            level = 0.5
        caption = _map_caption(made, column, level)
    with look():
        figure = _curves(made) if len(made.varied) == 1 else _map(made, column or "", level)
        save(
            figure,
            path,
            format=file_format,
            title=drawable(f"Simulated study: {made.scene.title or 'untitled'}", longest=200),
            description=caption,
            overwrite=overwrite,
        )
    return caption


def places(one: Varied) -> FloatArray:
    """Where the values of a varied key stand on an axis: at their numbers, or one by one."""
    numbers = one.steps.numbers or range(len(one.steps.values))
    return np.array(numbers, dtype=np.float64)


def key_words(one: Varied) -> str:
    """The key and its unit, for an axis."""
    unit = f" ({one.steps.unit})" if one.steps.unit else ""
    return drawable(f"{one.key}{unit}", ems=36.0)


def _sheet(height: float) -> Any:
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(_WIDTH * MILLIMETRE, height * MILLIMETRE))
    FigureCanvasAgg(figure)
    return figure


def _head(figure: Any, made: Sweep, height: float) -> None:
    top = 1.0 - 0.45 * _TOP / height
    title = drawable(made.scene.title or "", ems=22.0)
    figure.text(
        _LEFT / _WIDTH, top, title, va="center", weight="bold", parse_math=False, gid="title"
    )
    figure.text(1.0 - _RIGHT / _WIDTH, top, "simulated", va="center", ha="right", gid="simulated")


def _column(made: Sweep, name: str) -> FloatArray:
    return np.array([row[name] for row in made.rows], dtype=np.float64)


def _curves(made: Sweep) -> Any:
    """Two panels over one another along the varied key."""
    one = made.varied[0]
    paired = bool(np.isfinite(_column(made, "bound_separation")).any())
    below = paired or bool(np.isfinite(_column(made, "snr")).any())
    top = _TOP + _LEGEND
    height = top + _PANEL + _BOTTOM + (_GAP + 0.8 * _PANEL if below else 0.0)
    figure = _sheet(height)
    _head(figure, made, height)
    wide = (_WIDTH - _LEFT - _RIGHT) / _WIDTH
    upper = figure.add_axes((_LEFT / _WIDTH, 1.0 - (top + _PANEL) / height, wide, _PANEL / height))
    x = places(one)
    for name, words, colour, style in _CURVES:
        y = _column(made, name)
        if np.isfinite(y).any():
            mark = "" if len(x) > 12 else "."
            upper.plot(x, y, style, color=colour, label=words, marker=mark, gid=name)
    upper.set_ylabel(f"separation ({_SECOND})")
    upper.legend(
        loc="lower left",
        bbox_to_anchor=(-0.02, 1.0),
        ncols=2,
        frameon=False,
        borderaxespad=0.2,
        handlelength=2.6,
        columnspacing=1.2,
        labelspacing=0.25,
    )
    axes = [upper]
    if below:
        lower = figure.add_axes(
            (_LEFT / _WIDTH, _BOTTOM / height, wide, 0.8 * _PANEL / height), sharex=upper
        )
        (_draw_shares if made.trials else _draw_bound)(lower, made, x, paired)
        upper.tick_params(labelbottom=False)
        axes.append(lower)
    _scale_axis(axes, one, x)
    axes[-1].set_xlabel(key_words(one))
    for panel in axes:
        panel.tick_params(direction="in", top=True, right=True, which="both")
    return figure


def _scale_axis(axes: list[Any], one: Varied, x: FloatArray) -> None:
    _key_axis(axes[-1].xaxis, one, x)
    values = _tall(axes[0])
    if values.size and values.min() > 0.0 and values.max() > 15.0 * values.min():
        _logarithmic(axes[0].yaxis)
    else:
        axes[0].set_ylim(bottom=0.0)


def _key_axis(axis: Any, one: Varied, at: FloatArray) -> None:
    """Scale and ticks along a varied key."""
    if one.steps.spacing == "log":
        _logarithmic(axis)
    if not one.steps.numbers:
        axis.set_ticks(at, labels=[drawable(str(value)) for value in one.steps.values])


def _logarithmic(axis: Any) -> None:
    """A logarithmic axis with few, plain numbers."""
    from matplotlib.ticker import LogLocator, NullFormatter

    axes = axis.axes
    (axes.set_xscale if axis is axes.xaxis else axes.set_yscale)("log")
    axis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0), numticks=12))
    axis.set_major_formatter("{x:g}")
    axis.set_minor_formatter(NullFormatter())


def _tall(panel: Any) -> FloatArray:
    lines = [np.asarray(line.get_ydata(), dtype=np.float64) for line in panel.get_lines()]
    every = np.concatenate(lines) if lines else np.zeros(0)
    return every[np.isfinite(every)]


def _draw_shares(axes: Any, made: Sweep, x: FloatArray, paired: bool) -> None:  # noqa: ARG001
    """Shares resolved, with their intervals."""
    for name, words, colour, mark in _SHARES:
        share = _column(made, name)
        low, high = _column(made, f"{name}_low"), _column(made, f"{name}_high")
        axes.fill_between(x, low, high, color=colour, alpha=0.2, linewidth=0.0, gid=f"{name}-range")
        axes.plot(x, share, color=colour, marker=mark, markersize=2.8, label=words, gid=name)
    axes.set_ylim(-0.04, 1.04)
    axes.set_ylabel("share resolved")
    axes.legend(loc="best", frameon=True, framealpha=0.9, edgecolor="none")


def _draw_bound(axes: Any, made: Sweep, x: FloatArray, paired: bool) -> None:
    """How well the pair is measured at best, or the object's signal to noise."""
    name = "bound_separation" if paired else "snr"
    y = _column(made, name)
    axes.plot(x, y, color=BLACK, marker="" if len(x) > 12 else ".", gid=name)
    finite = y[np.isfinite(y)]
    if finite.size and finite.min() > 0.0 and finite.max() > 5.0 * finite.min():
        _logarithmic(axes.yaxis)
    else:
        axes.set_ylim(bottom=0.0)
    axes.set_ylabel(f"error at best ({_SECOND})" if paired else "signal to noise")


def _map(made: Sweep, column: str, level: float | None) -> Any:
    """One column over two keys, in shades."""
    first, second = made.varied
    values = _column(made, column).reshape(len(first.steps.values), len(second.steps.values)).T
    height = _TOP + 0.8 * _WIDTH - _BAR + _BOTTOM
    figure = _sheet(height)
    _head(figure, made, height)
    tall = height - _TOP - _BOTTOM
    wide = _WIDTH - _LEFT - _BAR
    axes = figure.add_axes((_LEFT / _WIDTH, _BOTTOM / height, wide / _WIDTH, tall / height))
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
        for text in axes.clabel(lines, fmt=f"{level:g}", fontsize=6.5):
            inked(text)
    _key_axis(axes.xaxis, first, x)
    _key_axis(axes.yaxis, second, y)
    axes.set_xlabel(key_words(first))
    axes.set_ylabel(key_words(second))
    axes.tick_params(direction="out")
    bar = figure.colorbar(picture, cax=axes.inset_axes((1.03, 0.0, 0.05, 1.0)))
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


def _curves_caption(made: Sweep) -> str:
    one = made.varied[0]
    start = drawable(made.scene.title or "A study", longest=200).rstrip(".")
    words = [f"Simulated: {start}, as {one.key} goes over {_range(one)}."]
    words.append("Above: the delivered limits of an equal pair, and that of diffraction.")
    if made.trials:
        words.append(
            f"Below: share of {made.trials} noise draws in which the pair is resolved, with its "
            "95 % interval."
        )
    elif np.isfinite(_column(made, "bound_separation")).any():
        words.append("Below: the Cramer-Rao bound on the pair's separation.")
    words.append(_PLANNING)
    return " ".join(words)


def _map_caption(made: Sweep, column: str, level: float | None) -> str:
    first, second = made.varied
    start = drawable(made.scene.title or "A study", longest=200).rstrip(".")
    words = [
        f"Simulated: {start}. {column_words(column).capitalize()}, as {first.key} goes over "
        f"{_range(first)} and {second.key} over {_range(second)}."
    ]
    if made.trials and column.startswith("fraction"):
        words.append(f"Each cell is {made.trials} noise draws.")
    if level is not None and isfinite(level):
        words.append(f"The white line is where it is {level:g}.")
    words.append(_PLANNING)
    return " ".join(words)


_PLANNING = "Estimates for planning, to be confirmed with the observatory."


def _range(one: Varied) -> str:
    steps = one.steps
    if steps.spacing == "list":
        return drawable(", ".join(str(value) for value in steps.values), longest=120)
    return f"{steps.values[0]} to {steps.values[-1]}"
