"""A scene in and out: from a TOML file or a frame's record, and back to text, record and hash.

Every mistake is reported at once, one line each, ``FILE: key: what is wrong; what to write
instead``. Where an override is at fault, the file is followed by ``(--set)``.
"""

from __future__ import annotations

import hashlib
import json
import numbers
import os
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from simimg.errors import InputError, mistake
from simimg.quantities import shown
from simimg.scene.build import build, read_layers
from simimg.scene.inputs import InputFile, UnusableFileError, read_bounded, read_input
from simimg.scene.layers import change
from simimg.scene.model import Scene
from simimg.scene.needs import defaults_used, requirements_to_expose
from simimg.scene.paths import MisplacedKeyError, parse_path
from simimg.scene.text import LARGEST_SCENE, parse_toml, to_toml

__all__ = [
    "defaults_used",
    "load_scene",
    "replace",
    "requirements_to_expose",
    "scene_from_record",
    "scene_id",
    "scene_record",
    "scene_text",
]

_RECORD = "use an undamaged frame that simimg wrote"


def load_scene(
    path: str | os.PathLike[str], *, overrides: Sequence[str] = (), without: Sequence[str] = ()
) -> Scene:
    """Read a scene file, the files it is laid over, and the files it names.

    Parameters
    ----------
    path : path
        TOML file.
    overrides : sequence of str, optional
        Changes ``KEY=VALUE``, made after tables are taken away: a TOML value, or bare text.
    without : sequence of str, optional
        Tables to take away: ``air``, ``sky``, ``vanes``, ...

    Returns
    -------
    Scene
        Checked, frozen, SI inside; it carries its own text and what it read.

    Raises
    ------
    InputError
        One line for each mistake.
    """
    file = Path(path)
    where = str(path)
    try:
        content = read_bounded(file, LARGEST_SCENE)
    except UnusableFileError as problem:
        raise InputError(mistake(where, "", problem.what, problem.mend)) from None
    return build(
        read_layers(content, where, file),
        name=file.name,
        directory=file.parent,
        find=lambda name: read_input(name, file.parent),
        overrides=overrides,
        without=without,
    )


def scene_from_record(
    files: Sequence[tuple[str, str, bytes]],
    *,
    name: str,
    directory: str | os.PathLike[str],
    overrides: Sequence[str] = (),
    without: Sequence[str] = (),
) -> Scene:
    """Make the scene again that `scene_record` wrote.

    Parameters
    ----------
    files : sequence of (name, sha256, content)
        First the scene's text, then the files it names. Empty content of a file that is not empty
        stands for one too large to keep: it is read from `directory`.
    name : str
        What to call the scene in messages (the frame's file name).
    directory : path
        Where files that the record lacks are looked for.
    overrides, without : sequence of str, optional
        As in `load_scene`.

    Raises
    ------
    InputError
        One line for each mistake; also where a content does not fit its hash.
    """
    if not files:
        raise InputError(mistake(name, "SCENE", "is empty", _RECORD))
    folder = Path(directory)
    digests = [hashlib.sha256(content).hexdigest() for _, _, content in files]
    lines = [
        mistake(name, f"SCENE {shown(one)}", "is damaged: its sha256 is another", _RECORD)
        for (one, sha256, content), digest in zip(files, digests, strict=True)
        if digest != sha256 and (content or one == files[0][0])
    ]
    if lines:
        raise InputError(*lines)
    document = parse_toml(files[0][2], name)
    if "base" in document:
        raise InputError(mistake(name, "base", "stands in the scene of a frame", _RECORD))
    kept = {
        one: (sha256, content if digest == sha256 else None)
        for (one, sha256, content), digest in zip(files[1:], digests[1:], strict=True)
    }

    def find(path: str) -> InputFile:
        if path not in kept:
            return read_input(path, folder)
        sha256, content = kept[path]
        if content is not None:
            return InputFile(path, sha256, content, None)
        return _fetch(path, sha256, folder)

    return build(
        [(name, document)],
        name=Path(files[0][0]).name or "scene.toml",
        directory=folder,
        find=find,
        overrides=overrides,
        without=without,
    )


def _fetch(name: str, sha256: str, folder: Path) -> InputFile:
    """Read from disk a file that a record holds only by its hash."""
    digest = sha256 if sha256.isalnum() and len(sha256) == 64 else shown(sha256)
    mend = f"put the file of sha256 {digest} beside the frame"
    try:
        found = read_input(name, folder)
    except UnusableFileError as problem:
        raise UnusableFileError(
            f"too large to be kept in the frame, {problem.what}", mend
        ) from None
    if found.sha256 != sha256:
        raise UnusableFileError("too large to be kept in the frame, and changed since", mend)
    return found


def replace(scene: Scene, changes: Mapping[str, Any]) -> Scene:
    """The same scene with some keys changed.

    Parameters
    ----------
    scene : Scene
        Stays as it is.
    changes : mapping
        Dotted keys to values as in a scene file: ``{"air.seeing": "0.5 arcsec"}``. None takes a
        key or a table away.

    Raises
    ------
    InputError
        One line for each mistake.
    """
    document = scene.document
    lines: list[str] = []
    for name, value in changes.items():
        try:
            change(document, parse_path(name), _plain_value(value))
        except MisplacedKeyError as error:
            lines.append(mistake(scene.where, name, error.what, error.mend))
    if lines:
        raise InputError(*lines)
    return build(
        [(scene.where, document)],
        name=scene.name,
        directory=scene.directory,
        find=lambda path: scene.inputs.get(path) or read_input(path, scene.directory),
    )


def _plain_value(value: Any) -> Any:
    """A value of Python or NumPy as a document holds it."""
    if value is None or isinstance(value, str | bool):
        return value
    if isinstance(value, numbers.Integral):
        return int(value)
    if isinstance(value, numbers.Real):
        return float(value)
    if isinstance(value, Mapping):
        return {str(name): _plain_value(one) for name, one in value.items()}
    if isinstance(value, Sequence):
        return [_plain_value(one) for one in value]
    to_list = getattr(value, "tolist", None)
    if callable(to_list):
        return _plain_value(to_list())
    raise MisplacedKeyError(f"cannot be {shown(value)}", "give text, a number, a list or a table")


def scene_text(scene: Scene) -> str:
    """The scene as run, as TOML: base and overrides applied, comments gone."""
    return to_toml(scene.document)


def scene_record(scene: Scene) -> list[tuple[str, str, bytes]]:
    """Everything needed to make the scene again.

    Returns
    -------
    list of (name, sha256, content)
        First the scene's own text, then each file that it names, in the order of their names. The
        content of a file of more than 16 MiB is left empty.
    """
    text = scene_text(scene).encode()
    record = [(scene.name, hashlib.sha256(text).hexdigest(), text)]
    for name in sorted(scene.inputs):
        one = scene.inputs[name]
        record.append((name, one.sha256, one.content if one.content is not None else b""))
    return record


def scene_id(scene: Scene) -> str:
    """Hash (sha256, hexadecimal) of the scene as run and of the files that it names.

    Comments, spacing, the order of keys and the file's own name do not count.
    """
    files = sorted((name, one.sha256) for name, one in scene.inputs.items())
    canonical = json.dumps([scene.document, files], sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(canonical.encode()).hexdigest()
