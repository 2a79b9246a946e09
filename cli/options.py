"""Options that several commands share, and how their values are read."""

from __future__ import annotations

import math
import os
import re
from collections.abc import Callable
from typing import Any, TypeVar

import click
from click.shell_completion import CompletionItem

_F = TypeVar("_F", bound=Callable[..., Any])

_BYTES = {
    "b": 1,
    **{f"{letter}b": 1000**power for power, letter in enumerate("kmgt", start=1)},
    **{f"{letter}ib": 1024**power for power, letter in enumerate("kmgt", start=1)},
}


class Memory(click.ParamType):
    """An amount of memory with its unit, such as ``2 GiB``; a whole number of bytes."""

    name = "size"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> int:
        if isinstance(value, int):
            return value
        found = re.fullmatch(r"\s*([0-9]*\.?[0-9]+)\s*([A-Za-z]+)\s*", value)
        factor = _BYTES.get(found[2].lower()) if found else None
        if found is None or factor is None:
            self.fail(
                f'{value!r} is not an amount of memory; write "2 GiB" or "500 MB"', param, ctx
            )
        size = float(found[1]) * factor
        if not 1 <= size <= 2**62:
            self.fail(f'{value!r} is out of range; write "2 GiB" or "500 MB"', param, ctx)
        return int(size)


class Place(click.ParamType):
    """A place in a frame, ``X,Y`` in pixels from 0 at the centre of the first pixel."""

    name = "X,Y"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[float, float]:
        if isinstance(value, tuple):
            return value
        try:
            x, y = (float(part) for part in value.split(","))
        except ValueError:
            x = y = math.nan
        if not (math.isfinite(x) and math.isfinite(y)):
            self.fail(
                f"{value!r} is not a place; write X,Y in pixels, such as 127.5,130", param, ctx
            )
        return x, y


class Dates(click.ParamType):
    """Julian years ``START:STOP:STEP``; the list of them."""

    name = "START:STOP:STEP"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> list[float]:
        if isinstance(value, list):
            return value
        from simimg.resolving.ephemeris import julian_years

        try:
            start, stop, step = (float(part) for part in value.split(":"))
            return julian_years(start, stop, step)
        except ValueError as error:
            what = "" if "could not" in str(error) or "unpack" in str(error) else f" ({error})"
            self.fail(
                f"{value!r} are no dates{what}; write Julian years START:STOP:STEP, such as "
                "1980:2020:10",
                param,
                ctx,
            )


class Width(click.ParamType):
    """The width of a figure with its unit, such as ``88mm``; millimetres inside."""

    name = "width"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        if isinstance(value, float):
            return value
        from simimg.quantities import QuantityError, parse_quantity
        from simimg.show.canvas import check_width

        try:
            return check_width(round(1e3 * parse_quantity(value, "length"), 9))
        except QuantityError:
            self.fail(f"{value!r} is not a width; write 88mm, 18cm or 7inch", param, ctx)
        except ValueError as error:
            self.fail(str(error), param, ctx)


class Degrees(click.ParamType):
    """An angle in degrees; radians inside."""

    name = "deg"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        if isinstance(value, float):
            return value
        text = value.strip().removesuffix("deg")
        try:
            angle = float(text)
        except ValueError:
            angle = math.nan
        if not math.isfinite(angle) or abs(angle) > 360.0:
            self.fail(f"{value!r} is not an angle; write degrees from 0 to 360", param, ctx)
        return math.radians(angle)


class Words(click.ParamType):
    """Some of a few words, with commas between them."""

    name = "words"

    def __init__(self, *known: str) -> None:
        self.known = known
        self.name = ",".join(known)

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[str, ...]:
        if isinstance(value, tuple):
            return value
        words = tuple(word.strip() for word in value.split(","))
        unknown = [word for word in words if word not in self.known]
        if unknown:
            known = ", ".join(self.known)
            self.fail(f"{unknown[0]!r} is none of {known}; write {value and self.name}", param, ctx)
        return words

    def shell_complete(
        self, ctx: click.Context, param: click.Parameter, incomplete: str
    ) -> list[CompletionItem]:
        """The words that may come next, after those that are there."""
        del ctx, param
        before, comma, begun = incomplete.rpartition(",")
        there = before.split(",")
        return [
            CompletionItem(f"{before}{comma}{word}")
            for word in self.known
            if word.startswith(begun) and word not in there
        ]


def changes(function: _F) -> _F:
    """What changes a scene."""
    for add in (
        click.option(
            "--without",
            multiple=True,
            metavar="TABLE",
            help="Take a table of the scene away: air, sky, vanes, ...",
        ),
        click.option(
            "--set",
            "overrides",
            multiple=True,
            metavar="KEY=VALUE",
            help='Change a value of the scene: telescope.aperture="4 m", pair.0.separation=...',
        ),
    ):
        function = add(function)
    return function


def scene(function: _F) -> _F:
    """The scene argument, and what changes it."""
    return click.argument("scene", type=click.Path())(changes(function))


width = click.option(
    "--width",
    type=Width(),
    metavar="WIDTH",
    help="Width of the figure, as 88mm, 18cm or 7inch: that of your page's column.",
)
as_json = click.option("--json", "as_json", is_flag=True, help="Print JSON, and nothing else.")
quiet = click.option("--quiet", "-q", is_flag=True, help="Print no progress, warning or summary.")
compress = click.option(
    "--compress",
    is_flag=True,
    help="Compress the images without loss: by tiles, with Rice's code, which FITS readers know.",
)
overwrite = click.option("--overwrite", is_flag=True, help="Replace files that exist.")
memory = click.option(
    "--memory", type=Memory(), metavar="SIZE", help='Memory the image may take, such as "2 GiB".'
)
threads = click.option(
    "--threads",
    type=click.IntRange(1, 1024),
    metavar="N",
    help="Threads to work on; all processors unless given. The result is the same.",
)
workers = click.option(
    "--workers",
    type=click.IntRange(1, 1024),
    metavar="N",
    help="Processes to work in; all processors unless given. The result is the same.",
)
cluster = click.option(
    "--cluster",
    metavar="ADDRESS",
    help="Let the workers of this Dask scheduler do it, as tcp://HOST:8786.",
)


def processors() -> int:
    """Processors that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def output(help_text: str) -> Callable[[_F], _F]:
    """The file to write."""
    return click.option(
        "--output", "-o", required=True, type=click.Path(), metavar="FILE", help=help_text
    )
