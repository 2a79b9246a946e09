"""Columns of a catalogue in simimg's own units: radians, pixels, electrons, kelvin.

Angles must have a unit, from the table or from the user; the rest may be bare.
"""

from __future__ import annotations

import math
from typing import Final

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.sky.tables import Column

ANGLES: Final = ("east", "north", "ra", "dec")

_BARE: Final = {
    "x": ("pix", "pixel", "px"),
    "y": ("pix", "pixel", "px"),
    "magnitude": ("mag", "mag(AB)", "mag(ST)"),
    "electrons": ("electron", "count", "ct", "ph", "photon"),
    "temperature": ("K",),
}
_FILL = "fill it in or leave the row out"


class ColumnError(Exception):
    """A column that does not hold what it should: what is wrong, and the mend."""

    def __init__(self, what: str, mend: str) -> None:
        self.what = what
        self.mend = mend
        super().__init__(f"{what}; {mend}")


def numbers(key: str, column: Column, unit: str | None) -> FloatArray:
    """Values of a column in our units.

    Parameters
    ----------
    key : str
        What the column means: east, north, ra, dec, x, y, magnitude, electrons or temperature.
    column : Column
        The column as read.
    unit : str or None
        The user's unit, for a column to which the table gives none.

    Returns
    -------
    ndarray, shape (rows,)
        Radians for angles (`ra` from 0 to 2 pi), pixels, magnitudes, electrons, kelvin; finite and
        within their range.

    Raises
    ------
    ColumnError
        A missing or unfit unit; a value that is missing, not a number or outside its range.
    """
    if column.values.ndim != 1:
        raise ColumnError("each row holds more than one value", "give a column of single numbers")
    text = _unit(key, column.unit, unit)
    scale = 1.0 if text is None or key not in ANGLES else _to_radians(text)
    if column.missing is not None:
        _refuse(column.missing, "missing", _FILL)
    values: FloatArray
    if column.values.dtype.kind in "iuf":
        values = column.values.astype(np.float64)
    elif key in ("ra", "dec") and text is not None:
        return _in_range(key, _sexagesimal(column.values, text))
    else:
        values = _from_text(column.values)
    if scale != 1.0:
        values *= scale
    return _in_range(key, values)


def labels(column: Column) -> AnyArray:
    """Text of each row, stripped; empty where there is none.

    Parameters
    ----------
    column : Column
        Text or numbers, one a row.

    Raises
    ------
    ColumnError
        More than one value in a row.
    """
    values = column.values
    if values.ndim != 1:
        raise ColumnError("each row holds more than one value", "give a column of single labels")
    if values.dtype.kind == "S":
        values = np.char.decode(values, "ascii", "replace")
    text = values.astype(str)
    if column.missing is not None:
        text[column.missing] = ""
    return np.asarray(np.char.strip(text))


def _unit(key: str, own: str | None, given: str | None) -> str | None:
    """The unit that holds; None for what may be bare."""
    own = (own or "").strip() or None
    if own is not None and given is not None and not _same(own, given):
        raise ColumnError(f"the table gives the unit {own!r}", f"leave units.{key} = {given!r} out")
    # The user's spelling first: the table's own may be one that nobody can read.
    text = given or own
    if text is None and key in ANGLES:
        mend = f'write units = {{ {key} = "arcsec" }} (or deg, mas, hourangle, ...)'
        raise ColumnError("no unit", mend)
    if text is not None and key not in ANGLES and text not in _BARE[key]:
        mend = f"give it in {_BARE[key][0]} or without a unit"
        raise ColumnError(f"the unit {text!r} does not fit", mend)
    return text


def _same(own: str, given: str) -> bool:
    """Whether the user's unit is the table's, or the table's is beyond reading."""
    from astropy import units as u

    table_unit = u.Unit(own, parse_strict="silent")
    return isinstance(table_unit, u.UnrecognizedUnit) or bool(
        table_unit == u.Unit(given, parse_strict="silent")
    )


def _to_radians(unit: str) -> float:
    from astropy import units as u

    try:
        return float(u.Unit(unit).to(u.rad))
    except (ValueError, TypeError, u.UnitsError) as error:
        what = f"the unit {unit!r} is not an angle"
        raise ColumnError(what, "write arcsec, deg, mas, hourangle, ...") from error


def _sexagesimal(values: AnyArray, unit: str) -> FloatArray:
    """Angles as text, such as 05:34:31.9 or 05h34m31.9s, in radians."""
    from astropy.coordinates import Angle

    try:
        angles = Angle(values.astype(str), unit=unit)
    except (ValueError, TypeError) as error:
        what = f"not an angle ({' '.join(str(error).split())[:80]})"
        raise ColumnError(what, "write numbers, or text such as 05:34:31.9") from error
    return np.array(angles.radian, dtype=np.float64)


def _from_text(values: AnyArray) -> FloatArray:
    """Numbers that the file holds as text."""
    result = np.empty(values.size)
    for row, value in enumerate(values):
        try:
            result[row] = float(value)
        except (TypeError, ValueError) as error:
            text = value.decode("ascii", "replace") if isinstance(value, bytes) else str(value)
            what = f"row {row + 1} is not a number: {text[:40]!r}"
            raise ColumnError(what, "write a number in every row") from error
    return result


def _in_range(key: str, values: FloatArray) -> FloatArray:
    """The values, ra wrapped; a line for the first that is outside its range."""
    _refuse(~np.isfinite(values), "not finite", _FILL)
    if key == "ra":
        values %= 2.0 * math.pi
    elif key == "dec":
        beyond = np.abs(values) > 0.5 * math.pi * (1.0 + 1e-12)
        _refuse(beyond, "beyond a pole", "give declinations from -90 to 90 deg")
    elif key == "electrons":
        _refuse(values < 0.0, "negative", "give electrons of 0 or more")
    elif key == "temperature":
        _refuse(values <= 0.0, "not above 0", "give temperatures in kelvin")
    return values


def _refuse(bad: AnyArray, what: str, mend: str) -> None:
    """Name the first bad row and how many there are."""
    count = int(np.count_nonzero(bad))
    if count:
        others = f" (and {count - 1} more)" if count > 1 else ""
        raise ColumnError(f"row {int(np.argmax(bad)) + 1}{others} is {what}", mend)
