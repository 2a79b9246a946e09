"""simimg measure: what a frame says of its pairs."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import click

from simimg.errors import InputError
from simimg_cli import options
from simimg_cli.output import document, note, plain, say, table, warn
from simimg_cli.progress import with_progress
from simimg_cli.scenes import named
from simimg_cli.trials import run_trials
from simimg_cli.words import arcsec, probability, short, with_error

if TYPE_CHECKING:
    from simimg.frame import Frame


MANY = 8  # pairs: of more, a table with a line for each


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
    help="Processes for the trials; all processors unless given. The result is the same.",
)
@options.changes
@options.as_json
@options.quiet
def command(
    frames: Sequence[str],
    near: Sequence[tuple[float, float]],
    trials: int | None,
    workers: int | None,
    overrides: Sequence[str],
    without: Sequence[str],
    as_json: bool,
    quiet: bool,
) -> None:
    """Measure pairs in FRAMES, and say whether they are resolved and how sure that is.

    Measured are the pairs that a frame's truth names and every place given with --near, in this
    order, then what is found in the frame. A frame that cannot be measured is reported, the others
    are measured all the same, and the exit code is 2.

    With --trials a scene is given in place of frames (or a frame, which carries its scene).
    """
    if trials is not None:
        if len(frames) > 1 or near:
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
    if overrides or without or workers is not None:
        raise click.UsageError("--set, --without and --workers go with --trials")
    answers: list[dict[str, Any]] = []
    mistakes: list[str] = []
    for path in with_progress(frames, "frames", quiet=quiet, lines=not as_json):
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


def _measured(path: str, near: Sequence[tuple[float, float]]) -> dict[str, Any]:
    """A frame's answer, for printing and for JSON."""
    from simimg.frame import Frame

    # Nothing slow is loaded for a frame that cannot be read.
    frame = Frame.read(path)

    from simimg.resolving.measure import measure_all

    with named(path):
        pairs = measure_all(frame, near=list(near) or None)
    return {
        "frame": path,
        "scene_id": frame.scene_id,
        "simulated": frame.simulated,
        "warnings": _warnings(frame),
        "pairs": [plain(pair.to_dict()) for pair in pairs],
    }


def _warnings(frame: Frame) -> list[str]:
    if frame.wcs is None:
        return ["no coordinates in the header: north is taken as up and east as left"]
    return []


def _document(answers: Sequence[dict[str, Any]]) -> str:
    """One frame's answer as it is; of several a list of them."""
    if len(answers) == 1:
        own = ("scene_id", "simulated", "warnings")
        rest = {key: value for key, value in answers[0].items() if key not in own}
        return document(rest, **{key: answers[0][key] for key in own})
    ids = {answer.get("scene_id") for answer in answers}
    return document(
        {"frames": answers},
        scene_id=ids.pop() if len(ids) == 1 else None,
        simulated=all(answer.get("simulated", False) for answer in answers),
        warnings=[
            f"{answer['frame']}: {text}"
            for answer in answers
            for text in answer.get("warnings", [])
        ],
    )


def _print(answer: Mapping[str, Any], *, heading: bool, quiet: bool) -> None:
    if heading:
        say(f"{answer['frame']}:")
    if not quiet:
        warn(answer["warnings"])
    if not answer["pairs"]:
        say("nothing to measure: no pair is named, none was found, and no place was given")
    if len(answer["pairs"]) > MANY:
        _print_table(answer["pairs"])
        return
    width = max((len(_name(pair)) for pair in answer["pairs"]), default=0)
    for pair in answer["pairs"]:
        _print_pair(pair, width)


def _print_table(pairs: Sequence[Mapping[str, Any]]) -> None:
    """A line for each of many pairs."""
    columns = ("pair", "separation", "PA", "", "dm", "single star", "Rayleigh", "", "Sparrow", "")
    rows = []
    for pair in pairs:
        separation, angle, difference = _geometry(pair)
        row = [_name(pair), separation, angle, "*" if pair["ambiguous_180"] else "", difference]
        row.append(probability(pair["probability_single"]))
        for criterion in ("rayleigh", "sparrow"):
            row += [pair[criterion]["verdict"], _chance(pair[criterion])]
        rows.append(row)
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
    lines += textwrap.wrap(pair["advice"], 88)
    for number, line in enumerate(lines):
        name = _name(pair) if number == 0 else ""
        say(f"{name:<{width}}  {line}")


def _geometry(pair: Mapping[str, Any]) -> tuple[str, str, str]:
    """Separation, position angle and magnitude difference with their errors."""
    separation = with_error(pair["separation_arcsec"], pair["separation_error_arcsec"])
    angle = with_error(pair["position_angle_deg"], pair["position_angle_error_deg"])
    difference = with_error(pair["magnitude_difference"], pair["magnitude_difference_error"])
    return f'{separation}"', f"{angle} deg", difference
