"""A FITS file again with one image changed: every other HDU stays as it was, byte for byte.

The image keeps its BITPIX, BSCALE, BZERO and BLANK, and its header every card that is not changed;
the table of a frame's truth, and what a frame of ours says beside its image, pixel by pixel, are
the only other things that may be replaced or added. Checksums are made anew for what is written
anew.
"""

from __future__ import annotations

import io
import os
import warnings
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.errors import InputError, mistake
from simimg.fits.cards import add_card, add_commentary
from simimg.fits.choosing import image_hdu
from simimg.fits.hdus import PASS_BYTES, word_sum, write_hdu
from simimg.fits.reader import open_hdus, opened, read_truth
from simimg.fits.writer import write_truth
from simimg.newfile import new_file

if TYPE_CHECKING:
    from astropy.io.fits import Header
    from astropy.table import Table

_STORED = {8: ">u1", 16: ">i2", 32: ">i4", 64: ">i8", -32: ">f4", -64: ">f8"}


@dataclass(frozen=True)
class _Span:
    """Where the bytes of an HDU lie in its file: header, data, end."""

    header: int
    data: int
    end: int


@dataclass(frozen=True, eq=False)
class Original:
    """A FITS file and the image in it that is to be changed.

    Attributes
    ----------
    content : bytes
        The whole file, unpacked.
    spans : tuple of _Span
        Of each HDU.
    number : int
        The image's HDU.
    name : str
        Its EXTNAME; may be empty.
    scale, zero : float
        A value is ``scale * stored + zero``.
    blank : int or None
        What an integer image stores for a pixel without a value.
    truth : astropy.table.Table or None
        The TRUTH of the file.
    truth_number : int or None
        Its HDU.
    beside : mapping of str to int
        HDUs that a frame of ours has beside its image: EXPECTED and MASK.
    """

    content: bytes
    spans: tuple[_Span, ...]
    number: int
    name: str
    scale: float
    zero: float
    blank: int | None
    truth: Table | None
    truth_number: int | None
    beside: Mapping[str, int] = field(default_factory=dict)

    @property
    def header(self) -> Header:
        """The header of the image, as it stands in the file."""
        return _header(self.content, self.spans[self.number])

    @property
    def stored(self) -> AnyArray:
        """The image's plane as it is stored, big-endian and read only."""
        return _plane(self.content, self.spans[self.number])

    def as_stored(self, name: str, values: AnyArray) -> AnyArray:
        """Values as an image beside this one stores them."""
        span = self.spans[self.beside[name]]
        header = _header(self.content, span)
        scale, zero = float(header.get("BSCALE", 1.0)), float(header.get("BZERO", 0.0))
        kind = _plane(self.content, span).dtype
        return np.asarray((values.astype(np.float64) - zero) / scale).astype(kind)

    def values(self, stored: AnyArray) -> FloatArray:
        """Stored pixels as values; NaN for those without."""
        values = stored.astype(np.float64) * self.scale + self.zero
        if self.blank is not None and stored.dtype.kind != "f":
            values[stored == self.blank] = np.nan
        return np.asarray(values)

    @property
    def value_range(self) -> tuple[float, float]:
        """Least and greatest value that the image can store."""
        kind = self.stored.dtype
        if kind.kind == "f":
            return -np.inf, np.inf
        bits = 8 * kind.itemsize
        lowest = 0 if kind.kind == "u" else -(2 ** (bits - 1))
        ends = [end * self.scale + self.zero for end in (lowest, lowest + 2**bits - 1)]
        return min(ends), max(ends)


def read_original(path: str | os.PathLike[str], *, hdu: int | str | None = None) -> Original:
    """Read a file of which one image is to be changed.

    Parameters
    ----------
    path : path
        A FITS file, gzipped or not.
    hdu : int or str, optional
        Number or name of the HDU that holds the image; the first 2-D image by default.

    Raises
    ------
    InputError
        As for `simimg.fits.reader.read_parts`; also an image that is stored compressed, and a TRUTH
        that is not that of a frame.
    """
    where = os.fspath(path)
    with open_hdus(where) as hdus:
        chosen = image_hdu(hdus, where, hdu)
        number = list(hdus).index(chosen)
        if chosen.header.get("ZIMAGE") is True or type(chosen).__name__ == "CompImageHDU":
            what = "its image is stored compressed, which cannot be added to"
            raise InputError(mistake(where, "", what, "unpack it to a plain FITS image first"))
        spans = []
        for one in hdus:
            place = one.fileinfo()
            start, data = int(place["hdrLoc"]), int(place["datLoc"])
            spans.append(_Span(start, data, data + int(place["datSpan"])))
        truth = truth_number = None
        if "TRUTH" in [one.name for one in hdus[1:]]:
            truth_number = next(n for n, one in enumerate(hdus) if n and one.name == "TRUTH")
            truth = read_truth(hdus[truth_number], where)
        beside = {}
        if chosen is hdus[0] and str(chosen.header.get("CREATOR", "")).startswith("simimg"):
            beside = {
                one.name: n
                for n, one in enumerate(hdus)
                if n
                and one.name in ("EXPECTED", "MASK")
                and type(one).__name__ == "ImageHDU"
                and one.shape == chosen.shape
            }
    with opened(where) as handle:
        handle.seek(0)
        content = handle.read()
    header = _header(content, spans[number])
    blank = header.get("BLANK")
    return Original(
        content=content,
        spans=tuple(spans),
        number=number,
        name=str(chosen.name) if number else "",
        scale=float(header.get("BSCALE", 1.0)),
        zero=float(header.get("BZERO", 0.0)),
        blank=blank if isinstance(blank, int) else None,
        truth=truth,
        truth_number=truth_number,
        beside=beside,
    )


