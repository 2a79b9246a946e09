"""FITS header cards: what a keyword and its value may be, and how text becomes ASCII.

After the FITS standard 4.0 (Pence et al. 2010, A&A 524, A42; version 4.0 of 2018), section 4. Text
outside printable ASCII, which a header cannot hold, loses its accents or is escaped; text that
exceeds a card goes on in CONTINUE cards (section 4.2.1.2).
"""

from __future__ import annotations

import math
import re
import textwrap
import unicodedata
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING, TypeAlias

from simimg.errors import mistake

if TYPE_CHECKING:
    from astropy.io.fits import Header

CardValue: TypeAlias = bool | int | float | str

KEYWORD_LENGTH = 8
TEXT_LIMIT = 2000
INTEGER_LIMIT = 2**63 - 1
COMMENTARY = ("COMMENT", "HISTORY")

_KEYWORD = re.compile(r"[A-Z0-9_-]{1,8}\Z")

# Keywords that say how the bytes of the file are laid out.
_LAYOUT = re.compile(
    r"(SIMPLE|XTENSION|BITPIX|NAXIS[0-9]*|EXTEND|PCOUNT|GCOUNT|GROUPS|TFIELDS|THEAP|BLANK|BSCALE"
    r"|BZERO|BLOCKED|END|CONTINUE|LONGSTRN|HIERARCH|INHERIT|EXTNAME|EXTVER|EXTLEVEL|CHECKSUM"
    r"|DATASUM|(TFORM|TTYPE|TUNIT|TSCAL|TZERO|TNULL|TDISP|TDIM|TBCOL|TCTYP|TCUNI|TCRVL|TCRPX|TCDLT|TCROT|TDMIN|TDMAX|TLMIN|TLMAX"
    r"|PTYPE|PSCAL|PZERO)[0-9]+|Z(IMAGE|TABLE|CMPTYPE|BITPIX|NAXIS[0-9]*|TILE[0-9]+|FORM[0-9]+"
    r"|NAME[0-9]+|VAL[0-9]+|SIMPLE|EXTEND|PCOUNT|GCOUNT|HECKSUM|DATASUM|QUANTIZ|DITHER0))\Z"
)

# Keywords of the celestial coordinates.
_COORDINATES = re.compile(
    r"(WCSAXES|WCSNAME|(CTYPE|CUNIT|CRVAL|CRPIX|CDELT|CROTA|CNAME|CRDER|CSYER|CZPHS|CPERI)[0-9]+"
    r"|(PC|CD|PV|PS)[0-9]+_[0-9]+|LONPOLE|LATPOLE|RADESYS|RADECSYS|EQUINOX|EPOCH|MJDREF[IF]?"
    r"|DATEREF|SPECSYS|SSYSOBS|SSYSSRC|RESTFRQ|RESTFREQ|RESTWAV|VELOSYS|VELANGL|ZSOURCE"
    r"|(A|B|AP|BP)_(ORDER|DMAX|[0-9]_[0-9]))[A-Z]?\Z"
)

# Keywords that simimg fills from the scene, and the key that says so.
FILLED = {
    "SIMULATE": "every frame of simimg carries it",
    "CREATOR": "every frame of simimg carries it",
    "SCENEID": "it is computed from the scene",
    "SEED": "set exposure.seed",
    "EXPTIME": "set exposure.time",
    "DATE-OBS": "set exposure.start",
    "DATE-BEG": "set exposure.start",
    "DATE-AVG": "set exposure.start",
    "DATE-END": "set exposure.start",
    "DATE": "no clock enters a frame; for the time of exposure set exposure.start",
    "MJD-AVG": "set exposure.start",
    "MJD-OBS": "set exposure.start",
    "TIMESYS": "set exposure.start",
    "FILTER": "set band.name",
    "GAIN": "set camera.gain",
    "RDNOISE": "set camera.read_noise",
    "SATURATE": "set camera.full_well or camera.bit_depth",
    "AIRMASS": "set air.airmass or air.altitude",
    "BUNIT": "a frame is in adu",
    "OBSTYPE": "it follows from what is made",
    "WAVELEN": "set band.name or band.centre",
    "BIASLVL": "set camera.bias",
    "DARKSIG": "set camera.dark_current",
    "SKYLVL": "set sky.surface_brightness",
    "PIXSCALE": "set camera.pixel_scale",
    "SEEING": "set air.seeing",
    "EXPNUM": "it is counted",
    "TELESCOP": "set telescope.name",
    "INSTRUME": "set camera.name",
}

# The standard gives these reserved keywords a text value, and readers rely on it.
_TEXT_ONLY = ("AUTHOR", "OBJECT", "OBSERVER", "ORIGIN", "REFERENC")
_NUMBER_ONLY = ("DATAMAX", "DATAMIN", "OBSGEO-X", "OBSGEO-Y", "OBSGEO-Z")


def is_keyword(text: str) -> bool:
    """Whether a text is a FITS keyword of the standard's eight characters."""
    return bool(_KEYWORD.match(text))


def is_layout(keyword: str) -> bool:
    """Whether a keyword says how the bytes of a file are laid out."""
    return bool(_LAYOUT.match(keyword))


def is_coordinate(keyword: str) -> bool:
    """Whether a keyword belongs to the world coordinates."""
    return bool(_COORDINATES.match(keyword))


def ascii_text(text: str) -> str:
    """Text in printable ASCII, for a header card or a table of fixed-width text.

    Accents are dropped, white space of any kind becomes a blank, and what has no plain letter is
    escaped as in a Python literal: a backslash, a ``u`` and four hexadecimal digits.
    """
    if text.isascii() and text.isprintable():
        return text
    pieces = []
    for character in unicodedata.normalize("NFKD", text):
        if character.isspace():
            pieces.append(" ")
        elif character.isascii() and character.isprintable():
            pieces.append(character)
        elif not unicodedata.combining(character):
            pieces.append(character.encode("unicode_escape").decode("ascii"))
    return "".join(pieces)


