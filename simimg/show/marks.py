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


def draw_arrows(
    axes: Any,
    compass: Compass,
    edges: tuple[float, float, float, float],
    taken: list[tuple[float, float]],
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
            gid=f"arrow-{name}",
        )
        _rimmed(arrow.arrow_patch)
        letter = axes.text(
            x + dx * 1.35 * length, y + dy * 1.35 * length, name, ha="center", va="center"
        )
        inked(letter)


def _rimmed(patch: Any) -> None:
    from matplotlib.patheffects import Normal, withStroke

    patch.set_path_effects([withStroke(linewidth=2.0, foreground="black"), Normal()])
