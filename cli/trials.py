"""simimg measure --trials: how often a scene's pairs would be resolved, and how well measured."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from simimg_cli.options import processors
from simimg_cli.output import document, say, table, warn
from simimg_cli.progress import progress_bar
from simimg_cli.words import arcsec, figures

if TYPE_CHECKING:
    from simimg.study.tally import Fraction, Geometry, Tally
    from simimg.study.trials import PairTrials

_FEW = 200  # trials for which starting processes takes longer than it saves


def run_trials(
    path: str,
    count: int,
    *,
    workers: int | None,
    overrides: Sequence[str],
    without: Sequence[str],
    as_json: bool,
    quiet: bool,
) -> None:
    """Make the trials of a scene, and print what they say."""
    from simimg.assembly.report import cautions, describe
    from simimg.scene.file import scene_id
    from simimg.study.trials import trials
    from simimg_cli.cautions import print_cautions
    from simimg_cli.scenes import open_scene

    opened = open_scene(path, overrides=overrides, without=without).scene
    warnings = describe(opened).warnings
    if workers is None:
        workers = workers_for(count)
    with progress_bar("trials", quiet=quiet) as progress:
        pairs = trials(opened, count=count, workers=workers, progress=progress)
    if as_json:
        payload = {
            "scene": path,
            "pairs": [pair.to_dict() for pair in pairs],
            "cautions": cautions(opened),
        }
        say(document(payload, scene_id=scene_id(opened), warnings=warnings))
        return
    if not pairs:
        say("nothing to measure: the scene has no pair in the frame")
    for number, pair in enumerate(pairs):
        if number:
            say()
        _print(pair)
    if not quiet:
        warn(warnings)
    print_cautions(opened, quiet=quiet)


def workers_for(count: int) -> int:
    """Processes for so many trials, where the user asks for none."""
    return 1 if count < _FEW else processors()


def _print(pair: PairTrials) -> None:
    """A pair's trials, of one exposure and of all together, side by side."""
    kinds: list[tuple[str, Tally]] = [("one exposure", pair)]
    if pair.together is not None:
        kinds.append((f"{pair.exposures} exposures", pair.together))
    name = pair.label or f"x {pair.x:.6g}, y {pair.y:.6g}"
    say(f"{name}   {pair.trials} trials")
    columns = ("", *(f"of {words}" for words, _ in kinds))
    rows = [
        (words, *(_share(getattr(one, key)) for _, one in kinds))
        for words, key in (
            ("second star certain", "double"),
            ("resolved by Rayleigh", "rayleigh"),
            ("resolved by Sparrow", "sparrow"),
        )
    ]
    table(columns, rows)
    rows = [
        (f"{words}, {kind}" if len(kinds) > 1 else words, *_three(getattr(one, key)))
        for kind, one in kinds
        for words, key in (
            ("bias", "bias"),
            ("scatter", "scatter"),
            ("error quoted", "error"),
            ("bound", "bound"),
        )
    ]
    table(("", "separation", "angle", "dm"), rows, right=(1, 2, 3))
    for kind, one in kinds:
        if one.measured < one.trials:
            lost = one.trials - one.measured
            say(f"in {lost} trials of {kind} no second star was fitted")


def _share(one: Fraction) -> str:
    """A share in percent, with its interval."""
    low, high = 100.0 * one.low, 100.0 * one.high
    return f"{100.0 * one.fraction_resolved:5.1f} %  ({low:.1f} to {high:.1f})"


def _three(one: Geometry) -> tuple[str, str, str]:
    return (
        arcsec(one.separation_arcsec, 2),
        f"{figures(one.position_angle_deg, 2)} deg",
        figures(one.magnitude_difference, 2),
    )
