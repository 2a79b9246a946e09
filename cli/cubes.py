"""Cubes of short exposures: written as their frames are made, and measured."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import click

from simimg_cli.output import document, plain, say
from simimg_cli.scenes import named, refuse_scene

if TYPE_CHECKING:
    from simimg.scene.model import Scene


class Share(click.ParamType):
    """A share of something: ``5%`` or ``0.05``."""

    name = "share"

    def convert(self, value: Any, param: Any, ctx: Any) -> float:
        """The share, above 0 and at most 1."""
        text = str(value).strip()
        try:
            number = float(text.removesuffix("%")) / (100.0 if text.endswith("%") else 1.0)
        except ValueError:
            number = 0.0
        if not 0.0 < number <= 1.0:
            self.fail(f"{value!r} is no share above 0 and at most 100 %; write 5%", param, ctx)
        return number


def expose_cube_file(
    scene: Scene,
    path: str,
    *,
    preview: str | None,
    memory: int | None,
    threads: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
    warnings: Sequence[str],
) -> None:
    """Make the cube of a scene, perhaps with a picture of some frames, and say what is in it."""
    from simimg.assembly.report import cautions
    from simimg.filming import expose_cube
    from simimg.scene.file import scene_id
    from simimg_cli.progress import progress_bar

    with progress_bar("frames", quiet=quiet) as progress:
        cube = expose_cube(scene, memory_bytes=memory, threads=threads, progress=progress)
        cube.write(path, overwrite=overwrite)
    if preview is not None:
        from simimg.cube import Cube
        from simimg.show.cubestrip import cube_strip
        from simimg.show.preview import write_preview

        write_preview(cube_strip(Cube.read(path)), preview, overwrite=overwrite)
    count, rows, columns = cube.shape
    seconds = cube.value("EXPTIME")
    objects = 0 if cube.truth is None else len(cube.truth)
    if as_json:
        record = {
            "file": path,
            "preview": preview,
            "frames": count,
            "columns": columns,
            "rows": rows,
            "exposure_s": seconds,
            "objects": objects,
        }
        payload = {"cubes": [record], "cautions": cautions(scene)}
        say(document(payload, scene_id=scene_id(scene), warnings=warnings))
    elif not quiet:
        size = f"{count} frames of {columns} x {rows} pixels"
        say(f"{path}: {size}, {seconds:g} s each, {objects} objects")


def cube_answer(
    path: str,
    *,
    method: Any,
    keep: float,
    quality: Any,
    reference: str | None,
    near: Sequence[tuple[float, float]],
) -> dict[str, Any]:
    """What a cube says, as `simimg_cli.answers.Answers.one` has it of a frame.

    Raises
    ------
    InputError
        A file that cannot be measured.
    """
    from simimg.cube import Cube
    from simimg.resolving.cubesum import measure_cube

    refuse_scene(path, f"expose it first: simimg expose {path} -o CUBE.fits")
    cube = Cube.read(path)
    other = None if reference is None else Cube.read(reference)
    with named(path):
        found = measure_cube(
            cube,
            method=method,
            keep=keep,
            quality=quality,
            reference=other,
            near=list(near) or None,
        )
    scene_id = cube.value("SCENEID")
    return {
        "frame": path,
        "method": method,
        "scene_id": scene_id if isinstance(scene_id, str) else None,
        "simulated": cube.simulated,
        "warnings": list(found.warnings),
        "psf": plain(found.psf.to_dict()),
        "pairs": [{"file": path, **plain(pair.to_dict())} for pair in found.pairs],
        "singles": [plain(single.to_dict()) for single in found.singles],
    }
