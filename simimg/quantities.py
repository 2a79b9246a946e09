"""Text with a unit becomes a checked SI number, here and nowhere else.

A quantity is written as a number and a unit (``"0.8 arcsec"``), an angle also in sexagesimal
notation (``"05:34:32"``, ``"12h30m"``, ``"-5d23m28s"``). Each kind of quantity has a table of the
units that people write, with the factor to the SI unit (radian, metre, second, kelvin, pascal;
electrons, counts and pixels stay themselves). A unit that is not in the table is handed to
`astropy.units`, which is imported only then because it is slow to import. Infinite and undefined
numbers are never accepted.
"""

from __future__ import annotations

import difflib
import math
import re
import warnings
from collections.abc import Mapping

from simimg.errors import InputError
from simimg.units import ANGLES, DEGREE, KINDS, Kind

__all__ = ["KINDS", "LONGEST_TEXT", "QuantityError", "parse_quantity", "shown", "unit_factor"]

LONGEST_TEXT = 100
"""Longest text that is read as a quantity, in characters."""

_SHOWN = 40
_LOOK_ALIKES = str.maketrans({"\u2212": "-", "\u00b5": "u", "\u03bc": "u", "\u212b": "\u00c5"})
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity)\b", re.IGNORECASE)
_COLONS = re.compile(r"([+-]?)([0-9]{1,3}):([0-9]{1,2})(?::([0-9]{1,2}(?:\.[0-9]*)?))?")
_SPACES = re.compile(r"([+-]?)([0-9]{1,3}) ([0-9]{1,2}) ([0-9]{1,2}(?:\.[0-9]*)?)")
_LETTERS = re.compile(
    r"([+-]?)([0-9]{1,3}) ?([hd°]) ?([0-9]{1,2}) ?[m'\u2032]"
    r"(?: ?([0-9]{1,2}(?:\.[0-9]*)?) ?[s\"\u2033])?"
)


class QuantityError(InputError):
    """Text that is not the wanted quantity.

    Attributes
    ----------
    what : str
        What is wrong with it.
    mend : str
        What to write instead.
    """

    def __init__(self, what: str, mend: str) -> None:
        self.what = what
        self.mend = mend
        super().__init__(f"{what}; {mend}")

    def __reduce__(self) -> tuple[type[QuantityError], tuple[str, str]]:
        return type(self), (self.what, self.mend)


def shown(value: object) -> str:
    """A stranger's value as a short, harmless piece of a message.

    Long text is cut, characters that could move a terminal's cursor are escaped, and numbers too
    long to print are only described.
    """
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value) if value.bit_length() < 200 else "a huge number"
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, str):
        cut = value if len(value) <= _SHOWN else value[:_SHOWN] + "..."
        return '"' + "".join(c if c.isprintable() else ascii(c)[1:-1] for c in cut) + '"'
    if isinstance(value, Mapping):
        return "a table"
    if isinstance(value, list | tuple):
        return f"an array of {len(value)}"
    return f"a value of type {type(value).__name__}"


def parse_quantity(text: object, kind: str) -> float:
    """Read a number with a unit.

    Parameters
    ----------
    text : str or number
        For example ``"0.8 arcsec"``. A bare number (also as text) is accepted only where the kind
        has no dimension: pixels, magnitudes, ratios and plain numbers.
    kind : str
        A name in `KINDS`. Sexagesimal text with colons is read as degrees, as hours where the
        kind is ``"right ascension"``.

    Returns
    -------
    float
        Finite value in SI units.

    Raises
    ------
    QuantityError
        Whose `what` and `mend` say what is wrong and what to write instead.
    """
    form = KINDS[kind]
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        raise QuantityError(f"must be {form.noun}, got {shown(text)}", f"write {_example(form)}")
    if not isinstance(text, str):
        return _bare(text, form)
    plain = " ".join(text.translate(_LOOK_ALIKES).split())
    if not plain:
        raise QuantityError("is empty", f"write {_example(form)}, say")
    if len(plain) > LONGEST_TEXT:
        raise QuantityError(
            f"is not {form.noun}: {len(plain)} characters long", f"write {_example(form)}"
        )
    if form.units is ANGLES:
        angle = _sexagesimal(plain, hours=kind == "right ascension")
        if angle is not None:
            return angle
    match = _NUMBER.match(plain)
    if match is None:
        if _NOT_FINITE.match(plain):
            raise QuantityError(
                f"must be finite, got {shown(text)}", f"write a finite value, as {_example(form)}"
            )
        raise QuantityError(f"is not {form.noun}: {shown(text)}", f"write {_example(form)}")
    number, unit = float(match.group()), plain[match.end() :].strip()
    if not unit:
        return _bare(number, form, written=match.group())
    value = number * unit_factor(unit, kind)
    if form.offsets is not None:
        value += form.offsets.get(unit, 0.0)
    return _finite(value, text, form)


