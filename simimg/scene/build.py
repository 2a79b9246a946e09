"""From layered documents to a checked scene, with every mistake told at once."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from simimg.errors import InputError, mistake
from simimg.quantities import shown
from simimg.scene.inputs import InputFile, UnusableFileError, files_named, read_bounded
from simimg.scene.layers import apply_overrides, overlay, take_away
from simimg.scene.model import Scene
from simimg.scene.text import LARGEST_SCENE, parse_toml

MOST_LINES = 200
"""Most mistakes that are reported of one scene."""

MOST_BASES = 8
"""Most scenes that may be laid over one another."""

Layer = tuple[str, dict[str, Any]]
"""Name of a file in messages, and its document."""

Place = tuple[str | int, ...]
"""Steps from the top of a document to a key."""


def read_layers(
    content: bytes, where: str, file: Path, above: tuple[Path, ...] = ()
) -> list[Layer]:
    """The document of a scene file and those it is laid over, topmost first.

    Parameters
    ----------
    content : bytes
        The file's content.
    where : str
        Its name in messages.
    file : Path
        Its place, which `base` is relative to.
    above : tuple of Path, optional
        The files that are laid over it, resolved.

    Raises
    ------
    InputError
        A mistake of syntax, or a base that cannot be read.
    """
    document = parse_toml(content, where)
    if "base" not in document:
        return [(where, document)]
    base = document.pop("base")
    here = (*above, file.resolve())
    if not isinstance(base, str) or not base.strip() or not base.isprintable():
        raise _base_error(
            where,
            f"must be the path of a scene, got {shown(base)}",
            'write base = "station.toml", relative to this file',
        )
    under = file.parent / base
    if len(base) > 1000:
        raise _base_error(where, "is too long for a path", "write a shorter path")
    if under.resolve() in here:
        raise _base_error(where, f"leads back to itself: {shown(base)}", "name another scene")
    if len(here) >= MOST_BASES:
        raise _base_error(where, "is one base too many", f"stack at most {MOST_BASES} scenes")
    try:
        below = read_bounded(under, LARGEST_SCENE)
    except UnusableFileError as problem:
        raise _base_error(where, f"{problem.what}: {shown(base)}", problem.mend) from None
    lower = read_layers(below, str(under), under, here)
    folder = os.path.dirname(base)
    if folder:
        for _, one in lower:
            _move_files(one, folder)
    return [(where, document), *lower]


def _base_error(where: str, what: str, mend: str) -> InputError:
    return InputError(mistake(where, "base", what, mend))


def _move_files(document: dict[str, Any], folder: str) -> None:
    """Make the paths in a base relative to the scene that is laid over it."""
    for place, name in list(files_named(document)):
        holder: Any = document
        for step in place[:-1]:
            holder = holder[step]
        holder[place[-1]] = os.path.join(folder, name)


def build(
    layers: Sequence[Layer],
    *,
    name: str,
    directory: Path,
    find: Callable[[str], InputFile],
    overrides: Sequence[str] = (),
    without: Sequence[str] = (),
) -> Scene:
    """Lay the documents over one another, check the result, and read the files it names.

    Parameters
    ----------
    layers : sequence of Layer
        Topmost first.
    name : str
        The scene's file name.
    directory : Path
        Folder that paths in the scene are relative to.
    find : callable
        Gives the file of a path in the scene; raises `UnusableFileError`.
    overrides, without : sequence of str, optional
        As in `simimg.scene.file.load_scene`.

    Raises
    ------
    InputError
        One line for each mistake.
    """
    document: dict[str, Any] = {}
    for _, one in reversed(layers):
        document = overlay(document, one)
    lines = take_away(document, without)
    changed, more = apply_overrides(document, overrides)
    lines.extend(more)

    def line(place: Place, what: str, mend: str) -> str:
        return mistake(_source(place, layers, changed), _dotted(place), what, mend)

    scene = None
    try:
        scene = Scene.model_validate(document)
    except ValidationError as error:
        for detail in error.errors(include_url=False, include_input=False):
            context = detail["ctx"]
            lines.append(line(detail["loc"], context["what"], context["mend"]))
    inputs: dict[str, InputFile] = {}
    for place, path in files_named(document):
        # The model has told already of what is no path at all.
        if path in inputs or not path.strip() or not path.isprintable() or len(path) > 1000:
            continue
        try:
            inputs[path] = find(path)
        except UnusableFileError as problem:
            lines.append(line(place, f"{problem.what}: {shown(path)}", problem.mend))
    if lines or scene is None:
        if len(lines) > MOST_LINES:
            rest = f"{len(lines) - MOST_LINES} more mistakes"
            lines = [*lines[:MOST_LINES], mistake(layers[0][0], "", rest, "mend these first")]
        raise InputError(*lines)
    return scene.made_from(
        document, name=name, where=layers[0][0], directory=directory, inputs=inputs
    )


def _source(place: Place, layers: Sequence[Layer], changed: Sequence[Place]) -> str:
    """Where a mistake stands: an override, or the topmost file that gives the key."""
    top = layers[0][0]
    if any(place[: len(path)] == path for path in changed):
        return f"{top} (--set)"
    for where, document in layers:
        if _has(document, place):
            return where
    return f"{top} (--set)" if any(path[: len(place)] == place for path in changed) else top


def _has(document: Any, place: Place) -> bool:
    here = document
    for step in place:
        known: Any = range(len(here)) if isinstance(here, list) else here
        if not isinstance(here, Mapping | list) or step not in known:
            return False
        here = here[step]  # type: ignore[index]
    return True


def _dotted(place: Place) -> str:
    """A place as a dotted key, short and harmless to print."""
    words = []
    for step in place:
        word = str(step)
        plain = len(word) <= 60 and word.isprintable() and word == word.strip() and word
        words.append(word if plain else shown(word))
    return ".".join(words)
