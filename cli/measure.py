"""simimg measure: what a frame says of its pairs."""

from __future__ import annotations

import os
import textwrap
from collections.abc import Mapping, Sequence
from typing import Any

import click

from simimg.errors import InputError
from simimg_cli import options
from simimg_cli.answers import Answers, answers_document
from simimg_cli.cubes import Share, cube_answer
from simimg_cli.foreign import Wanted, frame_options
from simimg_cli.output import note, page_width, say, table, warn
from simimg_cli.progress import with_progress
from simimg_cli.scenes import refuse_scene
from simimg_cli.trials import run_trials
from simimg_cli.words import arcsec, figures, probability, short, with_error, with_interval

MANY = 8  # pairs: of more, a table with a line for each
_SOURCES = {
    "extension": "the frame's extension",
    "file": "the file given",
    "stars": "the stars named",
    "profile": "a profile of the frame's stars",
}


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
@click.option(
    "--trials",
    type=click.IntRange(1, 1_000_000),
    metavar="N",
    help="Expose and measure the pairs of a scene N times: how often are they resolved, and how "
    "well measured?",
)
@click.option(
    "--workers",
    type=click.IntRange(1, 1024),
    metavar="N",
    help="Processes for trials and for fields of many stars; all processors unless given. The "
    "result is the same.",
)
@options.changes
@click.option(
    "--together",
    is_flag=True,
    help="Fit the frames, which show one field, as if they were one: each with its own PSF, "
    "background, small shift and transparency. Places are those of the first.",
)
@click.option(
    "--method",
    type=click.Choice(["sum", "recentred", "lucky", "speckle"]),
    help="How to measure cubes of short exposures: their sum, the sum of frames recentred, of the "
    "sharpest frames, or by speckle interferometry.",
)
@click.option(
    "--keep",
    type=Share(),
    default="5%",
    show_default=True,
    help="Share of the frames of a cube that --method lucky keeps.",
)
@click.option(
    "--quality",
    type=click.Choice(["peak", "sharpness"]),
    default="peak",
    show_default=True,
    help="By what --method lucky chooses frames.",
)
@click.option(
    "--reference",
    type=click.Path(),
    metavar="CUBE",
    help="A cube of a single star for --method speckle, in place of the model.",
)
@frame_options
@click.option(
    "--output",
    "-o",
    type=click.Path(),
    metavar="TABLE",
    help="Write a table, too, a row for each pair and single object: .ecsv or .fits.",
)
@options.overwrite
@options.as_json
@options.quiet
def command(
    frames: Sequence[str],
    near: Sequence[tuple[float, float]],
    trials: int | None,
    workers: int | None,
    overrides: Sequence[str],
    without: Sequence[str],
    together: bool,
    method: str | None,
    keep: float,
    quality: str,
    reference: str | None,
    output: str | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
    **wanted: Any,
) -> None:
    """Measure pairs in FRAMES, and say whether they are resolved and how sure that is.

    Measured are the pairs that a frame's truth names and every place given with --near, in this
    order, then what is found in the frame. A frame that cannot be measured is reported, the others
    are measured all the same, and the exit code is 2.

    Frames of other programs are measured alike. Their gain, read noise and coordinates are read
    from the header under the usual keywords; what is assumed besides is said as a warning.

    Cubes of short exposures are measured with --method.

    With --trials a scene is given in place of frames (or a frame, which carries its scene).
    """
    asked = Wanted(**wanted)
    if trials is not None:
        if len(frames) > 1 or near or asked.anything or together or output is not None:
            raise click.UsageError("--trials takes one scene, and measures the pairs it names")
        run_trials(
            frames[0],
            trials,
            workers=workers,
            overrides=overrides,
            without=without,
            as_json=as_json,
            quiet=quiet,
        )
        return
    if overrides or without:
        raise click.UsageError("--set and --without go with --trials")
    if method is not None and (asked.anything or together or output is not None):
        raise click.UsageError("--method goes with --near, --keep, --quality and --reference alone")
    if reference is not None and method != "speckle":
        raise click.UsageError("--reference goes with --method speckle")
    if together and len(frames) < 2:
        raise click.UsageError("--together takes two frames or more")
    if output is not None:
        from simimg.resolving.recordtable import check_table

        lines = check_table(output, overwrite=overwrite)
        if lines:
            raise InputError(*lines)
    measured = Answers(near, asked, workers=workers or os.cpu_count() or 1)
    answers: list[dict[str, Any]] = []
    mistakes: list[str] = []
    if together:
        answers.append(measured.together(frames))
    for path in () if together else with_progress(frames, "frames", quiet=quiet):
        try:
            refuse_scene(
                path, f"expose it first: simimg expose {path} -o FRAME.fits; or give --trials N"
            )
            if method is None:
                answers.append(measured.one(path))
            else:
                answers.append(
                    cube_answer(
                        path,
                        method=method,
                        keep=keep,
                        quality=quality,
                        reference=reference,
                        near=near,
                    )
                )
        except InputError as error:
            mistakes += error.lines
            answers.append({"frame": path, "error": list(error.lines)})
    good = [answer for answer in answers if "error" not in answer]
    if as_json and good:
        say(answers_document(answers))
    elif not as_json:
        _print(good, several=len(answers) > 1, quiet=quiet)
    if output is not None and good:
        measured.write(output, overwrite=overwrite)
    if mistakes:
        raise InputError(*mistakes)
    if not as_json and not quiet and any(answer["simulated"] for answer in good):
        from simimg.assembly.report import SIMULATION_NOTE

        note(f"note: {SIMULATION_NOTE}")


