"""simimg measure: what a frame says of its pairs."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from typing import Any

import click
from simimg_cli import options
from simimg_cli.output import document, note, plain, say, warn
from simimg_cli.progress import with_progress
from simimg_cli.words import arcsec, figures, probability, with_error

from simimg.errors import InputError


@click.command("measure")
@click.argument("frames", nargs=-1, required=True, type=click.Path())
@click.option(
    "--near",
    type=options.Place(),
    multiple=True,
    metavar="X,Y",
    help="Measure at this place, too: pixels from 0 at the centre of the first pixel. May be given "
    "several times.",
)
@options.as_json
@options.quiet
def command(
    frames: Sequence[str], near: Sequence[tuple[float, float]], as_json: bool, quiet: bool
) -> None:
    """Measure pairs in FRAMES, and say whether they are resolved and how sure that is.

    Measured are the pairs that a frame's truth names and every place given with --near, in this
    order, then what is found in the frame. A frame that cannot be measured is reported, the others
    are measured all the same, and the exit code is 2.
    """
    answers: list[dict[str, Any]] = []
    mistakes: list[str] = []
    for path in with_progress(frames, "frames", quiet=quiet or as_json):
        try:
            answer = _measured(path, near)
        except InputError as error:
            mistakes += error.lines
            answers.append({"frame": path, "error": list(error.lines)})
            continue
        answers.append(answer)
        if not as_json:
            _print(answer, heading=len(frames) > 1, quiet=quiet)
    if as_json and len(answers) > len(mistakes):
        say(_document(answers))
    if mistakes:
        raise InputError(*mistakes)
    if not as_json and not quiet and any(answer["simulated"] for answer in answers):
        from simimg.assembly.report import SIMULATION_NOTE

        note(f"note: {SIMULATION_NOTE}")
