"""A scene in and out: from a TOML file or a frame's record, and back to text, record and hash.

Every mistake is reported at once, one line each, ``FILE: key: what is wrong; what to write
instead``.
"""

from __future__ import annotations

import hashlib
import json
import numbers
import os
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from simimg.errors import InputError, mistake
from simimg.quantities import shown
from simimg.scene.inputs import (
    InputFile,
    UnusableFileError,
    files_named,
    read_bounded,
    read_input,
)
from simimg.scene.layers import (
    MisplacedKeyError,
    apply_overrides,
    change,
    overlay,
    parse_path,
    take_away,
)
from simimg.scene.model import Scene
from simimg.scene.needs import defaults_used, requirements_to_expose
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

MOST_LINES = 200
"""Most mistakes that are reported of one scene."""

MOST_BASES = 8
"""Most scenes that may be laid over one another."""

_Layer = tuple[str, dict[str, Any]]
_Place = tuple[str | int, ...]


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
    layers = _layers(content, where, file, ())
    return _build(
        layers,
        name=file.name,
        directory=file.parent,
        kept={},
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
        raise InputError(mistake(name, "SCENE", "is empty", "use a frame that simimg wrote"))
    folder = Path(directory)
    lines: list[str] = []
    kept: dict[str, InputFile] = {}
    for index, (file_name, sha256, content) in enumerate(files):
        digest = hashlib.sha256(content).hexdigest()
        if digest == sha256 and index > 0:
            kept[file_name] = InputFile(file_name, sha256, content, None)
        elif digest != sha256 and index > 0 and not content:
            try:
                kept[file_name] = _fetch(file_name, sha256, folder)
            except UnusableFileError as problem:
                lines.append(mistake(name, f"SCENE {shown(file_name)}", problem.what, problem.mend))
        elif digest != sha256:
            lines.append(
                mistake(
                    name,
                    f"SCENE {shown(file_name)}",
                    "is damaged: the content does not fit its sha256",
                    "use an undamaged copy of the frame",
                )
            )
    if lines:
        raise InputError(*lines)
    document = parse_toml(files[0][2], name)
    if "base" in document:
        raise InputError(
            mistake(name, "base", "stands in the scene of a frame", "use a frame that simimg wrote")
        )
    return _build(
        [(name, document)],
        name=Path(files[0][0]).name or "scene.toml",
        directory=folder,
        kept=kept,
        overrides=overrides,
        without=without,
    )


def replace(scene: Scene, changes: Mapping[str, Any]) -> Scene:
    """The same scene with some keys changed.

    Parameters
    ----------
    scene : Scene
    changes : mapping
        Dotted keys to values as in a scene file: ``{"air.seeing": "0.5 arcsec"}``. None takes a
        key or a table away.

    Raises
    ------
    InputError
        As `load_scene`.
    """
    document = scene.document
    lines: list[str] = []
    for name, value in changes.items():
        try:
            change(document, parse_path(name), _plain_value(value))
        except MisplacedKeyError as error:
            lines.append(mistake(scene.name, name, error.what, error.mend))
    if lines:
        raise InputError(*lines)
    return _build(
        [(scene.name, document)],
        name=scene.name,
        directory=scene.directory,
        kept=dict(scene.inputs),
        overrides=(),
        without=(),
    )


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
    item = getattr(value, "tolist", None)
    if callable(item):
        return _plain_value(item())
    raise MisplacedKeyError(f"cannot be {shown(value)}", "give text, a number, a list or a table")


def _fetch(name: str, sha256: str, folder: Path) -> InputFile:
    """Read from disk a file that a record holds only by its hash."""
    try:
        found = read_input(name, folder)
    except UnusableFileError as problem:
        raise UnusableFileError(
            f"is kept in the frame by its hash only, and on disk: {problem.what}",
            f"put the file of sha256 {sha256[:64]} beside the frame",
        ) from None
    if found.sha256 != sha256:
        raise UnusableFileError(
            "is kept in the frame by its hash only, and the file on disk is another",
            f"put the file of sha256 {sha256[:64]} beside the frame",
        )
    return found


def _layers(content: bytes, where: str, file: Path, above: tuple[Path, ...]) -> list[_Layer]:
    """The document and those it is laid over, topmost first."""
    document = parse_toml(content, where)
    if "base" not in document:
        return [(where, document)]
    base = document.pop("base")
    here = (*above, file.resolve())
    good = 'write base = "station.toml", a path relative to this file'
    if not isinstance(base, str) or not base.strip() or not base.isprintable():
        raise InputError(mistake(where, "base", f"must be a path, got {shown(base)}", good))
    under = file.parent / base
    if under.resolve() in here:
        raise InputError(mistake(where, "base", "leads back to a scene above it", "break the ring"))
    if len(here) >= MOST_BASES:
        raise InputError(
            mistake(
                where, "base", "too many bases", f"lay at most {MOST_BASES} scenes over another"
            )
        )
    try:
        below = read_bounded(under, LARGEST_SCENE)
    except UnusableFileError as problem:
        raise InputError(
            mistake(where, "base", f"{problem.what}: {shown(base)}", problem.mend)
        ) from None
    lower = _layers(below, str(under), under, here)
    folder = os.path.dirname(base)
    if folder:
        for _, one in lower:
            _move_files(one, folder)
    return [(where, document), *lower]


def _move_files(document: dict[str, Any], folder: str) -> None:
    """Make the paths in a base relative to the scene that is laid over it."""
    for place, name in list(files_named(document)):
        holder: Any = document
        for step in place[:-1]:
            holder = holder[step]
        holder[place[-1]] = os.path.join(folder, name)


def _build(
    layers: list[_Layer],
    *,
    name: str,
    directory: Path | None,
    kept: Mapping[str, InputFile],
    overrides: Sequence[str],
    without: Sequence[str],
) -> Scene:
    """Check the merged document, read its files, and make the scene."""
    document: dict[str, Any] = {}
    for _, one in reversed(layers):
        document = overlay(document, one)
    lines = take_away(document, without)
    changed, more = apply_overrides(document, overrides)
    lines.extend(more)

    def line(place: _Place, what: str, mend: str) -> str:
        source = _source(place, layers, changed)
        return mistake(source, _shown_place(place), what, mend)

    scene = None
    try:
        scene = Scene.model_validate(document)
    except ValidationError as error:
        for detail in error.errors(include_url=False, include_input=False):
            context = detail["ctx"]
            lines.append(line(detail["loc"], context["what"], context["mend"]))
    inputs: dict[str, InputFile] = {}
    for place, file_name in files_named(document):
        if file_name in kept or file_name in inputs:
            inputs[file_name] = kept.get(file_name) or inputs[file_name]
            continue
        try:
            inputs[file_name] = read_input(file_name, directory or Path())
        except UnusableFileError as problem:
            if file_name.strip() and file_name.isprintable():
                lines.append(line(place, f"{problem.what}: {shown(file_name)}", problem.mend))
    if lines or scene is None:
        if len(lines) > MOST_LINES:
            rest = len(lines) - MOST_LINES
            lines = [*lines[:MOST_LINES], mistake(name, "", f"{rest} more mistakes", "mend these")]
        raise InputError(*lines)
    return scene.origin(document, name=name, directory=directory, inputs=inputs)


def _source(place: _Place, layers: list[_Layer], changed: Sequence[_Place]) -> str:
    """Where a mistake stands: an override, or the topmost file that gives the key."""
    for path in changed:
        if place[: len(path)] == path:
            return f"{layers[0][0]} (--set)"
    for where, document in layers:
        if _has(document, place):
            return where
    return layers[0][0]


def _has(document: Any, place: _Place) -> bool:
    here: Any = document
    for step in place:
        known = range(len(here)) if isinstance(here, list) else here
        if not isinstance(here, Mapping | list) or step not in known:
            return False
        here = here[step]
    return True


def _shown_place(place: _Place) -> str:
    """A place as a dotted key, short and harmless to print."""
    words = []
    for step in place:
        word = str(step)
        plain = len(word) <= 60 and word.isprintable() and word == word.strip() and word
        words.append(word if plain else shown(word))
    return ".".join(words)
