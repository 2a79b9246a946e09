"""Which image of a FITS file is the frame, and what else in the file belongs to it.

The first two-dimensional image unless another HDU is asked for, by number or by name; a third axis
of length one is no axis. Keywords of the primary header hold for an extension that does not say
otherwise, as custom has it (and INHERIT of the standard's appendix K). In a foreign file an
extension of the same shape whose name says that it flags bad pixels is a mask.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from simimg.arrays import AnyArray
from simimg.errors import InputError, mistake
from simimg.fits.cards import ascii_text

if TYPE_CHECKING:
    from astropy.io.fits import HDUList

COUNT_TYPES = ("u1", "u2", "u4", "i2", "i4", "i8", "f4", "f8")
"""Kinds of numbers that a frame's counts may be."""

MASKS = ("MASK", "BADPIX", "BPM", "DQ")
"""Names of extensions that flag bad pixels, by custom: anything but 0 is bad."""


def image_hdu(hdus: HDUList, where: str, wanted: int | str | None = None) -> Any:
    """The HDU that holds the frame.

    Parameters
    ----------
    hdus : astropy.io.fits.HDUList
    where : str
        Name of the file, for messages.
    wanted : int or str, optional
        Number of the HDU from 0, or its name, or ``NAME,VERSION``.

    Raises
    ------
    InputError
        No such HDU, or it is no two-dimensional image.
    """
    if wanted is not None:
        return _wanted(hdus, where, wanted)
    axes_seen = []
    for hdu in hdus:
        axes = int(hdu.header.get("NAXIS", 0))
        if not hdu.is_image or axes == 0:
            continue
        if is_plane(hdu):
            return hdu
        axes_seen.append(axes)
    if any(axes > 2 for axes in axes_seen):
        what = f"has no 2-D image, only one of {max(axes_seen)} axes"
        mend = "write one of its planes to a file of its own"
        if any(hdu.name == "CUBE" and hdu.header.get("SIMULATE") is True for hdu in hdus):
            # A single short exposure has not the PSF of a long one.
            mend = "a cube of short exposures is measured by simimg measure --method speckle"
        raise InputError(mistake(where, "", what, mend))
    if 1 in axes_seen:
        what = "has no 2-D image, only one of 1 axis"
    else:
        what = "its image has no pixels" if axes_seen else "holds no image"
    raise InputError(mistake(where, "", what, "give a FITS file with a 2-D image"))


def is_plane(hdu: Any) -> bool:
    """Whether an image HDU holds one plane of pixels."""
    shape = tuple(hdu.shape)
    return len(shape) >= 2 and min(shape) > 0 and all(length == 1 for length in shape[:-2])


def plane_of(image: AnyArray) -> AnyArray:
    """The plane of an image whose other axes have length one."""
    return image.reshape(image.shape[-2:])


def _wanted(hdus: HDUList, where: str, wanted: int | str) -> Any:
    """The HDU of a number or a name."""
    text = str(wanted).strip()
    name, _, version = text.partition(",")
    shown = ascii_text(text)[:40]
    if name.isdecimal() and not version:
        found = [hdu for number, hdu in enumerate(hdus) if number == int(name[:9])]
    else:
        found = [
            hdu
            for hdu in hdus
            if hdu.name.upper() == name.strip().upper()
            and (not version or str(hdu.ver) == version.strip())
        ]
    images = [
        f"{number}" + (f" ({ascii_text(hdu.name)[:20]})" if hdu.name else "")
        for number, hdu in enumerate(hdus)
        if hdu.is_image and int(hdu.header.get("NAXIS", 0)) > 0 and is_plane(hdu)
    ]
    mend = (
        "its 2-D images are in HDU " + ", ".join(images[:12]) if images else "it has no 2-D image"
    )
    if not found:
        raise InputError(mistake(where, "hdu", f"there is no HDU {shown}", mend))
    hdu = found[0]
    if not hdu.is_image or int(hdu.header.get("NAXIS", 0)) == 0 or not is_plane(hdu):
        raise InputError(mistake(where, "hdu", f"HDU {shown} holds no 2-D image", mend))
    return hdu


def inherited(hdus: HDUList, chosen: Any) -> Any:
    """The header of an HDU with what the primary header adds."""
    header = chosen.header
    if chosen is hdus[0] or header.get("INHERIT") is False:
        return header
    merged = hdus[0].header.copy()
    for keyword in ("COMMENT", "HISTORY", ""):
        merged.remove(keyword, ignore_missing=True, remove_all=True)
    merged.update(header)
    return merged


def foreign_mask(hdus: HDUList, chosen: Any, shape: tuple[int, ...]) -> AnyArray | None:
    """Pixels that a foreign file flags as bad; None where it flags none.

    Of several masks the one that follows the image closest counts.
    """
    images = list(hdus)
    begin = images.index(chosen)
    for hdu in [*images[begin + 1 :], *images[:begin]]:
        if not hdu.is_image or hdu.name.upper() not in MASKS or not is_plane(hdu):
            continue
        if tuple(hdu.shape[-2:]) != tuple(shape):
            continue
        flags = plane_of(hdu.data)
        if flags.dtype.kind in "iub" and flags.any():
            return np.asarray(flags != 0)
    return None
