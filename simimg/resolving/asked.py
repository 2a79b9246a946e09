"""What a caller may hand over, as measuring needs it: plain arrays become frames, images PSFs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from simimg.arrays import AnyArray
from simimg.camera.masks import DEAD
from simimg.errors import InputError, mistake
from simimg.frame import COUNT_TYPES, Frame, PsfImage
from simimg.resolving.psfsource import SOURCES, PsfChoice

_WORDS = ("scene", "extension", "profile")


def as_frame(image: Frame | AnyArray, *, mask: AnyArray | None = None) -> Frame:
    """A frame; of a plain array one without a header.

    Parameters
    ----------
    image : Frame or array_like, shape (rows, columns)
        Numbers; those that are not finite, and masked ones, do not count.
    mask : array_like of bool, optional
        True for pixels that do not count.

    Raises
    ------
    InputError
        Not a two-dimensional image of numbers.
    """
    if isinstance(image, Frame):
        if mask is None:
            return image
        dead = np.where(_mask(mask, image.counts.shape), DEAD, 0).astype(np.uint16)
        return replace(image, mask=dead if image.mask is None else dead | image.mask)
    given: Any = image
    bad: AnyArray | None = (
        np.ma.getmaskarray(given) if isinstance(given, np.ma.MaskedArray) else None
    )
    values = np.asarray(np.ma.getdata(given))
    if values.ndim != 2 or values.size == 0 or values.dtype.kind not in "buif":
        what = f"must be a two-dimensional array of numbers, got shape {values.shape}"
        raise InputError(mistake("frame", "image", what, "give one plane of numbers"))
    if values.dtype.str[1:] not in COUNT_TYPES:
        values = values.astype(np.float64)
    if mask is not None:
        both = _mask(mask, values.shape)
        bad = both if bad is None else both | bad
    if values.dtype.kind == "f" and not np.isfinite(values).any():
        raise InputError(mistake("frame", "image", "has no finite pixel", "give one that has"))
    pixels = None if bad is None or not bad.any() else np.where(bad, DEAD, 0).astype(np.uint8)
    return Frame(counts=values, mask=pixels, simulated=False)


def _mask(mask: AnyArray, shape: tuple[int, ...]) -> AnyArray:
    bad = np.asarray(mask)
    if bad.shape != shape or bad.dtype.kind not in "bui":
        what = f"must be true or false for each of {shape} pixels, got shape {bad.shape}"
        raise InputError(mistake("frame", "mask", what, "give one of the image's own shape"))
    return np.asarray(bad != 0)


def as_choice(
    psf: PsfImage | AnyArray | str | None,
    *,
    oversampling: int = 1,
    stars: Sequence[tuple[float, float]] = (),
) -> PsfChoice:
    """Where the PSF is to come from.

    Parameters
    ----------
    psf : PsfImage, array_like, str or None
        An image of it, or "scene", "extension" or "profile"; None for the first that there is.
    oversampling : int, optional
        Samples to the pixel of an array.
    stars : sequence of (x, y), optional
        Stars to measure it from, instead.

    Raises
    ------
    InputError
        Both or nonsense.
    """
    if stars:
        if psf is not None:
            what = "a PSF is given and stars to measure it from as well"
            raise InputError(mistake("frame", "psf", what, "give one of the two"))
        return PsfChoice(source="stars", stars=tuple((float(x), float(y)) for x, y in stars))
    if psf is None:
        return PsfChoice()
    if isinstance(psf, PsfImage):
        return PsfChoice(source="file", image=psf)
    if isinstance(psf, str):
        if psf not in _WORDS:
            known = ", ".join(repr(word) for word in SOURCES if word in _WORDS)
            what = f"{psf!r} is no source of a PSF"
            raise InputError(mistake("frame", "psf", what, f"write one of {known}, or an image"))
        return PsfChoice(source=psf)
    image = np.asarray(psf)
    whole = isinstance(oversampling, int | np.integer) and not isinstance(oversampling, bool)
    if not whole or not 1 <= oversampling <= 1000:
        what = f"must be a whole number from 1 to 1000, got {oversampling!r}"
        raise InputError(mistake("frame", "psf oversampling", what, "write for example 4"))
    if image.ndim != 2 or image.size == 0 or image.dtype.kind not in "buif":
        what = f"must be a two-dimensional image, got shape {image.shape}"
        raise InputError(mistake("frame", "psf", what, "give an image of a single star"))
    return PsfChoice(source="file", image=PsfImage(image, int(oversampling)))
