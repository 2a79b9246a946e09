"""simimg expose: make the frames of a scene."""

from __future__ import annotations

import os
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from simimg.errors import InputError, mistake
from simimg_cli import options
from simimg_cli.output import document, note, say

if TYPE_CHECKING:
    from simimg.frame import Frame
    from simimg_cli.scenes import Source

_PACKED = (".gz", ".fz", ".bz2", ".xz", ".zip", ".Z")


@click.command("expose")
@options.scene
@options.output("The frame to write; of several exposures FRAME-000.fits, FRAME-001.fits, ...")
@click.option(
    "--with",
    "keep",
    type=options.Words("expected", "psf"),
    default=(),
    help="Extensions to add: the image without noise, the effective PSF.",
)
@click.option(
    "--preview", type=click.Path(), metavar="PNG", help="Write a picture of the frame, too."
)
@options.compress
@options.memory
@options.threads
@options.overwrite
@options.as_json
@options.quiet
def command(
    scene: str,
    overrides: Sequence[str],
    without: Sequence[str],
    output: str,
    keep: tuple[str, ...],
    preview: str | None,
    compress: bool,
    memory: int | None,
    threads: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Make the frame that the set-up of SCENE would record, with the truth beside it.

    SCENE may be a frame of simimg: it carries its scene, and the same exposure is made again.
    """
    from simimg.assembly.report import cautions, describe
    from simimg.scene.file import requirements_to_expose, scene_id
    from simimg_cli.cautions import print_cautions
    from simimg_cli.progress import with_progress
    from simimg_cli.scenes import open_scene

    source = open_scene(scene, overrides=overrides, without=without)
    indices = _indices(source)
    frames = _numbered(output, indices)
    pictures = _numbered(preview, indices) if preview else [None] * len(indices)
    mistakes = _forbidden(source, scene, [*frames, *filter(None, pictures)], overwrite=overwrite)
    if preview and not preview.lower().endswith(".png"):
        mistakes.append(mistake(preview, "", "a preview is a PNG", "end its name in .png"))
    mistakes += requirements_to_expose(source.scene)
    if mistakes:
        raise InputError(*mistakes)
    warnings = [*describe(source.scene).warnings, *_of_another_version(source)]
    if not as_json:
        if not quiet:
            for line in warnings:
                note(f"warning: {line}")
        print_cautions(source.scene, quiet=quiet)

    exposure = source.scene.exposure
    cube = exposure is not None and exposure.frame_time is not None
    if source.scene.detector and not cube:
        if preview or "psf" in keep:
            what = "have no preview and no PSF extension"
            raise InputError(mistake(scene, "detector", f"mosaics {what}", "leave them out"))
        _expose_mosaics(
            source,
            indices,
            frames,
            keep=keep,
            compress=compress,
            memory=memory,
            threads=threads,
            overwrite=overwrite,
            as_json=as_json,
            quiet=quiet,
            warnings=warnings,
        )
        return

    if cube:
        from simimg_cli.cubes import expose_cube_file

        if keep or compress:
            what = "have no further extensions, and are not compressed"
            raise InputError(
                mistake(scene, "exposure.frame_time", f"cubes {what}", "leave them out")
            )
        expose_cube_file(
            source.scene,
            frames[0],
            preview=preview,
            memory=memory,
            threads=threads,
            overwrite=overwrite,
            as_json=as_json,
            quiet=quiet,
            warnings=warnings,
        )
        return

    from simimg.exposure import expose_prepared, prepare

    kept = keep or _kept(source)
    prepared = prepare(source.scene, memory_bytes=memory, threads=threads)
    written = []
    jobs = list(zip(indices, frames, pictures))
    for index, path, picture in with_progress(jobs, "exposures", quiet=quiet, lines=not as_json):
        frame = expose_prepared(prepared, index=index, keep=kept, threads=threads)
        frame.write(path, overwrite=overwrite, compress=compress)
        if picture is not None:
            from simimg.show.preview import write_preview

            write_preview(frame, picture, overwrite=overwrite)
        record = {"file": path, "preview": picture, "index": index, **_figures(frame)}
        written.append(record)
        if not (quiet or as_json):
            say(_line(record))
    if as_json:
        payload = {"frames": written, "cautions": cautions(source.scene)}
        say(document(payload, scene_id=scene_id(source.scene), warnings=warnings))


def _expose_mosaics(
    source: Source,
    indices: Sequence[int],
    paths: Sequence[str],
    *,
    keep: tuple[str, ...],
    compress: bool,
    memory: int | None,
    threads: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
    warnings: Sequence[str],
) -> None:
    """Make the frames of several detectors, an image extension each."""
    from simimg.assembly.report import cautions
    from simimg.mosaic import expose_prepared_mosaic, prepare_mosaic
    from simimg.scene.file import scene_id
    from simimg_cli.progress import with_progress

    prepared = prepare_mosaic(source.scene, memory_bytes=memory, threads=threads)
    written = []
    jobs = list(zip(indices, paths))
    for index, path in with_progress(jobs, "exposures", quiet=quiet, lines=not as_json):
        mosaic = expose_prepared_mosaic(prepared, index=index, keep=keep, threads=threads)
        mosaic.write(path, overwrite=overwrite, compress=compress)
        detectors = [
            {"name": name, **_figures(frame)} for name, frame in zip(mosaic.names, mosaic.frames)
        ]
        written.append({"file": path, "preview": None, "index": index, "detectors": detectors})
        if not (quiet or as_json):
            for record in detectors:
                say(_line({**record, "file": f"{path}[{record['name']}]", "preview": None}))
    if as_json:
        payload = {"frames": written, "cautions": cautions(source.scene)}
        say(document(payload, scene_id=scene_id(source.scene), warnings=warnings))


def _indices(source: Source) -> list[int]:
    """Which exposures are to be made: of a frame its own, of a scene all."""
    if source.frame is not None:
        number = source.frame.value("EXPNUM", 0)
        if not isinstance(number, int) or not 0 <= number < 2**31:
            what = f"must be the number of an exposure, got {number!r}"
            raise InputError(mistake(source.name, "EXPNUM", what, "use an undamaged frame"))
        return [number]
    exposure = source.scene.exposure
    # A cube has all its frames in one file.
    single = exposure is None or exposure.frame_time is not None
    return list(range(1 if exposure is None or single else exposure.count))


def _numbered(path: str, indices: Sequence[int]) -> list[str]:
    """One file name for each exposure: numbered before the ending, where there are several."""
    if len(indices) == 1:
        return [path]
    whole = Path(path)
    digits = max(3, len(str(indices[-1])))
    return [
        os.fspath(whole.with_name(f"{whole.stem}-{index:0{digits}d}{whole.suffix}"))
        for index in indices
    ]


def _forbidden(source: Source, scene: str, paths: Sequence[str], *, overwrite: bool) -> list[str]:
    """Why the files cannot be written, before any work is done."""
    from simimg.newfile import check_new_file

    read = {os.path.realpath(one.path) for one in source.scene.inputs.values() if one.path}
    if source.frame is None:
        read.add(os.path.realpath(scene))
    lines = []
    seen = set()
    for path in paths:
        real = os.path.realpath(path)
        if real in read:
            lines.append(mistake(path, "", "is a file that the scene reads", "choose another name"))
        elif real in seen:
            lines.append(mistake(path, "", "is to be written twice", "choose different names"))
        elif path.endswith(_PACKED):
            lines.append(
                mistake(path, "", "frames are not packed", "name a file that ends in .fits")
            )
        else:
            lines += check_new_file(path, overwrite=overwrite)
        seen.add(real)
    return lines


def _of_another_version(source: Source) -> list[str]:
    from simimg.version import __version__

    maker = source.frame.value("CREATOR") if source.frame is not None else None
    if isinstance(maker, str) and maker != f"simimg {__version__}":
        return [f"{source.name} was made by {maker}, this is {__version__}: counts may differ"]
    return []


def _kept(source: Source) -> tuple[str, ...]:
    """The extensions that a frame has, so that it is made again as it was."""
    if source.frame is None:
        return ()
    return tuple(name for name in ("expected", "psf") if getattr(source.frame, name) is not None)


def _figures(frame: Frame) -> dict[str, Any]:
    rows, columns = frame.counts.shape
    truth = frame.truth
    saturated = 0
    if frame.mask is not None:
        from simimg.camera.masks import SATURATED

        saturated = int(((frame.mask & SATURATED) != 0).sum())
    return {
        "columns": columns,
        "rows": rows,
        "exposure_s": frame.value("EXPTIME"),
        "objects": 0 if truth is None else len(truth),
        "objects_inside": 0 if truth is None else int(truth["inside"].sum()),
        "least_adu": int(frame.counts.min()),
        "most_adu": int(frame.counts.max()),
        "saturated_pixels": saturated,
    }


def _line(record: dict[str, Any]) -> str:
    outside = record["objects"] - record["objects_inside"]
    parts = [
        f"{record['columns']} x {record['rows']} pixels",
        f"{record['exposure_s']:g} s",
        f"{record['objects']} objects" + (f" ({outside} outside)" if outside else ""),
        f"{record['least_adu']} to {record['most_adu']} adu",
    ]
    if record["saturated_pixels"]:
        parts.append(f"{record['saturated_pixels']} pixels saturated")
    shown = f"; preview {record['preview']}" if record["preview"] else ""
    return f"{record['file']}: {', '.join(parts)}{shown}"
