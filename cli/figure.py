"""simimg figure: a frame and its pair's profile, or a scene's optics, drawn for a proposal."""

from __future__ import annotations

from collections.abc import Sequence
from math import hypot
from typing import TYPE_CHECKING, Any

import click

from simimg.errors import InputError, mistake
from simimg_cli import options
from simimg_cli.output import document, paragraph, say
from simimg_cli.scenes import named, refuse_scene

if TYPE_CHECKING:
    from simimg.frame import Frame
    from simimg.resolving.records import PairMeasurement
    from simimg.study.trials import PairTrials


@click.command("figure")
@click.argument("frame", type=click.Path())
@options.changes
@click.option(
    "--what",
    type=options.Words("pupil", "wavefront", "psf", "transfer"),
    metavar="PANELS",
    help="Draw the optics of a scene (or of a frame's scene) in place of a frame: some of pupil, "
    "wavefront, psf, transfer, with commas between them.",
)
@options.output("The figure to write; its ending says PNG, PDF or SVG.")
@click.option(
    "--pair",
    metavar="LABEL",
    help="The pair to show, by its label or its number from 0; the first unless given.",
)
@click.option(
    "--near",
    type=options.Place(),
    metavar="X,Y",
    help="Show what is measured at this place: pixels from 0 at the centre of the first pixel.",
)
@click.option(
    "--restored",
    is_flag=True,
    help="Add a view restored by Richardson and Lucy's iteration. It adds no information beyond "
    "the fit.",
)
@click.option(
    "--iterations",
    type=click.IntRange(1, 1000),
    metavar="N",
    help="Iterations of the restored view; 30 unless given.",
)
@click.option(
    "--trials",
    type=click.IntRange(1, 1_000_000),
    metavar="N",
    help="Expose and measure N noise draws; the caption then gives the probability of a split.",
)
@options.width
@options.workers
@options.overwrite
@options.as_json
@options.quiet
def command(
    frame: str,
    overrides: Sequence[str],
    without: Sequence[str],
    what: tuple[str, ...] | None,
    output: str,
    pair: str | None,
    near: tuple[float, float] | None,
    restored: bool,
    iterations: int | None,
    trials: int | None,
    width: float | None,
    workers: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Draw FRAME beside the profile along its pair's axis, and print a caption.

    A frame without pairs is shown with the profile of its brightest object. With --what, FRAME may
    be a scene, too, and its optics are drawn.
    """
    if what is not None:
        others = (pair, near, iterations, trials, workers)
        if restored or any(one is not None for one in others):
            raise click.UsageError("--what draws a scene's optics, not a frame; leave out the rest")
        _draw_optics(
            frame, overrides, without, what, output, overwrite, width, as_json=as_json, quiet=quiet
        )
        return
    if overrides or without:
        raise click.UsageError("--set and --without change a scene's optics; they go with --what")
    if pair is not None and near is not None:
        raise click.UsageError("--pair and --near name two subjects; give one of them")
    if iterations is not None and not restored:
        raise click.UsageError("--iterations goes with --restored")
    if workers is not None and trials is None:
        raise click.UsageError("--workers goes with --trials")
    from simimg.frame import Frame
    from simimg.newfile import check_new_file

    refuse_scene(
        frame, f"expose it first: simimg expose {frame} -o FRAME.fits; or draw its optics by --what"
    )
    mistakes = check_new_file(output, overwrite=overwrite)
    if mistakes:
        raise InputError(*mistakes)
    read = Frame.read(frame)

    from simimg.show.canvas import PAGE, figure_format
    from simimg.show.figure import write_figure
    from simimg.show.restored import ITERATIONS

    figure_format(output, overwrite=overwrite)
    with named(frame):
        chosen, measurement = _subject(read, pair, near)
        tried = None
        if trials is not None:
            measurement = _measured(read, chosen) if measurement is None else measurement
            tried = _tried(frame, measurement, trials, workers, quiet=quiet or as_json)
        caption = write_figure(
            read,
            output,
            overwrite=overwrite,
            pair=chosen,
            measurement=measurement,
            restored=(iterations or ITERATIONS) if restored else None,
            trials=tried,
            width=PAGE if width is None else width,
        )
    if as_json:
        payload: dict[str, Any] = {"frame": frame, "figure": output, "caption": caption}
        if tried is not None:
            payload["trials"] = tried.to_dict()
        say(document(payload, scene_id=read.scene_id, simulated=read.simulated))
    elif not quiet:
        say(paragraph(caption))


def _draw_optics(
    path: str,
    overrides: Sequence[str],
    without: Sequence[str],
    what: Sequence[str],
    output: str,
    overwrite: bool,
    width: float | None,
    *,
    as_json: bool,
    quiet: bool,
) -> None:
    """Draw the optics of a scene, or of the scene of a frame."""
    from simimg.scene.file import scene_id
    from simimg_cli.scenes import open_scene

    scene = open_scene(path, overrides=overrides, without=without).scene

    from simimg.show.optics import write_optics

    caption = write_optics(scene, output, what=what, overwrite=overwrite, width=width)
    if as_json:
        payload = {"scene": path, "figure": output, "caption": caption}
        say(document(payload, scene_id=scene_id(scene)))
    elif not quiet:
        say(paragraph(caption))


def _subject(
    frame: Frame, pair: str | None, near: tuple[float, float] | None
) -> tuple[str | int | None, PairMeasurement | None]:
    """What the figure is about: a label, a number, or what is measured at a place."""
    if near is not None:
        from simimg.resolving.measure import measure

        return None, measure(frame, near=[near])[0]
    if pair is None or frame.truth is None or pair in list(frame.truth["label"]):
        return pair, None
    return (int(pair) if pair.isdecimal() and len(pair) < 9 else pair), None


def _measured(frame: Frame, pair: str | int | None) -> PairMeasurement | None:
    """What is measured of the pair that the figure shows."""
    from simimg.resolving.measure import measure
    from simimg.show.subject import choose_pair

    return choose_pair(measure(frame), pair)


def _tried(
    path: str,
    measurement: PairMeasurement | None,
    count: int,
    workers: int | None,
    *,
    quiet: bool,
) -> PairTrials:
    """Noise draws of the pair that the figure shows, by the scene that the frame carries.

    Raises
    ------
    InputError
        The frame carries no scene, or what is shown is no pair of it.
    """
    from simimg.study.trials import trials
    from simimg_cli.progress import progress_bar
    from simimg_cli.scenes import open_scene
    from simimg_cli.trials import workers_for

    scene = open_scene(path).scene
    with progress_bar("trials", quiet=quiet) as progress:
        pairs = trials(scene, count=count, workers=workers or workers_for(count), progress=progress)
    if pairs and measurement is not None and measurement.truth is not None:
        # The frame's measured place is within the noise of the scene's.
        return min(pairs, key=lambda one: hypot(one.x - measurement.x, one.y - measurement.y))
    raise InputError(
        mistake(path, "--trials", "what is shown is no pair of the scene", "name one by --pair")
    )
