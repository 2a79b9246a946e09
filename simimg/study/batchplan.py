"""What a batch will make: the scene of each frame, its drawn values and the seed of its noise.

Everything about frame i follows from the batch's scene and from i alone, whoever makes it and in
whatever order: each drawn key has a stream of its own, spawned from the scene's seed by frame and
key. Values are those a scene would have.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np

from simimg.arrays import AnyArray
from simimg.camera.streams import Stage
from simimg.errors import InputError, mistake
from simimg.fits.hdus import Column
from simimg.scene.draw import Draw
from simimg.scene.file import replace, requirements_to_expose
from simimg.scene.inputs import files_named
from simimg.scene.model import Scene
from simimg.scene.paths import parse_path
from simimg.scene.steps import split_value

MOST_FRAMES = 1_000_000
INPUTS = "inputs"
_TRIED = 8  # frames whose scenes are made before any work, to find what cannot be


@dataclass(frozen=True, eq=False)
class BatchPlan:
    """A batch of frames.

    Attributes
    ----------
    scene : Scene
        With its ``[draw]`` table, its files as they will be named from the batch's folder.
    count : int
        Frames.
    """

    scene: Scene
    count: int

    @property
    def seed(self) -> int:
        """Of the batch."""
        return self.scene.exposure.seed if self.scene.exposure is not None else 0

    @property
    def drawn(self) -> Mapping[str, Draw]:
        """The distributions by key."""
        return self.scene.draw

    @cached_property
    def still(self) -> Scene:
        """The scene without what only a batch reads, with the files that its frames may name."""
        made = replace(self.scene, {"draw": None, "study": None})
        return made.made_from(
            made.document,
            name=made.name,
            where=made.where,
            directory=made.directory,
            inputs=self.scene.inputs,
        )

    @cached_property
    def tables(self) -> dict[str, Any]:
        """The tables that rows are taken from, by file."""
        names = {one.table for one in self.drawn.values() if one.kind == "table"}
        return {name: _table(self.scene, name) for name in names}

    def frame_seed(self, number: int) -> int:
        """Seed of a frame's noise."""
        state = np.random.SeedSequence(self.seed, spawn_key=(number, Stage.DRAW))
        return int(state.generate_state(1, np.uint64)[0] >> np.uint64(11))

    def values(self, number: int) -> dict[str, Any]:
        """The values drawn for a frame, by key, as its scene has them."""
        found = {}
        for name, one in self.drawn.items():
            if one.kind == "table":
                found[name] = _cell(self.tables[one.table], one.column, number)
                continue
            digest = hashlib.sha256(name.encode()).digest()
            key = (number, int(Stage.DRAW), int.from_bytes(digest[:4], "big"))
            state = np.random.SeedSequence(self.seed, spawn_key=key)
            found[name] = one.value(np.random.Generator(np.random.PCG64(state)), name)
        return found

    def frame_scene(self, number: int) -> Scene:
        """The scene of a frame, its draws applied.

        Raises
        ------
        InputError
            A drawn value that its key cannot have.
        """
        changes = self.values(number)
        return replace(self.still, changes | {"exposure.seed": self.frame_seed(number)})

    def columns(self, numbers: AnyArray) -> list[Column]:
        """The drawn keys of some frames as the columns of a table."""
        drawn = [self.values(int(number)) for number in numbers]
        columns = []
        for name in self.drawn:
            values = [one[name] for one in drawn]
            held, unit = column_values(values)
            columns.append(Column(column_name(name), held, unit, f"{name}, drawn"))
        return columns


def column_name(key: str) -> str:
    """A key as the name of a column, dots and brackets as underscores."""
    return "_".join(str(step) for step in parse_path(key))


