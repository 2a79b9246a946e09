"""simimg figure: a frame and its pair's profile, or a scene's optics, drawn for a proposal."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

import click

from simimg.errors import InputError
from simimg_cli import options
from simimg_cli.output import document, say
from simimg_cli.scenes import named

if TYPE_CHECKING:
    from simimg.frame import Frame
    from simimg.resolving.records import PairMeasurement


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
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Draw FRAME beside the profile along its pair's axis, and print a caption.

    A frame without pairs is shown with the profile of its brightest object. With --what, FRAME may
    be a scene, too, and its optics are drawn.
    """
    if what is not None:
        if pair is not None or near is not None or restored or iterations is not None:
            raise click.UsageError("--what draws a scene's optics, not a frame; leave out the rest")
        _draw_optics(
            frame, overrides, without, what, output, overwrite, as_json=as_json, quiet=quiet
        )
        return
    if overrides or without:
        raise click.UsageError("--set and --without change a scene's optics; they go with --what")
    if pair is not None and near is not None:
        raise click.UsageError("--pair and --near name two subjects; give one of them")
    if iterations is not None and not restored:
        raise click.UsageError("--iterations goes with --restored")
    from simimg.frame import Frame
    from simimg.newfile import check_new_file

    mistakes = check_new_file(output, overwrite=overwrite)
    if mistakes:
        raise InputError(*mistakes)
    read = Frame.read(frame)

    from simimg.show.figure import write_figure
    from simimg.show.restored import ITERATIONS

    with named(frame):
        chosen, measurement = _subject(read, pair, near)
        caption = write_figure(
            read,
            output,
            overwrite=overwrite,
            pair=chosen,
            measurement=measurement,
            restored=(iterations or ITERATIONS) if restored else None,
        )
    if as_json:
        payload = {"frame": frame, "figure": output, "caption": caption}
        say(document(payload, scene_id=read.scene_id, simulated=read.simulated))
    elif not quiet:
        say(textwrap.fill(caption, 96))


def _draw_optics(
    path: str,
    overrides: Sequence[str],
    without: Sequence[str],
    what: Sequence[str],
    output: str,
    overwrite: bool,
    *,
    as_json: bool,
    quiet: bool,
) -> None:
    """Draw the optics of a scene, or of the scene of a frame."""
    from simimg.scene.file import scene_id
    from simimg_cli.scenes import open_scene

    scene = open_scene(path, overrides=overrides, without=without).scene

    from simimg.show.optics import write_optics

    caption = write_optics(scene, output, what=what, overwrite=overwrite)
    if as_json:
        payload = {"scene": path, "figure": output, "caption": caption}
        say(document(payload, scene_id=scene_id(scene)))
    elif not quiet:
        say(textwrap.fill(caption, 96))


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
