"""simimg study: limits, bounds and trials of a scene as one or two of its keys are varied."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

import click

from simimg.errors import InputError, mistake
from simimg_cli import options
from simimg_cli.output import document, note, paragraph, say, table, warn
from simimg_cli.progress import progress_bar
from simimg_cli.trade import rows_of
from simimg_cli.words import figures

if TYPE_CHECKING:
    from simimg.study.sweep import Plan, Sweep, Varied

_SHOWN = (
    ("delivered_fwhm", "FWHM"),
    ("delivered_rayleigh", "Rayleigh"),
    ("delivered_sparrow", "Sparrow"),
    ("pixels_per_fwhm", "pixels/FWHM"),
    ("snr", "S/N"),
    ("bound_separation", "bound"),
)
_TRIED = (("fraction_rayleigh", "by Rayleigh"), ("fraction_sparrow", "by Sparrow"))


@click.command("study")
@options.scene
@click.option(
    "--vary",
    multiple=True,
    metavar="KEY=VALUES",
    help="A key and its values, START:STOP:COUNT (with :log for equal factors) or a list with "
    'commas: camera.pixel_scale="0.05 arcsec:0.6 arcsec:12". Twice for a map. The scene\'s [study] '
    "table unless given.",
)
@click.option(
    "--trials",
    type=click.IntRange(0, 1_000_000),
    metavar="N",
    help="Expose and measure N noise draws at each point.",
)
@click.option("--pair", metavar="LABEL", help="The pair that is studied; the first unless given.")
@click.option("--output", "-o", type=click.Path(), metavar="TABLE", help="Write the study as ECSV.")
@click.option(
    "--plot",
    type=click.Path(),
    metavar="FILE",
    help="Draw it: curves of one key, a map of two, the separation map.",
)
@click.option(
    "--column",
    metavar="NAME",
    help="The column that a map shows: fraction_sparrow, or bound_separation without trials, "
    "unless given.",
)
@click.option(
    "--level",
    type=float,
    metavar="P",
    help="Draw the boundary of a map at this value; 0.5 unless given, of fractions.",
)
@click.option(
    "--strip", type=click.Path(), metavar="FILE", help="Draw the frames side by side along one key."
)
@click.option(
    "--report",
    "page",
    type=click.Path(),
    metavar="PAGE",
    help="Write picture, table and how to make them again as one page, .html.",
)
@click.option(
    "--pixel-advice",
    is_flag=True,
    help="Say which pixel scales suit the pair, and why, in place of varied keys.",
)
@click.option(
    "--separation-map",
    is_flag=True,
    help="Say which separations are resolved against the magnitude difference, in place of varied "
    "keys.",
)
@options.width
@options.workers
@options.cluster
@options.overwrite
@options.as_json
@options.quiet
def command(
    scene: str,
    overrides: Sequence[str],
    without: Sequence[str],
    vary: Sequence[str],
    trials: int | None,
    pair: str | None,
    output: str | None,
    plot: str | None,
    column: str | None,
    level: float | None,
    strip: str | None,
    page: str | None,
    pixel_advice: bool,
    separation_map: bool,
    width: float | None,
    workers: int | None,
    cluster: str | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Say what a scene resolves as one or two of its keys change.

    An interrupted study whose table is named by -o goes on where it was when called again.
    """
    from simimg.scene.file import scene_id
    from simimg.study.checkpoint import Checkpoint
    from simimg.study.sweep import make, plan
    from simimg.study.sweeptable import check_sweep_file, sweep_columns, write_sweep
    from simimg_cli.cautions import print_cautions
    from simimg_cli.scenes import open_scene

    lines = _wrong_files(output, plot, strip, check_sweep_file, overwrite=overwrite)
    if page is not None:
        from simimg.show.reportpage import check_page

        lines += check_page(page, overwrite=overwrite)
    if lines:
        raise InputError(*lines)
    if width is not None and plot is None and strip is None:
        raise click.UsageError("--width is that of a picture; it goes with --plot or --strip")
    opened = open_scene(scene, overrides=overrides, without=without).scene
    if pixel_advice or separation_map:
        of_keys = vary or strip or page or column or level or cluster
        if of_keys or (pixel_advice and separation_map):
            raise click.UsageError(
                "--pixel-advice and --separation-map stand alone; leave out what is of varied keys"
            )
        if pixel_advice and plot:
            raise click.UsageError("--pixel-advice draws nothing; leave out --plot")
        from simimg_cli.trade import run_pixel_advice, run_separation_map

        shared: dict[str, Any] = {
            "pair": pair,
            "output": output,
            "workers": options.processors() if workers is None else workers,
            "overwrite": overwrite,
            "as_json": as_json,
            "quiet": quiet,
        }
        if pixel_advice:
            run_pixel_advice(scene, opened, trials=trials, **shared)
        else:
            run_separation_map(scene, opened, plot=plot, width=width, **shared)
        if not as_json:
            print_cautions(opened, quiet=quiet)
        return
    planned = plan(opened, vary=_varied(vary), trials=trials, pair=pair)
    if strip is not None and len(planned.varied) != 1:
        raise InputError(mistake("--strip", "", "shows one varied key", "vary one key"))
    if column is not None or level is not None:
        _check_map(planned, plot, column)
    checkpoint = None if output is None else Checkpoint(output, planned, fresh=overwrite)
    before = 0 if checkpoint is None else len(checkpoint.done)
    if before and not quiet:
        note(f"{before} of {len(planned.points)} points were done before")
    with _going_on(checkpoint, quiet=quiet), progress_bar("points", quiet=quiet) as progress:
        made = make(
            planned,
            workers=options.processors() if workers is None else workers,
            cluster=cluster,
            done=None if checkpoint is None else checkpoint.done,
            keep=None if checkpoint is None else checkpoint.keep,
            progress=progress,
        )
    if output is not None and checkpoint is not None:
        write_sweep(made, output, overwrite=overwrite)
        checkpoint.remove()
    caption = _draw(made, plot, column, level, strip, planned, width, overwrite=overwrite)
    if page is not None:
        from simimg.show.reportstudy import write_study_page

        write_study_page(made, page, pair=pair, overwrite=overwrite)
    warnings = list(dict.fromkeys(one for one in made.problems if one))
    if as_json:
        payload: dict[str, Any] = {
            "scene": scene,
            "vary": [
                {"key": one.key, "unit": one.steps.unit, "values": list(one.steps.values)}
                for one in made.varied
            ],
            "trials": made.trials,
            "points": rows_of(sweep_columns(made)),
        }
        if caption:
            payload["caption"] = caption
        say(document(payload, scene_id=scene_id(opened), warnings=warnings))
        return
    if output is None or not quiet:
        _print(made)
    if caption and not quiet:
        say()
        say("\n".join(paragraph(line) for line in caption.split("\n")))
    if not quiet:
        warn(warnings)
    print_cautions(opened, quiet=quiet)


