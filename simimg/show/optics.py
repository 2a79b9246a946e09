"""The figure of a telescope's optics: pupil, wavefront, PSF and transfer function of a scene.

Up to four panels with their scales, two abreast unless the figure is narrow, as PNG, PDF or SVG;
the same scene gives the same bytes.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from math import degrees
from typing import Any

from simimg.assembly.report import cautions, wavelength_text
from simimg.scene.model import Scene
from simimg.show.canvas import (
    TWO_ABREAST,
    check_width,
    drawable,
    figure_format,
    look,
    save,
    sheet,
)
from simimg.show.opticspanels import DRAWN
from simimg.show.opticsview import OpticsView, optics_view

PANELS = tuple(DRAWN)
"""What can be drawn."""

_PANEL = 58.0  # side of a panel unless the figure's width is given, mm
_LEFT, _BETWEEN = 14.0, 34.0  # margins beside the panels, mm: labels and colour bars
_BELOW, _ABOVE, _HEADING = 11.0, 6.0, 4.5
_ARCSEC = "\N{DOUBLE PRIME}"


def write_optics(
    scene: Scene,
    path: str | os.PathLike[str],
    *,
    what: Sequence[str] = PANELS,
    overwrite: bool = False,
    width: float | None = None,
) -> str:
    """Draw the optics of a scene and write the figure to a file.

    Parameters
    ----------
    scene : Scene
        A camera is not needed.
    path : path
        Ends in .png, .pdf or .svg.
    what : sequence of {"pupil", "wavefront", "psf", "transfer"}, optional
        The panels, in their order.
    overwrite : bool, optional
        Whether a file of that name may be replaced.
    width : float, optional
        Of the figure, 80 to 400 mm; 92 mm for each of two panels abreast unless given.

    Returns
    -------
    str
        The caption: the set-up and what is drawn.

    Raises
    ------
    InputError
        Another ending, a file that exists or cannot be written, a map that cannot serve.
    RunError
        The system refused; no part of the file is left behind.
    ValueError
        No panel, or a word that is none; a width that is out of range.
    """
    if width is not None:
        check_width(width)
    panels = list(dict.fromkeys(what))
    unknown = [one for one in panels if one not in DRAWN]
    if not panels or unknown:
        raise ValueError(f"what must be some of {', '.join(PANELS)}, got {list(what)}")
    file_format = figure_format(path, overwrite=overwrite)
    view = optics_view(scene)
    caption = optics_caption(view, panels)
    with look():
        figure = draw_optics(view, panels, width=width)
        save(
            figure,
            path,
            format=file_format,
            title=drawable(f"Simulated optics: {scene.title or 'untitled'}", longest=200),
            description=caption,
            overwrite=overwrite,
        )
    return caption


def draw_optics(view: OpticsView, panels: Sequence[str], *, width: float | None = None) -> Any:
    """The figure as a matplotlib object; to be called within `simimg.show.canvas.look`."""
    narrow = width is not None and width < TWO_ABREAST
    columns = 1 if narrow else min(len(panels), 2)
    side = _PANEL if width is None else width / columns - _BETWEEN
    rows = -(-len(panels) // columns)
    step = _BELOW + side + _ABOVE
    width = columns * (side + _BETWEEN)
    height = rows * step + _HEADING
    figure = sheet(width, height)
    for number, name in enumerate(panels):
        row, column = divmod(number, columns)
        left = _LEFT + column * (side + _BETWEEN)
        bottom = (rows - 1 - row) * step + _BELOW
        axes = figure.add_axes((left / width, bottom / height, side / width, side / height))
        DRAWN[name](axes, view)
    top = 1.0 - 0.45 * _HEADING / height
    figure.text(
        _LEFT / width,
        top,
        _heading(view.scene, ems=12.0 if columns == 1 else 40.0),
        va="center",
        weight="bold",
        parse_math=False,
    )
    right = (width - (_BETWEEN - _LEFT)) / width
    figure.text(right, top, "simulated", va="center", ha="right", gid="simulated")
    return figure


def _heading(scene: Scene, *, ems: float) -> str:
    name = scene.telescope.name or scene.title or ""
    return drawable(name, ems=ems)


def optics_caption(view: OpticsView, panels: Sequence[str]) -> str:
    """The caption of a figure of optics, one paragraph."""
    scene, train = view.scene, view.train
    title = f"Simulated optics: {drawable(scene.title, longest=200)}." if scene.title else ""
    words = {
        "pupil": "Pupil: transmission of the pupil as projected on the detector",
        "wavefront": "Wavefront: its error on the axis as optical path, piston and tilt taken out, "
        "grey where no light passes",
        "psf": "PSF: as it falls on the focal plane, without the pixel, on a logarithmic scale; "
        f"its FWHM is {_angle(view.fwhm)}",
        "transfer": "Transfer: modulus of the transfer functions along the detector's axes",
    }
    return " ".join(
        one
        for one in (
            title or "Simulated optics.",
            _setup(scene, view),
            *(f"{words[name]}." for name in panels),
            "A measured PSF stands in place of optics and air." if scene.psf is not None else "",
            _colours(train.wavelengths.size) if {"psf", "transfer"} & set(panels) else "",
            *cautions(scene),
        )
        if one
    )


def _setup(scene: Scene, view: OpticsView) -> str:
    train, telescope = view.train, scene.telescope
    parts = [drawable(telescope.name or ""), f"aperture {telescope.aperture:.4g} m"]
    if telescope.obstruction:
        parts.append(f"obstruction {telescope.obstruction:.3g}")
    if telescope.segments is not None:
        parts.append("segmented")
    band = drawable(scene.band.name or "")
    parts.append(f"{band} {wavelength_text(train.wavelength)}".strip())
    if train.aperture.rms > 0.0:
        parts.append(f"wavefront {train.aperture.rms * 1e9:.3g} nm rms")
    if train.seeing is None:
        parts.append("above the atmosphere")
    else:
        parts.append(f"seeing {_angle(train.seeing)} (500 nm, zenith)")
        parts.append(f"airmass {train.airmass:.3g}")
    if train.dispersion > 0.0:
        parts.append(f"dispersion {_angle(train.dispersion)} across the band")
    words = ", ".join(part for part in parts if part)
    return words[0].upper() + words[1:] + "."


def _colours(count: int) -> str:
    if count == 1:
        return "PSF and transfer function are those of the band's centre."
    return f"PSF and transfer function are of {count} wavelengths over the band."


def _angle(angle: float) -> str:
    return f"{degrees(angle) * 3600.0:.3g}{_ARCSEC}"
