"""Where the PSF of a measurement comes from.

- ``scene``: computed from the scene that a frame of simimg carries;
- ``extension``: the frame's own PSF extension;
- ``file``: an image that the user gives;
- ``stars``: measured from stars that the user names (`simimg.resolving.empirical`);
- ``profile``: an elliptical Moffat profile fitted to the stars that stand alone in the frame
  (`simimg.resolving.moffat`).

Unless one is asked for, the first of scene, extension and profile that there is. Detector pixels.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, floor, hypot, isfinite

import numpy as np
from scipy import ndimage

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.assembly.train import Train
from simimg.errors import InputError, mistake
from simimg.frame import Frame, PsfImage
from simimg.imaging.basis import Transfer
from simimg.imaging.profile import sampled_psf
from simimg.resolving.backdrop import find_backdrop
from simimg.resolving.empirical import Measured, measured_profile, measured_stars
from simimg.resolving.imagecut import ImageDirections
from simimg.resolving.isolated import Candidate, StarField, company, isolated_stars, star_at
from simimg.resolving.moffat import Stamp, fit_moffat, like_the_others
from simimg.resolving.pairlimits import Cuts
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.readout import Readout, unfit
from simimg.resolving.resolution import Directions

SOURCES = ("scene", "extension", "file", "stars", "profile")

_SPLINE_ERROR = 4e-7  # of the peak: what interpolation between the PSF's samples may cost
_REACH = 12.0  # FWHM from a star beyond which its light is not modelled
_STAMP = 4.5  # FWHM from a star that a PSF is measured from to the edge of its stamp
_FEW = 3  # stars under which a profile rests on too little to be checked by the stars themselves
_MOST_STARS = 16
_LEAST_SIDE = 9  # samples
_MENDS = "give --psf FILE, or name single stars with --psf-star X,Y"


@dataclass(frozen=True, kw_only=True)
class PsfChoice:
    """What the user wants of the PSF.

    Attributes
    ----------
    source : str or None
        One of `SOURCES`; None for the first that there is.
    image : PsfImage or None
        For ``file``.
    stars : tuple of (x, y)
        For ``stars``.
    """

    source: str | None = None
    image: PsfImage | None = None
    stars: tuple[tuple[float, float], ...] = ()

    def __post_init__(self) -> None:
        if self.source not in (None, *SOURCES):
            raise ValueError(f"a PSF comes from one of {', '.join(SOURCES)}, not {self.source!r}")
        if (self.source == "file") != (self.image is not None):
            raise ValueError("an image of the PSF and only that is of the source 'file'")
        if (self.source == "stars") != bool(self.stars):
            raise ValueError("places of stars and only they are of the source 'stars'")


@dataclass(frozen=True, eq=False)
class SourcedPsf:
    """An effective PSF and where it comes from.

    Attributes
    ----------
    source : str
    model : PsfModel
    delivered : Cuts
        For the limits.
    noise : float
        Deviance that the PSF's own noise leaves in a star, over the square of the star's signal to
        noise; 0 for a PSF that was not measured from stars.
    stars : tuple of (x, y)
        That it was measured from.
    notes : tuple of str
    """

    source: str
    model: PsfModel
    delivered: Cuts
    noise: float = 0.0
    stars: tuple[tuple[float, float], ...] = ()
    notes: tuple[str, ...] = ()


def source_psf(
    frame: Frame,
    choice: PsfChoice,
    *,
    train: Train | None,
    readout: Readout,
    pixel_scale: float,
    widest: float = 0.0,
    apart: Sequence[tuple[float, float]] = (),
) -> SourcedPsf:
    """Get the effective PSF of a frame.

    Parameters
    ----------
    frame : Frame
    choice : PsfChoice
    train : Train or None
        Of the frame's scene.
    readout : Readout
    pixel_scale : float
        Side of a pixel (rad).
    widest : float, optional
        Largest separation that will be fitted, pixels.
    apart : sequence of (x, y), optional
        Places of what may be no single stars, which a profile is not to be fitted to.

    Raises
    ------
    InputError
        What is asked for is not there, or no star serves.
    """
    source = choice.source
    if source is None:
        source = "scene" if train is not None else "profile" if frame.psf is None else "extension"
    if source == "scene":
        return _of_scene(train, pixel_scale, widest)
    if source in ("extension", "file"):
        image = frame.psf if source == "extension" else choice.image
        if image is None:
            what, mend = "the frame has no PSF extension", "expose it --with psf, or " + _MENDS
            raise InputError(mistake("frame", "psf", what, mend))
        model = PsfModel.from_image(usable_image(image, source), oversampling=image.oversampling)
        return SourcedPsf(source, model, ImageDirections(model, pixel_scale=pixel_scale))
    return _of_stars(frame, choice, source, readout, pixel_scale, widest, apart)


def _of_scene(train: Train | None, scale: float, widest: float) -> SourcedPsf:
    if train is None:
        what = "the frame carries no scene to compute a PSF from"
        raise InputError(mistake("frame", "psf", what, _MENDS))
    return transfer_psf(train.effective, scale, widest)


def transfer_psf(transfer: Transfer, scale: float, widest: float) -> SourcedPsf:
    """The effective PSF of a transfer function of a scene.

    Parameters
    ----------
    transfer : Transfer
        Pixel included.
    scale : float
        Side of a pixel (rad).
    widest : float
        Largest separation that will be fitted, pixels.
    """
    delivered = Directions(transfer)
    width = delivered.profile(0.0).width / scale
    oversampling = spline_oversampling(transfer, scale)
    image = sampled_psf(
        transfer,
        pixel_scale=scale,
        oversampling=oversampling,
        half_width_pixels=ceil(max(_REACH * width, widest + 5.0 * width, 8.0)),
    )
    return SourcedPsf("scene", PsfModel.from_image(image, oversampling=oversampling), delivered)


def spline_oversampling(transfer: Transfer, pixel_scale: float) -> int:
    """Samples to the pixel that a quintic spline needs to render a PSF to 1e-6 of its peak.

    Parameters
    ----------
    transfer : Transfer
        Of the effective PSF.
    pixel_scale : float
        Side of a pixel, radians.

    Notes
    -----
    A quintic B-spline misses a wave of frequency f, sampled h apart, by about ``2 (f h)^6``
    (Unser 1999, IEEE Signal Process. Mag. 16, 22); the waves of the PSF are weighted by their
    strength.
    """
    radius = transfer.band_limit * (np.arange(600) + 0.5) / 600
    angle = np.pi * np.arange(8)[:, None] / 8
    strength = np.abs(transfer(radius * np.cos(angle), radius * np.sin(angle))).max(axis=0) * radius
    waves = (radius * pixel_scale) ** 6
    error = 2.0 * float((strength * waves).sum() / strength.sum())
    return int(max(1, ceil((error / _SPLINE_ERROR) ** (1.0 / 6.0))))


def usable_image(psf: PsfImage, name: str) -> FloatArray:
    """An image of a PSF as fits need it: square, odd, the star in the middle, of unit light.

    In an image of odd sides the star is taken to be at the middle sample unless its light is
    centred more than half a pixel from there; in any other it is where its light is centred.

    Parameters
    ----------
    psf : PsfImage
    name : str
        For messages.

    Raises
    ------
    InputError
        NaN, no light, or too few samples.
    """
    image = np.asarray(psf.image, dtype=np.float64)
    if not np.isfinite(image).all() or not image.sum() > 0.0 or not image.max() > 0.0:
        what = "must hold finite numbers with a positive sum"
        raise InputError(mistake("psf", name, what, "give an image of a star without background"))
    rows, columns = image.shape
    if min(rows, columns) < 3:
        raise InputError(mistake("psf", name, f"has {columns} x {rows} samples", "give a larger"))
    middle = 0.5 * (columns - 1), 0.5 * (rows - 1)
    x, y = _centre(image)
    odd = rows % 2 == 1 and columns % 2 == 1
    if odd and hypot(x - middle[0], y - middle[1]) <= 0.5 * psf.oversampling:
        x, y = middle
    half = floor(min(x, y, columns - 1 - x, rows - 1 - y) + 1e-9)
    if (x, y) == middle:
        kept = image[int(y) - half : int(y) + half + 1, int(x) - half : int(x) + half + 1]
    else:
        half = max(half - 1, 1)
        axis = np.arange(-half, half + 1)
        places = np.broadcast_arrays(y + axis[:, None], x + axis)
        kept = ndimage.map_coordinates(image, np.stack(places), order=5, mode="mirror")
    short = max(0, (_LEAST_SIDE - kept.shape[0] + 1) // 2)
    kept = np.pad(kept, short)
    return frozen(kept * (psf.oversampling**2 / kept.sum()))


def _centre(image: FloatArray) -> tuple[float, float]:
    """Centre of the light above half of the maximum (x, y), samples."""
    core = np.maximum(image - 0.5 * image.max(), 0.0)
    label, _ = ndimage.label(core > 0.0)
    core = core * (label == label[np.unravel_index(int(np.argmax(image)), image.shape)])
    rows, columns = image.shape
    total = core.sum()
    return (
        float((core.sum(axis=0) @ np.arange(columns)) / total),
        float((core.sum(axis=1) @ np.arange(rows)) / total),
    )


def _of_stars(
    frame: Frame,
    choice: PsfChoice,
    source: str,
    readout: Readout,
    scale: float,
    widest: float,
    apart: Sequence[tuple[float, float]],
) -> SourcedPsf:
    """A PSF measured from stars of the frame."""
    electrons, field = star_field(frame, readout)
    notes: list[str] = []
    if source == "stars":
        stars = _named(field, choice.stars)
    else:
        stars = isolated_stars(field, apart=apart, most=_MOST_STARS)
        if not stars:
            what = "no star stands alone in it that a PSF could be taken from"
            raise InputError(mistake("frame", "psf", what, _MENDS))
    width = float(np.median([star.width for star in stars]))
    stamps, corners = _stamps(electrons, field, stars, width)
    if source == "profile" and len(stamps) > _FEW:
        kept = like_the_others(fit_moffat(stamps, width=width, variance=readout.variance))
        stamps = [stamp for stamp, good in zip(stamps, kept) if good]
        corners = [corner for corner, good in zip(corners, kept) if good]
    if source == "profile" and len(stamps) < _FEW:
        number = {1: "a single star", 2: "two stars"}[len(stamps)]
        notes.append(
            f"the PSF's profile rests on {number}: if that is itself a close pair, no pair shows"
        )
    half = ceil(max(_REACH * width, widest + 5.0 * width, 8.0))
    measured: Measured = (measured_stars if source == "stars" else measured_profile)(
        stamps, width=width, variance=readout.variance, half_width=half
    )
    model = PsfModel.from_image(measured.image, oversampling=measured.oversampling)
    places = measured.places + np.array(corners)
    return SourcedPsf(
        source,
        model,
        ImageDirections(model, pixel_scale=scale),
        noise=measured.noise,
        stars=tuple((float(x), float(y)) for x, y in places),
        notes=tuple(notes),
    )


def star_field(frame: Frame, readout: Readout) -> tuple[FloatArray, StarField]:
    """Electrons of a frame, its background's slant taken off, and the same for finding stars."""
    counts = frame.counts
    good = np.isfinite(counts) & (counts < readout.saturation)
    for bad in (readout.barred, unfit(frame)):
        if bad is not None:
            good &= ~bad
    backdrop = readout.backdrop or find_backdrop(counts, good)
    everywhere = (slice(None), slice(None))
    shape = (counts.shape[0], counts.shape[1])
    known = np.where(good, counts, backdrop.level).astype(np.float64)
    electrons = (known - backdrop.rise(everywhere, shape) - readout.bias) * readout.gain
    variance = max((readout.gain * backdrop.noise) ** 2, readout.variance, 1e-9)
    above = (known - backdrop.relief(everywhere, shape) - backdrop.level) * readout.gain
    above[~good] = 0.0
    if not good.all():
        weight = ndimage.gaussian_filter(good.astype(np.float64), 1.0)
        around = ndimage.gaussian_filter(above, 1.0) / np.maximum(weight, 1e-6)
        above = np.where(good, above, np.where(weight > 0.2, around, 0.0))
    return electrons, StarField(above, good, variance)