def column_values(values: list[Any]) -> tuple[AnyArray, str]:
    """Drawn values as numbers and their unit; as text where they are no numbers."""
    split = [split_value(one) for one in values]
    units = {one[1] for one in split if one is not None}
    if None in split or len(units) > 1:
        return np.array([str(one) for one in values], dtype=str), ""
    numbers = [one[0] for one in split if one is not None]
    return np.array(numbers, dtype=np.float64), units.pop() if units else ""


def plan_batch(scene: Scene, *, count: int) -> BatchPlan:
    """Plan a batch, and check what can be before any frame is made.

    Parameters
    ----------
    scene : Scene
    count : int
        Frames, from 1.

    Raises
    ------
    InputError
        A scene that cannot be exposed, a key or a table that cannot be drawn from.
    ValueError
        A count out of range.
    """
    if not 1 <= count <= MOST_FRAMES:
        raise ValueError(f"count must be from 1 to {MOST_FRAMES}, got {count}")
    missing = requirements_to_expose(scene)
    if missing:
        raise InputError(*missing)
    if scene.exposure is not None and scene.exposure.frame_time is not None:
        what = "makes a cube, and a batch is of single frames"
        mend = "write time in its place, or expose the scene by itself"
        raise InputError(mistake(scene.where, "exposure.frame_time", what, mend))
    plan = BatchPlan(_moved(scene), count)
    lines: list[str] = []
    for name, one in plan.drawn.items():
        if one.kind == "table" and one.column not in plan.tables[one.table].colnames:
            known = ", ".join(plan.tables[one.table].colnames)
            what = f"has no column {one.column!r}"
            lines.append(mistake(scene.where, f"draw.{name}", what, f"write one of {known}"))
    if lines:
        raise InputError(*lines)
    good = 0
    for number in range(min(count, _TRIED)):
        try:
            plan.frame_scene(number)
        except InputError as error:
            lines += [line for line in error.lines if line not in lines]
        else:
            good += 1
    # Some frames may fail, as they will be told; not all of them.
    if not good:
        raise InputError(*lines)
    return plan


def _moved(scene: Scene) -> Scene:
    """The scene with its files where the batch's folder will keep them."""
    document = scene.document
    inputs = {}
    for place, path in list(files_named(document)):
        one = scene.inputs[path]
        kept = f"{INPUTS}/{one.sha256[:12]}-{os.path.basename(path)}"
        holder: Any = document
        for step in place[:-1]:
            holder = holder[step]
        holder[place[-1]] = kept
        inputs[kept] = one.renamed(kept)
    if not inputs:
        return scene
    # The same checks hold for the same files under their new names.
    return (
        type(scene)
        .model_validate(document)
        .made_from(
            document,
            name=scene.name,
            where=scene.where,
            directory=scene.directory,
            inputs=inputs,
        )
    )


def _table(scene: Scene, name: str) -> Any:
    """A table that rows are taken from."""
    from astropy.table import Table

    one = scene.inputs[name]
    content = one.read()
    form = "ascii.ecsv" if Path(name).suffix.lower() == ".ecsv" else "ascii.csv"
    try:
        found = Table.read(content.decode("utf-8").splitlines(), format=form)
    except Exception as error:
        # Whatever a reader of strangers' tables raises.
        what = f"cannot be read as a table: {' '.join(str(error).split())[:200]}"
        mend = "write an ECSV table, or CSV with names in its first row"
        raise InputError(mistake(scene.where, f"draw: {name}", what, mend)) from None
    if len(found) == 0:
        raise InputError(mistake(scene.where, f"draw: {name}", "has no rows", "write some"))
    return found


def _cell(table: Any, column: str, number: int) -> Any:
    """A value of a table's row, which begin again after the last, as a scene would have it."""
    value = table[column][number % len(table)]
    unit = table[column].unit
    plain = value.item() if hasattr(value, "item") else value
    if isinstance(plain, float | int) and not isinstance(plain, bool) and unit is not None:
        return f"{plain:.15g} {unit}"
    return plain if isinstance(plain, float | int | bool) else str(plain)
