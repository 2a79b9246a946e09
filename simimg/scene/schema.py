"""The JSON schema of a scene file, by which an editor completes and checks what is written.

Made from the models, as a user writes a scene: a quantity is text with its unit, a bare number only
where the kind has no dimension, and an unknown key is a mistake. What hangs on several keys at once
(one way to a place, one to a brightness) the schema does not know; ``simimg check`` does. The
dialect is draft 2020-12.
"""

from __future__ import annotations

from functools import singledispatch
from typing import Any

from simimg.scene.draw import FORMS, DrawnKeys
from simimg.scene.electronics import OfAmplifiers
from simimg.scene.header import Header
from simimg.scene.keys import (
    Choice,
    FileName,
    Flag,
    Instant,
    Quantity,
    Reader,
    Several,
    Text,
    Whole,
)
from simimg.scene.model import Scene
from simimg.scene.mosaic import DetectorName, FocalOffset
from simimg.scene.objects import Names
from simimg.scene.readers import EachAxis, RatioOrFile, UpTo
from simimg.scene.study import MOST_VARIED, VariedKeys
from simimg.scene.table import Table
from simimg.scene.telescope import Obstruction
from simimg.scene.walk import KeyOfTable, keys_of, tables_of
from simimg.scene.wavefront import LARGEST_TERM, Terms
from simimg.units import ANGLES, KINDS

Schema = dict[str, Any]

DIALECT = "https://json-schema.org/draft/2020-12/schema"

_NUMBER = r"[+\-\u2212]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+\-]?[0-9]+)?"
_UNIT = r"\s*[^\s0-9.].*"
_SEXAGESIMAL = r"[+\-\u2212]?[0-9]{1,3}\s?[:hd\u00b0 ].*"


def scene_schema() -> Schema:
    """The schema of a scene file.

    Returns
    -------
    dict
        As JSON has it: dictionaries, lists, text, numbers.
    """
    definitions = {_name(table): _table(table) for table in tables_of(Scene) if table is not Scene}
    root = _table(Scene)
    root["properties"] = {
        "base": {
            "type": "string",
            "minLength": 1,
            "description": "Another scene file, over which this one is laid; relative to it.",
        },
        **root["properties"],
    }
    return {
        "$schema": DIALECT,
        "title": "A scene of simimg",
        "description": _summary(Scene),
        **{name: value for name, value in root.items() if name != "description"},
        # A scene over another may leave to it what it does not change.
        "if": {"not": {"required": ["base"]}},
        "then": _needs(Scene),
        "$defs": definitions,
    }


def _name(table: type[Table]) -> str:
    return table.__name__


def _summary(table: type[Table]) -> str:
    return (table.__doc__ or "").strip().split("\n")[0]


def _table(table: type[Table]) -> Schema:
    """What a table may hold; of one that may stand many times also what it must hold."""
    made: Schema = {
        "type": "object",
        "description": _summary(table),
        "properties": {one.name: _key(one) for one in keys_of(table)},
        "additionalProperties": False,
    }
    # An array of tables is replaced whole by a scene that is laid over it.
    if table.heading.startswith("[[") and (needs := _needs(table)):
        made["allOf"] = [needs]
    return made


def _needs(table: type[Table]) -> Schema:
    """The required keys of a table, and of the tables in it where they are given."""
    required = [one.name for one in keys_of(table) if one.required]
    below = {
        one.name: needs
        for one in keys_of(table)
        if one.table is not None and not one.many and (needs := _needs(one.table))
    }
    made: Schema = {}
    if required:
        made["required"] = required
    if below:
        made["properties"] = below
    return made


def _key(one: KeyOfTable) -> Schema:
    words = [one.description]
    if one.reader is not None:
        words.append(f"{one.reader.range[0].upper()}{one.reader.range[1:]}.")
    if one.absent:
        words.append(f"Absent: {one.absent}" + (f", {one.meaning}." if one.meaning else "."))
    description = " ".join(words)
    if one.table is not None:
        reference: Schema = {"$ref": f"#/$defs/{_name(one.table)}"}
        if one.many:
            return {"description": description, "type": "array", "items": reference}
        return {"description": description, **reference}
    if one.reader is None:
        raise TypeError(f"{one.name} has neither a reader nor a table")
    return {"description": description, **value_schema(one.reader)}


@singledispatch
def value_schema(reader: Reader) -> Schema:
    """What a reader accepts, as a schema.

    Raises
    ------
    TypeError
        A kind of reader that has none yet: write one below.
    """
    raise TypeError(f"simimg/scene/schema.py has no schema for the reader {type(reader).__name__}")


