"""The parts of a frame out of a FITS file: one of simimg's own, or any with a 2-D image.

Files come from strangers: they are surveyed before they are parsed (`simimg.fits.survey`), and
whatever is damaged in one ends in a line that says so.
"""

from __future__ import annotations

import gzip
import hashlib
import io
import os
import warnings
import zlib
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, BinaryIO
from urllib.parse import unquote_to_bytes

import numpy as np

from simimg.arrays import AnyArray
from simimg.errors import InputError, mistake
from simimg.fits.cards import COMMENTARY, ascii_text, is_coordinate, is_keyword, is_layout
from simimg.fits.choosing import COUNT_TYPES, foreign_mask, image_hdu, inherited, plane_of
from simimg.fits.packing import COUNTS
from simimg.fits.survey import UNPACKED_LIMIT, survey

if TYPE_CHECKING:
    from astropy.io.fits import HDUList, Header
    from astropy.table import Table
    from astropy.wcs import WCS

TRUTH_COLUMNS = {
    "label": "text",
    "kind": "text",
    "x": "numbers",
    "y": "numbers",
    "ra": "numbers",
    "dec": "numbers",
    "inside": "true or false",
    "electrons": "numbers",
    "electrons_in_frame": "numbers",
    "magnitude": "numbers",
    "separation": "numbers",
    "position_angle": "numbers",
    "partner": "numbers",
}
_KINDS = {"text": "SU", "numbers": "iuf", "true or false": "b"}
_AGAIN = "fetch or make the file again"


def read_parts(path: str | os.PathLike[str], *, hdu: int | str | None = None) -> dict[str, Any]:
    """The parts of a frame, as named in `simimg.frame.Frame`; the PSF as (image, oversampling).

    The mask of a foreign file is true for its bad pixels.

    Parameters
    ----------
    path : path
        A FITS file, gzipped or not.
    hdu : int or str, optional
        Number or name of the HDU that holds the frame; the first 2-D image by default.

    Raises
    ------
    InputError
        No such file; not FITS, damaged, without a usable image, or larger than simimg reads.
    """
    where = os.fspath(path)
    with open_hdus(where) as hdus:
        return _parts(hdus, where, hdu)


def read_scene_files(path: str | os.PathLike[str]) -> tuple[tuple[str, str, bytes], ...]:
    """The scene that a file of simimg carries, of whatever images; empty where it carries none.

    Raises
    ------
    InputError
        As for `read_parts`.
    """
    where = os.fspath(path)
    with open_hdus(where) as hdus:
        creator = str(hdus[0].header.get("CREATOR", ""))
        if "SCENE" not in [one.name for one in hdus[1:]] or not creator.startswith("simimg"):
            return ()
        with _damage(where, "SCENE"):
            return _read_scene(hdus["SCENE"], where)


def read_psf_file(path: str | os.PathLike[str]) -> tuple[AnyArray, int | None]:
    """An image of a PSF, and its samples to the pixel where the header says (OVERSAMP).

    An extension named PSF is taken before any other image.

    Raises
    ------
    InputError
        As for `read_parts`.
    """
    where = os.fspath(path)
    with open_hdus(where) as hdus:
        named = [hdu for hdu in hdus if hdu.name.upper() == "PSF" and hdu.is_image]
        chosen = image_hdu(hdus, where, "PSF" if named else None)
        with _damage(where, "image"):
            image = plane_of(_native(chosen.data))
        told = chosen.header.get("OVERSAMP")
    if told is None:
        return image, None
    whole = isinstance(told, int | float) and not isinstance(told, bool) and told == int(told)
    if not whole or told < 1:
        what = f"must be a count of 1 or more, got {ascii_text(str(told))[:40]}"
        raise InputError(mistake(where, "OVERSAMP", what, "repair it, or give --psf-oversampling"))
    return image, int(told)


@contextmanager
def open_hdus(where: str) -> Iterator[HDUList]:
    """The HDUs of a file that has been surveyed."""
    with opened(where) as handle:
        survey(handle, where)
        handle.seek(0)
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            from astropy.io import fits

            with (
                _damage(where, ""),
                fits.open(handle, memmap=False, lazy_load_hdus=False) as hdus,
            ):
                yield hdus


