"""What the pictures of studies share: their margins, heading, and the axes of varied keys."""

from __future__ import annotations

from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.show.canvas import COLUMN, drawable
from simimg.study.sweep import Sweep, Varied

SECOND = "\N{DOUBLE PRIME}"
TOP, BOTTOM, LEFT, RIGHT = 9.0, 10.5, 14.0, 4.0
"""Margins, mm."""
PLANNING = "Estimates for planning, to be confirmed with the observatory."


def places(one: Varied) -> FloatArray:
    """Where the values of a varied key stand on an axis: at their numbers, or one by one."""
    numbers = one.steps.numbers or range(len(one.steps.values))
    return np.array(numbers, dtype=np.float64)


def key_words(one: Varied) -> str:
    """The key and its unit, for an axis."""
    unit = f" ({one.steps.unit})" if one.steps.unit else ""
    return drawable(f"{one.key}{unit}", ems=36.0)


def value_words(one: Varied, number: int) -> str:
    """The value of a varied key at a point, to four figures, with its unit."""
    steps = one.steps
    if not steps.numbers:
        return str(steps.values[number])
    return f"{steps.numbers[number]:.4g} {steps.unit or ''}".strip()


def panel_height(width: float) -> float:
    """Height of a panel of curves in a figure of a width, mm."""
    return 44.0 * min(width / COLUMN, 1.6)


def draw_heading(figure: Any, title: str, width: float, height: float) -> None:
    """The title of a figure (mm) at its upper left, and the word "simulated" at its right."""
    top = 1.0 - 0.45 * TOP / height
    figure.text(
        LEFT / width,
        top,
        drawable(title, ems=(width - 36.0) / 3.0),
        va="center",
        weight="bold",
        parse_math=False,
        gid="title",
    )
    figure.text(1.0 - RIGHT / width, top, "simulated", va="center", ha="right", gid="simulated")


def column_of(made: Sweep, name: str) -> FloatArray:
    """One column of a study."""
    return np.array([row[name] for row in made.rows], dtype=np.float64)


def key_axis(axis: Any, one: Varied, at: FloatArray) -> None:
    """Scale and ticks along a varied key."""
    if one.steps.spacing == "log":
        logarithmic(axis)
    if not one.steps.numbers:
        axis.set_ticks(at, labels=[drawable(str(value)) for value in one.steps.values])


def logarithmic(axis: Any) -> None:
    """A logarithmic axis with few, plain numbers."""
    from matplotlib.ticker import LogLocator, NullFormatter

    axes = axis.axes
    (axes.set_xscale if axis is axes.xaxis else axes.set_yscale)("log")
    axis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0), numticks=12))
    axis.set_major_formatter("{x:g}")
    axis.set_minor_formatter(NullFormatter())


def inward(axes: Any) -> None:
    """Ticks inside the panel, on all its sides."""
    axes.tick_params(direction="in", top=True, right=True, which="both")
