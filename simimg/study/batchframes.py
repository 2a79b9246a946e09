"""Making the frames of a batch: one by one, the same bytes whoever makes them.

What does not hang on the drawn keys (the train from pupil to pixel) is worked out once by each
process. A frame's own scene refers to the batch's folder for the files it reads.
"""

from __future__ import annotations

import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from simimg.assembly.train import Train, assemble_train
from simimg.errors import InputError, RunError
from simimg.exposure import expose_prepared, prepare
from simimg.frame import Frame
from simimg.study.batchfolder import frame_name
from simimg.study.batchplan import BatchPlan, column_name, column_values

_PLACES = (
    "separation", "position_angle", "magnitude", "magnitudes", "electrons", "east", "north",
    "x", "y", "ra", "dec", "effective_radius", "axis_ratio", "diameter", "surface_brightness",
)  # fmt: skip
_OBJECTS = ("star", "pair", "galaxy", "disc", "ring", "picture", "sky")


@dataclass
class FrameMaker:
    """Makes the frames of one batch, in one process.

    Parameters
    ----------
    plan : BatchPlan
    keep : tuple of str
        Extensions to keep: ``expected``, ``psf``.
    compress : bool
        Whether images are Rice-compressed.
    """

    plan: BatchPlan
    keep: tuple[str, ...] = ()
    compress: bool = False
    _train: Train | None = field(default=None, repr=False)

    def frame(self, number: int) -> Frame:
        """Make one frame.

        Raises
        ------
        InputError
            A drawn scene that cannot be.
        """
        scene = self.plan.frame_scene(number)
        if self._shared and self._train is None:
            self._train = assemble_train(scene)
        prepared = prepare(scene, threads=1, train=self._train if self._shared else None)
        made = expose_prepared(prepared, keep=self.keep, threads=1)
        truth = made.truth.copy() if made.truth is not None else None
        if truth is not None:
            for name, value in self.plan.values(number).items():
                held, unit = column_values([value])
                truth[column_name(name)] = np.repeat(held, len(truth))
                if unit:
                    truth[column_name(name)].unit = unit
        # The folder keeps once what every frame reads.
        files = tuple(
            (name, sha256, content if index == 0 else b"")
            for index, (name, sha256, content) in enumerate(made.scene_files)
        )
        return Frame(
            counts=made.counts,
            header=made.header,
            wcs=made.wcs,
            truth=truth,
            expected=made.expected,
            psf=made.psf,
            mask=made.mask,
            scene_files=files,
        )

    @property
    def _shared(self) -> bool:
        """Whether all frames have one train: only places and brightnesses of objects are drawn."""
        for name in self.plan.drawn:
            steps = [one for one in name.replace("[", ".").replace("]", "").split(".") if one]
            words = [one for one in steps if not one.isdigit()]
            if words[0] not in _OBJECTS or words[-1] not in _PLACES:
                return False
        return True

    def write(self, number: int, folder: str | os.PathLike[str]) -> str:
        """Make one frame and write it; what went wrong, or nothing."""
        target = Path(folder) / frame_name(number)
        try:
            if not target.exists():
                self.frame(number).write(target, overwrite=True, compress=self.compress)
        except (InputError, RunError) as error:
            return " ".join(error.lines)
        except MemoryError:
            return "not enough memory"
        return ""


_makers: dict[str, FrameMaker] = {}


def make_frames(
    task: tuple[str, BatchPlan, tuple[str, ...], bool, str, tuple[int, ...]],
) -> list[tuple[int, str]]:
    """Make some frames in this process: number and what went wrong with each.

    Parameters
    ----------
    task : (identity, plan, keep, compress, folder, numbers)
        The identity tells whether a process has worked on the same batch before.
    """
    from threadpoolctl import threadpool_limits

    identity, plan, keep, compress, folder, numbers = task
    if identity not in _makers:
        _makers.clear()
        _makers[identity] = FrameMaker(plan, keep, compress)
    import scipy.linalg  # noqa: F401

    maker, told = _makers[identity], []
    with threadpool_limits(limits=1):
        for number in numbers:
            told.append((number, maker.write(number, folder)))
    return told


def described(error: BaseException) -> str:
    """An unforeseen failure in one line."""
    return " ".join(f"{type(error).__name__}: {error}".split())[:300]


__all__: list[Any] = ["FrameMaker", "described", "make_frames"]