def check_header(extra: Mapping[str, object], where: str, *, table: str = "header") -> list[str]:
    """Mistakes in the keywords that a user adds to a frame.

    Parameters
    ----------
    extra : mapping
        Keywords and values as the user gave them.
    where : str
        File that holds them, for the messages.
    table : str
        Name of the table that holds them.

    Returns
    -------
    list of str
        One line for each mistake, each with its mend; empty when all can be written.
    """
    lines = []
    for keyword, value in extra.items():
        key = f"{table}.{ascii_text(str(keyword))[:80]}"
        wrong = card_mistake(str(keyword), value)
        if wrong:
            lines.append(mistake(where, key, *wrong))
    return lines


def card_mistake(keyword: str, value: object) -> tuple[str, str] | None:
    """What is wrong with one keyword that a user adds, and its mend; None when nothing is."""
    return _keyword_mistake(keyword) or _value_mistake(keyword, value)


def _keyword_mistake(keyword: str) -> tuple[str, str] | None:
    if not _KEYWORD.match(keyword):
        if _KEYWORD.match(keyword.upper()):
            return "a FITS keyword is in capitals", f"write {keyword.upper()}"
        rule = f"use at most {KEYWORD_LENGTH} of A-Z, 0-9, - and _"
        return "is not a FITS keyword", rule
    if is_layout(keyword):
        return "is a keyword of the file's own layout", "choose another keyword"
    if is_coordinate(keyword):
        mend = "set pointing, camera.rotation and camera.pixel_scale instead"
        return "belongs to the coordinates that simimg writes", mend
    if keyword in FILLED:
        return "is written by simimg itself", FILLED[keyword]
    if keyword.startswith("DATE"):
        return "is reserved for dates by the FITS standard", "choose another keyword"
    return None


def _value_mistake(keyword: str, value: object) -> tuple[str, str] | None:
    if not isinstance(value, (bool, int, float, str)):
        kind = "a table" if isinstance(value, Mapping) else f"of type {type(value).__name__}"
        return f"is {kind}", "write text, a number, true or false"
    if isinstance(value, float) and not math.isfinite(value):
        return f"must be finite, got {value}", "write a finite number, or text"
    if isinstance(value, int) and abs(value) > INTEGER_LIMIT:
        return "is too large an integer", "write it as text"
    if isinstance(value, str) and len(ascii_text(value)) > TEXT_LIMIT:
        return f"has over {TEXT_LIMIT} characters", "write less"
    if keyword in (*COMMENTARY, *_TEXT_ONLY) and not isinstance(value, str):
        return "must be text", f'write "{value}"'
    if keyword in _NUMBER_ONLY and (isinstance(value, (bool, str))):
        return "must be a number", "write a bare number, or choose another keyword"
    return None


def add_cards(header: Header, cards: Mapping[str, object]) -> None:
    """Add cards to a header in place, in their order.

    Parameters
    ----------
    header : astropy.io.fits.Header
        The header to extend.
    cards : mapping
        Keyword to value, to ``(value, comment)``, or, for COMMENT and HISTORY, to text or a list
        of texts. A value of None, NaN or infinity leaves the card out: FITS cannot say it.

    Raises
    ------
    ValueError
        A keyword or a value that no FITS header can hold.
    """
    for keyword, given in cards.items():
        if keyword in COMMENTARY:
            texts = [given] if isinstance(given, str) else given
            if not isinstance(texts, Iterable):
                raise ValueError(f"{keyword} must be text, got {given!r}")
            for text in texts:
                add_commentary(header, keyword, str(text))
            continue
        value, comment = given if isinstance(given, tuple) else (given, "")
        add_card(header, keyword, value, comment)


def add_commentary(header: Header, keyword: str, text: str) -> None:
    """Add a COMMENT or HISTORY, over several cards where it is long."""
    for line in textwrap.wrap(ascii_text(text), 72) or [""]:
        header.add_comment(line) if keyword == "COMMENT" else header.add_history(line)


def add_card(header: Header, keyword: str, value: object, comment: str = "") -> None:
    """Add one card, or replace it, with its comment cut to what fits."""
    if not _KEYWORD.match(keyword):
        raise ValueError(f"{keyword!r} is not a FITS keyword")
    plain = _plain(value)
    if plain is None:
        return
    note = ascii_text(comment)
    if isinstance(plain, str):
        shown = len(plain.replace("'", "''"))
        room = 80 - 10 - max(shown + 2, 20) - 3
        # A text that fills its card goes on in CONTINUE cards, with its comment at their end.
        note = note[: max(room, 0)] if shown <= 68 else note[:60]
    else:
        note = note[:47]
    header[keyword] = (plain, note)
    if len(header.cards[keyword].image) > 80:
        header["LONGSTRN"] = ("OGIP 1.0", "long text goes on in CONTINUE cards")


def _plain(value: object) -> CardValue | None:
    if value is None:
        return None
    item = getattr(value, "item", None)
    if callable(item):
        value = item()
    if isinstance(value, (bool, int)):
        return value
    if isinstance(value, float):
        # Adding zero turns -0.0 into 0.0.
        return value + 0.0 if math.isfinite(value) else None
    if isinstance(value, str):
        return ascii_text(value).rstrip()  # blanks at the end mean nothing in FITS
    raise ValueError(f"a FITS card cannot hold {value!r}")
