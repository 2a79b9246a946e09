"""The right panel of a figure: the light along the subject's axis, and what the model leaves."""

from __future__ import annotations

from typing import Any

import numpy as np

from simimg.show.canvas import BLACK, BLUE, GREEN, VERMILION, grouped
from simimg.show.profile import Profile
from simimg.show.subject import Subject

_STYLES = (
    {"color": BLUE, "linestyle": "-", "linewidth": 1.1},
    {"color": VERMILION, "linestyle": "--", "linewidth": 1.0},
    {"color": GREEN, "linestyle": "-.", "linewidth": 1.0},
)
_LEAST_RESIDUAL = 3.5
_HEADROOM = 1.38  # room above the peak for the legend and the width of the PSF
_LONG = 1e5  # from which numbers are given in thousands, millions, and so on
_RAISED = str.maketrans(
    "0123456789", "\u2070\u00b9\u00b2\u00b3\u2074\u2075\u2076\u2077\u2078\u2079"
)
_CROWD = 100  # points that still stand apart


def draw_profile(
    axes: Any, below: Any | None, profile: Profile, subject: Subject, *, unit: str
) -> None:
    """Draw a profile, and the residuals of its model.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    below : matplotlib.axes.Axes or None
        For the residuals; None where there is no model.
    profile : Profile
    subject : Subject
    unit : str
        Of the light.
    """
    if profile.offsets.size == 0:
        axes.set_axis_off()
        axes.text(0.5, 0.5, "too close to the edge for a profile", ha="center", va="center")
        return
    scale = subject.compass.scale or 1.0
    for curve, style in zip(profile.curves, _STYLES, strict=False):
        axes.plot(profile.fine * scale, curve.values, label=curve.name, gid=curve.key, **style)
    offsets = profile.offsets * scale
    points = _points(offsets.size)
    axes.errorbar(offsets, profile.values, profile.errors, label="data", **points)
    seen = profile.values[np.isfinite(profile.values)]
    tops = [float(curve.values.max()) for curve in profile.curves]
    top = max([float(seen.max(initial=0.0)), *tops, float(profile.errors.max()) * 3.0])
    spread = (profile.values - profile.errors)[np.isfinite(profile.values)]
    least = min(float(spread.min(initial=0.0)), 0.0)
    axes.set_ylim(least - 0.06 * top, _HEADROOM * top)
    axes.set_xlim(offsets[0] - scale, offsets[-1] + scale)
    _mark_stars(axes, profile, scale)
    _mark_fwhm(axes, profile, scale, known=subject.compass.scale is not None)
    power = 3 * int(np.log10(top) // 3) if top >= _LONG else 0
    axes.yaxis.set_major_formatter(lambda value, _: grouped(value / 10.0**power))
    axes.legend(
        loc="upper right", frameon=False, handlelength=2.2, borderaxespad=0.2, labelspacing=0.3
    )
    words = f"{unit}s per pixel" if unit == "electron" else "adu per pixel"
    axes.set_ylabel(words + (f" / 10{str(power).translate(_RAISED)}" if power else ""))
    lowest = axes if below is None else below
    lowest.set_xlabel(_along(subject))
    for one in (axes, below):
        if one is not None:
            one.set_xlim(axes.get_xlim())
            one.tick_params(direction="in", top=True, right=True)
    if below is not None and profile.residuals is not None:
        axes.tick_params(labelbottom=False)
        below.axhline(0.0, color=BLUE, linewidth=0.8)
        below.errorbar(offsets, profile.residuals, 1.0, **points)
        finite = profile.residuals[np.isfinite(profile.residuals)]
        most = max(_LEAST_RESIDUAL, 1.25 * float(np.abs(finite).max(initial=0.0)))
        below.set_ylim(-most, most)
        below.set_ylabel("residual (\N{GREEK SMALL LETTER SIGMA})")
        below.locator_params(axis="y", nbins=4)


def _points(count: int) -> dict[str, Any]:
    """How data points are drawn: above the model, or small below it where they crowd."""
    points: dict[str, Any] = {"fmt": "o", "linestyle": "none"}
    if count <= _CROWD:
        return points | {"color": BLACK, "markersize": 2.2, "elinewidth": 0.7, "zorder": 3}
    return points | {"color": "0.45", "markersize": 1.3, "elinewidth": 0.5, "zorder": 1}


def _along(subject: Subject) -> str:
    unit = "arcsec" if subject.compass.scale is not None else "pixel"
    if subject.position_angle is None:
        return f"offset along x ({unit})"
    return f"offset towards position angle {subject.position_angle:.1f}\N{DEGREE SIGN} ({unit})"


def _mark_stars(axes: Any, profile: Profile, scale: float) -> None:
    """The places of the stars as ticks on the base line."""
    for number, offset in enumerate(profile.marks, start=1):
        axes.axvline(
            offset * scale,
            color="0.55",
            linewidth=0.7,
            linestyle=":",
            zorder=0,
            gid=f"star-{number}",
        )


def _mark_fwhm(axes: Any, profile: Profile, scale: float, *, known: bool) -> None:
    """The width of the PSF, true to scale, in the upper left corner."""
    if profile.fwhm is None:
        return
    width = profile.fwhm * scale
    low, high = axes.get_xlim()
    left, height = low + 0.045 * (high - low), 0.93
    across = axes.get_xaxis_transform()
    axes.plot(
        [left, left + width],
        [height, height],
        color=BLACK,
        linewidth=0.9,
        marker="|",
        markersize=5.0,
        transform=across,
        gid="psf-fwhm",
    )
    words = f"{width:.3g}" + ("\N{DOUBLE PRIME}" if known else " pixels")
    axes.annotate(
        f"PSF FWHM {words}",
        (left, height),
        (0, -5),
        xycoords=across,
        textcoords="offset points",
        ha="left",
        va="top",
        fontsize=7.0,
        bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.8},
    )
