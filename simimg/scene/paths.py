"""Dotted keys, ``pair.0.separation`` or ``pair[0].separation``, as steps into a document."""

from __future__ import annotations

import re

from simimg.quantities import shown

_FORM = 'write KEY=VALUE, as telescope.aperture="2 m"'
_STEP = re.compile(r"[^.\[\]]+|\[\d+\]")

_NUMBERED = ("header", "zernike")
"""Tables whose keys may look like numbers."""

Path = tuple[str | int, ...]


class MisplacedKeyError(Exception):
    """A key that names no place in the document: what is wrong, and what to write instead."""

    def __init__(self, what: str, mend: str) -> None:
        self.what = what
        self.mend = mend
        super().__init__(f"{what}; {mend}")


def parse_path(text: str) -> Path:
    """Steps of a dotted key: ``pair.0.separation`` or ``pair[0].separation``.

    Raises
    ------
    MisplacedKeyError
        If the text is not a key.
    """
    steps = _STEP.findall(text.strip())
    rebuilt = "".join(step if step.startswith("[") else f".{step}" for step in steps).lstrip(".")
    if not steps or rebuilt != text.strip() or len(steps) > 8 or steps[0].startswith("["):
        raise MisplacedKeyError(f"{shown(text)} is not a key", _FORM)
    path: list[str | int] = []
    for step in steps:
        word = step.strip("[] ")
        is_index = word.isascii() and word.isdigit() and len(word) < 10
        path.append(int(word) if is_index and path and path[-1] not in _NUMBERED else word)
    return tuple(path)


def dotted(path: Path) -> str:
    """A path as one dotted key."""
    return ".".join(str(step) for step in path)
