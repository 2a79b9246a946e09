"""Tables of a page: what a reader sees in a cell, and what a spreadsheet gets of it.

A number keeps all its figures in the CSV file and shows a few on the page. Texts may come from a
stranger's scene: on the page the template escapes them, and in the file a cell that a spreadsheet
would take for a formula is turned into text by a leading apostrophe. Numbers are written by this
program alone and stay as they are, minus signs included.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from math import floor, isfinite, log10

NONE = "none"
"""What stands where there is no number: a word, which a screen reader reads."""

_BLANK, _TIED = "\N{NARROW NO-BREAK SPACE}", "\N{NO-BREAK SPACE}"
_MINUS = "\N{MINUS SIGN}"
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_LEAST, _MOST = 1e-4, 1e7  # between which a number is written without a power of ten
_NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
# A cell may also begin behind a separator of another country's spreadsheets.
_FORMULA = re.compile(r"(^|[;,|])(\s*)(?=[=+\-@\uff1d\uff0b\uff0d\uff20])")


@dataclass(frozen=True)
class Cell:
    """A cell: what it shows, and what it holds.

    Attributes
    ----------
    text : str
        On the page.
    value : float, str or None
        In the CSV file; None leaves it empty.
    mark : str
        A class by which the page sets the cell apart; empty for none.
    """

    text: str
    value: float | str | None
    mark: str = ""


@dataclass(frozen=True)
class Column:
    """A column: its heading, the unit of its numbers, and whether they are numbers."""

    heading: str
    unit: str = ""
    numbers: bool = False

    @property
    def title(self) -> str:
        """Heading and unit."""
        return f"{self.heading} ({self.unit})" if self.unit else self.heading


@dataclass(frozen=True)
class Table:
    """A table with a caption; the first cell of each row is the row's heading.

    Attributes
    ----------
    key : str
        A word that names it in the page and in the name of its file.
    caption : str
    columns : tuple of Column
    rows : tuple of tuple of Cell
    shown : int
        Rows on the page; the file holds all.
    """

    key: str
    caption: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]
    shown: int = field(default=60)

    def __post_init__(self) -> None:
        if any(len(row) != len(self.columns) for row in self.rows):
            raise ValueError(f"a row of the table {self.key!r} has not {len(self.columns)} cells")

    @property
    def hidden(self) -> int:
        """Rows that only the file holds."""
        return max(len(self.rows) - self.shown, 0)

    def csv(self) -> str:
        """The table as CSV (RFC 4180), safe to open in a spreadsheet."""
        held = io.StringIO()
        writer = csv.writer(held, quoting=csv.QUOTE_NONNUMERIC, lineterminator="\r\n")
        writer.writerow([harmless(column.title) for column in self.columns])
        for row in self.rows:
            writer.writerow([_held(cell.value) for cell in row])
        return held.getvalue()


def table(
    key: str, caption: str, columns: Sequence[Column], rows: Sequence[Sequence[Cell]]
) -> Table:
    """A table of sequences."""
    return Table(key, caption, tuple(columns), tuple(tuple(row) for row in rows))


def word(text: str, *, mark: str = "") -> Cell:
    """A cell of text."""
    shown = plain_text(text)
    return Cell(shown, shown, mark)


def number(value: float | None, digits: int = 4, *, missing: str = NONE) -> Cell:
    """A cell of a number, shown to so many figures; `missing` where there is none."""
    if value is None or not isfinite(value):
        return Cell(missing, None)
    return Cell(figures(value, digits), float(value))


def count(value: int) -> Cell:
    """A cell of a whole number."""
    return Cell(f"{value:,}".replace(",", _BLANK), float(value))


def percent(share: float | None) -> Cell:
    """A cell of a share, in percent to a tenth."""
    if share is None or not isfinite(share):
        return Cell(NONE, None)
    return Cell(f"{100.0 * share:.1f}", 100.0 * share)


def figures(value: float, digits: int = 4) -> str:
    """A number in so many figures, thousands set apart, powers of ten raised."""
    sign = _MINUS if value < 0.0 else ""
    size = abs(value)
    if size == 0.0:
        return "0"
    if not _LEAST <= size < _MOST:
        factor, power = f"{size:.{digits - 1}e}".split("e")
        return f"{sign}{factor}\N{MULTIPLICATION SIGN}10{str(int(power)).translate(_RAISED)}"
    places = max(digits - 1 - floor(log10(size)), 0)
    return sign + f"{size:,.{places}f}".replace(",", _BLANK)


def percentage(share: float) -> str:
    """A share in percent, to a tenth where there is one, tied to its sign."""
    return f"{100.0 * share:.1f}".removesuffix(".0") + f"{_TIED}%"


def plain_text(text: str) -> str:
    """Text without controls and marks of direction, which could hide or reorder what stands by it.

    They become blanks, and blanks in a row become one; those that tie a number to its unit stay.
    """
    kept = "".join(c if c.isprintable() or c in _BLANK + _TIED else " " for c in text)
    return " ".join(part for part in kept.split(" ") if part)


def harmless(text: str) -> str:
    """Text as a cell that no spreadsheet takes for a formula; numbers stay numbers."""
    shown = plain_text(text)
    return shown if _NUMBER.fullmatch(shown) else _FORMULA.sub(r"\1\2'", shown)


def _held(value: float | str | None) -> float | str:
    """A cell's value as the CSV writer takes it: ten figures of a number."""
    if value is None:
        return ""
    return harmless(value) if isinstance(value, str) else float(f"{value:.10g}")
