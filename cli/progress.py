"""A bar on standard error while many things are done, only where a person watches."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
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


@contextmanager
def progress_bar(what: str, *, quiet: bool) -> Iterator[Callable[[int, int], None] | None]:
    """What to call with the number of things done and of all, or None where nobody watches."""
    if quiet or not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import Progress

    with Progress(console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(what, total=None)

        def progress(done: int, total: int) -> None:
            bar.update(task, completed=done, total=total)

        yield progress
