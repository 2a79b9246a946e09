"""Panels of a telescope's optics: pupil, wavefront, PSF, transfer function; each with its scale."""

from __future__ import annotations

from collections.abc import Callable
from math import degrees, floor, log10
from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.show.canvas import BLACK, BLUE, GREEN, VERMILION, beside
from simimg.show.compass import round_number
from simimg.show.framepanel import COLOUR_MAP
from simimg.show.marks import draw_arrows, draw_scale_bar
from simimg.show.opticsview import OpticsView

PATH_COLOURS = "viridis"
"""Of a wavefront: even in lightness, so that ahead and behind stay apart in grey print."""

_LENGTHS = ((1.0, "m"), (1e-2, "cm"), (1e-3, "mm"))
_PATHS = ((1.0, "m"), (1e-3, "mm"), (1e-6, "\N{MICRO SIGN}m"), (1e-9, "nm"))
_ARCSEC = degrees(1.0) * 3600.0
_ANGLES = (
    (3600.0 / _ARCSEC, "deg"),
    (60.0 / _ARCSEC, "arcmin"),
    (1.0 / _ARCSEC, "arcsec"),
    (1e-3 / _ARCSEC, "mas"),
)
_STYLES = {
    "perfect": {"color": BLACK, "linestyle": ":", "linewidth": 1.0},
    "delivered": {"color": BLUE, "linestyle": "-", "linewidth": 1.2},
    "delivered-x": {"color": BLUE, "linestyle": "-", "linewidth": 1.2},
    "delivered-y": {"color": VERMILION, "linestyle": "--", "linewidth": 1.1},
    "pixel": {"color": GREEN, "linestyle": "-.", "linewidth": 1.0},
}
_FAINTEST, _PALEST = 1e-5, 1e-2  # of the peak: bounds of the darkest shade of a PSF


def _unit(size: float, units: tuple[tuple[float, str], ...]) -> tuple[float, str]:
    """The largest unit of which `size` holds at least one; the smallest one otherwise."""
    return next((one for one in units if size >= one[0]), units[-1])


def _of_cycles(cut_off: float) -> tuple[float, str]:
    """The smallest angle to which a cut-off has at least one cycle; the largest one otherwise."""
    return next((one for one in _ANGLES[::-1] if cut_off * one[0] >= 1.0), _ANGLES[0])


def _colour_bar(axes: Any, picture: Any, label: str) -> Any:
    bar = axes.figure.colorbar(picture, cax=axes.inset_axes(beside(axes)))
    bar.ax.minorticks_off()
    bar.set_label(label)
    bar.outline.set_linewidth(0.6)
    return bar


def _on_pupil(axes: Any, view: OpticsView, suffix: str) -> tuple[float, float, float, float]:
    """Axes in lengths on the pupil, with its scale and directions; the extent of its picture."""
    size, name = _unit(0.5 * view.side, _LENGTHS)
    axes.set_xlabel(f"x in the pupil ({name})")
    axes.set_ylabel(f"y in the pupil ({name})")
    axes.locator_params(nbins=5)
    half = 0.5 * view.side / size
    edges = (-half, half, -half, half)
    length = round_number(0.5 * half)
    draw_scale_bar(axes, edges, length, f"{length:.6g} {name}", suffix=suffix)
    draw_arrows(axes, view.compass, edges, [], suffix=suffix)
    return edges


def draw_pupil(axes: Any, view: OpticsView) -> None:
    """What part of the light each place of the pupil passes."""
    pupil = view.train.pupil
    picture = axes.imshow(
        pupil.transmission,
        origin="lower",
        extent=_on_pupil(axes, view, "-pupil"),
        cmap="gray",
        vmin=0.0,
        vmax=1.0,
        gid="pupil",
    )
    _colour_bar(axes, picture, "transmission")
    size, name = (1.0, "m\N{SUPERSCRIPT TWO}") if pupil.area >= 0.1 else (1e-4, "cm" + "\u00b2")
    axes.set_title(f"Pupil: {pupil.area / size:.4g} {name} open", loc="left")