def _print(answers: Sequence[Mapping[str, Any]], *, several: bool, quiet: bool) -> None:
    """The answers in words: of several frames a table of all their pairs."""
    for answer in answers:
        prefix = f"{answer['frame']}: " if several else ""
        if not quiet:
            warn(f"{prefix}{text}" for text in answer["warnings"])
            _print_psf(answer, prefix)
        if not answer["pairs"]:
            say(f"{prefix}nothing to measure: no pair is named or found, and no place was given")
    pairs = [pair for answer in answers for pair in answer["pairs"]]
    if len(pairs) > MANY or (several and pairs):
        _print_table(pairs, files=several)
    else:
        width = max((len(_name(pair)) for pair in pairs), default=0)
        for pair in pairs:
            _print_pair(pair, width)
    for answer in answers:
        _print_singles(answer.get("singles", []), f"{answer['frame']}: " if several else "")


def _print_singles(singles: Sequence[Mapping[str, Any]], prefix: str) -> None:
    """How many single objects there are besides, and where these are few, what they are."""
    if not singles:
        return
    extended = sum(single["verdict"] == "extended" for single in singles)
    say()
    objects = "object" if len(singles) == 1 else "objects"
    say(f"{prefix}{len(singles)} single {objects} besides, {extended} extended")
    if len(singles) > MANY:
        return
    table(
        ("", "x", "y", "electrons", "", "width"),
        [
            (
                single.get("label") or "",
                f"{single['x']:.2f}",
                f"{single['y']:.2f}",
                f"{figures(single['electrons'], 5)} +/- {figures(single['electrons_error'], 2)}",
                single["verdict"],
                _width(single),
            )
            for single in singles
        ],
        right=(1, 2),
    )


def _print_psf(answer: Mapping[str, Any], prefix: str) -> None:
    """Where the PSF comes from, unless it is that of the frame's own scene."""
    psf = answer["psf"]
    if psf["source"] == "scene":
        return
    chi = psf["reduced_chi_square"]
    judged = ""
    if chi is not None:
        stars = f"{psf['stars']} single star{'s' if psf['stars'] != 1 else ''}"
        judged = f", reduced chi-square {short(chi)} in {stars}"
    note(
        f"{prefix}PSF from {_SOURCES[psf['source']]}, FWHM {arcsec(psf['fwhm_arcsec'], 3)}{judged}"
    )