def _parts(hdus: HDUList, where: str, wanted: int | str | None) -> dict[str, Any]:
    chosen = image_hdu(hdus, where, wanted)
    with _damage(where, "image"):
        counts = plane_of(_native(chosen.data))
        if counts.dtype.str[1:] not in COUNT_TYPES:
            counts = counts.astype(np.float64)
    if counts.dtype.kind == "f" and not np.isfinite(counts).any():
        raise InputError(mistake(where, "", "its image has no finite pixel", "give one that has"))
    header = inherited(hdus, chosen)
    parts: dict[str, Any] = {
        "counts": counts,
        "header": plain_header(header),
        "wcs": read_wcs(chosen.header, (counts.shape[0], counts.shape[1]), where),
        "simulated": chosen.header.get("SIMULATE") is True,
    }
    ours = parts["simulated"] and str(header.get("CREATOR", "")).startswith("simimg")
    main = chosen is hdus[0] or (chosen is hdus[1] and chosen.name == COUNTS)
    if not ours or not main:
        # Extensions of the same names in other programs' files mean other things; but a mask is
        # a mask.
        with _damage(where, "mask"):
            flagged = foreign_mask(hdus, chosen, counts.shape)
        if flagged is not None:
            parts["mask"] = flagged
        if parts["simulated"] and chosen is hdus[0] and "TRUTH" in [one.name for one in hdus[1:]]:
            with _damage(where, "TRUTH"):
                parts["truth"] = read_truth(hdus["TRUTH"], where)
        return parts
    extensions = {hdu.name: hdu for hdu in reversed(hdus[1:]) if hdu is not chosen}
    readers: dict[str, Callable[[Any, str], Any]] = {
        "TRUTH": read_truth,
        "SCENE": _read_scene,
        "PSF": _read_psf,
        "EXPECTED": _read_image,
        "MASK": _read_image,
    }
    for name, read in readers.items():
        if name not in extensions:
            continue
        with _damage(where, name):
            part = read(extensions[name], where)
        if read is _read_image and part.shape != counts.shape:
            what = f"has the shape {part.shape}, the frame {counts.shape}"
            raise InputError(mistake(where, name, what, _AGAIN))
        parts["scene_files" if name == "SCENE" else name.lower()] = part
    return parts


def plain_header(header: Header) -> dict[str, object]:
    """Keyword to value and comment, of what can be parsed and is no layout or coordinate."""
    plain: dict[str, object] = {}
    texts: dict[str, list[str]] = {}
    for card in header.cards:
        try:
            keyword, value, comment = card.keyword, card.value, card.comment
        except Exception:  # a card that cannot be parsed says nothing
            continue
        if keyword in COMMENTARY:
            plain[keyword] = texts.setdefault(keyword, [])
            texts[keyword].append(str(value))
        elif (
            is_keyword(keyword)
            and not is_layout(keyword)
            and not is_coordinate(keyword)
            and isinstance(value, (bool, int, float, str))
        ):
            plain[keyword] = (value, comment)
    return plain


def read_wcs(header: Header, shape: tuple[int, int], where: str) -> WCS | None:
    """The celestial coordinates of an image of (rows, columns); None where there are none.

    Raises
    ------
    InputError
        Coordinates that make no sense.
    """
    from astropy.wcs import WCS

    if not any(str(header.get(f"CTYPE{axis}", "")).strip() for axis in (1, 2)):
        return None
    mend = "repair its CTYPE, CRPIX, CRVAL and CD or CDELT keywords, or take them out"
    with _damage(where, "coordinates", mend=mend):
        wcs = WCS(header)
        if not wcs.has_celestial or (wcs.wcs.naxis != 2 and wcs.wcs.lng != 0):
            return None
        if wcs.wcs.naxis != 2:
            wcs = wcs.celestial
        for keyword in ("CRPIX1", "CRPIX2", "CRVAL1", "CRVAL2", "CD1_1", "CDELT1", "CDELT2"):
            if isinstance(header.get(keyword), str):
                raise ValueError(f"{keyword} is not a number")
        matrix = wcs.celestial.pixel_scale_matrix
        if not abs(np.linalg.det(matrix)) > 1e-6 * np.sum(matrix**2):
            raise ValueError("a pixel has no extent")
        rows, columns = shape
        centre = wcs.all_pix2world([[(columns - 1) / 2, (rows - 1) / 2]], 0)
        if not np.isfinite(centre).all():
            raise ValueError("the middle of the image has no coordinates")
    return wcs


def _read_image(hdu: Any, where: str) -> AnyArray:
    if not hdu.is_image or hdu.data is None:
        raise InputError(mistake(where, hdu.name, "holds no image", _AGAIN))
    return _native(hdu.data)


