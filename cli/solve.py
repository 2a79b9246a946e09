"""simimg solve: the value of a key at which a scene just does what is asked of it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import click

from simimg_cli import options
from simimg_cli.output import document, paragraph, say
from simimg_cli.progress import progress_bar
from simimg_cli.words import figures

if TYPE_CHECKING:
    from simimg.study.solve import Solution


@click.command("solve")
@options.scene
@click.option(
    "--for",
    "key",
    required=True,
    metavar="KEY",
    help="The key: exposure.time, telescope.aperture, pair.0.separation, pair.0.magnitudes.1, ...",
)
@click.option(
    "--until",
    required=True,
    metavar="TARGET",
    help="resolved=0.95 (the share of frames whose verdict is resolved), or a column of a study "
    "and its value, as snr=100 or bound_separation=0.01.",
)
@click.option(
    "--criterion",
    type=click.Choice(["sparrow", "rayleigh"]),
    default="sparrow",
    show_default=True,
    help="Under which the pair is to be resolved.",
)
@click.option(
    "--between",
    metavar="START:STOP",
    help="Where to search; a hundredth to a hundred times what the scene says unless given.",
)
@click.option(
    "--trials",
    type=click.IntRange(50, 1_000_000),
    default=400,
    show_default=True,
    metavar="N",
    help="Noise draws at each value that is tried.",
)
@click.option("--pair", metavar="LABEL", help="The pair; the first unless given.")
@options.workers
@options.as_json
@options.quiet
def command(
    scene: str,
    overrides: Sequence[str],
    without: Sequence[str],
    key: str,
    until: str,
    criterion: str,
    between: str | None,
    trials: int,
    pair: str | None,
    workers: int | None,
    as_json: bool,
    quiet: bool,
) -> None:
    """Find the value of a key at which SCENE just reaches a target.

    The answer is the boundary nearest to what the scene says, with its 95 % interval; that it
    cannot be reached is an answer, too.
    """
    from simimg.scene.file import scene_id
    from simimg.study.solve import solve
    from simimg_cli.cautions import print_cautions
    from simimg_cli.scenes import open_scene

    ends = None
    if between is not None:
        start, colon, stop = between.partition(":")
        if not colon:
            raise click.UsageError('--between takes START:STOP, such as "1 s:1000 s"')
        ends = (start.strip(), stop.strip())
    opened = open_scene(scene, overrides=overrides, without=without).scene
    with progress_bar("search", quiet=quiet) as progress:
        found = solve(
            opened,
            key,
            until=until,
            criterion=criterion,
            between=ends,
            trials=trials,
            pair=pair,
            workers=options.processors() if workers is None else workers,
            progress=progress,
        )
    if as_json:
        say(document({"scene": scene, **found.to_dict()}, scene_id=scene_id(opened)))
        return
    _print(found)
    print_cautions(opened, quiet=quiet)


def _print(found: Solution) -> None:
    under = "" if found.criterion is None else f" by {found.criterion.capitalize()}"
    unit = f" {found.unit}" if found.unit else ""
    if not found.reached:
        say(paragraph(f"{found.target}{under} cannot be reached: {found.reason}"))
        return
    if found.reason:
        say(f"{found.target}{under} is {found.reason}")
        return
    say(
        f"{found.key} = {figures(found.value)}{unit}  ({figures(found.low)} to "
        f"{figures(found.high)}{unit})  for {found.target}{under}"
    )
    if found.trials:
        say(f"95 % interval from {found.trials} trials")
    if found.others:
        rest = ", ".join(f"{figures(one, 3)}{unit}" for one in found.others)
        say(f"limit and bound cross it again near {rest}")
