"""The bytes of FITS images and tables, with their checksums.

After the FITS standard 4.0 (2018): layout of sections 3, 4 and 7, checksum of appendix J (Seaman,
Pence & Rots 2012). An image is converted, summed and written block by block, so that a frame costs
one pass over its pixels; nothing takes the time of day.
"""

from __future__ import annotations

import sys
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, BinaryIO

import numpy as np

from simimg.arrays import AnyArray
from simimg.fits.cards import ascii_text

if TYPE_CHECKING:
    from astropy.io.fits import Header

BLOCK = 2880
PASS_BYTES = 256 * BLOCK  # of an image at a time: small enough to stay in a processor's cache

_BITPIX = {"u1": 8, "i2": 16, "i4": 32, "i8": 64, "f4": -32, "f8": -64}
_ONES = 0xFFFFFFFF


@dataclass(frozen=True)
class Column:
    """A column of a table to be written.

    Attributes
    ----------
    name : str
    values : array
        Numbers, booleans or text, one for each row; or a list of bytes of any length.
    unit : str
        As FITS writes units; may be empty.
    comment : str
        What the column holds.
    """

    name: str
    values: AnyArray | Sequence[bytes]
    unit: str = ""
    comment: str = ""


def image_cards(image: AnyArray) -> dict[str, object]:
    """The cards that describe the bytes of an image, BITPIX first."""
    code = image.dtype.kind + str(image.dtype.itemsize)
    offset = code in ("u2", "u4", "u8")
    cards: dict[str, object] = {
        "BITPIX": (_BITPIX[code.replace("u", "i") if offset else code], "bits of a pixel"),
        "NAXIS": (image.ndim, "axes"),
    }
    for axis, length in enumerate(reversed(image.shape), start=1):
        cards[f"NAXIS{axis}"] = (length, "columns" if axis == 1 else "rows")
    if offset:
        zero = 1 << (8 * image.dtype.itemsize - 1)
        cards["BSCALE"] = (1, "value = BSCALE * stored + BZERO")
        cards["BZERO"] = (zero, "unsigned integers are stored so")
    return cards


def image_blocks(image: AnyArray) -> Iterator[tuple[memoryview, int]]:
    """The bytes of an image as FITS stores them, block by block, each with its sum.

    Yields
    ------
    (bytes, sum)
        `sum` is congruent to the sum of the big-endian 32-bit words, modulo 2^32 - 1.
    """
    flat = np.ascontiguousarray(image).reshape(-1)
    if flat.dtype.byteorder not in "=|" and not flat.dtype.isnative:
        flat = flat.astype(flat.dtype.newbyteorder("="))
    size = flat.dtype.itemsize
    step = PASS_BYTES // size
    flip = None
    if flat.dtype.kind == "u" and size > 1:
        flip = flat.dtype.type(1 << (8 * size - 1))
    for start in range(0, flat.size, step):
        native = flat[start : start + step]
        if flip is not None:
            native = native ^ flip
        swapped = native.astype(native.dtype.newbyteorder(">"))
        # Words of two or four bytes can be summed before their bytes are swapped, which is several
        # times as fast: the two halves of a word change places, and so do those of the sum,
        # because 2^32 is 1 in the arithmetic of the checksum.
        if size == 2 and sys.byteorder == "little" and native.size % 2 == 0:
            total = int(native.view(np.uint32).sum(dtype=np.uint64)) << 16
        elif size in (4, 8):
            total = int(native.view(np.uint32).sum(dtype=np.uint64))
        else:
            total = word_sum(swapped.view(np.uint8).data)
        yield swapped.view(np.uint8).data, total


def word_sum(data: bytes | memoryview) -> int:
    """Sum of the big-endian 32-bit words of some bytes, zeros added to fill the last word."""
    array = np.frombuffer(data, dtype=np.uint8)
    whole = array.size - array.size % 4
    total = int(array[:whole].view(">u4").sum(dtype=np.uint64))
    return total + int.from_bytes(array[whole:].tobytes().ljust(4, b"\0"), "big")


