"""The map of separations as a picture: what is resolved, what shows at all, and the contrast.

Above the smallest separations against the magnitude difference, for either criterion without noise
(its limit) and with it (the share of frames asked for), over the ground where no second star shows
whatever a criterion says; below, read the other way, the faintest second star at each separation.
Sized for one column of a page (88 mm) unless another width is asked for.
"""

from __future__ import annotations

import os
from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.scene.model import Scene
from simimg.show.canvas import (
    BLACK,
    BLUE,
    COLUMN,
    VERMILION,
    check_width,
    drawable,
    figure_format,
    look,
    save,
    sheet,
)
from simimg.show.studysheet import (
    BOTTOM,
    LEFT,
    PLANNING,
    RIGHT,
    SECOND,
    TOP,
    draw_heading,
    inward,
    logarithmic,
    panel_height,
)
from simimg.study.separations import SHOWS, SeparationMap

_LEGEND = 11.5  # mm above the curves
_GROUND = "0.88"  # of what does not show
_STYLES = (
    ("rayleigh_limit", "Rayleigh, limit", BLUE, ":", ""),
    ("sparrow_limit", "Sparrow, limit", VERMILION, ":", ""),
    ("resolved_rayleigh", "by Rayleigh", BLUE, "-", "o"),
    ("resolved_sparrow", "by Sparrow", VERMILION, "--", "s"),
)


def write_separation_plot(
    found: SeparationMap,
    scene: Scene,
    path: str | os.PathLike[str],
    *,
    overwrite: bool = False,
    width: float = COLUMN,
) -> str:
    """Draw a map of separations and write it to a file.

    Parameters
    ----------
    found : SeparationMap
    scene : Scene
        Of which it was made, for its title.
    path : path
        Ends in .png, .pdf or .svg.
    overwrite : bool, optional
        Whether a file of that name may be replaced.
    width : float, optional
        Of the figure, 80 to 400 mm; one column of a page unless given.

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
    ValueError
        A width that is out of range.
    """
    check_width(width)
    file_format = figure_format(path, overwrite=overwrite)
    caption = separation_caption(found, scene)
    with look():
        save(
            draw_separations(found, scene, width=width),
            path,
            format=file_format,
            title=drawable(f"Simulated separations: {scene.title or 'untitled'}", longest=200),
            description=caption,
            overwrite=overwrite,
        )
    return caption


def separation_caption(found: SeparationMap, scene: Scene) -> str:
    """The caption of a map of separations, one paragraph."""
    title = drawable(scene.title or "A set-up", longest=200).rstrip(".")
    pair = f" of {drawable(found.label)}" if found.label else ""
    return (
        f"Simulated: {title}. Above: the smallest separation resolved against the magnitude "
        f"difference, the first star{pair} as it is: the delivered limit of either criterion "
        f"(dotted), and from where {found.share:.0%} of frames are resolved, noise and all "
        "(expected, not drawn). Shaded: the physical limit; no second star shows there "
        f"({SHOWS:g} standard deviations expected at the Cramer-Rao bound), whatever a criterion "
        f"says. Below: the faintest second star that shows at each separation, down to the "
        f"{found.magnitude_difference[-1]:g} mag that were tried. {PLANNING}"
    )


def draw_separations(found: SeparationMap, scene: Scene, *, width: float = COLUMN) -> Any:
    """The figure as a matplotlib object; to be called within `simimg.show.canvas.look`."""
    tall = panel_height(width)
    gap = BOTTOM + 1.5
    height = TOP + _LEGEND + tall + gap + 0.8 * tall + BOTTOM
    figure = sheet(width, height)
    draw_heading(figure, scene.title or "", width, height)
    wide = (width - LEFT - RIGHT) / width
    low = (BOTTOM + 0.8 * tall + gap) / height
    upper = figure.add_axes((LEFT / width, low, wide, tall / height))
    lower = figure.add_axes((LEFT / width, BOTTOM / height, wide, 0.8 * tall / height))
    _draw_limits(upper, found)
    _draw_contrast(lower, found)
    for panel in (upper, lower):
        inward(panel)
    return figure


def _draw_limits(axes: Any, found: SeparationMap) -> None:
    """Separations against the magnitude difference."""
    x = found.magnitude_difference
    for name, words, colour, line, mark in _STYLES:
        y = _finite(getattr(found, name))
        if np.isfinite(y).any():
            if mark:
                words = f"{words}, {found.share:.0%}"
            axes.plot(x, y, line, color=colour, marker=mark, markersize=2.6, label=words, gid=name)
    shows = _finite(found.shows)
    every = [_finite(getattr(found, name)) for name, *_ in _STYLES]
    seen = np.concatenate([*every, shows])
    seen = seen[np.isfinite(seen) & (seen > 0.0)]
    bottom, top = (seen.min() / 1.6, seen.max() * 1.4) if seen.size else (0.01, 1.0)
    axes.plot(x, shows, color=BLACK, label="a second star shows", gid="shows")
    # Where none shows within the separations tried, the ground reaches the top.
    axes.fill_between(
        x,
        bottom,
        np.where(np.isfinite(shows), shows, top),
        color=_GROUND,
        linewidth=0.0,
        zorder=0,
        gid="ground",
    )
    axes.set_ylim(bottom, top)
    axes.set_xlim(float(x[0]), float(x[-1]))
    logarithmic(axes.yaxis)
    axes.set_xlabel("magnitude difference (mag)")
    axes.set_ylabel(f"separation ({SECOND})")
    axes.legend(
        loc="lower left",
        bbox_to_anchor=(-0.02, 1.0),
        ncols=2,
        frameon=False,
        borderaxespad=0.2,
        handlelength=2.6,
        columnspacing=1.0,
        labelspacing=0.25,
        fontsize=6.5,
    )


def _draw_contrast(axes: Any, found: SeparationMap) -> None:
    """The faintest second star against the separation, the fainter the lower."""
    x, y = found.separation, _finite(found.contrast)
    faintest = float(found.magnitude_difference[-1])
    # Beyond the differences tried nothing is known.
    beyond = np.flatnonzero(y >= faintest)
    known = y.copy()
    known[beyond[1:]] = np.nan
    axes.plot(x, known, color=BLACK, marker=".", gid="contrast")
    axes.fill_between(
        x,
        np.where(np.isfinite(y), y, 0.0),
        faintest,
        color=_GROUND,
        linewidth=0.0,
        zorder=0,
        gid="ground-contrast",
    )
    axes.set_ylim(faintest, 0.0)
    axes.set_xlim(float(x[0]) / 1.25, float(x[-1]) * 1.25)
    logarithmic(axes.xaxis)
    axes.set_xlabel(f"separation ({SECOND})")
    axes.set_ylabel("faintest that shows (mag)")


def _finite(values: FloatArray) -> FloatArray:
    return np.where(np.isfinite(values), values, np.nan)
