"""Scenes as the commands take them: a TOML file, or a frame that carries its scene."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from simimg.errors import InputError, mistake

if TYPE_CHECKING:
    from simimg.frame import Frame
    from simimg.scene.model import Scene

_FITS, _GZIP = b"SIMPLE", b"\x1f\x8b"


@dataclass(frozen=True)
class Source:
    """A scene, and the frame that it was taken out of, if any."""

    name: str
    scene: Scene
    frame: Frame | None


def open_scene(
    path: str | os.PathLike[str], *, overrides: Sequence[str] = (), without: Sequence[str] = ()
) -> Source:
    """Read a scene from its file, or out of a frame of simimg.

    Raises
    ------
    InputError
        One line for each mistake.
    """
    from simimg.scene.file import load_scene, scene_from_record

    where = os.fspath(path)
    if not _is_frame(where):
        scene = load_scene(where, overrides=overrides, without=without)
        return Source(where, scene, None)
    from simimg.fits.cubes import holds_cube
    from simimg.fits.reader import read_scene_files
    from simimg.frame import Frame

    frame = None if holds_cube(where) else Frame.read(where)
    # The images of a mosaic and of a cube are extensions; the scene stands beside them.
    files = (frame.scene_files if frame is not None else ()) or read_scene_files(where)
    if not files:
        mend = "give a scene file, or a frame that simimg made"
        raise InputError(mistake(where, "", "carries no scene", mend))
    scene = scene_from_record(
        files,
        name=where,
        directory=Path(where).parent,
        overrides=overrides,
        without=without,
    )
    return Source(where, scene, frame)


def refuse_scene(path: str, mend: str) -> None:
    """Refuse a scene where a frame is wanted.

    Raises
    ------
    InputError
        The path is one of a TOML file.
    """
    if path.lower().endswith(".toml"):
        raise InputError(mistake(path, "", "is a scene, not a frame", mend))


@contextmanager
def named(path: str) -> Iterator[None]:
    """Give a frame's mistakes the name of its file, which a frame in memory does not know."""
    try:
        yield
    except InputError as error:
        lines = [f"{path}: {line.removeprefix('frame: ')}" for line in error.lines]
        raise InputError(*lines) from error


def _is_frame(path: str) -> bool:
    try:
        if not os.path.isfile(path):
            return False
        with open(path, "rb") as handle:
            start = handle.read(len(_FITS))
    except (OSError, ValueError):
        return False  # whoever reads the file as a scene says what is wrong with it
    return start == _FITS or start.startswith(_GZIP)
