"""simimg inject: put a scene's objects into a frame that exists."""

from __future__ import annotations

import os
from collections.abc import Sequence
from math import degrees

import click

from simimg.errors import InputError, mistake
from simimg_cli import options
from simimg_cli.foreign import Wanted, frame_options_named
from simimg_cli.output import document, note, say


@click.command("inject")
@click.argument("frame", type=click.Path())
@click.option(
    "--scene",
    "-s",
    required=True,
    type=click.Path(),
    metavar="SCENE",
    help="The scene whose objects are put in: a scene file, or a frame that carries its scene.",
)
@options.output("The frame with the objects in it.")
@click.option(
    "--seed",
    type=click.IntRange(0, 2**63 - 1),
    metavar="N",
    help="Seed of the objects' own noise; the scene's unless given.",
)
@frame_options_named("gain", "pixel_scale", "saturation", "hdu")
@options.changes
@options.memory
@options.threads
@options.overwrite
@options.as_json
@options.quiet
def command(
    frame: str,
    scene: str,
    output: str,
    seed: int | None,
    gain: float | None,
    pixel_scale: float | None,
    saturation: float | None,
    hdu: str | None,
    overrides: Sequence[str],
    without: Sequence[str],
    memory: int | None,
    threads: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Put the objects of a scene into FRAME, a FITS image of simimg or of any telescope.

    The objects come with the photon noise of their own light, with the PSF of the scene at the
    frame's pixel scale, where the frame's coordinates say. Nothing else is added: the frame has its
    sky, bias and read noise already. TRUTH lists what was put in.
    """
    from simimg.newfile import check_new_file
    from simimg_cli.scenes import open_scene

    given = Wanted(gain=gain, pixel_scale=pixel_scale, saturation=saturation, hdu=hdu).given()
    mistakes = check_new_file(output, overwrite=overwrite)
    if os.path.realpath(output) in (os.path.realpath(frame), os.path.realpath(scene)):
        mistakes = [mistake(output, "", "is the file that is read", "choose another name")]
    if mistakes:
        raise InputError(*mistakes)
    source = open_scene(scene, overrides=overrides, without=without)

    from simimg.study.inject import inject

    made = inject(
        frame,
        source.scene,
        hdu=hdu,
        given=given,
        seed=seed,
        memory_bytes=memory,
        threads=threads,
    )
    if not (quiet or as_json):
        for line in made.notes:
            note(f"note: {line}")
    made.write(output, overwrite=overwrite)
    figures = {
        "file": output,
        "frame": frame,
        "objects": made.added,
        "objects_inside": int(made.truth["inside"][len(made.truth) - made.added :].sum()),
        "electrons": float(made.expected.sum()),
        "gain": made.gain,
        "pixel_scale_arcsec": degrees(made.pixel_scale) * 3600.0,
        "saturation_adu": made.saturation,
        "saturated_pixels": made.saturated,
        "seed": made.seed,
    }
    if as_json:
        say(document(figures, scene_id=made.scene_id, warnings=made.notes))
    elif not quiet:
        full = f"; {made.saturated} pixels saturated" if made.saturated else ""
        say(
            f"{output}: {made.added} objects put in ({figures['objects_inside']} inside), "
            f"{figures['electrons']:.6g} electrons at {made.gain:.4g} electron/adu{full}"
        )