@value_schema.register
def _(reader: Quantity) -> Schema:
    form = KINDS[reader.kind]
    if form.usual:
        ways = [rf"^\s*{_NUMBER}{_UNIT}$"]
        if form.units is ANGLES:
            ways.append(rf"^\s*{_SEXAGESIMAL}$")
        if len(ways) == 1:
            return {"type": "string", "pattern": ways[0]}
        return {"type": "string", "anyOf": [{"pattern": way} for way in ways]}
    number: Schema = {"type": "number"}
    for name, bound in (
        ("minimum", reader.at_least),
        ("exclusiveMinimum", reader.above),
        ("maximum", reader.at_most),
        ("exclusiveMaximum", reader.below),
    ):
        if bound is not None:
            number[name] = float(bound)
    text = {"type": "string", "pattern": rf"^\s*{_NUMBER}(?:{_UNIT})?$"}
    return {"anyOf": [number, text]}


@value_schema.register
def _(_reader: Obstruction) -> Schema:
    return {
        "anyOf": [
            {"type": "number", "minimum": 0.0, "exclusiveMaximum": 1.0},
            {"type": "string", "pattern": rf"^\s*{_NUMBER}(?:{_UNIT})?$"},
        ]
    }


@value_schema.register
def _(reader: Whole) -> Schema:
    return {"type": "integer", "minimum": reader.at_least, "maximum": reader.at_most}


@value_schema.register
def _(_reader: Text) -> Schema:
    return {"type": "string", "pattern": r"\S"}


@value_schema.register
def _(reader: Choice) -> Schema:
    return {"enum": list(reader.words)}


@value_schema.register
def _(_reader: Flag) -> Schema:
    return {"type": "boolean"}


@value_schema.register
def _(_reader: FileName) -> Schema:
    return {"type": "string", "pattern": r"\S", "maxLength": 1000}


@value_schema.register
def _(_reader: Instant) -> Schema:
    return {"type": "string", "pattern": r"^\s*[0-9]{4}-?[0-9]{2}-?[0-9]{2}", "maxLength": 40}


@value_schema.register
def _(reader: Several) -> Schema:
    return _array(reader.item, reader.count, reader.count)


@value_schema.register
def _(reader: UpTo) -> Schema:
    return _array(reader.item, 1, reader.most)


@value_schema.register
def _(reader: EachAxis) -> Schema:
    return {"anyOf": [value_schema(reader.item), _array(reader.item, 2, 2)]}


@value_schema.register
def _(reader: OfAmplifiers) -> Schema:
    return {"anyOf": [_array(reader.item, count, count) for count in (2, 4)]}


@value_schema.register
def _(reader: RatioOrFile) -> Schema:
    return {"anyOf": [value_schema(reader.ratio), value_schema(reader.file)]}


@value_schema.register
def _(_reader: FocalOffset) -> Schema:
    return {"anyOf": [{"type": "number"}, {"type": "string", "pattern": rf"^\s*{_NUMBER}"}]}


@value_schema.register
def _(_reader: DetectorName) -> Schema:
    return {"type": "string", "pattern": r"^\s*[A-Za-z][A-Za-z0-9_\-]{0,19}\s*$"}


@value_schema.register
def _(reader: Terms) -> Schema:
    return {
        "type": "object",
        "propertyNames": {"enum": [str(index) for index in range(2, LARGEST_TERM + 1)]},
        "additionalProperties": value_schema(reader.path),
    }


@value_schema.register
def _(reader: Names) -> Schema:
    name = {"type": "string", "pattern": r"\S", "maxLength": 200}
    return {
        "type": "object",
        "properties": dict.fromkeys(reader.known, name),
        "additionalProperties": False,
    }


@value_schema.register
def _(reader: Header) -> Schema:
    return {
        "type": "object",
        "maxProperties": reader.most,
        "additionalProperties": {"type": ["string", "number", "boolean"]},
    }


@value_schema.register
def _(_reader: DrawnKeys) -> Schema:
    values: Schema = {"type": "array", "minItems": 1}
    ways: Schema = dict.fromkeys(FORMS, values)
    ways |= {
        "isotropic": {"const": True},
        "table": {"type": "string", "minLength": 1},
        "column": {"type": "string", "minLength": 1},
    }
    return {
        "type": "object",
        "additionalProperties": {
            "type": "object",
            "properties": ways,
            "additionalProperties": False,
            "oneOf": [{"required": [name]} for name in FORMS],
        },
    }


@value_schema.register
def _(_reader: VariedKeys) -> Schema:
    value: Schema = {"type": ["string", "number", "boolean"]}
    steps = {
        "type": "object",
        "properties": {
            "from": value,
            "to": value,
            "count": {"type": "integer", "minimum": 1},
            "spacing": {"enum": ["linear", "log"]},
        },
        "required": ["from", "to", "count"],
        "additionalProperties": False,
    }
    return {
        "type": "object",
        "minProperties": 1,
        "maxProperties": MOST_VARIED,
        "additionalProperties": {
            "anyOf": [{"type": "array", "minItems": 1, "items": value}, steps]
        },
    }


def _array(item: Reader, least: int, most: int) -> Schema:
    return {"type": "array", "items": value_schema(item), "minItems": least, "maxItems": most}
