"""TOML text and plain documents: nested dictionaries of text, numbers, booleans and lists.

Reading is by `tomllib`, with the size and the depth bounded. Writing is done here, so that the text
inside a frame depends on nothing but the document.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from datetime import date, datetime, time
from typing import Any

from simimg.errors import InputError, mistake
from simimg.quantities import shown

LARGEST_SCENE = 4 * 2**20
"""Largest scene file, in bytes."""

_DEEPEST = 12
_MOST_DOTS = 200
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_AT = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)\s*$")
_ASSIGNMENT = re.compile(r"\s*([A-Za-z0-9_.-]+)\s*=\s*(.*?)\s*(?:#.*)?$")


def parse_toml(content: bytes, where: str) -> dict[str, Any]:
    """Read a scene file's bytes.

    Parameters
    ----------
    content : bytes
        TOML in UTF-8, at most `LARGEST_SCENE` bytes.
    where : str
        Name of the file in messages.

    Returns
    -------
    dict
        Nested plain values; dates become ISO text.

    Raises
    ------
    InputError
        With the line of the first mistake of syntax.
    """
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        raise InputError(
            mistake(where, f"line {line}", "is not UTF-8 text", "save the file as UTF-8")
        ) from None
    for number, line_text in enumerate(text.split("\n"), start=1):
        # The parser takes time as the square of the number of parts of a dotted key.
        if line_text.count(".") > _MOST_DOTS:
            raise InputError(
                mistake(where, f"line {number}", "is too long", "write it as several lines")
            )
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(_syntax(text, str(error), where)) from None
    except RecursionError:
        raise InputError(mistake(where, "", "is nested too deeply", _FLAT)) from None
    except ValueError:
        raise InputError(
            mistake(where, "", "holds a number that cannot be read", "write a shorter number")
        ) from None
    plain: dict[str, Any] = _plain(document, where, 0)
    return plain


_FLAT = "write tables of at most one table inside another"


def _plain(value: Any, where: str, depth: int) -> Any:
    """The value with dates as text; refuses nesting that no scene needs."""
    if depth > _DEEPEST:
        raise InputError(mistake(where, "", "is nested too deeply", _FLAT))
    if isinstance(value, dict):
        return {name: _plain(inner, where, depth + 1) for name, inner in value.items()}
    if isinstance(value, list):
        return [_plain(inner, where, depth + 1) for inner in value]
    if isinstance(value, datetime | date | time):
        return value.isoformat()
    return value


def _syntax(text: str, message: str, where: str) -> str:
    """One mistake of syntax, with its line and the likely mend."""
    lines = text.split("\n")
    found = _AT.search(message)
    reason = _AT.sub("", message)
    number = int(found.group(1)) if found and found.group(1) else max(len(text.splitlines()), 1)
    line = lines[number - 1] if number <= len(lines) else ""
    mend = 'write lines such as key = "text", key = 1.5 or [table]'
    assignment = _ASSIGNMENT.match(line[:200])
    if "overwrite" in reason or "declare" in reason or "mutate" in reason:
        reason, mend = "gives a key or a table a second time", "keep one of them"
    elif assignment is not None:
        name, value = assignment.groups()
        inner = value.strip("\"'")
        if not value:
            mend = f'write {name} = "text" or {name} = 1.5'
        elif not isinstance(parse_value(value), str) or value != parse_value(value):
            mend = "close the bracket or the quotes that are open above this line"
        elif '"' not in inner and "'" not in inner:
            mend = f'write {name} = "{inner}" if text or a quantity is meant'
    reason = reason[:1].lower() + reason[1:120]
    return mistake(where, f"line {number}", f"is not TOML: {_safe(reason)}", _safe(mend))


def _safe(text: str) -> str:
    return "".join(c if c.isprintable() else ascii(c)[1:-1] for c in text)


def parse_value(text: str) -> Any:
    """Read the value of an override: TOML where it is TOML, else the text itself."""
    stripped = text.strip()
    if len(stripped) > LARGEST_SCENE or stripped.count(".") > _MOST_DOTS or "\n" in stripped:
        return stripped
    try:
        document = tomllib.loads(f"value = {stripped}")
        value = _plain(document["value"], "--set", 0)
    except (ValueError, RecursionError, InputError):
        return stripped
    return value


def to_toml(document: Mapping[str, Any]) -> str:
    """Write a document as TOML: plain keys first, then tables, then arrays of tables."""
    lines: list[str] = []
    _table(document, (), lines)
    return "\n".join(lines).strip("\n") + "\n"


def _is_tables(value: Any) -> bool:
    return isinstance(value, list) and bool(value) and all(isinstance(v, Mapping) for v in value)


def _table(table: Mapping[str, Any], path: tuple[str, ...], lines: list[str]) -> None:
    later: list[tuple[str, Any]] = []
    for name, value in table.items():
        # Small tables inside a table stay on their line, as people write them.
        if (isinstance(value, Mapping) or _is_tables(value)) and len(path) == 0:
            later.append((name, value))
        else:
            lines.append(f"{_key(name)} = {_value(value)}")
    for name, value in later:
        inner = (*path, name)
        heading = ".".join(_key(part) for part in inner)
        for one in value if isinstance(value, list) else [value]:
            lines.extend(("", f"[[{heading}]]" if isinstance(value, list) else f"[{heading}]"))
            _table(one, inner, lines)


def _key(name: str) -> str:
    return name if _BARE_KEY.fullmatch(name) else _text(name)


def _text(text: str) -> str:
    escapes = {'"': '\\"', "\\": "\\\\", "\n": "\\n", "\t": "\\t", "\r": "\\r"}
    return (
        '"' + "".join(escapes.get(c) or (c if c.isprintable() else _escape(c)) for c in text) + '"'
    )


def _escape(character: str) -> str:
    return f"\\u{ord(character):04x}" if ord(character) < 0x10000 else f"\\U{ord(character):08x}"


def _value(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, str):
        return _text(value)
    if isinstance(value, Mapping):
        inner = ", ".join(f"{_key(name)} = {_value(one)}" for name, one in value.items())
        return f"{{ {inner} }}" if inner else "{}"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(_value(one) for one in value) + "]"
    raise TypeError(f"a scene holds no {shown(value)}")
