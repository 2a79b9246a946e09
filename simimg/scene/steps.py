"""Values along which a key is varied: evenly, by equal factors, or one by one.

On a command line ``START:STOP:COUNT``, with ``:log`` for equal factors, or values with commas
between them; in a scene a table ``{ from = ..., to = ..., count = 7, spacing = "log" }`` or a list.
A value is a number with the unit that it is written with, or a word (the name of a band).
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from simimg.quantities import shown

MOST_STEPS = 1000
"""Most values of one key."""

FORM = 'write START:STOP:COUNT as "0.1 arcsec:0.6 arcsec:6", with :log for equal factors, or a list'
_NUMBER = re.compile(r"\s*([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)\s*(.*?)\s*")
_SPACINGS = ("linear", "log")
_KEYS = ("from", "to", "count", "spacing")


class StepsError(ValueError):
    """Values that cannot be read: what is wrong, and what to write instead."""

    def __init__(self, what: str, mend: str = FORM) -> None:
        self.what = what
        self.mend = mend
        super().__init__(f"{what}; {mend}")


@dataclass(frozen=True)
class Steps:
    """The values of one varied key.

    Attributes
    ----------
    values : tuple of str, float, int or bool
        As a scene would have them.
    numbers : tuple of float
        The same without their unit; empty where any is a word.
    unit : str
        Of the numbers, as written; empty for none.
    spacing : str
        ``linear``, ``log`` or ``list``.
    """

    values: tuple[str | float | int | bool, ...]
    numbers: tuple[float, ...]
    unit: str
    spacing: str

    def at(self, number: float) -> str | float | int:
        """A value between the steps, with their unit.

        Parameters
        ----------
        number : float
            In the unit of `numbers`.
        """
        return written(number, self.unit)


def written(number: float, unit: str) -> str | float | int:
    """A number with its unit, as a scene would have it.

    Parameters
    ----------
    number : float
    unit : str
        Empty for a bare number.
    """
    if unit:
        return f"{number:.12g} {unit}"
    plain = float(f"{number:.12g}")
    return int(plain) if plain.is_integer() else plain


def split_value(value: Any) -> tuple[float, str] | None:
    """Number and unit of a value of a scene; None where it is no number.

    Parameters
    ----------
    value : object
        Text such as ``"0.8 arcsec"``, or a number.
    """
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        return None
    if not isinstance(value, str):
        return (float(value), "") if math.isfinite(value) else None
    found = _NUMBER.fullmatch(value)
    if found is None or not math.isfinite(float(found[1])):
        return None
    return float(found[1]), found[2]


def steps_from_text(text: str) -> Steps:
    """Values as written on a command line.

    Raises
    ------
    StepsError
        Text that says no values.
    """
    plain = text.strip()
    inner = plain[1:-1] if plain.startswith("[") and plain.endswith("]") else plain
    if "," in inner:
        return _listed([_unquoted(part) for part in inner.split(",")])
    parts = [_unquoted(part) for part in inner.split(":")]
    spacing = parts.pop() if len(parts) == 4 else "linear"
    if len(parts) != 3 or not parts[2].isascii() or not parts[2].isdigit():
        raise StepsError(f"{shown(text)} are no values")
    return _between(parts[0], parts[1], int(parts[2]), spacing)


def steps_from_value(value: Any) -> Steps:
    """Values as written in a scene: a list, a table, or text as on a command line.

    Raises
    ------
    StepsError
        A value that says no values.
    """
    if isinstance(value, Steps):
        return value
    if isinstance(value, str):
        return steps_from_text(value)
    if isinstance(value, list | tuple):
        return _listed(value)
    if not isinstance(value, Mapping):
        raise StepsError(f"must be a table, a list or text, got {shown(value)}")
    unknown = [name for name in value if name not in _KEYS]
    if unknown or not {"from", "to", "count"} <= set(value):
        wrong = f"{shown(unknown[0])} is not known" if unknown else "needs from, to and count"
        raise StepsError(wrong, 'write { from = "0.1 arcsec", to = "0.6 arcsec", count = 6 }')
    count = value["count"]
    if isinstance(count, bool) or not isinstance(count, int):
        raise StepsError(f"count must be a whole number, got {shown(count)}", "write count = 6")
    return _between(value["from"], value["to"], count, value.get("spacing", "linear"))


def _unquoted(text: str) -> str:
    plain = text.strip()
    quoted = len(plain) > 1 and plain[0] == plain[-1] and plain[0] in "\"'"
    return plain[1:-1] if quoted else plain


def _between(first: Any, last: Any, count: int, spacing: Any) -> Steps:
    begin, end = split_value(first), split_value(last)
    if begin is None or end is None:
        raise StepsError(f"{shown(first if begin is None else last)} is not a number with a unit")
    unit = end[1] or begin[1]
    if begin[1] not in ("", unit):
        raise StepsError(
            f"from {shown(begin[1])} to {shown(end[1])}: two units", "write both in the same unit"
        )
    if not 2 <= count <= MOST_STEPS:
        raise StepsError(f"{count} values", f"write a count from 2 to {MOST_STEPS}")
    if spacing not in _SPACINGS:
        raise StepsError(f"{shown(spacing)} is no spacing", "write linear or log")
    if begin[0] == end[0]:
        raise StepsError("both ends are the same", "write two different ends")
    numbers = [begin[0] + (end[0] - begin[0]) * i / (count - 1) for i in range(count)]
    if spacing == "log":
        if min(begin[0], end[0]) <= 0.0:
            raise StepsError("equal factors need ends above 0", "write linear, or ends above 0")
        low, high = math.log(begin[0]), math.log(end[0])
        numbers = [math.exp(low + (high - low) * i / (count - 1)) for i in range(count)]
    # The ends stay as they were written.
    numbers[0], numbers[-1] = begin[0], end[0]
    values = tuple(written(number, unit) for number in numbers)
    rounded = tuple(float(f"{number:.12g}") for number in numbers)
    return Steps(values, rounded, unit, spacing)


def _listed(values: Sequence[Any]) -> Steps:
    if not 1 <= len(values) <= MOST_STEPS:
        raise StepsError(f"{len(values)} values", f"write 1 to {MOST_STEPS} of them")
    wrong = [one for one in values if not isinstance(one, str | int | float) or one == ""]
    if wrong:
        raise StepsError(f"{shown(wrong[0])} is not a value")
    split = [split_value(one) for one in values]
    units = {one[1] for one in split if one is not None}
    if None in split or len(units - {""}) > 1:
        return Steps(tuple(_plain(one) for one in values), (), "", "list")
    unit = max(units)
    numbers = tuple(one[0] for one in split if one is not None)
    return Steps(tuple(written(number, unit) for number in numbers), numbers, unit, "list")


def _plain(value: Any) -> str | float | int:
    """A word, or a number as bare as it is meant."""
    found = split_value(value)
    return value if found is None or found[1] else written(found[0], "")