def _plane(content: bytes, span: _Span) -> AnyArray:
    """The last two axes of an image as it is stored, big-endian and read only."""
    header = _header(content, span)
    count = [int(header[f"NAXIS{axis}"]) for axis in range(int(header["NAXIS"]), 0, -1)]
    flat = np.frombuffer(
        content, dtype=_STORED[int(header["BITPIX"])], count=int(np.prod(count)), offset=span.data
    )
    return flat.reshape(count[-2:])


def _header(content: bytes, span: _Span) -> Header:
    from astropy.io.fits import Header

    return Header.fromfile(io.BytesIO(content[span.header : span.data]))


def write_changed(
    path: str | os.PathLike[str],
    original: Original,
    *,
    stored: AnyArray,
    truth: Table,
    cards: Mapping[str, tuple[object, str]],
    history: Sequence[str],
    truth_says: Iterable[str] = (),
    beside: Mapping[str, AnyArray] | None = None,
    overwrite: bool = False,
) -> None:
    """Write a file again with its image changed and its truth grown.

    Parameters
    ----------
    path : path
    original : Original
    stored : ndarray
        The image as it is to be stored, of the original's shape.
    truth : astropy.table.Table
        Takes the place of the file's TRUTH, or is added at its end.
    cards : mapping
        Keyword to value and comment, for the headers of the image and of the primary HDU.
    history : sequence of str
        Lines of HISTORY for the image's header.
    truth_says : iterable of str
        Further comments of the TRUTH.
    beside : mapping of str to ndarray, optional
        By name, the images of `Original.beside` as they are to be stored.
    overwrite : bool
        Whether a file of that name may be replaced.

    Raises
    ------
    InputError, RunError
        As `simimg.newfile.new_file`.
    """
    planes = {original.beside[name]: plane for name, plane in (beside or {}).items()}
    planes[original.number] = np.ascontiguousarray(stored, dtype=original.stored.dtype)
    with new_file(path, overwrite=overwrite) as handle, warnings.catch_warnings():
        warnings.simplefilter("ignore")
        for number, span in enumerate(original.spans):
            if number == original.truth_number:
                write_truth(handle, truth, simulated=True, says=truth_says)
            elif number == 0 or number in planes:
                told = history if number == original.number else ()
                header = _marked(original, number, cards, told)
                data = (
                    planes[number].tobytes()
                    if number in planes
                    else original.content[span.data : span.end]
                )
                write_hdu(handle, header, _blocks(data))
            else:
                handle.write(original.content[span.header : span.end])
        if original.truth_number is None:
            write_truth(handle, truth, simulated=True, says=truth_says)


def _marked(
    original: Original,
    number: int,
    cards: Mapping[str, tuple[object, str]],
    history: Sequence[str],
) -> Header:
    """A header of the file with the cards added."""
    header = _header(original.content, original.spans[number])
    for keyword in ("DATASUM", "CHECKSUM"):
        header.remove(keyword, ignore_missing=True, remove_all=True)
    if number == 0 and "EXTEND" not in header:
        last = f"NAXIS{header['NAXIS']}" if header["NAXIS"] else "NAXIS"
        header.insert(last, ("EXTEND", True, "extensions may follow"), after=True)
    elif number == 0:
        header["EXTEND"] = True
    for keyword, (value, comment) in cards.items():
        add_card(header, keyword, value, comment)
    for line in history:
        add_commentary(header, "HISTORY", line)
    return header


def _blocks(data: bytes) -> Iterator[tuple[memoryview, int]]:
    for start in range(0, len(data), PASS_BYTES):
        part = memoryview(data)[start : start + PASS_BYTES]
        yield part, word_sum(part)
