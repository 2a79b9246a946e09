"""The pictures of a page: frame, profile with the criteria's limits, views side by side.

Each picture is one panel, narrow enough that its lettering is legible where a phone's screen
shrinks it, and has words for those who do not see it. PNG within the page.
"""

from __future__ import annotations

import base64
import io
from collections.abc import Sequence
from dataclasses import replace
from math import isfinite
from typing import Any

import numpy as np

from simimg.arrays import frozen
from simimg.show.canvas import BLACK, BLUE, GREEN, VERMILION, drawable, look, sheet
from simimg.show.framepanel import draw_frame
from simimg.show.profile import Profile
from simimg.show.profilepanel import draw_profile
from simimg.show.reportfacts import Facts
from simimg.show.reportpage import Picture
from simimg.show.reporttable import Column, Table, figures, number, plain_text, table
from simimg.show.reportviews import View
from simimg.show.signal import Light, frame_light
from simimg.show.stretch import Stretch, choose_stretch
from simimg.show.subject import Subject

_DOTS_PER_INCH = 200
_WIDTH = 100.0  # mm
_SIDE = 64.0  # of a frame, mm
_LEFT, _LOW, _HIGH = 13.0, 11.0, 6.0  # margins, mm
_SECOND = "\N{DOUBLE PRIME}"
_SECOND_STAR = "second star"


def picture(figure: Any, key: str, *, alt: str, caption: str) -> Picture:
    """A drawn figure as a picture; to be called within `simimg.show.canvas.look`."""
    held = io.BytesIO()
    about = {"Title": f"Simulated: {key}", "Description": plain_text(alt), "Software": "simimg"}
    figure.savefig(held, format="png", dpi=_DOTS_PER_INCH, metadata=about)
    content = held.getvalue()
    # Width and height stand at a fixed place of a PNG file.
    width, height = (int.from_bytes(content[i : i + 4], "big") for i in (16, 20))
    source = "data:image/png;base64," + base64.b64encode(content).decode("ascii")
    return Picture(key, source, plain_text(alt), plain_text(caption), width, height)


def frame_picture(facts: Facts) -> Picture:
    """The frame about its subject."""
    subject, profile = facts.subject, facts.profile
    what = _what(subject)
    alt = f"Picture of the simulated frame, {_extent(subject)}, {what}, with a scale bar"
    about = "" if subject.kind != "pair" else f" about {subject.label}"
    caption = f"The simulated frame{about}, asinh stretch"
    if profile.fit is not None and len(profile.fit.places) > 1:
        alt += "; small crosses mark the fitted stars"
        caption += "; crosses at the fitted stars"
    elif profile.fit is not None:
        alt += "; a small cross marks the one star that is fitted"
        caption += "; a cross at the one star that is fitted"
    alt += f". {_directions(subject)}"
    if profile.offsets.size >= 2:
        through = "" if subject.kind == "pair" else f" through {_name(subject)}"
        caption += f"; the short lines are the ends of the strip of the profile{through}"
    with look():
        figure = _plate(facts.light, subject, profile, None, "")
        return picture(figure, "frame", alt=alt, caption=caption + ".")


def profile_picture(facts: Facts) -> Picture | None:
    """The light along the subject's axis; None where it lies too close to the edge for one."""
    profile, subject = facts.profile, facts.subject
    if profile.offsets.size == 0:
        return None
    scale = subject.compass.scale or 1.0
    unit = _SECOND if subject.compass.scale else " pixels"
    bars = _bars(facts)
    along = (
        "along x"
        if subject.position_angle is None
        else f"along position angle {subject.position_angle:.1f}\N{DEGREE SIGN}"
    )
    caption = (
        f"Mean over a strip {figures(profile.width * scale, 2)}{unit} wide {along}, with 1-sigma "
        "errors"
    )
    if profile.fit is not None:
        two = len(profile.fit.places) > 1
        stars = "the curves are two stars" if two else "the curve is one star"
        caption += f"; {stars} of the frame's own PSF fitted to the pixels"
    elif profile.curves:
        caption += "; the curve is the scene without noise"
    if profile.residuals is not None:
        caption += "; below, what the curve leaves, in errors"
    if bars:
        second = (
            "how far from the first star, at 0, the second is, and how far it must be"
            if any(name == _SECOND_STAR for name, *_ in bars)
            else "how far from the star, at 0, another must be"
        )
        caption += (
            f". At the bottom, to the same scale: {second} for each criterion; the dark ring is "
            "the pupil's own"
        )
    peak = float(np.nanmax(profile.values))
    alt = (
        f"Graph of the light through {_name(subject)} {along}: it peaks at "
        f"{figures(peak, 3)} {facts.light.unit}s per pixel. "
        + " ".join(f"{name}: {figures(length, 3)} arcsec." for name, length, _, _ in bars)
    )
    with look():
        figure = _profile_sheet(facts, bars)
        return picture(figure, "profile", alt=alt, caption=caption + ".")


