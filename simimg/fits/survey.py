"""What a FITS file from a stranger claims to hold, against what is there.

Files are surveyed before a library parses them: after the FITS standard 4.0 (2018), sections 3, 4
and 7, every HDU's header is read, and the bytes that it claims are bounded and compared with the
file's own length. No memory is taken for data here.
"""

from __future__ import annotations

import os
from typing import BinaryIO

from simimg.errors import InputError, mistake
from simimg.fits.cards import ascii_text

BLOCK = 2880
CARD = 80

FILE_LIMIT = 2**34  # bytes of a file to be read
UNPACKED_LIMIT = 2**31  # bytes of a gzipped file, which is unpacked into memory
PIXEL_LIMIT = 2**30  # pixels of an image to be read: 32768 x 32768, as many as a scene may ask for
PACKED_LIMIT = 2**28  # pixels of a compressed image, which the length of the file does not bound
HEADER_LIMIT = 1000  # blocks of one header
HDU_LIMIT = 1000


def survey(handle: BinaryIO, where: str) -> list[dict[str, str]]:
    """Walk through a FITS file's HDUs and compare what they claim with what is there.

    Parameters
    ----------
    handle : binary file
        Open for reading and seekable.
    where : str
        Name of the file, for messages.

    Returns
    -------
    list of dict
        The bare values, as text, of each HDU's cards before the first ``/``.

    Raises
    ------
    InputError
        Not FITS, cut short, or larger than simimg reads.
    """
    size = handle.seek(0, os.SEEK_END)
    if size == 0:
        raise InputError(mistake(where, "", "is empty", "give a FITS file"))
    if size > FILE_LIMIT:
        most = f"simimg reads at most {FILE_LIMIT} bytes"
        raise InputError(mistake(where, "", f"has {size} bytes", f"{most}; cut the file up"))
    handle.seek(0)
    if handle.read(10) != b"SIMPLE  = ":
        mend = "give a file that begins with SIMPLE, or convert it to FITS first"
        raise InputError(mistake(where, "", "is not a FITS file", mend))
    found: list[dict[str, str]] = []
    place = 0
    while place < size and len(found) < HDU_LIMIT:
        handle.seek(place)
        first = handle.read(8)
        if found and first != b"XTENSION":
            break  # the standard allows other records after the last HDU
        cards, place = _read_cards(handle, place, where, len(found))
        length = _data_length(cards, where, len(found))
        if place + length > size:
            what = f"is cut short: its HDU {len(found)} claims {length} bytes of data"
            mend = "fetch or make the file again"
            raise InputError(mistake(where, "", f"{what}, {max(size - place, 0)} are there", mend))
        found.append(cards)
        place += length + (-length) % BLOCK
    return found


def _read_cards(
    handle: BinaryIO, place: int, where: str, number: int
) -> tuple[dict[str, str], int]:
    handle.seek(place)
    cards: dict[str, str] = {}
    for count in range(1, HEADER_LIMIT + 1):
        block = handle.read(BLOCK)
        if len(block) < BLOCK:
            break
        for start in range(0, BLOCK, CARD):
            card = block[start : start + CARD].decode("latin-1")
            keyword = card[:8].rstrip()
            if keyword == "END" and not card[8:].strip():
                return cards, place + count * BLOCK
            if card[8] == "=":
                cards.setdefault(keyword, card[9:].split("/")[0].strip())
    what = f"the header of its HDU {number} has no END"
    raise InputError(mistake(where, "", what, "fetch or make the file again"))


def _data_length(cards: dict[str, str], where: str, number: int) -> int:
    """Bytes of data that the cards of an HDU claim (FITS standard, equation 2)."""

    def whole(keyword: str, default: int | None = None) -> int:
        text = cards.get(keyword)
        try:
            value = default if text is None else int(text)
        except ValueError:
            value = None
        if value is None or (keyword != "BITPIX" and not 0 <= value < 2**62):
            key = f"HDU {number}: {keyword}"
            what = "is missing" if text is None else f"is not a count: {ascii_text(text)[:40]}"
            raise InputError(mistake(where, key, what, "fetch or make the file again"))
        return value

    bitpix, axes = whole("BITPIX"), whole("NAXIS")
    if bitpix not in (8, 16, 32, 64, -32, -64):
        what = f"must be 8, 16, 32, 64, -32 or -64, got {bitpix}"
        raise InputError(mistake(where, f"HDU {number}: BITPIX", what, "make the file again"))
    if axes > 999:
        raise InputError(mistake(where, f"HDU {number}: NAXIS", f"is {axes}", "at most 999"))
    if axes == 0:
        return 0
    lengths = [whole(f"NAXIS{axis}") for axis in range(1, axes + 1)]
    grouped = cards.get("GROUPS") == "T" and lengths[0] == 0
    pixels = 1
    for length in lengths[1:] if grouped else lengths:
        pixels *= length
    packed = cards.get("ZIMAGE") == "T"
    if packed:
        claimed = 1
        for axis in range(1, min(whole("ZNAXIS"), 999) + 1):
            claimed *= whole(f"ZNAXIS{axis}")
        _bound(claimed, PACKED_LIMIT, where, number)
    if cards.get("XTENSION", "'IMAGE").startswith("'IMAGE"):
        _bound(pixels, PIXEL_LIMIT, where, number)
    return abs(bitpix) // 8 * whole("GCOUNT", 1) * (whole("PCOUNT", 0) + pixels)


def _bound(pixels: int, most: int, where: str, number: int) -> None:
    if pixels > most:
        what = f"its HDU {number} claims an image of {pixels} pixels"
        raise InputError(mistake(where, "", what, f"simimg reads at most {most}; cut out a part"))
