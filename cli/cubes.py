"""simimg expose for a scene with a frame time: the cube, written as its frames are made."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from simimg_cli.output import document, say

if TYPE_CHECKING:
    from simimg.scene.model import Scene


def expose_cube_file(
    scene: Scene,
    path: str,
    *,
    memory: int | None,
    threads: int | None,
    overwrite: bool,
    as_json: bool,
    quiet: bool,
    warnings: Sequence[str],
) -> None:
    """Make the cube of a scene and say what is in it."""
    from simimg.assembly.report import cautions
    from simimg.filming import expose_cube
    from simimg.scene.file import scene_id
    from simimg_cli.progress import progress_bar

    with progress_bar("frames", quiet=quiet) as progress:
        cube = expose_cube(scene, memory_bytes=memory, threads=threads, progress=progress)
        cube.write(path, overwrite=overwrite)
    count, rows, columns = cube.shape
    seconds = cube.value("EXPTIME")
    objects = 0 if cube.truth is None else len(cube.truth)
    if as_json:
        record = {
            "file": path,
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
