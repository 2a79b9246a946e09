"""The light along the axis of a figure's subject: data with errors, model, components.

For a pair the model is two stars of the frame's own PSF, fitted to the pixels of the window from
the measured places; for anything else it is the frame's scene without noise. Points and curves are
means over the same strip (`simimg.show.strip`).
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.frame import Frame
from simimg.resolving.starfit import Cutout, StarFit, fit_stars
from simimg.show.setup import Setup, light_without_noise
from simimg.show.signal import Light, header_number
from simimg.show.strip import Strip, strip_along
from simimg.show.subject import Subject

_FINE = 8  # points of a curve to the pixel
_WIDTH = 0.5  # of a strip, in FWHMs
_FEWEST = 8  # pixels in the side of a window that two stars can be fitted to


@dataclass(frozen=True, eq=False)
class Curve:
    """A named curve along the strip."""

    name: str
    values: FloatArray


@dataclass(frozen=True, eq=False)
class Profile:
    """The light along a strip.

    Attributes
    ----------
    offsets, values, errors : (n,) array
        The data, above the background; NaN where a pixel has no number. Offsets in pixels from
        the subject's origin.
    residuals : (n,) array or None
        Data less model over error; None without a model.
    fine : (m,) array
        Offsets of the curves.
    curves : tuple of Curve
        The model first, then its components; empty without a model.
    marks : tuple of float
        Offsets of the stars.
    width : float
        Of the strip, pixels.
    fwhm : float or None
        Of the PSF along the strip, pixels.
    fit : StarFit or None
        The two stars, or the one, that the model shows.
    """

    offsets: FloatArray
    values: FloatArray
    errors: FloatArray
    residuals: FloatArray | None
    fine: FloatArray
    curves: tuple[Curve, ...]
    marks: tuple[float, ...]
    width: float
    fwhm: float | None
    fit: StarFit | None


def subject_profile(frame: Frame, light: Light, subject: Subject, setup: Setup | None) -> Profile:
    """The light along the axis of a subject."""
    fwhm = None if setup is None else setup.psf_fwhm(subject.angle)
    width = max(1.0, _WIDTH * fwhm) if fwhm is not None else 1.0
    end = subject.reach
    if subject.second is not None:
        end += hypot(subject.second[0] - subject.x, subject.second[1] - subject.y)
    left, right, bottom, top = _pixels(subject, light, end, width)
    values = light.values[bottom:top, left:right]
    variance = light.variance[bottom:top, left:right]

    def strip(offsets: AnyArray) -> Strip:
        return strip_along(
            (values.shape[0], values.shape[1]),
            x=subject.x - left,
            y=subject.y - bottom,
            angle=subject.angle,
            width=width,
            offsets=offsets,
        )

    first, last = -round(subject.reach), round(end)
    points = strip(np.arange(first, last + 1, dtype=np.float64))
    fine = strip(np.arange(first * _FINE, last * _FINE + 1) / _FINE)
    models, fit = _models(frame, light, subject, setup, (left, right, bottom, top))
    residuals = None
    mean, error = points.mean(values), points.error(variance)
    if models:
        difference = mean - points.mean(models[0][1])
        residuals = frozen(difference / np.where(error > 0.0, error, np.inf))
    marks: tuple[float, ...] = (0.0,) if subject.kind in ("pair", "star") else ()
    if fit is not None:
        direction = np.array([np.cos(subject.angle), np.sin(subject.angle)])
        along = (fit.places - np.array([subject.x, subject.y])) @ direction
        marks = tuple(float(offset) for offset in along)
    return Profile(
        offsets=points.offsets,
        values=frozen(mean),
        errors=frozen(error),
        residuals=residuals,
        fine=fine.offsets,
        curves=tuple(Curve(name, frozen(fine.mean(image))) for name, image in models),
        marks=marks,
        width=width,
        fwhm=fwhm,
        fit=fit,
    )


def _pixels(subject: Subject, light: Light, end: float, width: float) -> tuple[int, int, int, int]:
    """Columns and rows that hold the strip and the window."""
    rows, columns = light.values.shape
    margin = end + width + 3.0
    if subject.kind == "pair":
        return subject.window
    left, right = int(max(subject.x - margin, 0)), int(min(subject.x + margin + 2, columns))
    bottom, top = int(max(subject.y - margin, 0)), int(min(subject.y + margin + 2, rows))
    return left, right, bottom, top


def _models(
    frame: Frame,
    light: Light,
    subject: Subject,
    setup: Setup | None,
    box: tuple[int, int, int, int],
) -> tuple[list[tuple[str, FloatArray]], StarFit | None]:
    """Images of the model and its components over a box, and the fit behind them."""
    if setup is None or light.unit != "electron":
        return [], None
    left, right, bottom, top = box
    if subject.kind == "pair":
        return _fitted(frame, light, subject, setup, box)
    expected = light_without_noise(frame, setup)
    if expected is None:
        return [], None
    models = [("scene, without noise", expected[bottom:top, left:right] - light.background)]
    if subject.kind == "star" and frame.truth is not None:
        psf = setup.psf_model(_farthest(box, [(subject.x, subject.y)]))
        alone = psf.evaluate(
            subject.x - left, subject.y - bottom, columns=right - left, rows=top - bottom, order=0
        )[0]
        electrons = float(frame.truth["electrons"][subject.row])
        models.append(("this star alone", electrons * alone))
    return models, None


def _farthest(box: tuple[int, int, int, int], stars: list[tuple[float, float]]) -> float:
    """Greatest distance along x or y from a star to the edge of a box, and half a pixel more."""
    left, right, bottom, top = box
    sides = [(x - left, right - x, y - bottom, top - y) for x, y in stars]
    return max(max(side) for side in sides) + 0.5


def _fitted(
    frame: Frame, light: Light, subject: Subject, setup: Setup, box: tuple[int, int, int, int]
) -> tuple[list[tuple[str, FloatArray]], StarFit | None]:
    """The stars of a pair fitted to the pixels of a box."""
    left, right, bottom, top = box
    if min(right - left, top - bottom) < _FEWEST:
        return [], None
    electrons = light.values[bottom:top, left:right] + light.background
    read_noise, gain = header_number(frame, "RDNOISE") or 0.0, header_number(frame, "GAIN") or 0.0
    used = np.ones(electrons.shape, dtype=bool)
    if frame.mask is not None:
        used = frame.mask[bottom:top, left:right] == 0
    places = [(subject.x, subject.y)]
    if subject.second is not None:
        places.append(subject.second)
    # The fit moves the stars a little: room for that.
    psf = setup.psf_model(_farthest(box, places) + 2.0)
    cutout = Cutout.of(
        electrons,
        variance=read_noise**2 + gain**2 / 12.0,
        psf=psf,
        x0=float(left),
        y0=float(bottom),
        used=used,
    )
    fit = fit_stars([cutout], places=places)
    if not np.isfinite(fit.vector).all():
        return [], None
    stars = [
        strength
        * psf.evaluate(x - left, y - bottom, columns=right - left, rows=top - bottom, order=0)[0]
        for (x, y), strength in zip(fit.places, fit.electrons, strict=True)
    ]
    total = sum(stars, start=np.zeros(electrons.shape)) + fit.background[0] - light.background
    if len(stars) == 1:
        return [("one star", total)], fit
    models = [("two stars", total), ("first star", stars[0]), ("second star", stars[1])]
    return models, fit
