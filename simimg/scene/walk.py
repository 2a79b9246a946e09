"""The keys of a scene, one by one, as its models declare them: for the schema and the reference."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, get_args

from pydantic.fields import FieldInfo

from simimg.scene.keys import Reader
from simimg.scene.table import Table


@dataclass(frozen=True)
class KeyOfTable:
    """One key of a table.

    Attributes
    ----------
    name : str
    description : str
        What it means.
    reader : Reader or None
        Of its value; None for a table.
    table : type of Table or None
        The table that it holds, itself or many times over.
    many : bool
        Whether it is an array of tables.
    required : bool
    absent, meaning : str
        The default as a user would write it, and what it means; empty for none to tell.
    """

    name: str
    description: str
    reader: Reader | None
    table: type[Table] | None
    many: bool
    required: bool
    absent: str
    meaning: str


def keys_of(table: type[Table]) -> Iterator[KeyOfTable]:
    """The keys of a table, in the order in which its model has them."""
    for name, field in table.model_fields.items():
        extra = field.json_schema_extra
        told = extra if isinstance(extra, dict) else {}
        held = _table(field.annotation)
        yield KeyOfTable(
            name=name,
            description=field.description or "",
            reader=_reader(field),
            table=held,
            many=held is not None and held.heading.startswith("[["),
            required=field.is_required(),
            absent=str(told.get("absent", "")),
            meaning=str(told.get("meaning", "")),
        )


def tables_of(root: type[Table]) -> Iterator[type[Table]]:
    """A table and every table below it, each once, parents first."""
    waiting, seen = [root], set()
    while waiting:
        one = waiting.pop(0)
        if one in seen:
            continue
        seen.add(one)
        yield one
        # Parts of a table come before the next table.
        waiting[:0] = [key.table for key in keys_of(one) if key.table is not None]


def _reader(field: FieldInfo) -> Reader | None:
    return next((one for one in field.metadata if isinstance(one, Reader)), None)


def _table(annotation: Any) -> type[Table] | None:
    """The table in an annotation such as ``Air | None`` or ``tuple[Star, ...]``."""
    if isinstance(annotation, type) and issubclass(annotation, Table):
        return annotation
    return next((held for one in get_args(annotation) if (held := _table(one))), None)
