"""How to make a page again: the command, the scene as it was run, and the files that it reads."""

from __future__ import annotations

from simimg.scene.file import scene_id, scene_record
from simimg.scene.model import Scene
from simimg.show.reportpage import File, Files, Listing, Section, Words, file_name, file_of, items
from simimg.show.reportpage import section as part
from simimg.version import __version__

MOST_KEPT = 1 << 20
"""Largest file of a scene that a page holds, in bytes; a larger one is named by its hash."""


def again(scene: Scene, command: str) -> Section:
    """The part of a page by which it can be made once more.

    Parameters
    ----------
    scene : Scene
    command : str
        For the scene as the page holds it, saved under the name of its file.
    """
    record = scene_record(scene)
    name = file_name(scene.name)
    kept: list[File] = []
    words = []
    for path, sha256, content in record[1:]:
        held = bool(content) and len(content) <= MOST_KEPT
        if held:
            kept.append(file_of(path, content, kind="application/octet-stream"))
        where = "below" if held else "too large to be kept here"
        words.append(f"The scene reads {path} ({where}), sha256 {sha256}.")
    text = (
        f"Save the scene below as {name} and run the command with simimg {__version__}: it makes "
        "this page again, byte for byte on the same versions of NumPy, SciPy, astropy and "
        "matplotlib. The scene is as it was run, with what it stands on and every change applied."
    )
    return part(
        "again",
        "How to make it again",
        Words(text),
        Listing("The command", command),
        items(words),
        Files(tuple(kept)) if kept else None,
        Listing("The scene", record[0][2].decode(), file_of(name, record[0][2])),
        Words(f"The sha256 of the scene with all it reads is {scene_id(scene)}."),
    )
