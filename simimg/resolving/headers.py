"""What a header says of its camera, in the many words that headers have for it.

FITS reserves no keyword for gain, read noise or pixel scale; custom has several for each. Values
that cannot be what their keyword says are passed over, with a line that says so. Electrons to the
count, electrons, counts, arcseconds, seconds.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from math import isfinite

from simimg.frame import Frame

GAINS = ("EGAIN", "GAIN", "CCDGAIN", "ATODGAIN", "CONAD", "EPADU", "E_GAIN")
READ_NOISES = ("RDNOISE", "READNOIS", "RDNOIS", "RNOISE", "RONOISE", "RON", "ENOISE")
SATURATIONS = ("SATURATE", "SATLEVEL", "SATURLVL", "MAXADU")
PIXEL_SCALES = ("PIXSCALE", "SECPIX", "SECPIX1", "PIXSCAL1", "SCALE")
TIMES = ("EXPTIME", "EXPOSURE", "EXP_TIME", "TEXPTIME", "ITIME")
UNITS = ("BUNIT", "UNIT", "UNITS")

_LARGEST_GAIN = 50.0  # electrons to the count: above it is a setting of the camera's amplifier
_INVERSE = re.compile(r"(adu|dn|counts?)\s*(/|per)\s*(photo-?)?e(-|lec|\b)", re.IGNORECASE)
_IN_COUNTS = re.compile(r"\b(adu|dn|counts?)\b", re.IGNORECASE)
_COUNTS = ("adu", "dn", "du", "count", "counts", "ct", "cts")
_ELECTRONS = ("e", "e-", "electron", "electrons", "photon", "photons", "photoelectrons")
_SECTION = re.compile(r"\s*\[\s*(\d+)\s*:\s*(\d+)\s*,\s*(\d+)\s*:\s*(\d+)\s*\]\s*\Z")


@dataclass(frozen=True)
class Found:
    """A value and the keyword that it was found under."""

    value: float
    keyword: str


def number(frame: Frame, keyword: str) -> float | None:
    """A finite number of a header, also where it is written as text; None where there is none."""
    value = frame.value(keyword)
    if isinstance(value, str):
        try:
            value = float(value)
        except ValueError:
            return None
    if isinstance(value, bool) or not isinstance(value, int | float) or not isfinite(value):
        return None
    return float(value)


def comment(frame: Frame, keyword: str) -> str:
    """The comment of a keyword; empty where there is none."""
    card = frame.header.get(keyword)
    return str(card[1]) if isinstance(card, tuple) and len(card) > 1 else ""


def header_gain(frame: Frame) -> tuple[Found | None, list[str]]:
    """Electrons to the count, and what to say about it."""
    notes = []
    for keyword in GAINS:
        value = number(frame, keyword)
        if value is None or value <= 0.0:
            continue
        if _INVERSE.search(comment(frame, keyword)):
            value = 1.0 / value
        if value > _LARGEST_GAIN:
            notes.append(f"{keyword} = {value:g} is no number of electrons to the count: not used")
            continue
        return Found(value, keyword), notes
    return None, notes


def header_read_noise(frame: Frame, gain: float) -> Found | None:
    """Read noise in electrons; one in counts is turned by `gain`."""
    for keyword in READ_NOISES:
        value = number(frame, keyword)
        if value is None or value < 0.0:
            continue
        said = comment(frame, keyword)
        if _IN_COUNTS.search(said) and "/" not in said:
            value *= gain
        return Found(value, keyword)
    return None


def header_excess(frame: Frame) -> float:
    """Square of the excess noise factor of a multiplying register; 1 where none is told."""
    value, gain = number(frame, "EXCESS"), number(frame, "EMGAIN")
    told = value is not None and gain is not None and gain > 1.0 and 1.0 <= value <= 2.0
    return value if told and value is not None else 1.0


def header_saturation(frame: Frame) -> Found | None:
    """Counts from which a pixel is full."""
    return _first(frame, SATURATIONS)


def header_time(frame: Frame) -> float | None:
    """Exposure time, seconds; None where it is not told or not above 0."""
    found = _first(frame, TIMES)
    return found.value if found is not None and found.value > 0.0 else None


def header_bias(frame: Frame) -> Found | None:
    """Counts of a pixel without electrons."""
    level, pedestal = number(frame, "BIASLVL"), number(frame, "PEDESTAL")
    if level is not None:
        return Found(level, "BIASLVL")
    # A pedestal is what must be added to come to zero.
    return None if pedestal is None else Found(-pedestal, "PEDESTAL")


def header_pixel_scale(frame: Frame) -> Found | None:
    """Side of a pixel, arcseconds."""
    found = _first(frame, PIXEL_SCALES)
    if found is not None and found.value != 0.0:
        return Found(abs(found.value), found.keyword)
    pixel, focal = number(frame, "XPIXSZ"), number(frame, "FOCALLEN")
    if pixel is not None and focal is not None and pixel > 0.0 and focal > 0.0:
        # Micrometres over millimetres.
        return Found(206.264806 * pixel / focal, "XPIXSZ and FOCALLEN")
    return None


def header_unit(frame: Frame) -> tuple[str, bool]:
    """What a pixel counts, "adu", "electron" or "" (something else), and whether per second."""
    text = next((str(frame.value(k)) for k in UNITS if isinstance(frame.value(k), str)), "")
    word = "".join(text.lower().split())
    rate = False
    for ending in ("/s", "/sec", "/second", "s-1", "s^-1", "s**-1", "s**(-1)", "persecond"):
        if word.endswith(ending):
            word, rate = word.removesuffix(ending).rstrip(".*"), True
            break
    for ending in ("/pixel", "/pix"):
        word = word.removesuffix(ending)
    if word in _COUNTS:
        return "adu", rate
    return ("electron" if word in _ELECTRONS else ""), rate


def header_section(frame: Frame, *keywords: str) -> tuple[slice, slice] | None:
    """Rows and columns of a section such as ``[17:528, 1:520]``; None where there is none."""
    rows, columns = frame.counts.shape
    for keyword in keywords:
        found = _SECTION.match(str(frame.value(keyword) or ""))
        if found is None:
            continue
        left, right, bottom, top = (int(text) for text in found.groups())
        if 1 <= left <= right <= columns and 1 <= bottom <= top <= rows:
            return slice(bottom - 1, top), slice(left - 1, right)
    return None


def _first(frame: Frame, keywords: tuple[str, ...]) -> Found | None:
    for keyword in keywords:
        value = number(frame, keyword)
        if value is not None:
            return Found(value, keyword)
    return None
