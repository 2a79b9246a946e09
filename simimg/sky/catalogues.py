"""Catalogues of stars: the columns of a table, by meaning, in radians, pixels and electrons.

A star needs a place (``east`` and ``north``, ``ra`` and ``dec``, or ``x`` and ``y``) and a
brightness (``magnitude`` or ``electrons``); ``label`` and ``temperature`` (kelvin) may be given.
Columns are taken by these names (capitals do not matter) unless a mapping names others.
"""

from __future__ import annotations

import difflib
from collections.abc import Mapping, Sequence
from typing import Final

from simimg.arrays import AnyArray
from simimg.errors import InputError, mistake
from simimg.sky.columns import ColumnError, labels, numbers
from simimg.sky.tables import RawTable, read_table

PLACES: Final = (("east", "north"), ("ra", "dec"), ("x", "y"))
BRIGHTNESSES: Final = (("magnitude",), ("electrons",))
NAMES: Final = (
    *(key for group in (*PLACES, *BRIGHTNESSES) for key in group),
    "label",
    "temperature",
)


def read_catalogue(
    content: bytes,
    name: str,
    *,
    columns: Mapping[str, str] | None = None,
    units: Mapping[str, str] | None = None,
) -> dict[str, AnyArray]:
    """Read a catalogue of stars.

    Parameters
    ----------
    content : bytes
        The file: ECSV, CSV, FITS or VOTable; its first table.
    name : str
        Its name, for messages.
    columns : mapping, optional
        From our names (east, north, ra, dec, x, y, magnitude, electrons, label, temperature) to
        the table's. Where it names a place or a brightness, only those it names are used.
    units : mapping, optional
        From our names to units, for columns to which the table gives none. Angles must have a unit;
        bare numbers are pixels, magnitudes, electrons and kelvin.

    Returns
    -------
    dict of ndarray, shape (rows,)
        ``east`` and ``north`` (radians), or ``ra`` (radians, 0 to 2 pi) and ``dec`` (radians), or
        ``x`` and ``y`` (pixels); ``magnitude`` or ``electrons``; ``label`` (text) and
        ``temperature`` (kelvin) where the table has them.

    Raises
    ------
    InputError
        No such table; a missing column or unit; a value that is missing, not a number or outside
        its range. Every mistake has its line.
    """
    columns, units = dict(columns or {}), dict(units or {})
    lines = [
        mistake(name, key, f"no column of a catalogue has the name {key!r}", _nearest(key, NAMES))
        for key in dict.fromkeys((*columns, *units))
        if key not in NAMES
    ]
    table = read_table(content, name)
    if table.rows == 0:
        raise InputError(
            *lines, mistake(name, "", "the table has no rows", "give at least one star")
        )
    found: dict[str, str] = {}
    for key in NAMES:
        wanted = columns.get(key, key)
        match = _match(wanted, table.names)
        if match is not None:
            found[key] = match
        elif key in columns:
            what = f"the table has no column {wanted!r}"
            lines.append(mistake(name, key, what, _nearest(wanted, table.names)))
    chosen = [
        *_choose("place", PLACES, found, columns, table, name, lines),
        *_choose("brightness", BRIGHTNESSES, found, columns, table, name, lines),
        *(key for key in ("label", "temperature") if key in found),
    ]
    result: dict[str, AnyArray] = {}
    for key in chosen:
        try:
            column = table.column(found[key])
            result[key] = labels(column) if key == "label" else numbers(key, column, units.get(key))
        except InputError as error:
            lines.extend(error.lines)
        except ColumnError as error:
            where = key if found[key] == key else f"{key} (column {found[key]})"
            lines.append(mistake(name, where, error.what, error.mend))
    if lines:
        raise InputError(*lines)
    return result


def _match(wanted: str, names: Sequence[str]) -> str | None:
    """The column of that name; failing that, the only one that differs from it in capitals."""
    if wanted in names:
        return wanted
    alike = [one for one in names if one.lower() == wanted.lower()]
    return alike[0] if len(alike) == 1 else None


def _near(wanted: str, names: Sequence[str]) -> str | None:
    """The name that was most likely meant: a near spelling, or an abbreviation."""
    lowered = {one.lower(): one for one in names}
    near = difflib.get_close_matches(wanted.lower(), lowered, n=1, cutoff=0.7)
    short = [one for one in lowered if len(one) > 2 and wanted.lower().startswith(one)]
    return next((lowered[one] for one in (*near, *short)), None)


def _nearest(wanted: str, names: Sequence[str]) -> str:
    """Hint: the nearest name, or all of them."""
    near = _near(wanted, names)
    if near is not None:
        return f"did you mean {near!r}?"
    shown = ", ".join(names[:12]) + (", ..." if len(names) > 12 else "")
    return f"there are: {shown}" if names else "the table has no columns"


def _choose(
    what: str,
    groups: Sequence[tuple[str, ...]],
    found: Mapping[str, str],
    columns: Mapping[str, str],
    table: RawTable,
    name: str,
    lines: list[str],
) -> tuple[str, ...]:
    """The one group of columns that gives the place or the brightness."""
    named = [group for group in groups if any(key in columns for key in group)]
    whole = [group for group in named or groups if all(key in found for key in group)]
    listed = " or ".join(" and ".join(group) for group in whole)
    if len(whole) == 1:
        return whole[0]
    if len(whole) > 1:
        mend = f"say which with columns = {{ {whole[0][0]} = ... }}"
        lines.append(mistake(name, "", f"two columns could give the {what}: {listed}", mend))
    elif not any(key in columns and key not in found for group in named for key in group):
        needed = ", or ".join(" and ".join(group) for group in named or groups)
        absent = [key for group in named or groups for key in group if key not in found]
        lines.append(
            mistake(name, "", f"no {what}: the table needs {needed}", _mend(absent, table))
        )
    return ()


def _mend(absent: Sequence[str], table: RawTable) -> str:
    """Hint for columns that are not there: the mapping to the nearest name, or all names."""
    for key in absent:
        near = _near(key, table.names)
        if near is not None:
            return f'did you mean columns = {{ {key} = "{near}" }}?'
    return f'name it with columns = {{ {absent[0]} = "..." }}; {_nearest("", table.names)}'
