"""The reference of every key of a scene, as Markdown, made from the models."""

from __future__ import annotations

from simimg.scene.model import Scene
from simimg.scene.table import Table
from simimg.scene.walk import KeyOfTable, keys_of, tables_of

_OPENING = """\
# Every key of a scene

Made from the models by `python scenes/make_keys.py`: edit those, not this page.

A scene is a TOML file. A value with a dimension is text with its unit (`"0.9 arcsec"`); magnitudes,
ratios, pixels and Julian years may be bare numbers. Paths are relative to the scene file.
`base = "station.toml"`, at the top of a file, lays the scene over another. `simimg check FILE`
lists the defaults that a scene uses, and `simimg check --schema` prints what is below as a JSON
schema, by which an editor completes and checks a scene.
"""

_EMPTY = "-"


def key_reference() -> str:
    """The page, table by table in the order of a scene, with a line for each key."""
    sections = [_OPENING, *(_section(table) for table in tables_of(Scene))]
    return "\n".join(sections)


def _section(table: type[Table]) -> str:
    heading = f"`{table.heading}`" if table.heading else "The scene itself"
    summary = (table.__doc__ or "").strip().split("\n")[0]
    lines = [f"## {heading}", "", summary]
    if table.written:
        lines += ["", f"May be written in one line: `{table.written}`"]
    lines += ["", "| key | says | value | unless given |", "| --- | --- | --- | --- |"]
    lines += [_row(one) for one in keys_of(table)]
    return "\n".join(lines) + "\n"


def _row(one: KeyOfTable) -> str:
    cells = (f"`{one.name}`", one.description, _value(one), _default(one))
    return "| " + " | ".join(cell.replace("|", r"\|") for cell in cells) + " |"


def _value(one: KeyOfTable) -> str:
    if one.table is not None:
        return f"tables `{one.table.heading}`" if one.many else f"the table `{one.table.heading}`"
    if one.reader is None:
        raise TypeError(f"{one.name} has neither a reader nor a table")
    return f"{one.reader.range}, as `{one.reader.example}`"


def _default(one: KeyOfTable) -> str:
    if one.required:
        return "required"
    if not one.absent:
        return _EMPTY
    return f"{one.absent}: {one.meaning}" if one.meaning else one.absent