def table_parts(columns: Sequence[Column], rows: int) -> tuple[dict[str, object], bytes, bytes]:
    """A binary table: its cards, its rows, and the heap of its values of varying length.

    Parameters
    ----------
    columns : sequence of Column
    rows : int
        Length of every column.

    Raises
    ------
    ValueError
        A column of another length, or of a kind that a FITS table cannot hold.
    """
    fields: list[tuple[str, AnyArray, str]] = []
    heap = bytearray()
    for column in columns:
        if len(column.values) != rows:
            raise ValueError(f"column {column.name} has {len(column.values)} rows, not {rows}")
        if isinstance(column.values, np.ndarray):
            stored, form = _stored(column.values)
        else:
            longest = max((len(value) for value in column.values), default=0)
            stored, form = np.zeros((rows, 2), dtype=">i8"), f"1QB({longest})"
            for row, value in enumerate(column.values):
                stored[row] = len(value), len(heap)
                heap += value
        fields.append((column.name, stored, form))
    dtype = [(f"{i}", f[1].dtype, f[1].shape[1:]) for i, f in enumerate(fields)]
    table = np.zeros(rows, dtype=dtype)
    for i, (_, stored, _) in enumerate(fields):
        table[f"{i}"] = stored
    cards: dict[str, object] = {
        "BITPIX": (8, "bytes"),
        "NAXIS": (2, "axes"),
        "NAXIS1": (table.dtype.itemsize, "bytes of a row"),
        "NAXIS2": (rows, "rows"),
        "PCOUNT": (len(heap), "bytes of the heap"),
        "GCOUNT": (1, "one group"),
        "TFIELDS": (len(fields), "columns"),
    }
    for number, (column, (name, _, form)) in enumerate(zip(columns, fields), start=1):
        cards[f"TTYPE{number}"] = (name, column.comment)
        cards[f"TFORM{number}"] = form
        if column.unit:
            cards[f"TUNIT{number}"] = column.unit
    return cards, table.tobytes(), bytes(heap)


def _stored(values: AnyArray) -> tuple[AnyArray, str]:
    if values.ndim != 1:
        raise ValueError("a column of a table has one value a row")
    kind = values.dtype.kind
    if kind == "O":
        values = np.array([str(value) for value in values], dtype=str)
        kind = "U"
    if kind == "U" and values.size and values.dtype.itemsize:
        points = np.ascontiguousarray(values).view(np.uint32)
        if np.any((points > 126) | ((points < 32) & (points > 0))):
            values = np.array([ascii_text(str(value)) for value in values], dtype=str)
            points = values.view(np.uint32)
        # Where all is ASCII a code point is its byte; encoding each text takes ten times as long.
        values = points.astype(np.uint8).view(f"S{values.dtype.itemsize // 4}")
    if kind in "SU":
        width = 1 if values.dtype.kind == "U" else max(values.dtype.itemsize, 1)
        return values.astype(f"S{width}"), f"{width}A"
    if kind == "b":
        return np.where(values, b"T", b"F").astype("S1"), "1L"
    code = kind + str(values.dtype.itemsize)
    form = {"u1": "1B", "i2": "1I", "i4": "1J", "i8": "1K", "f4": "1E", "f8": "1D"}.get(code)
    if form is None:
        raise ValueError(f"a FITS table cannot hold values of type {values.dtype}")
    return values.astype(values.dtype.newbyteorder(">")), form


def write_hdu(handle: BinaryIO, header: Header, blocks: Iterable[tuple[memoryview, int]]) -> None:
    """Write one HDU with its DATASUM and CHECKSUM.

    Parameters
    ----------
    handle : binary file
        Open for writing at the place of the HDU; must be seekable.
    header : astropy.io.fits.Header
        Without DATASUM and CHECKSUM; they are added here.
    blocks : iterable of (bytes, sum)
        The data; the length of every block but the last is a multiple of four bytes.
    """
    header["DATASUM"] = ("0" * 10, "sum of the data's 32-bit words")
    header["CHECKSUM"] = ("0" * 16, "makes the whole HDU's sum zero")
    start = handle.tell()
    room = len(header.tostring())
    handle.seek(start + room)
    total = length = 0
    for data, part in blocks:
        handle.write(data)
        length += len(data)
        total += part
    if length % BLOCK:
        handle.write(bytes(BLOCK - length % BLOCK))
    end = start + room + length + (-length) % BLOCK
    # The standard's sum is that of ones' complement: nought only for words that are all nought.
    datasum = total % _ONES or (_ONES if total else 0)
    header["DATASUM"] = str(datasum)
    head = header.tostring().encode("ascii")
    header["CHECKSUM"] = _checksum_text(~(_fold(word_sum(head) + datasum)) & _ONES)
    handle.seek(start)
    handle.write(header.tostring().encode("ascii"))
    handle.seek(end)


def _fold(total: int) -> int:
    while total > _ONES:
        total = (total & _ONES) + (total >> 32)
    return total


def _checksum_text(value: int) -> str:
    """The 16 characters that stand for a checksum (FITS standard, appendix J.2)."""
    columns = []
    for shift in (24, 16, 8, 0):
        byte = (value >> shift) & 0xFF
        letters = [byte // 4 + 48] * 4
        letters[0] += byte % 4
        # Letters and digits only: pairs are pushed apart, which keeps their sum.
        while any(58 <= c <= 64 or 91 <= c <= 96 for c in letters):
            for first in (0, 2):
                pair = letters[first : first + 2]
                if any(58 <= c <= 64 or 91 <= c <= 96 for c in pair):
                    letters[first] += 1
                    letters[first + 1] -= 1
        columns.append(letters)
    text = "".join(chr(columns[column][row]) for row in range(4) for column in range(4))
    return text[-1] + text[:-1]
