"""What a scene leaves unsaid: the defaults it uses, and what it lacks for a frame."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from simimg.errors import mistake
from simimg.scene.model import Scene
from simimg.scene.table import MANY, REPEATED, Table


def requirements_to_expose(scene: Scene) -> list[str]:
    """One line for each key that an exposure needs and the scene lacks.

    Needed are ``camera.pixels``, one route to the pixel scale, ``exposure.time`` unless every
    signal is given in electrons and nothing moves, and ``exposure.start`` for an orbit.
    """
    lines: list[str] = []
    if scene.camera is None or scene.camera.pixels is None:
        lines.append(
            mistake(
                scene.where,
                "camera.pixels",
                "is required to expose and missing",
                "add pixels = [256, 256] (columns, rows) to [camera]",
            )
        )
    if scene.pixel_scale is None:
        lines.append(
            mistake(
                scene.where,
                "camera.pixel_scale",
                "a pixel scale is required to expose and missing",
                'add pixel_scale = "0.12 arcsec", or pixel_size with telescope.focal_length',
            )
        )
    timed = next(_signals_by_time(scene), None)
    if timed is not None and (scene.exposure is None or scene.exposure.time is None):
        lines.append(
            mistake(
                scene.where,
                "exposure.time",
                f"is required to expose and missing, because of {timed}",
                'add time = "30 s" to [exposure], or give every signal in electrons',
            )
        )
    orbit = next((index for index, one in enumerate(scene.pair) if one.orbit is not None), None)
    if orbit is not None and (scene.exposure is None or scene.exposure.start is None):
        lines.append(
            mistake(
                scene.where,
                "exposure.start",
                f"is required to expose and missing, because of pair.{orbit}.orbit",
                'add start = "2026-04-12T03:00:00" (UTC) to [exposure]',
            )
        )
    return lines


def _signals_by_time(scene: Scene) -> Iterator[str]:
    """The keys whose signal or trail grows with the exposure time."""
    if scene.sky is not None and scene.sky.surface_brightness is not None:
        yield "sky.surface_brightness"
    if scene.camera is not None and scene.camera.dark_current > 0.0:
        yield "camera.dark_current"
    for kind in MANY:
        for index, one in enumerate(getattr(scene, kind)):
            if kind == "catalogue":
                if "electrons" not in one.columns:
                    yield f"the magnitudes of catalogue.{index}"
            elif one.electrons is None:
                yield f"{kind}.{index}.{'magnitudes' if kind == 'pair' else 'magnitude'}"
            elif one.motion is not None:
                yield f"{kind}.{index}.motion"
    if scene.pointing is not None:
        if scene.pointing.drift is not None:
            yield "pointing.drift"
        if scene.pointing.rotation_rate != 0.0:
            yield "pointing.rotation_rate"


def defaults_used(scene: Scene) -> list[tuple[str, str, str]]:
    """Every default that stands in for an absent key.

    Returns
    -------
    list of (key, value, meaning)
        The value as a scene would have it, and what it means for the frame. Objects of one kind
        share a row, ``star.*.east``, where there are several.
    """
    document = scene.document
    rows = list(_absent(scene, document, ""))
    for name in Scene.model_fields:
        value = getattr(scene, name)
        if isinstance(value, Table):
            rows.extend(_within(value, document[name], f"{name}."))
    for kind in REPEATED:
        rows.extend(_of_objects(scene, document, kind))
    return rows


def _within(table: Table, given: Mapping[str, Any], prefix: str) -> Iterator[tuple[str, str, str]]:
    """Defaults of a table and of the small tables inside it."""
    yield from _absent(table, given, prefix)
    for name, value in table:
        if isinstance(value, Table):
            yield from _within(value, given[name], f"{prefix}{name}.")
        elif isinstance(value, tuple) and value and isinstance(value[0], Table):
            for index, one in enumerate(value):
                yield from _within(one, given[name][index], f"{prefix}{name}.{index}.")


def _absent(table: Table, given: Mapping[str, Any], prefix: str) -> Iterator[tuple[str, str, str]]:
    for name, field in type(table).model_fields.items():
        extra = field.json_schema_extra
        if name in given or not isinstance(extra, dict) or not extra.get("absent"):
            continue
        unless = extra.get("unless")
        if isinstance(unless, list) and any(other in given for other in unless):
            continue
        when = extra.get("when")
        if isinstance(when, list) and when and not any(given.get(str(other)) for other in when):
            continue
        absent = str(extra["absent"])
        if prefix == "band." and name == "system":
            absent = getattr(table, "resolved_system", absent)
        yield f"{prefix}{name}", absent, str(extra["meaning"])


def _of_objects(
    scene: Scene, document: Mapping[str, Any], kind: str
) -> Iterator[tuple[str, str, str]]:
    tables = getattr(scene, kind)
    if len(tables) == 1:
        yield from _within(tables[0], document[kind][0], f"{kind}.0.")
        return
    counts: dict[tuple[str, str, str], int] = {}
    for table, given in zip(tables, document.get(kind, []), strict=True):
        for row in _within(table, given, f"{kind}.*."):
            counts[row] = counts.get(row, 0) + 1
    for (name, value, meaning), count in counts.items():
        yield name, value, f"{meaning} ({count} of {len(tables)})"