def unit_factor(unit: str, kind: str) -> float:
    """Factor from a unit to the SI unit of its kind.

    Parameters
    ----------
    unit : str
        For example ``"mas"``.
    kind : str
        A name in `KINDS`.

    Raises
    ------
    QuantityError
        If the unit is unknown or of another kind.
    """
    form = KINDS[kind]
    tidy = re.sub(r"\s*/\s*", "/", unit.strip())
    factor = form.units.get(tidy)
    if factor is not None:
        return factor
    others = [other.noun for other in KINDS.values() if tidy in other.units]
    # A unit known to be of another kind need not wait for the slow import.
    if form.astropy and not others and len(tidy) <= LONGEST_TEXT:
        factor = _astropy_factor(tidy, form)
        if factor is not None:
            return factor
    if not form.units:
        raise QuantityError(f"takes no unit, got {shown(unit)}", f"write {_example(form)}")
    if others:
        what = f"must be {form.noun}, but {shown(unit)} is a unit of {_bare_noun(others[0])}"
    else:
        what = f"unknown unit {shown(unit)} for {form.noun}"
    near = difflib.get_close_matches(tidy, list(form.units), n=1, cutoff=0.75)
    hint = f'did you mean "{near[0]}"? ' if near and not others else ""
    raise QuantityError(what, f"{hint}write {_example(form)}, say")


def _example(form: Kind) -> str:
    return f'"{form.example}"' if form.usual else form.example


def _bare_noun(noun: str) -> str:
    return noun.split(" ", 1)[1]


def _bare(number: float, form: Kind, *, written: str = "") -> float:
    """Accept a number without a unit where the kind has no dimension."""
    try:
        value = float(number)
    except OverflowError:
        value = math.inf
    _finite(value, number, form)
    if form.usual:
        written = written or shown(number)
        raise QuantityError(
            f"bare number {written}, but {form.noun} needs a unit",
            f'write "{written} {form.usual}" if {form.usual} is meant',
        )
    return value


def _finite(value: float, text: object, form: Kind) -> float:
    if not math.isfinite(value):
        raise QuantityError(
            f"must be finite, got {shown(text)}", f"write a finite value, as {_example(form)}"
        )
    return value


def _sexagesimal(text: str, *, hours: bool) -> float | None:
    """Sexagesimal angle in radians, or None where the text is written otherwise."""
    match = _COLONS.fullmatch(text) or _SPACES.fullmatch(text)
    if match is not None:
        sign, whole, minutes, seconds = match.groups()
    else:
        match = _LETTERS.fullmatch(text)
        if match is None:
            return None
        sign, whole, letter, minutes, seconds = match.groups()
        hours = letter == "h"
    if float(minutes) >= 60.0 or float(seconds or 0.0) >= 60.0:
        raise QuantityError(
            f"minutes and seconds must be below 60, got {shown(text)}", 'write "05:34:32", say'
        )
    degrees = float(whole) + float(minutes) / 60.0 + float(seconds or 0.0) / 3600.0
    value = degrees * DEGREE * (15.0 if hours else 1.0)
    return -value if sign == "-" else value


def _astropy_factor(unit: str, form: Kind) -> float | None:
    """Factor of a unit that only `astropy.units` knows; None where it does not convert."""
    from astropy import units as u

    spelled = re.sub(r"\be-", "electron", unit)
    spelled = re.sub(r"\bpx\b", "pix", spelled)
    spelled = re.sub(r"\binch(?:es)?\b", "imperial_inch", spelled)
    spelled = spelled.replace("imperial_inch", "(2.54 cm)")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            parsed = u.Unit(spelled, parse_strict="raise")
            for target in form.astropy:
                if parsed.is_equivalent(target):
                    factor = float(parsed.to(target))
                    return factor if math.isfinite(factor) and factor > 0.0 else None
    except (ValueError, TypeError, ArithmeticError, LookupError, AttributeError, RecursionError):
        return None
    return None
