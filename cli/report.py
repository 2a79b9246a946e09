"""simimg report: a scene's set-up, frame, limits and probability of a split, as one page."""

from __future__ import annotations

import os
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from simimg.errors import InputError, mistake
from simimg_cli import options
from simimg_cli.output import document, say, warn
from simimg_cli.progress import progress_bar

if TYPE_CHECKING:
    from simimg.show.report import Report
    from simimg.show.reportfacts import Told
    from simimg_cli.scenes import Source

_MOST_LINES = 8
_FEW = 200  # trials for which starting processes takes longer than it saves


@click.command("report")
@options.scene
@click.option(
    "--output",
    "-o",
    type=click.Path(),
    metavar="PAGE",
    help="The page to write, .html; named after SCENE, in this folder, unless given.",
)
@click.option(
    "--trials",
    type=click.IntRange(0, 1_000_000),
    metavar="N",
    help="Noise draws for the probability of a split, 0 for none; 100 unless given.",
)
@click.option(
    "--pair",
    metavar="LABEL",
    help="The pair that the pictures show; the first unless given.",
)
@options.workers
@options.overwrite
@options.as_json
@options.quiet
def command(
    scene: str,
    overrides: Sequence[str],
    without: Sequence[str],
    output: str | None,
    trials: int | None,
    pair: str | None,
    workers: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Write a page on what the set-up of SCENE records and resolves, and how sure that is.

    One HTML file that opens from disk: the set-up, limits, the frame, the profile through the pair,
    the probability of a split, views above the air and in it, what limits the answer, and the scene
    itself. SCENE may be a frame of simimg, which carries its scene.
    """
    from simimg.scene.file import scene_id
    from simimg_cli.cautions import print_cautions
    from simimg_cli.scenes import open_scene

    path = output if output is not None else f"{Path(scene).stem or 'scene'}.html"
    opened = open_scene(scene, overrides=overrides, without=without)
    lines = _forbidden(opened, scene, path, overwrite=overwrite)
    if lines:
        raise InputError(*lines)

    from simimg.show.report import report, write_report
    from simimg.show.reportfacts import TRIALS

    if workers is None:
        few = (TRIALS if trials is None else trials) < _FEW
        workers = 1 if few else options.processors()
    with progress_bar("trials", quiet=quiet) as progress:
        made = report(opened.scene, trials=trials, pair=pair, workers=workers, progress=progress)
    write_report(made, path, overwrite=overwrite)
    warnings = made.facts.meaning.warnings
    if as_json:
        payload = _payload(scene, path, made)
        say(document(payload, scene_id=scene_id(opened.scene), warnings=warnings))
        return
    if not quiet:
        _print(path, made)
        warn(warnings)
    print_cautions(opened.scene, quiet=quiet)


def _forbidden(opened: Source, scene: str, path: str, *, overwrite: bool) -> list[str]:
    """Why the page cannot be written, before any work is done."""
    from simimg.show.reportpage import check_page

    read = {os.path.realpath(one.path) for one in opened.scene.inputs.values() if one.path}
    if "\0" not in path and os.path.realpath(path) in read | {os.path.realpath(scene)}:
        return [mistake(path, "", "is a file that the scene reads", "choose another name")]
    return check_page(path, overwrite=overwrite)


def _payload(scene: str, path: str, made: Report) -> dict[str, Any]:
    facts = made.facts
    return {
        "scene": scene,
        "report": path,
        "title": facts.title,
        "trials": facts.trials,
        "pairs": [
            {
                **told.measured.to_dict(),
                "trials": None if told.trials is None else told.trials.to_dict(),
            }
            for told in facts.pairs
        ],
        "cautions": facts.meaning.cautions,
    }


def _print(path: str, made: Report) -> None:
    size = len(made.html.encode()) / 1e3
    say(f"{path}: {made.facts.title}, {size:.0f} kB")
    for told in made.facts.pairs[:_MOST_LINES]:
        say(_line(told))
    if len(made.facts.pairs) > _MOST_LINES:
        say(f"and {len(made.facts.pairs) - _MOST_LINES} pairs more")


def _line(told: Told) -> str:
    parts = []
    for name in ("rayleigh", "sparrow"):
        text = f"{name.capitalize()}: {getattr(told.measured, name).verdict}"
        if told.trials is not None:
            share = getattr(told.trials, name)
            low, high = 100.0 * share.low, 100.0 * share.high
            text += f", in {100.0 * share.fraction_resolved:.1f} % ({low:.1f} to {high:.1f})"
            text += f" of {told.trials.trials} trials resolved"
        parts.append(text)
    return f"{told.name}  " + "; ".join(parts)