def draw_wavefront(axes: Any, view: OpticsView) -> None:
    """The error of the wavefront, tilt taken out."""
    path, rms = view.wavefront(), view.train.aperture.rms
    most = float(np.nanmax(np.abs(path)))
    size, name = _unit(most, _PATHS) if most > 0.0 else _PATHS[-1]
    most = max(most / size, 1e-3) if most > 0.0 else 1.0
    picture = axes.imshow(
        path / size,
        origin="lower",
        extent=_on_pupil(axes, view, "-wavefront"),
        cmap=PATH_COLOURS,
        vmin=-most,
        vmax=most,
        interpolation="nearest",
        gid="wavefront",
    )
    axes.set_facecolor("0.7")
    _colour_bar(axes, picture, f"optical path ({name})")
    words = "no error"
    if rms > 0.0:
        words = f"{rms / size:.3g} {name} rms, {rms / view.train.wavelength:.2g} waves"
    axes.set_title(f"Wavefront: {words}", loc="left")


def draw_psf(axes: Any, view: OpticsView) -> None:
    """The PSF at the focal plane, logarithmic."""
    from matplotlib.colors import LogNorm

    image, half = view.psf()
    size, name = _unit(half, _ANGLES)
    edge = half / size
    least = float(np.clip(10.0 ** floor(log10(_floor(image))), _FAINTEST, _PALEST))
    picture = axes.imshow(
        np.maximum(image, least),
        origin="lower",
        extent=(-edge, edge, -edge, edge),
        cmap=COLOUR_MAP,
        norm=LogNorm(least, 1.0),
        gid="psf",
    )
    bar = _colour_bar(axes, picture, "light over the peak's")
    powers = range(round(log10(least)), 1)
    bar.set_ticks([10.0**power for power in powers], labels=[_power(power) for power in powers])
    axes.set_xlabel(f"x ({name})")
    axes.set_ylabel(f"y ({name})")
    axes.locator_params(nbins=5)
    draw_arrows(axes, view.compass, (-edge, edge, -edge, edge), [])
    length = round_number(0.6 * edge)
    draw_scale_bar(axes, (-edge, edge, -edge, edge), length, f"{length:.6g} {name}")
    axes.set_xlim(-edge, edge)
    axes.set_ylim(-edge, edge)
    axes.set_title(f"PSF: FWHM {view.fwhm / size:.3g} {name}, Strehl {view.strehl:.2g}", loc="left")


def _floor(image: FloatArray) -> float:
    return max(float(np.percentile(image, 10.0)), 1e-12)


def _power(power: int) -> str:
    return "1" if power == 0 else f"$10^{{{power}}}$"


def draw_transfer(axes: Any, view: OpticsView) -> None:
    """Moduli of the transfer functions along the detector's axes."""
    frequency, curves = view.curves()
    cut_off = view.train.optics.band_limit
    size, name = _of_cycles(cut_off)
    for curve in curves:
        axes.plot(
            frequency * size, curve.values, label=curve.name, gid=curve.key, **_STYLES[curve.key]
        )
    end = float(frequency[-1]) * size
    scale = view.train.pixel_scale
    if scale is not None and 0.5 / scale * size < end:
        place = 0.5 / scale * size
        axes.axvline(place, color="0.55", linewidth=0.7, label="pixel's Nyquist", gid="nyquist")
    axes.set_xlim(0.0, end)
    axes.set_ylim(-0.03, 1.04)
    axes.set_xlabel(f"spatial frequency (cycles per {name})")
    axes.set_ylabel("modulus of the transfer function")
    axes.tick_params(direction="in", top=True, right=True)
    axes.legend(loc="best", framealpha=1.0, edgecolor="none", handlelength=2.4, borderpad=0.1)
    axes.set_title(f"Transfer: optics end at {cut_off * size:.3g} cycles/{name}", loc="left")


DRAWN: dict[str, Callable[[Any, OpticsView], None]] = {
    "pupil": draw_pupil,
    "wavefront": draw_wavefront,
    "psf": draw_psf,
    "transfer": draw_transfer,
}
"""Every panel, in the order of the light's way."""
