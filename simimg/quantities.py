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
from dataclasses import dataclass

from simimg.errors import InputError

LONGEST_TEXT = 100
"""Longest text that is read as a quantity, in characters."""

_SHOWN = 40
_LOOK_ALIKES = str.maketrans({"\u2212": "-", "\u00b5": "u", "\u03bc": "u", "\u212b": "\u00c5"})
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity)\b", re.IGNORECASE)
_COLONS = re.compile(r"([+-]?)([0-9]{1,3}):([0-9]{1,2})(?::([0-9]{1,2}(?:\.[0-9]*)?))?")
_SPACES = re.compile(r"([+-]?)([0-9]{1,3}) ([0-9]{1,2}) ([0-9]{1,2}(?:\.[0-9]*)?)")
_LETTERS = re.compile(
    r"([+-]?)([0-9]{1,3}) ?([hd°]) ?([0-9]{1,2}) ?[m'\u2032](?: ?([0-9]{1,2}(?:\.[0-9]*)?) ?[s\"\u2033])?"
)

_DEGREE = math.pi / 180.0
_ARCSEC = _DEGREE / 3600.0

_ANGLES = {
    **dict.fromkeys(("rad", "radian", "radians"), 1.0),
    "mrad": 1e-3,
    "urad": 1e-6,
    "nrad": 1e-9,
    **dict.fromkeys(("deg", "degree", "degrees", "°"), _DEGREE),
    **dict.fromkeys(
        ("arcmin", "arcmins", "arcminute", "arcminutes", "'", "\u2032"), _DEGREE / 60.0
    ),
    **dict.fromkeys(("arcsec", "arcsecs", "arcsecond", "arcseconds", "as", '"', "\u2033"), _ARCSEC),
    **dict.fromkeys(("mas", "milliarcsec"), _ARCSEC * 1e-3),
    **dict.fromkeys(("uas", "microarcsec"), _ARCSEC * 1e-6),
    **dict.fromkeys(("hourangle", "h", "hour", "hours"), 15.0 * _DEGREE),
}
_LENGTHS = {
    **dict.fromkeys(("m", "metre", "metres", "meter", "meters"), 1.0),
    "km": 1e3,
    "dm": 0.1,
    "cm": 1e-2,
    "mm": 1e-3,
    **dict.fromkeys(("um", "micron", "microns", "micrometre", "micrometer"), 1e-6),
    **dict.fromkeys(("nm", "nanometre", "nanometres", "nanometer", "nanometers"), 1e-9),
    "pm": 1e-12,
    **dict.fromkeys(("angstrom", "Angstrom", "angstroms", "AA", "\u00c5", "A"), 1e-10),
    **dict.fromkeys(("inch", "inches", "in"), 0.0254),
    **dict.fromkeys(("ft", "foot", "feet"), 0.3048),
}
_TIMES = {
    **dict.fromkeys(("s", "sec", "secs", "second", "seconds"), 1.0),
    "ms": 1e-3,
    "us": 1e-6,
    "ns": 1e-9,
    **dict.fromkeys(("min", "mins", "minute", "minutes"), 60.0),
    **dict.fromkeys(("h", "hr", "hour", "hours"), 3600.0),
    **dict.fromkeys(("d", "day", "days"), 86400.0),
}
_PRESSURES = {
    **dict.fromkeys(("Pa", "pascal"), 1.0),
    **dict.fromkeys(("hPa", "mbar", "millibar"), 100.0),
    "kPa": 1e3,
    "bar": 1e5,
    "mmHg": 133.322387415,
    "atm": 101325.0,
}
_SPEEDS = {
    "m/s": 1.0,
    "km/s": 1e3,
    **dict.fromkeys(("km/h", "kph"), 1.0 / 3.6),
    "mph": 0.44704,
    **dict.fromkeys(("knot", "knots"), 1852.0 / 3600.0),
}
_ELECTRON = ("electron", "electrons", "e-", "e")
_COUNT = ("adu", "ADU", "count", "counts", "DN")
_PIXEL = ("pixel", "pixels", "pix", "px")


def _per(tops: tuple[str, ...], bottoms: Mapping[str, float]) -> dict[str, float]:
    """Table of the quotients of the given units, written with a slash."""
    return {f"{top}/{bottom}": 1.0 / size for top in tops for bottom, size in bottoms.items()}


