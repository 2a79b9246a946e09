"""expose_cube: a scene with a frame time becomes a cube of short exposures.

Each frame is the mean over its instants, counted by the camera with the noise of its own number.
The air is followed in the order of time by one thread; images and counts are made by several, a few
frames ahead of the one that is asked for. No bit hangs on how many.
"""

from __future__ import annotations

import os
from collections import deque
from collections.abc import Callable, Iterator
from concurrent.futures import Future, ThreadPoolExecutor

import numpy as np

from simimg.arrays import AnyArray
from simimg.assembly.detector import camera_settings
from simimg.assembly.instants import SceneInstants, not_in_instants
from simimg.camera.chain import CameraSettings, record
from simimg.camera.converter import counts_type
from simimg.cube import Cube
from simimg.errors import InputError, mistake
from simimg.exposure import expose_prepared, prepare
from simimg.scene.model import Scene

_AHEAD = 4


class Filmed:
    """The frames of a scene, made as they are asked for.

    Parameters
    ----------
    instants : SceneInstants
    settings : CameraSettings
    count : int
        Of frames.
    shape : (rows, columns)
        Of a frame as it is read.
    seed : int
    threads : int
    progress : callable, optional
        Called with the number of frames done and of all.
    """

    def __init__(
        self,
        instants: SceneInstants,
        settings: CameraSettings,
        *,
        count: int,
        shape: tuple[int, int],
        seed: int,
        threads: int,
        progress: Callable[[int, int], None] | None = None,
    ) -> None:
        self._instants, self._settings = instants, settings
        self._seed, self._threads, self._progress = seed, threads, progress
        self.shape = (count, *shape)

    def __len__(self) -> int:
        return self.shape[0]

    def __getitem__(self, index: int) -> AnyArray:
        if not 0 <= index < self.shape[0]:
            raise IndexError(f"frame {index} of {self.shape[0]}")
        return self._made(index, self._instants.phases(index))

    def __iter__(self) -> Iterator[AnyArray]:
        waiting: deque[Future[AnyArray]] = deque()
        count = self.shape[0]
        with ThreadPoolExecutor(self._threads) as pool:
            try:
                done = 0
                for index in range(count):
                    phases = self._instants.phases(index)
                    waiting.append(pool.submit(self._made, index, phases))
                    if len(waiting) >= self._threads + _AHEAD:
                        yield waiting.popleft().result()
                        done += 1
                        if self._progress is not None:
                            self._progress(done, count)
                while waiting:
                    yield waiting.popleft().result()
                    done += 1
                    if self._progress is not None:
                        self._progress(done, count)
            finally:
                for one in waiting:
                    one.cancel()

    def _made(self, index: int, phases: list[AnyArray]) -> AnyArray:
        light = self._instants.light(phases)
        return record(light, settings=self._settings, seed=self._seed, frame=index).counts


def expose_cube(
    scene: Scene,
    *,
    memory_bytes: int | None = None,
    threads: int | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Cube:
    """The cube of short exposures that a scene's set-up would record.

    Parameters
    ----------
    scene : Scene
        With ``exposure.frame_time``; ``exposure.count`` is the number of frames.
    memory_bytes : int, optional
        Most memory that an image may take; 2 GiB unless given.
    threads : int, optional
        All processors unless given; of no effect on the result.
    progress : callable, optional
        Called with the number of frames done and of all, as they are asked for in order.

    Returns
    -------
    Cube
        Its frames are made as they are asked for.

    Raises
    ------
    InputError
        The scene lacks what an exposure needs, has no frame time, or something that cannot be seen
        in instants; or it does not fit into the memory.
    """
    if scene.exposure is None or scene.exposure.frame_time is None:
        what = "is required for a cube and missing"
        mend = 'write frame_time = "10 ms" in place of time, or use simimg.expose'
        raise InputError(mistake(scene.name, "exposure.frame_time", what, mend))
    refused = list(not_in_instants(scene))
    if refused:
        raise InputError(*refused)
    prepared = prepare(scene, memory_bytes=memory_bytes, threads=1)
    settings = camera_settings(scene)
    # The first frame of the long exposure tells the shape, and what the frames share.
    like = expose_prepared(prepared, threads=1)
    instants = SceneInstants(scene, prepared.train, prepared.objects, memory_bytes=memory_bytes)
    count, rows, columns = scene.exposure.count, *like.counts.shape
    header = dict(like.header)
    header.pop("EXPNUM", None)
    header["FRAMES"] = (count, "short exposures in the cube")
    header["CYCLE"] = (
        settings.time + scene.exposure.overhead,
        "[s] from the begin of a frame to that of the next",
    )
    if scene.exposure.substeps > 1:
        header["SUBSTEPS"] = (scene.exposure.substeps, "instants averaged in a frame")
    workers = threads if threads is not None else (os.cpu_count() or 1)
    return Cube(
        planes=Filmed(
            instants,
            settings,
            count=count,
            shape=(rows, columns),
            seed=scene.exposure.seed,
            threads=workers,
            progress=progress,
        ),
        dtype=np.dtype(counts_type(settings.bit_depth)),
        header=header,
        wcs=like.wcs,
        truth=like.truth,
        scene_files=like.scene_files,
        directory=like.directory,
    )
