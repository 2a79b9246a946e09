"""One row of a table of malformed scenes."""

from __future__ import annotations

from typing import NamedTuple


class Malformed(NamedTuple):
    """One malformed scene."""

    name: str
    content: bytes
    key: str
    word: str


def replaced(scene: str, *pieces: str) -> bytes:
    """A scene with pieces of it, each of which stands in it once, replaced by others in turn."""
    for old, new in zip(pieces[::2], pieces[1::2], strict=True):
        if scene.count(old) != 1:
            raise ValueError(f"{old!r} stands {scene.count(old)} times in the scene")
        scene = scene.replace(old, new)
    return scene.encode()