def profile_table(facts: Facts) -> Table:
    """The points of the profile, for a file."""
    profile = facts.profile
    known = facts.subject.compass.scale is not None
    scale = facts.subject.compass.scale or 1.0
    unit = f"{facts.light.unit}s per pixel"
    columns = [
        Column("offset", "arcsec" if known else "pixel", numbers=True),
        Column("light", unit, numbers=True),
        Column("error", unit, numbers=True),
    ]
    values = [profile.offsets * scale, profile.values, profile.errors]
    if profile.residuals is not None:
        columns.append(Column("residual", "sigma", numbers=True))
        values.append(profile.residuals)
    rows = [[number(float(one)) for one in row] for row in zip(*values, strict=True)]
    return table("profile", "The light along the axis", columns, rows)


def view_pictures(facts: Facts, views: Sequence[View]) -> tuple[Picture, ...]:
    """The views of a scene, on one stretch."""
    if not views:
        return ()
    left, right, bottom, top = facts.subject.window
    lights = [frame_light(view.frame) for view in views]
    cuts = [light.values[bottom:top, left:right].ravel() for light in lights]
    noise = float(np.median([light.noise for light in lights]))
    stretch = choose_stretch(np.concatenate(cuts), noise=noise)
    blank = _without_marks(facts.profile)
    made = []
    with look():
        for view, light, cut in zip(views, lights, cuts, strict=True):
            caption = f"{view.title}. {view.remark}"
            full = view.full_pixels(facts.subject.window)
            if full:
                some = "pixel is" if full == 1 else "pixels are"
                caption += f" {full} {some} full."
            alt = (
                f"{view.title}: {_extent(facts.subject)} of the simulated frame, "
                f"{_what(facts.subject)}; the brightest pixel has {figures(float(cut.max()), 3)} "
                f"{light.unit}s above the background."
            )
            figure = _plate(light, facts.subject, blank, stretch, view.title)
            made.append(picture(figure, f"view-{view.key}", alt=alt, caption=caption))
    return tuple(made)


def _plate(
    light: Light, subject: Subject, profile: Profile, stretch: Stretch | None, title: str
) -> Any:
    """A frame with its scale of brightness, as a figure."""
    left, right, bottom, top = subject.window
    tall = _SIDE * min(max((top - bottom) / (right - left), 0.35), 1.4)
    height = _LOW + tall + _HIGH
    figure = sheet(_WIDTH, height)
    axes = figure.add_axes((_LEFT / _WIDTH, _LOW / height, _SIDE / _WIDTH, tall / height))
    axes.set_anchor("W")
    draw_frame(axes, light, subject, profile, simulated=True, stretch=stretch)
    axes.set_title(drawable(title, ems=24.0), loc="left", parse_math=False)
    return figure


def _without_marks(profile: Profile) -> Profile:
    """A profile of which a frame shows nothing."""
    none = frozen(np.zeros(0))
    return replace(
        profile, offsets=none, values=none, errors=none, residuals=None, fit=None, marks=()
    )


_Bar = tuple[str, float, float, str]
"""Name, length and its error (arcsec, NaN for none), colour."""


def _bars(facts: Facts) -> list[_Bar]:
    """Separations to be drawn under a profile: the pair's own, and those of the criteria."""
    if facts.subject.compass.scale is None or facts.subject.kind not in ("pair", "star"):
        return []
    found: list[_Bar] = []
    none, delivered = float("nan"), facts.limits.delivered
    sparrow, rayleigh = delivered.sparrow_arcsec, delivered.rayleigh_arcsec
    if facts.chosen is not None:
        # The limits of the verdicts: for the magnitude difference that was measured.
        one = facts.chosen.measured
        second = one.separation_arcsec, one.separation_error_arcsec
        found.append((_SECOND_STAR, *second, BLACK))
        sparrow, rayleigh = one.sparrow.limit_arcsec, one.rayleigh.limit_arcsec
    found.append(("Sparrow", sparrow, none, VERMILION))
    found.append(("Rayleigh", rayleigh, none, BLUE))
    found.append(("dark ring", facts.limits.diffraction.rayleigh_arcsec, none, GREEN))
    return [bar for bar in found if isfinite(bar[1])]