def _wrong_files(
    output: str | None,
    plot: str | None,
    strip: str | None,
    check: Callable[..., list[str]],
    *,
    overwrite: bool,
) -> list[str]:
    """What forbids writing any of the files, before any work is spent."""
    from simimg.show.canvas import figure_format

    lines = [] if output is None else check(output, overwrite=overwrite)
    for path in (plot, strip):
        if path is not None:
            try:
                figure_format(path, overwrite=overwrite)
            except InputError as error:
                lines += error.lines
    return lines


def _varied(texts: Sequence[str]) -> list[Varied]:
    from simimg.scene.steps import StepsError, steps_from_text
    from simimg.study.sweep import Varied

    found, lines = [], []
    for text in texts:
        name, equals, values = text.partition("=")
        try:
            if not equals:
                raise StepsError("has no values")
            found.append(Varied(name.strip(), steps_from_text(values)))
        except StepsError as error:
            lines.append(mistake("--vary", name.strip()[:60] or "KEY", error.what, error.mend))
    if lines:
        raise InputError(*lines)
    return found


def _check_map(planned: Plan, plot: str | None, column: str | None) -> None:
    from simimg.scene.keys import nearest
    from simimg.study.point import COLUMNS, TRIAL_COLUMNS

    if plot is None or len(planned.varied) != 2:
        raise click.UsageError("--column and --level are of a map: --plot with two keys varied")
    known = [*COLUMNS, *(TRIAL_COLUMNS if planned.asked.trials else ())]
    if column is not None and column not in known:
        raise InputError(mistake("--column", column, "is no column", nearest(column, known)))


@contextmanager
def _going_on(checkpoint: Any, *, quiet: bool) -> Iterator[None]:
    """Say after an interrupt how to go on."""
    try:
        yield
    except (KeyboardInterrupt, SystemExit):
        if checkpoint is not None and checkpoint.path.exists() and not quiet:
            note(f"what is done is kept in {checkpoint.path}; the same command goes on from there")
        raise


def _draw(
    made: Sweep,
    plot: str | None,
    column: str | None,
    level: float | None,
    strip: str | None,
    planned: Plan,
    width: float | None,
    *,
    overwrite: bool,
) -> str:
    """Draw what is asked for; the captions."""
    from simimg.show.canvas import COLUMN, PAGE

    captions = []
    if plot is not None:
        from simimg.show.studyplot import write_study_plot

        captions.append(
            write_study_plot(
                made,
                plot,
                column=column,
                level=level,
                overwrite=overwrite,
                width=COLUMN if width is None else width,
            )
        )
    if strip is not None:
        from simimg.show.studystrip import write_study_strip

        captions.append(
            write_study_strip(
                planned, made, strip, overwrite=overwrite, width=PAGE if width is None else width
            )
        )
    return "\n".join(captions)


def _print(made: Sweep) -> None:
    shown = (*_SHOWN, *(_TRIED if made.trials else ()))
    units = {name: unit for name, (unit, _) in made.columns.items()}
    headings = [
        *(one.key for one in made.varied),
        *(heading + (' "' if units[name] == "arcsec" else "") for name, heading in shown),
    ]
    rows = [
        [*(str(value) for value in point), *(figures(row[name]) for name, _ in shown)]
        for point, row in zip(made.points, made.rows, strict=True)
    ]
    table(headings, rows, right=range(len(headings)))
