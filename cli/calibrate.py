"""simimg calibrate: the calibration frames of a scene's camera."""

from __future__ import annotations

import os
from collections.abc import Sequence

import click

from simimg.errors import InputError, RunError, mistake
from simimg_cli import options
from simimg_cli.foreign import Amount
from simimg_cli.output import document, note, say

_MANY = click.IntRange(0, 100_000)


@click.command("calibrate")
@options.scene
@click.option("--bias", type=_MANY, default=0, metavar="N", help="Bias frames: no time, no light.")
@click.option(
    "--dark", type=_MANY, default=0, metavar="N", help="Dark frames of the scene's exposure time."
)
@click.option(
    "--flat",
    type=_MANY,
    default=0,
    metavar="N",
    help="Flats, at half of what a pixel can record.",
)
@click.option(
    "--ramp",
    type=_MANY,
    default=0,
    metavar="N",
    help="Flats of growing exposure, up to all that a pixel can record: linearity.",
)
@click.option(
    "--transfer",
    type=_MANY,
    default=0,
    metavar="N",
    help="Pairs of flats at N levels: photon transfer.",
)
@click.option(
    "--flat-time",
    type=Amount("time", 1.0, '"5 s"'),
    default="5",
    metavar="T",
    help="Exposure of a flat in seconds; 5 unless given.",
)
@click.option(
    "--out", required=True, type=click.Path(), metavar="DIR", help="The folder to write to."
)
@options.threads
@options.overwrite
@options.as_json
@options.quiet
def command(
    scene: str,
    overrides: Sequence[str],
    without: Sequence[str],
    bias: int,
    dark: int,
    flat: int,
    ramp: int,
    transfer: int,
    flat_time: float,
    out: str,
    threads: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Make the calibration frames of SCENE's camera in a folder.

    They are of the same detector (camera.serial) as the frames of simimg expose. Called again, it
    makes what is missing; frames of another scene or other options are not replaced without
    --overwrite.
    """
    from simimg.scene.file import scene_id
    from simimg_cli.progress import with_progress
    from simimg_cli.scenes import open_scene

    if not 1e-6 <= flat_time <= 1e7:
        what = f"must be from 0.000001 to 10000000 seconds, got {flat_time:g}"
        raise InputError(mistake("--flat-time", "", what, "write 5, say"))
    if not bias + dark + flat + ramp + transfer:
        raise click.UsageError("say how many: --bias, --dark, --flat, --ramp or --transfer")
    source = open_scene(scene, overrides=overrides, without=without)

    from simimg.study.calibrate import calibration

    made = calibration(
        source.scene,
        bias=bias,
        dark=dark,
        flat=flat,
        ramp=ramp,
        transfer=transfer,
        flat_time=flat_time,
        threads=threads,
    )
    folder = os.path.realpath(out)
    if os.path.exists(folder) and not os.path.isdir(folder):
        raise InputError(mistake(out, "", "is a file", "name a folder"))
    if not os.path.isdir(os.path.dirname(folder)):
        raise InputError(mistake(out, "", "cannot be made here", "make the folder above it first"))
    paths = {one: os.path.join(out, one.file) for one in made.frames}
    kept = set()
    mistakes = []
    for one, path in paths.items():
        if overwrite or not os.path.lexists(path):
            continue
        if made.made_before(one, path):
            kept.add(one)
        else:
            what = "exists already, and is another frame"
            mistakes.append(mistake(path, "", what, "choose another folder, or give --overwrite"))
    if mistakes:
        raise InputError(*mistakes[:20])
    try:
        os.makedirs(folder, exist_ok=True)
    except OSError as error:
        what = f"could not be made: {error.strerror or error}"
        raise RunError(mistake(out, "", what)) from error
    records = []
    for one in with_progress(list(made.frames), "frames", quiet=quiet, lines=not as_json):
        if one not in kept:
            made.frame(one, threads=threads).write(paths[one], overwrite=overwrite)
        records.append(
            {
                "file": paths[one],
                "kind": one.kind,
                "exposure_s": one.time,
                "light_electrons": one.light,
                "kept": one in kept,
            }
        )
    if as_json:
        say(document({"frames": records}, scene_id=scene_id(source.scene)))
    elif not quiet:
        counted = {"bias": bias, "dark": dark, "flat": flat, "ramp": ramp}
        parts = [f"{count} {kind}" for kind, count in counted.items() if count]
        parts += [f"{transfer} photon-transfer pairs"] if transfer else []
        there = f" ({len(kept)} were there already)" if kept else ""
        say(f"{out}: {', '.join(parts)}{there}")
        note("note: simulated frames, for planning and testing")
