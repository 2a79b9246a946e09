"""The left panel of a figure: the frame itself, with scale, directions and a colour bar."""

from __future__ import annotations

from math import cos, sin
from typing import Any

import numpy as np

from simimg.arrays import AnyArray
from simimg.show.canvas import beside, grouped
from simimg.show.compass import round_length, round_number, shown_length
from simimg.show.marks import draw_arrows, draw_scale_bar, draw_word, inked
from simimg.show.profile import Profile
from simimg.show.signal import Light
from simimg.show.stretch import Stretch, choose_stretch
from simimg.show.subject import Subject

COLOUR_MAP = "magma"  # its lightness rises evenly: it survives grey print and colour blindness
_MOST_SHOWN = 1200  # pixels in the side of a drawn image; more are averaged in blocks


def draw_frame(
    axes: Any,
    light: Light,
    subject: Subject,
    profile: Profile,
    *,
    simulated: bool,
    stretch: Stretch | None = None,
) -> None:
    """Draw the window of a frame about a subject.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    light : Light
    subject : Subject
    profile : Profile
        Its strip is marked.
    simulated : bool
        Whether the panel says so.
    stretch : Stretch, optional
        That of other panels beside it; chosen for this one unless given.
    """
    from matplotlib.colors import AsinhNorm

    left, right, bottom, top = subject.window
    values = light.values[bottom:top, left:right]
    shown = _averaged(values)
    if stretch is None:
        stretch = choose_stretch(shown, noise=light.noise, field=subject.kind in ("star", "source"))
    picture = axes.imshow(
        shown,
        origin="lower",
        extent=(left - 0.5, right - 0.5, bottom - 0.5, top - 0.5),
        cmap=COLOUR_MAP,
        norm=AsinhNorm(stretch.softening, vmin=stretch.low, vmax=stretch.high),
        interpolation="nearest",
        gid="frame",
    )
    axes.set_facecolor("0.5")
    axes.set_xlabel("x (pixel)")
    axes.set_ylabel("y (pixel)")
    axes.locator_params(nbins=5, integer=True)
    _colour_bar(axes, picture, stretch.ticks(), light.unit)
    if simulated:
        draw_word(axes)
    strip_ends = _mark_strip(axes, subject, profile)
    if profile.fit is not None:
        _mark_stars(axes, profile.fit.places)
    orient(axes, subject, strip_ends)


def _averaged(values: AnyArray) -> AnyArray:
    """The image, or means over square blocks where it has more pixels than a page can show."""
    block = -(-max(values.shape) // _MOST_SHOWN)
    if block == 1:
        return values
    rows, columns = (max(side // block, 1) * block for side in values.shape)
    if min(values.shape) < block:
        return values
    blocks = values[:rows, :columns].reshape(rows // block, block, columns // block, block)
    return np.asarray(blocks.mean(axis=(1, 3)))


def _colour_bar(axes: Any, picture: Any, ticks: list[float], unit: str) -> None:
    bar = axes.figure.colorbar(picture, cax=axes.inset_axes(beside(axes)))
    bar.set_ticks(ticks, labels=[grouped(tick) for tick in ticks])
    bar.ax.minorticks_off()
    bar.set_label(f"{unit}s per pixel above background" if unit == "electron" else "adu per pixel")
    bar.outline.set_linewidth(0.6)


def _mark_strip(axes: Any, subject: Subject, profile: Profile) -> list[tuple[float, float]]:
    """A short line at either end of the strip, clear of the subject itself; where they end."""
    if profile.offsets.size < 2:
        return []
    c, s = cos(subject.angle), sin(subject.angle)
    # Not to the very end, where the corners' texts begin.
    first, last = 0.95 * float(profile.offsets[0]), 0.95 * float(profile.offsets[-1])
    length = 0.16 * (last - first)
    ends = ((first, first + length), (last - length, last))
    for number, (near, far) in enumerate(ends, start=1):
        (line,) = axes.plot(
            [subject.x + near * c, subject.x + far * c],
            [subject.y + near * s, subject.y + far * s],
            linewidth=0.8,
            gid=f"strip-{number}",
        )
        inked(line)
    return [(subject.x + end * c, subject.y + end * s) for end in (first, last)]


def _mark_stars(axes: Any, places: AnyArray) -> None:
    """Small crosses at the fitted stars."""
    from matplotlib.patheffects import Normal, withStroke

    axes.plot(
        places[:, 0],
        places[:, 1],
        linestyle="none",
        marker="+",
        markersize=4.0,
        markeredgewidth=0.8,
        color="black",
        path_effects=[withStroke(linewidth=1.8, foreground="white"), Normal()],
        gid="fitted-stars",
    )


def orient(
    axes: Any, subject: Subject, taken: list[tuple[float, float]], *, suffix: str = ""
) -> None:
    """Scale bar, north and east on a picture of a subject's window, and the window's edges.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    subject : Subject
    taken : list of (x, y)
        Places in pixels that must stay free.
    suffix : str, optional
        Of the marks' names in the figure.
    """
    left, right, bottom, top = (edge - 0.5 for edge in subject.window)
    edges = (left, right, bottom, top)
    longest = 0.33 * min(right - left, top - bottom)
    scale = subject.compass.scale
    if scale is None:
        pixels = round_number(max(longest, 1.0))
        words = f"{pixels:.6g} pixel" + ("s" if pixels > 1.0 else "")
    else:
        arcsec = round_length(longest * scale)
        pixels, words = arcsec / scale, shown_length(arcsec)
    draw_scale_bar(axes, edges, pixels, words, suffix=suffix)
    draw_arrows(axes, subject.compass, edges, taken, suffix=suffix)
    axes.set_xlim(left, right)
    axes.set_ylim(bottom, top)
