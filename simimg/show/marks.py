"""Marks on a picture: white on a dark rim, so that they are legible on any shade."""

from __future__ import annotations

from typing import Any

import numpy as np

from simimg.show.compass import Compass

INK = "white"

_ARROW = 0.11  # of the panel's shorter side
_CORNER = 0.3  # of the same: a corner with the arrows in it


def inked(artist: Any) -> None:
    """Give a text or a line white ink on a dark rim."""
    from matplotlib.patheffects import Normal, withStroke

    artist.set_color(INK)
    rim = withStroke(linewidth=1.6, foreground="black")
    artist.set_path_effects([rim] if hasattr(artist, "get_text") else [rim, Normal()])


def draw_scale_bar(
    axes: Any,
    edges: tuple[float, float, float, float],
    length: float,
    words: str,
    *,
    suffix: str = "",
) -> None:
    """A bar of round length in the lower left corner, with its length over it.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    edges : (float, float, float, float)
        Left, right, bottom and top of the picture, in data.
    length : float
        In data.
    words : str
        The length with its unit.
    suffix : str, optional
        Of the bar's name in the figure, where it has several.
    """
    left, right, bottom, top = edges
    x, y = left + 0.05 * (right - left), bottom + 0.05 * (top - bottom)
    (bar,) = axes.plot([x, x + length], [y, y], linewidth=1.4, solid_capstyle="butt")
    bar.set_gid(f"scale-bar{suffix}")
    inked(bar)
    inked(
        axes.annotate(
            words,
            (x + 0.5 * length, y),
            (0, 3),
            textcoords="offset points",
            ha="center",
            va="bottom",
        )
    )


def draw_word(axes: Any, *, suffix: str = "") -> None:
    """The word "simulated" in the upper left corner of a picture."""
    word = axes.text(0.03, 0.97, "simulated", va="top", transform=axes.transAxes)
    word.set_gid(f"simulated{suffix}")
    inked(word)


def draw_arrows(
    axes: Any,
    compass: Compass,
    edges: tuple[float, float, float, float],
    taken: list[tuple[float, float]],
    *,
    suffix: str = "",
) -> None:
    """North and east in the upper right corner, or the lower where the upper is taken.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    compass : Compass
        No arrows where it does not know them.
    edges : (float, float, float, float)
        Left, right, bottom and top of the picture, in data.
    taken : list of (x, y)
        Places in data that must stay free.
    suffix : str, optional
        Of the arrows' names in the figure, where it has several pictures.
    """
    if not compass.known:
        return
    left, right, bottom, top = edges
    size = min(right - left, top - bottom)
    length = _ARROW * size
    # Arrows and letters keep to a box in the corner, whichever way they point.
    tips = np.array([(0.0, 0.0), compass.north, compass.east]) * 1.45 * length
    x = right - 0.05 * size - tips[:, 0].max()
    y = top - 0.05 * size - tips[:, 1].max()
    low_x, low_y = right - _CORNER * size, top - _CORNER * size
    if any(px > low_x and py > low_y for px, py in taken):
        y = bottom + 0.05 * size - tips[:, 1].min()
    for name, (dx, dy) in (("N", compass.north), ("E", compass.east)):
        arrow = axes.annotate(
            "",
            (x + dx * length, y + dy * length),
            (x, y),
            arrowprops={
                "arrowstyle": "-|>,head_width=0.16,head_length=0.32",
                "shrinkA": 0.0,
                "shrinkB": 0.0,
                "linewidth": 0.9,
                "color": INK,
            },
            gid=f"arrow-{name}{suffix}",
        )
        _rimmed(arrow.arrow_patch)
        letter = axes.text(
            x + dx * 1.35 * length, y + dy * 1.35 * length, name, ha="center", va="center"
        )
        inked(letter)


def _rimmed(patch: Any) -> None:
    from matplotlib.patheffects import Normal, withStroke

    patch.set_path_effects([withStroke(linewidth=2.0, foreground="black"), Normal()])
