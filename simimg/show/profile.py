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
from simimg.resolving.observation import observe
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.starfit import StarFit, fit_stars
from simimg.show.setup import Setup, light_without_noise
from simimg.show.signal import Light
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

    @property
    def key(self) -> str:
        """The name as one word."""
        return "-".join(self.name.replace(",", "").split())


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
        return _fitted(frame, light, subject, box)
    expected = light_without_noise(frame, setup)
    if expected is None:
        return [], None
    models = [("scene, without noise", expected[bottom:top, left:right] - light.background)]
    if subject.kind == "star" and frame.truth is not None:
        electrons = float(frame.truth["electrons"][subject.row])
        place = (subject.x, subject.y)
        models.append(("this star alone", _alone(observe(frame).psf, place, electrons, box)))
    return models, None


def _alone(
    psf: PsfModel, place: tuple[float, float], electrons: float, box: tuple[int, int, int, int]
) -> FloatArray:
    """One star over a box."""
    left, right, bottom, top = box
    x, y = place[0] - left, place[1] - bottom
    image = psf.evaluate(x, y, columns=right - left, rows=top - bottom, order=0)[0]
    return np.asarray(electrons * image)


def _fitted(
    frame: Frame, light: Light, subject: Subject, box: tuple[int, int, int, int]
) -> tuple[list[tuple[str, FloatArray]], StarFit | None]:
    """The stars of a pair fitted to the pixels about them, over a box."""
    left, right, bottom, top = box
    if min(right - left, top - bottom) < _FEWEST:
        return [], None
    places = [(subject.x, subject.y)]
    if subject.second is not None:
        places.append(subject.second)
    middle = np.mean(places, axis=0)
    seen = observe(frame)
    cutout = seen.cutout(float(middle[0]), float(middle[1]), 0.5 * max(right - left, top - bottom))
    fit = fit_stars([cutout], places=places)
    if not np.isfinite(fit.vector).all():
        return [], None
    stars = [
        _alone(seen.psf, (float(x), float(y)), float(electrons), box)
        for (x, y), electrons in zip(fit.places, fit.electrons, strict=True)
    ]
    total = sum(stars, start=np.zeros(stars[0].shape)) + fit.background[0] - light.background
    if len(stars) == 1:
        return [("one star", total)], fit
    return [("two stars", total), ("first star", stars[0]), ("second star", stars[1])], fit