def _read_psf(hdu: Any, where: str) -> tuple[AnyArray, int]:
    image = _read_image(hdu, where)
    if image.ndim != 2 or image.size == 0 or not np.isfinite(image).all():
        raise InputError(mistake(where, "PSF", "must be a 2-D image of finite numbers", _AGAIN))
    oversampling = hdu.header.get("OVERSAMP")
    if not isinstance(oversampling, int) or oversampling < 1:
        what = f"OVERSAMP must be a count of 1 or more, got {oversampling!r}"
        raise InputError(mistake(where, "PSF", what, _AGAIN))
    return image, oversampling


def read_truth(hdu: Any, where: str) -> Table:
    """The TRUTH of a frame out of its HDU.

    Raises
    ------
    InputError
        A column is missing or holds something else.
    """
    from astropy.table import Table
    from astropy.units import Unit, UnrecognizedUnit

    truth = Table.read(hdu, mask_invalid=False)
    truth.meta.clear()
    lines = []
    for name, word in TRUTH_COLUMNS.items():
        key = f"TRUTH: {name}"
        if name not in truth.colnames:
            lines.append(mistake(where, key, "the column is missing", _AGAIN))
        elif truth[name].dtype.kind not in _KINDS[word] or truth[name].ndim != 1:
            lines.append(mistake(where, key, f"must hold {word}", _AGAIN))
    if lines:
        raise InputError(*lines)
    for number, name in enumerate(truth.colnames, start=1):
        comment = hdu.header.comments[f"TTYPE{number}"]
        truth[name].description = comment or None
        if isinstance(truth[name].unit, UnrecognizedUnit):
            # The standard's list of units has no electron.
            truth[name].unit = Unit(str(truth[name].unit), parse_strict="silent")
    return truth


def _read_scene(hdu: Any, where: str) -> tuple[tuple[str, str, bytes], ...]:
    files = []
    for row in hdu.data:
        name = unquote_to_bytes(str(row["name"])).decode("utf-8", errors="surrogateescape")
        files.append((name, str(row["sha256"]), bytes(row["content"])))
    for name, sha256, content in files:
        if content and hashlib.sha256(content).hexdigest() != sha256:
            what = f"the bytes of {ascii_text(name)} do not match their sha256"
            raise InputError(mistake(where, "SCENE", what, _AGAIN))
    return tuple(files)


def _native(image: AnyArray) -> AnyArray:
    return np.ascontiguousarray(image, dtype=image.dtype.newbyteorder("="))


@contextmanager
def opened(where: str) -> Iterator[BinaryIO]:
    """The file, unpacked into memory where it is gzipped."""
    try:
        with open(where, "rb") as handle:
            if not handle.seekable():
                what = "is not an ordinary file"
                raise InputError(mistake(where, "", what, "write it to a file first"))
            packed = handle.read(2) == b"\x1f\x8b"
            handle.seek(0)
            yield _unpacked(handle, where) if packed else handle
    except FileNotFoundError as error:
        raise InputError(mistake(where, "", "no such file", "check its name")) from error
    except IsADirectoryError as error:
        raise InputError(mistake(where, "", "is a folder", "name a file in it")) from error
    except OSError as error:
        what = f"cannot be read: {error.strerror or error}"
        raise InputError(mistake(where, "", what, "check the file")) from error
    except ValueError as error:  # a NUL in the name
        raise InputError(mistake(ascii_text(where), "", "is not a file name")) from error


def _unpacked(handle: BinaryIO, where: str) -> BinaryIO:
    try:
        with gzip.open(handle) as packed:
            content = packed.read(UNPACKED_LIMIT + 1)
    except (OSError, EOFError, zlib.error) as error:
        what = f"its gzip packing is damaged: {error}"
        raise InputError(mistake(where, "", what, "fetch the file again")) from error
    if len(content) > UNPACKED_LIMIT:
        what = f"unpacks to more than {UNPACKED_LIMIT} bytes"
        raise InputError(mistake(where, "", what, "unpack it, or cut out a part"))
    return io.BytesIO(content)


@contextmanager
def _damage(where: str, part: str, *, mend: str = _AGAIN) -> Iterator[None]:
    """Turn whatever a damaged file does to a library into one line."""
    try:
        yield
    except InputError:
        raise
    except Exception as error:  # libraries raise nearly anything on a damaged file
        lines = str(error).strip().split("\n")
        # Some libraries name their own source file first and the trouble last.
        line = lines[-1] if lines[0].startswith("ERROR") else lines[0]
        what = ascii_text(line)[:120].rstrip(" .") or type(error).__name__
        raise InputError(mistake(where, part, f"is damaged: {what}", mend)) from error
