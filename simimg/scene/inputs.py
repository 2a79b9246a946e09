"""The files that a scene names, read as data and nothing else.

Every file is hashed; one of up to 16 MiB is kept whole, a larger one by its path and hash. Its size
is known and bounded before any memory is taken.
"""

from __future__ import annotations

import hashlib
import os
import stat
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from simimg.errors import InputError
from simimg.scene.paths import MisplacedKeyError, parse_path
from simimg.scene.readers import names_a_file

LARGEST_KEPT = 16 * 2**20
"""Largest file, in bytes, whose content is kept."""

LARGEST_READ = 2**30
"""Largest file, in bytes, that a scene may name."""

_FILE_KEYS = (
    ("telescope", "pupil"),
    ("telescope", "wavefront", "file"),
    ("band", "file"),
    ("psf", "file"),
)
_FILE_OR_RATIO = (("camera", "quantum_efficiency"),)
_OBJECT_FILES = {
    **dict.fromkeys(("star", "galaxy", "disc", "ring"), ("spectrum",)),
    "pair": ("spectra",),
    "picture": ("file", "spectrum"),
    "catalogue": ("file",),
}


class UnusableFileError(Exception):
    """A file that cannot be used: what is wrong with it, and what to do instead."""

    def __init__(self, what: str, mend: str) -> None:
        self.what = what
        self.mend = mend
        super().__init__(f"{what}; {mend}")


@dataclass(frozen=True)
class InputFile:
    """A file that a scene names.

    Attributes
    ----------
    name : str
        The path as written in the scene.
    sha256 : str
        Hash of the content, in hexadecimal.
    content : bytes or None
        None for a file of more than `LARGEST_KEPT` bytes.
    path : Path or None
        Where it was read; None where it came out of a frame.
    """

    name: str
    sha256: str
    content: bytes | None = field(repr=False)
    path: Path | None

    def read(self) -> bytes:
        """The whole content, from disk for a large file.

        Raises
        ------
        InputError
            If the file has gone or changed since the scene was read.
        """
        if self.content is not None:
            return self.content
        if self.path is None:
            raise InputError(f"{self.name}: is not here; put the file back")
        try:
            content = read_bounded(self.path, LARGEST_READ)
        except UnusableFileError as problem:
            raise InputError(f"{self.name}: {problem.what}; {problem.mend}") from None
        if hashlib.sha256(content).hexdigest() != self.sha256:
            raise InputError(f"{self.name}: has changed since the scene was read; read it again")
        return content

    def renamed(self, name: str) -> InputFile:
        """The same file under another name, wherever it was read."""
        return replace(self, name=name)


def read_bounded(path: Path, most: int) -> bytes:
    """Content of a regular file of at most `most` bytes.

    Raises
    ------
    UnusableFileError
        If there is no such file, or it is too large, or cannot be read.
    """
    chunks: list[bytes] = []
    for chunk in _chunks(path, most):
        chunks.append(chunk)
    return b"".join(chunks)


def _chunks(path: Path, most: int) -> Iterator[bytes]:
    try:
        status = os.stat(path)
        if not stat.S_ISREG(status.st_mode):
            raise UnusableFileError("is not a regular file", "name a data file")
        if status.st_size > most:
            raise UnusableFileError(
                f"is too large, {status.st_size} bytes", f"use a file of at most {most} bytes"
            )
        taken = 0
        with open(path, "rb") as stream:
            while chunk := stream.read(min(2**20, most - taken + 1)):
                taken += len(chunk)
                if taken > most:
                    raise UnusableFileError(
                        "grew while it was read", "try again when it is complete"
                    )
                yield chunk
    except FileNotFoundError:
        raise UnusableFileError("no such file", "check the path, or put the file there") from None
    except PermissionError:
        raise UnusableFileError("may not be read", "give yourself leave to read it") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "not a path"
        raise UnusableFileError(f"cannot be read: {reason}", "check the path") from None


def read_input(name: str, directory: Path) -> InputFile:
    """Read and hash one file.

    Parameters
    ----------
    name : str
        Path as written in the scene, relative to `directory`.
    directory : Path
        Folder of the scene.

    Raises
    ------
    UnusableFileError
        As `read_bounded`.
    """
    path = directory / name
    digest = hashlib.sha256()
    kept: list[bytes] | None = []
    size = 0
    for chunk in _chunks(path, LARGEST_READ):
        digest.update(chunk)
        size += len(chunk)
        if size > LARGEST_KEPT:
            kept = None
        if kept is not None:
            kept.append(chunk)
    content = None if kept is None else b"".join(kept)
    return InputFile(name, digest.hexdigest(), content, path.absolute())


def files_named(document: Mapping[str, Any]) -> Iterator[tuple[tuple[str | int, ...], str]]:
    """Every key of a document that names a file, with the path as written."""
    for place in (*_FILE_KEYS, *_FILE_OR_RATIO):
        value: Any = document
        for step in place:
            value = value.get(step) if isinstance(value, Mapping) else None
        if isinstance(value, str) and (place not in _FILE_OR_RATIO or names_a_file(value)):
            yield place, value
    drawn = document.get("draw")
    for name, one in drawn.items() if isinstance(drawn, Mapping) else ():
        if isinstance(one, Mapping) and isinstance(one.get("table"), str):
            yield ("draw", name, "table"), one["table"]
        elif isinstance(one, Mapping) and isinstance(one.get("choice"), list):
            for number, path in enumerate(one["choice"]):
                if isinstance(path, str) and _is_file(str(name), path):
                    yield ("draw", name, "choice", number), path
    for kind, names in _OBJECT_FILES.items():
        tables = document.get(kind)
        for index, one in enumerate(tables if isinstance(tables, list) else []):
            for name in names if isinstance(one, Mapping) else ():
                value = one.get(name)
                if isinstance(value, str) and name != "spectra":
                    yield (kind, index, name), value
                elif isinstance(value, list) and name == "spectra":
                    for which, path in enumerate(value):
                        if isinstance(path, str):
                            yield (kind, index, name, which), path


def _is_file(name: str, value: str) -> bool:
    """Whether a value of a dotted key is the path of a file."""
    try:
        path = parse_path(name)
    except MisplacedKeyError:
        return False
    if path in _FILE_OR_RATIO:
        return names_a_file(value)
    if path in _FILE_KEYS:
        return True
    return len(path) > 2 and path[2] in _OBJECT_FILES.get(str(path[0]), ())