_PER_TIME = {**_TIMES, **{f"{p}/{unit}": size for p in _PIXEL for unit, size in _TIMES.items()}}


@dataclass(frozen=True)
class Kind:
    """One kind of quantity: its units, and the words for it in a message.

    Attributes
    ----------
    noun : str
        With its article: ``"a length"``.
    example : str
        A well written value, shown in the mend.
    usual : str
        The unit offered when a number comes without one; empty where a bare number is right.
    units : mapping of str to float
        Factor from the unit to SI.
    astropy : tuple of str
        Units of `astropy` that any other unit must convert to; empty: no other units.
    offsets : mapping of str to float
        Added after the factor (temperatures).
    """

    noun: str
    example: str
    usual: str
    units: Mapping[str, float]
    astropy: tuple[str, ...] = ()
    offsets: Mapping[str, float] | None = None


KINDS: Mapping[str, Kind] = {
    "angle": Kind("an angle", "0.8 arcsec", "arcsec", _ANGLES, ("rad",)),
    "right ascension": Kind("a right ascension", "05:34:32", "deg", _ANGLES, ("rad",)),
    "declination": Kind("a declination", "-05:23:28", "deg", _ANGLES, ("rad",)),
    "length": Kind("a length", "2 m", "m", _LENGTHS, ("m",)),
    "time": Kind("a time", "30 s", "s", _TIMES, ("s",)),
    "temperature": Kind(
        "a temperature",
        "10 degC",
        "degC",
        {
            **dict.fromkeys(("K", "kelvin", "degC", "deg_C", "°C", "celsius", "Celsius"), 1.0),
            **dict.fromkeys(("degF", "deg_F", "°F"), 5.0 / 9.0),
        },
        ("K",),
        {
            **dict.fromkeys(("degC", "deg_C", "°C", "celsius", "Celsius"), 273.15),
            **dict.fromkeys(("degF", "deg_F", "°F"), 459.67 * 5.0 / 9.0),
        },
    ),
    "pressure": Kind("a pressure", "780 hPa", "hPa", _PRESSURES, ("Pa",)),
    "speed": Kind("a speed", "10 m/s", "m/s", _SPEEDS, ("m / s",)),
    "electrons": Kind(
        "a number of electrons",
        "5 electron",
        "electron",
        {**dict.fromkeys(_ELECTRON, 1.0), "ke-": 1e3},
        ("electron", "electron / pix"),
    ),
    "electron rate": Kind(
        "a rate of electrons",
        "0.02 electron/s",
        "electron/s",
        _per(_ELECTRON, _PER_TIME),
        ("electron / s", "electron / (s pix)"),
    ),
    "gain": Kind(
        "a gain",
        "1.4 electron/adu",
        "electron/adu",
        _per(_ELECTRON, dict.fromkeys(_COUNT, 1.0)),
        ("electron / adu", "electron / ct"),
    ),
    "counts": Kind("a number of counts", "400 adu", "adu", dict.fromkeys(_COUNT, 1.0), ("adu",)),
    "signal": Kind("a number of electrons", "5e5", "", dict.fromkeys(_ELECTRON, 1.0)),
    "pixels": Kind("a number of pixels", "127.5", "", dict.fromkeys(_PIXEL, 1.0), ("pix",)),
    "magnitude": Kind("a magnitude", "11.2", "", dict.fromkeys(("mag", "mags"), 1.0)),
    "surface brightness": Kind(
        "a surface brightness in magnitudes per square arcsecond",
        "21.4",
        "",
        dict.fromkeys(("mag/arcsec2", "mag/arcsec^2", "mag/arcsec**2", "mag arcsec-2"), 1.0),
    ),
    "ratio": Kind("a ratio", "0.8", "", dict.fromkeys(("%", "percent"), 0.01)),
    "number": Kind("a number", "1.5", "", {}),
}
"""Every kind of quantity that `parse_quantity` knows, by name."""


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
        raise QuantityError("is empty", f"write {_example(form)}")
    if len(plain) > LONGEST_TEXT:
        raise QuantityError(
            f"is not {form.noun}: {len(plain)} characters long", f"write {_example(form)}"
        )
    if form.units is _ANGLES:
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
    near = difflib.get_close_matches(tidy, list(form.units), n=1, cutoff=0.6)
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
    value = degrees * _DEGREE * (15.0 if hours else 1.0)
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
