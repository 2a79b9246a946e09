"""A bar on standard error while many things are done, only where a person watches."""

from __future__ import annotations

import sys
from collections.abc import Iterator, Sequence
from typing import TypeVar

_T = TypeVar("_T")


def with_progress(
    items: Sequence[_T], what: str, *, quiet: bool = False, lines: bool = False
) -> Iterator[_T]:
    """The items one by one, with a bar where there are several and a terminal.

    `lines` says that each item prints lines of its own; on a terminal they are progress enough.
    """
    spoken = lines and sys.stdout.isatty()
    if quiet or spoken or len(items) < 2 or not sys.stderr.isatty():
        yield from items
        return
    from rich.console import Console
    from rich.progress import track

    yield from track(items, description=what, console=Console(stderr=True), transient=True)