def _print_table(pairs: Sequence[Mapping[str, Any]], *, files: bool) -> None:
    """A line for each of many pairs, with its file where there are several."""
    columns: tuple[str, ...] = (
        "pair",
        "separation",
        "PA",
        "",
        "dm",
        "single star",
        "Rayleigh",
        "",
        "Sparrow",
        "",
    )
    rows = []
    for pair in pairs:
        separation, angle, difference = _geometry(pair)
        row = [_name(pair), separation, angle, "*" if pair["ambiguous_180"] else "", difference]
        row.append(probability(pair["probability_single"]))
        for criterion in ("rayleigh", "sparrow"):
            row += [pair[criterion]["verdict"], _chance(pair[criterion])]
        rows.append(row)
    if files:
        columns = ("file", *columns)
        rows = [[pair["file"], *row] for pair, row in zip(pairs, rows)]
    table(columns, rows)
    if any(pair["ambiguous_180"] for pair in pairs):
        say("* the position angle may be half a turn off")
    say("single star: the chance that one star would look so double; (): the probability that")
    say("the pair lies beyond the criterion's limit. Limits, saddles and advice: --near or --json")


def _chance(verdict: Mapping[str, Any], word: str = "") -> str:
    chance = verdict["probability"]
    return "" if chance is None else f"({word}{chance:.2f})"


def _name(pair: Mapping[str, Any]) -> str:
    return pair["label"] or f"x {pair['x']:.6g}, y {pair['y']:.6g}"


def _print_pair(pair: Mapping[str, Any], width: int) -> None:
    single = f"chance of a single star {probability(pair['probability_single'])}"
    if pair["separation_arcsec"] is None:
        lines = [f"no second star   {single}"]
    else:
        separation, angle, difference = _geometry(pair)
        either = " or half a turn on" if pair["ambiguous_180"] else ""
        lines = [f"{separation}   PA {angle}{either}   dm {difference}   {single}"]
    truth = pair["truth"]
    if truth:
        lines.append(
            f'truth    {short(truth["separation_arcsec"])}"'
            f"   PA {short(truth['position_angle_deg'])} deg"
            f"   dm {short(truth['magnitude_difference'])}"
        )
    word = "probability "
    for criterion in ("rayleigh", "sparrow"):
        one = pair[criterion]
        words = f"{criterion.capitalize():<8} {'limit ' + arcsec(one['limit_arcsec'], 3):<13}"
        elongated = "   elongated" if criterion == "sparrow" and pair["elongated"] else ""
        lines.append(f"{words} {one['verdict']:<11} {_chance(one, word)}{elongated}".rstrip())
    if pair["saddle_ratio"] is not None:
        saddle = with_error(pair["saddle_ratio"], pair["saddle_ratio_error"])
        lines.append(f"saddle   {saddle} of the fainter peak")
    lines += textwrap.wrap(pair["advice"], page_width() - width - 2)
    for number, line in enumerate(lines):
        name = _name(pair) if number == 0 else ""
        say(f"{name:<{width}}  {line}")


def _geometry(pair: Mapping[str, Any]) -> tuple[str, str, str]:
    """Separation, position angle and magnitude difference with their errors."""
    separation = with_error(pair["separation_arcsec"], pair["separation_error_arcsec"])
    if pair["separation_high_arcsec"] is not None:
        ends = pair["separation_low_arcsec"], pair["separation_high_arcsec"]
        separation = with_interval(pair["separation_arcsec"], *ends)
    angle = with_error(pair["position_angle_deg"], pair["position_angle_error_deg"])
    difference = with_error(pair["magnitude_difference"], pair["magnitude_difference_error"])
    return f'{separation}"', f"{angle} deg", difference


def _width(single: Mapping[str, Any]) -> str:
    width, error = (figures(single[f"width{part}_arcsec"], 2) for part in ("", "_error"))
    return f'{width} +/- {error}"'