def _named(field: StarField, places: Sequence[tuple[float, float]]) -> list[Candidate]:
    """The stars at named places."""
    rows, columns = field.good.shape
    stars, lines = [], []
    for x, y in places:
        inside = isfinite(x) and isfinite(y) and 0 <= x <= columns - 1 and 0 <= y <= rows - 1
        star = star_at(field, x, y) if inside else None
        if not inside:
            what, mend = "is not on the frame", f"write x to {columns - 1} and y to {rows - 1}"
        elif star is None:
            what, mend = (
                "shows no single bright star",
                "name a star that stands out and is not full",
            )
        if star is None:
            lines.append(mistake("frame", "psf-star", f"the place {x:g},{y:g} {what}", mend))
        else:
            stars.append(star)
    if lines:
        raise InputError(*lines)
    return stars


def _stamps(
    electrons: FloatArray, field: StarField, stars: Sequence[Candidate], width: float
) -> tuple[list[Stamp], list[tuple[int, int]]]:
    """The pixels about each star, neighbours taken out, and the places of their first pixels."""
    half = max(ceil(_STAMP * width), 5)
    rows, columns = electrons.shape
    stamps, corners = [], []
    for star in stars:
        left, bottom = max(0, star.x - half), max(0, star.y - half)
        box = (
            slice(bottom, min(rows, star.y + half + 1)),
            slice(left, min(columns, star.x + half + 1)),
        )
        used: AnyArray = field.good[box] & ~company(field, star, box, width)
        stamps.append(
            Stamp(electrons[box], used.astype(np.float64), star.x - left, star.y - bottom)
        )
        corners.append((left, bottom))
    return stamps, corners
