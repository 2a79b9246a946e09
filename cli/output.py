"""What goes to standard output and standard error: JSON, tables, notes.

Plain aligned text where the output goes to a file or a pipe; tables with a rule on a terminal.
"""

from __future__ import annotations

import json
import math
import shutil
import sys
import textwrap
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, Literal

import click

from simimg.version import __version__

_PIPED, _LEAST, _MOST = 80, 40, 120  # characters to a line


def printable(text: str) -> str:
    """Text without the control characters by which a stranger's file could steer a terminal."""
    return "".join(c if c.isprintable() else f"\\x{ord(c):02x}" for c in text)


def document(
    payload: Mapping[str, Any],
    *,
    scene_id: str | None,
    simulated: bool = True,
    warnings: Sequence[str] = (),
) -> str:
    """A command's answer as JSON: what every document carries, then its own keys.

    NaN and infinity become null.
    """
    envelope = {
        "version": __version__,
        "scene_id": scene_id,
        "simulated": simulated,
        "warnings": list(warnings),
    }
    return json.dumps(plain({**envelope, **payload}), indent=2, allow_nan=False)


def plain(value: Any) -> Any:
    """A value as JSON can hold it: numbers of any library, arrays as lists, NaN as None."""
    if value is None or isinstance(value, (bool, int, str)):
        return value
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if hasattr(value, "tolist"):
        return plain(value.tolist())
    if isinstance(value, Iterable):
        return [plain(item) for item in value]
    return str(value)


def say(text: str = "") -> None:
    """A line of the answer."""
    click.echo("\n".join(printable(line) for line in text.split("\n")))


def page_width() -> int:
    """Characters to a line: the terminal's where there is one, within reason, else 80."""
    if not sys.stdout.isatty():
        return _PIPED
    return min(max(shutil.get_terminal_size((_PIPED, 24)).columns, _LEAST), _MOST)


def paragraph(text: str, *, under: str = "") -> str:
    """Text broken to the width of the page.

    Parameters
    ----------
    text : str
    under : str, optional
        What every line but the first begins with.
    """
    return textwrap.fill(text, page_width(), subsequent_indent=under, break_long_words=False)


def note(text: str) -> None:
    """A line beside the answer: progress, a warning, a caution."""
    click.echo(printable(text), err=True)


def warn(lines: Iterable[str]) -> None:
    """Warnings, one a line, on standard error."""
    for line in lines:
        note(f"warning: {line}")


def table(
    columns: Sequence[str], rows: Sequence[Sequence[str]], *, right: Sequence[int] = ()
) -> None:
    """A table: ruled on a terminal, aligned with blanks elsewhere.

    Parameters
    ----------
    columns : sequence of str
        Headings; all empty for a table without.
    rows : sequence of sequence of str
    right : sequence of int
        Columns to be set flush right.
    """
    cells = [[printable(cell) for cell in row] for row in rows]
    if sys.stdout.isatty():
        _ruled(columns, cells, right)
        return
    shown = [list(columns), *cells] if any(columns) else cells
    widths = [max((len(row[i]) for row in shown), default=0) for i in range(len(columns))]
    for row in shown:
        parts = [
            cell.rjust(width) if i in right else cell.ljust(width)
            for i, (cell, width) in enumerate(zip(row, widths))
        ]
        click.echo("  ".join(parts).rstrip())


def _ruled(columns: Sequence[str], cells: Sequence[Sequence[str]], right: Sequence[int]) -> None:
    from rich import box
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    ruled = Table(
        box=box.SIMPLE_HEAD, show_header=any(columns), pad_edge=False, padding=(0, 1, 0, 0)
    )
    for i, heading in enumerate(columns):
        # On a narrow terminal words are wrapped, numbers never.
        justify: Literal["left", "right"] = "right" if i in right else "left"
        ruled.add_column(Text(heading), justify=justify, no_wrap=i in right, overflow="fold")
    for row in cells:
        ruled.add_row(*(Text(cell) for cell in row))
    Console().print(ruled)
