"""simimg batch: many frames of a scene, each with its own draws; goes on where it was."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from time import perf_counter

import click

from simimg_cli import options
from simimg_cli.output import document, note, say

FAILED = 1


@click.command("batch")
@options.scene
@click.option(
    "--count", required=True, type=click.IntRange(1, 1_000_000), metavar="N", help="Frames."
)
@click.option(
    "--out", required=True, type=click.Path(), metavar="DIR", help="Folder for the frames."
)
@click.option(
    "--with",
    "keep",
    type=options.Words("expected", "psf"),
    default=(),
    metavar="PARTS",
    help="Extensions to add to each frame: expected, psf, with commas between them.",
)
@options.compress
@click.option("--dry-run", is_flag=True, help="Say how many frames, bytes and hours it would take.")
@options.workers
@options.cluster
@options.as_json
@options.quiet
def command(
    scene: str,
    overrides: Sequence[str],
    without: Sequence[str],
    count: int,
    out: str,
    keep: tuple[str, ...],
    compress: bool,
    dry_run: bool,
    workers: int | None,
    cluster: str | None,
    as_json: bool,
    quiet: bool,
) -> None:
    """Make N frames of SCENE in a folder, with what its [draw] table says drawn for each.

    Frame i is the same whoever makes it. Called again with the same scene it makes what is missing.
    The folder holds frame-000000.fits and so on, manifest.ecsv (what was drawn, the seed and the
    checksum of each), truth.fits, the scene, and inputs/.
    """
    from simimg.scene.file import scene_id
    from simimg.study.batch import batch, estimate
    from simimg_cli.cautions import print_cautions
    from simimg_cli.scenes import open_scene

    opened = open_scene(scene, overrides=overrides, without=without).scene
    crew = options.processors() if workers is None else workers
    if dry_run:
        found = estimate(
            opened, count=count, folder=out, keep=keep, compress=compress, workers=crew
        )
        if as_json:
            own = {"scene": scene, "folder": out, "workers": crew, **found.__dict__}
            say(document(own, scene_id=scene_id(opened)))
            return
        size = _size(found.bytes)
        say(f"{found.frames} frames, {found.missing} of them missing, {size} in all")
        say(f"{_duration(found.hours * 3600.0)} on {crew} processes, by three frames made here")
        return
    lines: list[str] = []

    def tell(line: str) -> None:
        lines.append(line)
        if not quiet and not as_json:
            note(line)

    with _progress(quiet=quiet) as progress:
        made = batch(
            opened,
            count=count,
            folder=out,
            keep=keep,
            compress=compress,
            workers=crew,
            cluster=cluster,
            progress=progress,
            tell=tell,
        )
    if as_json:
        own = {
            "scene": scene,
            "folder": out,
            "count": made.count,
            "frames": made.there,
            "before": made.before,
            "failed": [{"frame": number, "why": why} for number, why in made.failed],
        }
        say(document(own, scene_id=scene_id(opened), warnings=lines))
    elif not quiet:
        had = f", {made.before} of them before" if made.before else ""
        say(f"{made.there} of {made.count} frames are in {out}{had}")
    print_cautions(opened, quiet=quiet or as_json)
    if made.failed:
        raise click.exceptions.Exit(FAILED)


@contextmanager
def _progress(*, quiet: bool) -> Iterator[Callable[[int, int], None] | None]:
    """A bar with rate and time left on standard error, where a person watches."""
    if quiet or not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

    columns = (BarColumn(), MofNCompleteColumn(), TextColumn("{task.description}"))
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("frames", total=None)
        begun: list[tuple[float, int]] = []

        def progress(done: int, total: int) -> None:
            now = perf_counter()
            begun.append((now, done))
            del begun[1:-1]
            seconds, made = now - begun[0][0], done - begun[0][1]
            words = "frames"
            if made and seconds > 0.0:
                left = (total - done) * seconds / made
                words = f"{made / seconds:.3g} frames/s, {_duration(left)} left"
            bar.update(task, completed=done, total=total, description=words)

        yield progress


def _duration(seconds: float) -> str:
    if seconds < 120.0:
        return f"{seconds:.3g} s"
    return f"{seconds / 60.0:.3g} min" if seconds < 7200.0 else f"{seconds / 3600.0:.3g} h"


def _size(count: float) -> str:
    for unit in ("bytes", "kB", "MB", "GB"):
        if count < 1000.0:
            return f"{count:.3g} {unit}"
        count /= 1000.0
    return f"{count:.3g} TB"
