"""A batch's folder: which scene it is of, which frames are there, and its manifest.

``scene.toml`` is the batch's scene as run, with a first line that names it; ``inputs/`` holds once
each what the frames read; ``frame-000000.fits`` and so on are the frames, each there whole or not
at all. ``manifest.ecsv`` and ``truth.fits`` are made from the frames that are there.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from simimg.errors import InputError, RunError, mistake
from simimg.fits.ecsv import ecsv_text
from simimg.fits.hdus import Column
from simimg.fits.writer import write_table_file
from simimg.newfile import new_file
from simimg.scene.file import scene_id, scene_text
from simimg.study.batchplan import INPUTS, BatchPlan
from simimg.version import __version__

SCENE, MANIFEST, TRUTH = "scene.toml", "manifest.ecsv", "truth.fits"
_CHUNK = 2**20


def frame_name(number: int) -> str:
    """File name of a frame."""
    return f"frame-{number:06d}.fits"


class BatchFolder:
    """The folder of one batch.

    Parameters
    ----------
    path : path
    plan : BatchPlan
    """

    def __init__(self, path: str | os.PathLike[str], plan: BatchPlan) -> None:
        self.path = Path(path)
        self.plan = plan

    @property
    def _named(self) -> str:
        """The line by which a folder knows its batch; the number of frames does not count."""
        return f"# simimg {__version__} batch of scene {scene_id(self.plan.scene)}\n"

    def check(self) -> None:
        """Refuse a folder that is another's.

        Raises
        ------
        InputError
            A file in its place, a folder with other things in it, or of another scene.
        """
        shown = str(self.path)
        if self.path.is_symlink() or self.path.exists():
            if not self.path.is_dir():
                raise InputError(mistake(shown, "", "is not a folder", "name another"))
        elif not self.path.parent.is_dir():
            parent = str(self.path.parent)
            raise InputError(mistake(shown, "", f"folder {parent!r} does not exist", "make it"))
        else:
            return
        scene = self.path / SCENE
        if scene.is_file():
            with scene.open(encoding="utf-8", errors="replace") as handle:
                if handle.readline() == self._named:
                    return
            what = "holds the batch of another scene, or of another version of simimg"
            raise InputError(mistake(shown, "", what, "name another folder"))
        if any(not one.name.startswith(".simimg-") for one in self.path.iterdir()):
            raise InputError(mistake(shown, "", "holds other things", "name an empty folder"))

    def begin(self) -> None:
        """Make the folder ready: stale temporary files gone, scene and inputs there.

        Raises
        ------
        InputError, RunError
            As `check`, or the system refused.
        """
        self.check()
        try:
            self.path.mkdir(exist_ok=True)
            for folder in (self.path, self.path / INPUTS):
                if folder.is_dir():
                    for stale in folder.glob(".simimg-*.part"):
                        stale.unlink(missing_ok=True)
            if self.plan.scene.inputs:
                (self.path / INPUTS).mkdir(exist_ok=True)
        except OSError as error:
            raise RunError(
                mistake(str(self.path), "", f"could not be made ready: {error.strerror}")
            ) from error
        for name, one in self.plan.scene.inputs.items():
            if not (self.path / name).is_file():
                with new_file(self.path / name) as handle:
                    handle.write(one.read())
        if not (self.path / SCENE).is_file():
            with new_file(self.path / SCENE) as handle:
                handle.write((self._named + scene_text(self.plan.scene)).encode("utf-8"))

    def frame(self, number: int) -> Path:
        """Where a frame is or will be."""
        return self.path / frame_name(number)

    def missing(self) -> list[int]:
        """Numbers of the frames that are not there."""
        there = {one.name for one in self.path.glob("frame-*.fits")} if self.path.is_dir() else ()
        return [number for number in range(self.plan.count) if frame_name(number) not in there]

    def finish(self) -> list[int]:
        """Write manifest and truth of the frames that are there; their numbers.

        Raises
        ------
        RunError
            The system refused.
        """
        absent = set(self.missing())
        numbers = [number for number in range(self.plan.count) if number not in absent]
        columns = [
            Column("frame", np.array(numbers, dtype=np.int64), "", "number, from 0"),
            Column("file", np.array([frame_name(one) for one in numbers], dtype=str), "", "name"),
            Column(
                "seed",
                np.array([self.plan.frame_seed(one) for one in numbers], dtype=np.int64),
                "",
                "of the frame's noise",
            ),
            Column(
                "sha256",
                np.array([_hash(self.frame(one)) for one in numbers], dtype=str),
                "",
                "of the file",
            ),
            *self.plan.columns(np.array(numbers, dtype=np.int64)),
        ]
        meta = {"SCENEID": scene_id(self.plan.scene), "frames": self.plan.count}
        with new_file(self.path / MANIFEST, overwrite=True) as handle:
            handle.write(ecsv_text(columns, meta=meta).encode("utf-8"))
        if numbers:
            truth = _joined(self._truths(numbers))
            write_table_file(self.path / TRUTH, truth, name="TRUTH", simulated=True, overwrite=True)
        return numbers

    def _truths(self, numbers: Sequence[int]) -> Iterator[tuple[int, Any]]:
        from astropy.io import fits

        for number in numbers:
            with fits.open(self.frame(number), memmap=False) as hdus:
                data = hdus["TRUTH"].data
                header = hdus["TRUTH"].columns
                yield number, {one.name: (np.array(data[one.name]), one.unit) for one in header}


def _joined(truths: Iterator[tuple[int, dict[str, tuple[Any, str | None]]]]) -> list[Column]:
    """Tables of truth under one another, with the number of their frame."""
    parts: dict[str, list[tuple[int, Any]]] = {}
    units: dict[str, str] = {}
    rows: list[tuple[int, int]] = []
    for number, table in truths:
        length = len(next(iter(table.values()))[0])
        rows.append((number, length))
        for name, (values, unit) in table.items():
            parts.setdefault(name, []).append((number, values))
            units.setdefault(name, unit or "")
    frames = np.concatenate([np.full(length, number) for number, length in rows]).astype(np.int64)
    columns = [Column("frame", frames, "", "number of the frame, from 0")]
    for name, held in parts.items():
        by_frame = dict(held)
        sample = held[0][1]
        filled = []
        for number, length in rows:
            if number in by_frame:
                filled.append(by_frame[number])
            elif sample.dtype.kind == "f":
                filled.append(np.full(length, np.nan))
            else:
                filled.append(np.zeros(length, dtype=sample.dtype))
        columns.append(Column(name, np.concatenate(filled), units[name]))
    return columns


def _hash(path: Path) -> str:
    digest = hashlib.sha256()
    with path.open("rb") as handle:
        while chunk := handle.read(_CHUNK):
            digest.update(chunk)
    return digest.hexdigest()
