"""The units that people write, by kind of quantity, with their factors to SI.

Angles go to radians, lengths to metres, times to seconds, temperatures to kelvin, pressures to
pascal; electrons, counts and pixels stay themselves. `simimg.quantities` reads them.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

DEGREE = math.pi / 180.0
_ARCMIN = DEGREE / 60.0
_ARCSEC = DEGREE / 3600.0

ANGLES = {
    **dict.fromkeys(("rad", "radian", "radians"), 1.0),
    "mrad": 1e-3,
    "urad": 1e-6,
    "nrad": 1e-9,
    **dict.fromkeys(("deg", "degree", "degrees", "°"), DEGREE),
    **dict.fromkeys(("arcmin", "arcmins", "arcminute", "arcminutes", "'", "\u2032"), DEGREE / 60.0),
    **dict.fromkeys(("arcsec", "arcsecs", "arcsecond", "arcseconds", "as"), _ARCSEC),
    **dict.fromkeys(('"', "\u2033"), _ARCSEC),
    **dict.fromkeys(("mas", "milliarcsec"), _ARCSEC * 1e-3),
    **dict.fromkeys(("uas", "microarcsec"), _ARCSEC * 1e-6),
    **dict.fromkeys(("hourangle", "h", "hour", "hours"), 15.0 * DEGREE),
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
    # Julian years, as orbits and proper motions are given.
    **dict.fromkeys(("yr", "yrs", "year", "years"), 365.25 * 86400.0),
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


_AREAS = {"m2": 1.0, "cm2": 1e-4, "mm2": 1e-6}
_HIT_RATES = {
    form.format(area=area, time=time): 1.0 / (size * duration)
    for area, size in _AREAS.items()
    for time, duration in _TIMES.items()
    for form in ("/({area} {time})", "/{area}/{time}", "1/({area} {time})", "{area}-1 {time}-1")
}

# An hour of angle an hour of time is no way to write how fast something turns.
_HOURS = ("hourangle", "h", "hour", "hours")
_ANGULAR_RATES = {
    f"{angle}/{time}": size / duration
    for angle, size in ANGLES.items()
    if angle not in _HOURS
    for time, duration in _TIMES.items()
}
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
    "angle": Kind("an angle", "0.8 arcsec", "arcsec", ANGLES, ("rad",)),
    "right ascension": Kind("a right ascension", "05:34:32", "deg", ANGLES, ("rad",)),
    "declination": Kind("a declination", "-05:23:28", "deg", ANGLES, ("rad",)),
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
    "frequency": Kind(
        "a frequency",
        "1000 Hz",
        "Hz",
        {"Hz": 1.0, "kHz": 1e3, "MHz": 1e6, "1/s": 1.0, "/s": 1.0},
        ("Hz",),
    ),
    "angular rate": Kind(
        "an angular rate", "30 arcsec/h", "arcsec/s", _ANGULAR_RATES, ("rad / s",)
    ),
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
    "hit rate": Kind(
        "a rate of hits",
        "5 / (cm2 min)",
        "/ (cm2 min)",
        _HIT_RATES,
        ("1 / (m2 s)",),
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
    "Julian year": Kind("a Julian year", "1934.0", "", {}),
}
"""Every kind of quantity that `parse_quantity` knows, by name."""
