"""Laying documents over one another: a base station, changes of single keys, tables taken away.

Where a layer gives one of several keys that exclude each other (a seeing, say), those that the
layers below gave in its stead (an image quality) are dropped.
"""

from __future__ import annotations

import copy
from collections.abc import Mapping, MutableMapping, Sequence
from typing import Any

from simimg.errors import mistake
from simimg.quantities import shown
from simimg.scene.colours import ABROAD, COLOURS, PAIR_COLOURS
from simimg.scene.keys import Choice, FileName, Text, nearest
from simimg.scene.model import Scene
from simimg.scene.paths import MisplacedKeyError, Path, dotted, parse_path
from simimg.scene.places import ROUTES
from simimg.scene.table import REPEATED, Table, table_types
from simimg.scene.telescope import PUPIL_PARTS
from simimg.scene.text import parse_value

_RIVALS: Mapping[str, tuple[tuple[tuple[str, ...], ...], ...]] = {
    "telescope": ((("pupil",), PUPIL_PARTS),),
    "telescope.vanes": ((("count", "angle"), ("angles",)),),
    "air": ((("seeing",), ("image_quality",)), (("airmass",), ("altitude",))),
    "band": ((("name",), ("centre", "width"), ("file",)),),
    "camera": ((("pixel_scale",), ("pixel_size",)),),
    "sky": ((("surface_brightness",), ("electrons",)),),
    "exposure": ((("time",), ("frame_time", "substeps")),),
    "pair": (
        (("magnitudes", *ABROAD), ("electrons",)),
        (("separation", "position_angle"), ("orbit",)),
        tuple((name,) for name in PAIR_COLOURS),
        ROUTES,
    ),
    **dict.fromkeys(
        ("star", "galaxy", "disc", "ring", "picture"),
        (
            (("magnitude", *ABROAD), ("electrons",)),
            tuple((name,) for name in COLOURS),
            ROUTES,
        ),
    ),
}


def overlay(
    below: Mapping[str, Any], above: Mapping[str, Any], *, kind: str = ""
) -> dict[str, Any]:
    """One document over another: tables merge key by key, all else is replaced.

    `kind` is the dotted name of the table that the two are of, empty for whole documents.
    """
    merged = copy.deepcopy(dict(below))
    for name, value in above.items():
        _displace(merged, kind, name, given=above)
        under = merged.get(name)
        if isinstance(value, Mapping) and isinstance(under, dict):
            merged[name] = overlay(under, value, kind=f"{kind}.{name}".lstrip("."))
        else:
            merged[name] = copy.deepcopy(value)
    return merged


def _displace(
    table: MutableMapping[str, Any], kind: str, name: str, *, given: Mapping[str, Any]
) -> None:
    """Drop the keys that `name` excludes, unless the same layer gives them too."""
    for group in _RIVALS.get(kind, ()):
        if any(name in members for members in group):
            for members in group:
                for rival in members:
                    if name not in members and rival not in given:
                        table.pop(rival, None)


def change(document: dict[str, Any], path: Path, value: Any) -> None:
    """Set one key of a document in place; `None` takes it away.

    Raises
    ------
    MisplacedKeyError
        If the path leads through something that is not there or is no table.
    """
    here: Any = document
    for depth, step in enumerate(path[:-1]):
        here = _step_into(here, path[: depth + 1], step)
    last = path[-1]
    if isinstance(here, list):
        index = _index(here, path, last)
        if value is None:
            del here[index]
        else:
            here[index] = value
    elif isinstance(here, dict) and isinstance(last, str):
        if value is None:
            here.pop(last, None)
        else:
            _displace(here, _kind(path), last, given={})
            here[last] = value
    else:
        raise MisplacedKeyError("is not inside a table", f"set {dotted(path[:-1])} itself")


def _kind(path: Path) -> str:
    """Dotted name of the table that the last step of a path is a key of."""
    return ".".join(step for step in path[:-1] if isinstance(step, str))


def _step_into(here: Any, path: Path, step: str | int) -> Any:
    if isinstance(here, list):
        return here[_index(here, path, step)]
    if isinstance(here, dict) and isinstance(step, str):
        if step in REPEATED and step not in here:
            raise MisplacedKeyError(
                f"there is no [[{step}]] in the scene", f"write a [[{step}]] there"
            )
        if step not in here:
            _displace(here, _kind(path), step, given={})
            here[step] = {}
        return here[step]
    raise MisplacedKeyError("is not inside a table", f"set {dotted(path[:-1])} itself")


def _index(here: list[Any], path: Path, step: str | int) -> int:
    before = dotted(path[: len(path) - 1])
    if not isinstance(step, int):
        raise MisplacedKeyError(
            f"{before} is an array, of which {shown(step)} names none",
            f"write {before}.0 for the first",
        )
    if step >= len(here):
        known = f"{before}.0" if len(here) == 1 else f"{before}.0 to {before}.{len(here) - 1}"
        raise MisplacedKeyError(f"there are only {len(here)} of {before}", f"write {known}")
    return step


def apply_overrides(
    document: dict[str, Any], overrides: Sequence[str]
) -> tuple[list[Path], list[str]]:
    """Apply ``KEY=VALUE`` changes in place.

    Returns
    -------
    paths, lines : list of tuple, list of str
        The keys that were changed, and one line for each change that could not be made.
    """
    paths: list[Path] = []
    lines: list[str] = []
    for text in overrides:
        name, equals, written = text.partition("=")
        try:
            if not equals:
                raise MisplacedKeyError(
                    "has no value", "write KEY=VALUE, as telescope.aperture=2 m"
                )
            path = parse_path(name)
            if path[0] == "base":
                raise MisplacedKeyError("cannot be changed", "write base in the scene file")
            value = parse_value(written)
            if not isinstance(value, str) and _wants_text(path):
                value = written.strip()
            change(document, path, value)
        except MisplacedKeyError as error:
            lines.append(mistake("--set", _short(name), error.what, error.mend))
        else:
            paths.append(path)
    return paths, lines


def _short(name: str) -> str:
    name = name.strip()
    plain = len(name) <= 60 and name.isprintable() and name
    return name if plain else shown(name)


def _wants_text(path: Path) -> bool:
    """True where the key holds text, so that ``label=7`` means the text 7."""
    table: type[Table] | None = Scene
    for step in path[:-1]:
        if isinstance(step, int) or table is None:
            continue
        table = next(
            (one for one in table_types() if one.heading.strip("[]").split(".")[-1] == step), None
        )
    reader = table.reader(str(path[-1])) if table is not None else None
    return isinstance(reader, Text | FileName | Choice)


_PARTS = ("vanes", "wavefront", "segments", "field")
"""Tables of the telescope that may be taken away by their own names."""

_NEEDED = ("telescope", "band")


def take_away(document: dict[str, Any], without: Sequence[str]) -> list[str]:
    """Take tables out of a document in place; one line for each that is not a table."""
    lines: list[str] = []
    known = [name for name in Scene.model_fields if name not in ("title", *_NEEDED)]
    for name in without:
        word = name.strip().strip("[]")
        part = word.removeprefix("telescope.")
        if word in _NEEDED:
            lines.append(mistake("--without", word, "cannot be left out of a scene", "leave it in"))
        elif part in _PARTS:
            telescope = document.get("telescope")
            if isinstance(telescope, dict):
                telescope.pop(part, None)
        elif word not in known:
            lines.append(
                mistake(
                    "--without",
                    _short(name),
                    "is not a table of a scene",
                    nearest(word, [*known, *_PARTS]),
                )
            )
        else:
            document.pop(word, None)
    return lines