def _profile_sheet(facts: Facts, bars: list[_Bar]) -> Any:
    """Profile, residuals and criteria, one over another."""
    profile, subject = facts.profile, facts.subject
    gap, low, left, right = 1.5, 10.0, 16.0, 3.0
    of_bars = 4.0 * len(bars) + 2.0 if bars else 0.0
    of_residuals = 14.0 if profile.residuals is not None else 0.0
    heights = [("bars", of_bars), ("residuals", of_residuals), ("light", 52.0)]
    height = low + sum(tall + gap for _, tall in heights if tall) + 5.0
    figure = sheet(_WIDTH, height)
    bottom, panels = low, {}
    for name, tall in heights:
        if tall:
            wide = _WIDTH - left - right
            box = (left / _WIDTH, bottom / height, wide / _WIDTH, tall / height)
            panels[name] = figure.add_axes(box)
            bottom += tall + gap
    upper, below = panels["light"], panels.get("residuals")
    draw_profile(upper, below, profile, subject, unit=facts.light.unit)
    upper.set_title(drawable(_name(subject), ems=22.0), loc="left", parse_math=False)
    upper.set_title("simulated", loc="right", gid="simulated")
    if "bars" in panels:
        lowest = upper if below is None else below
        _draw_bars(panels["bars"], bars, upper.get_xlim(), lowest)
    return figure


def _draw_bars(axes: Any, bars: list[_Bar], edges: tuple[float, float], above: Any) -> None:
    """Separations from the first star outwards, with their names to the left of it."""
    axes.set_xlabel(above.get_xlabel())
    above.set_xlabel("")
    above.tick_params(labelbottom=False)
    axes.set_xlim(edges)
    axes.set_ylim(len(bars) - 0.4, -0.6)
    axes.set_yticks([])
    axes.tick_params(direction="in", top=True)
    axes.axvline(0.0, color="0.55", linewidth=0.7, linestyle=":")
    for row, (name, length, error, colour) in enumerate(bars):
        axes.plot([0.0, length], [row, row], color=colour, linewidth=2.0, solid_capstyle="butt")
        if isfinite(error):
            axes.errorbar([length], [row], xerr=[error], color=colour, linewidth=0.8, capsize=2.0)
        words = f"{name} {figures(length, 3)}{_SECOND}"
        axes.annotate(
            words, (0.0, row), (-4, 0), textcoords="offset points", ha="right", va="center"
        )


def _name(subject: Subject) -> str:
    """What a picture is of, in a sentence."""
    if subject.kind == "source":
        return "the brightest pixel"
    return subject.label or f"the brightest {subject.kind}"


def _what(subject: Subject) -> str:
    if subject.kind == "pair":
        return f"with the pair {subject.label} in the middle"
    return f"whose brightest object is {_name(subject)}"


def _extent(subject: Subject) -> str:
    """How large the piece is."""
    left, right, bottom, top = subject.window
    scale = subject.compass.scale
    if scale is None:
        return f"{right - left} by {top - bottom} pixels"
    sides = " by ".join(figures(side * scale, 3) for side in (right - left, top - bottom))
    return f"{sides} arcsec"


def _directions(subject: Subject) -> str:
    """Where north and east lie on the picture."""
    if not subject.compass.known:
        return ""
    words = [
        f"{name} points {_clock(*direction)}"
        for name, direction in (("north", subject.compass.north), ("east", subject.compass.east))
    ]
    return f"{words[0].capitalize()}, {words[1]}."


def _clock(dx: float, dy: float) -> str:
    """A direction on the page in words."""
    across = "right" if dx > 0.38 else "left" if dx < -0.38 else ""
    along = "up" if dy > 0.38 else "down" if dy < -0.38 else ""
    return " and ".join(word for word in (along, across) if word)
