"""batch: many frames of one scene, each with its own draws, resumable, on processes or a cluster.

Few chunks of frames are under way at a time, so that memory stays flat and it is known which frames
a process had in hand when it died. A frame that failed, or whose process died, is tried once more
by itself; then the rest goes on without it.
"""

from __future__ import annotations

import multiprocessing
import os
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import FIRST_COMPLETED, Executor, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

from simimg.errors import InputError, mistake
from simimg.interrupts import holding_interrupts
from simimg.scene.file import scene_id
from simimg.scene.model import Scene
from simimg.study.batchfolder import BatchFolder
from simimg.study.batchframes import FrameMaker, described, make_frames
from simimg.study.batchplan import BatchPlan, plan_batch

Progress = Callable[[int, int], None]
Told = Callable[[str], None]
_CHUNK = 8


@dataclass(frozen=True)
class Batch:
    """What a batch came to.

    Attributes
    ----------
    folder : str
    count : int
        Frames asked for.
    there : int
        Frames that are there.
    before : int
        Frames that were there before.
    failed : tuple of (int, str)
        Number of each frame that failed, and why.
    """

    folder: str
    count: int
    there: int
    before: int
    failed: tuple[tuple[int, str], ...]


@dataclass(frozen=True)
class Estimate:
    """What a batch would take.

    Attributes
    ----------
    frames, missing : int
        In all, and not there yet.
    bytes : int
        Of all frames.
    hours : float
        To make those that are missing.
    """

    frames: int
    missing: int
    bytes: int
    hours: float


def batch(
    scene: Scene,
    *,
    count: int,
    folder: str | os.PathLike[str],
    keep: Sequence[str] = (),
    compress: bool = False,
    workers: int = 1,
    cluster: str | None = None,
    progress: Progress | None = None,
    tell: Told | None = None,
) -> Batch:
    """Make many frames of a scene.

    Parameters
    ----------
    scene : Scene
        With a ``[draw]`` table, or without: then only the noise differs.
    count : int
        Frames, from 1.
    folder : path
        Made if it is not there; one of the same scene is gone on with.
    keep : sequence of {"expected", "psf"}, optional
    compress : bool, optional
        Rice-compress the images, without loss.
    workers : int, optional
        Processes, of no effect on the frames. A script that asks for more than 1 must guard its
        main part by ``if __name__ == "__main__":``.
    cluster : str, optional
        Address of a Dask scheduler whose workers see the same folder.
    progress : callable, optional
        Called with the frames there and their whole number.
    tell : callable, optional
        Called with a line for each frame that failed or process that died.

    Returns
    -------
    Batch

    Raises
    ------
    InputError
        A scene that cannot be exposed, or a folder of another scene.
    RunError
        The folder could not be written.
    """
    home = BatchFolder(folder, plan_batch(scene, count=count))
    home.begin()
    waiting = home.missing()
    before = count - len(waiting)
    if progress is not None and before:
        progress(before, count)
    crew = _Crew(home, tuple(keep), compress, workers, cluster, before, progress, tell)
    try:
        failed = crew.make(waiting)
    finally:
        there = home.finish()
    return Batch(str(home.path), count, len(there), before, tuple(sorted(failed.items())))


def estimate(
    scene: Scene,
    *,
    count: int,
    folder: str | os.PathLike[str],
    keep: Sequence[str] = (),
    compress: bool = False,
    workers: int = 1,
) -> Estimate:
    """What a batch would take, by its first frames made in memory; nothing is left behind."""
    import tempfile
    from time import perf_counter

    plan = plan_batch(scene, count=count)
    home = BatchFolder(folder, plan)
    home.check()
    maker = FrameMaker(plan, tuple(keep), compress)
    with tempfile.TemporaryDirectory() as place:
        for number in (0, 1, 2):
            begun = perf_counter()
            wrong = maker.write(number, place)
            taken = perf_counter() - begun
            if wrong:
                raise InputError(mistake(scene.where, "draw", f"frame {number}: {wrong}", ""))
            # The first also works out what all share.
            size = os.stat(os.path.join(place, f"frame-{number:06d}.fits")).st_size
    missing = len(home.missing())
    return Estimate(count, missing, size * count, taken * missing / workers / 3600.0)


class _Crew:
    """Hands out frames, and knows which were in whose hands."""

    def __init__(
        self,
        home: BatchFolder,
        keep: tuple[str, ...],
        compress: bool,
        workers: int,
        cluster: str | None,
        before: int,
        progress: Progress | None,
        tell: Told | None,
    ) -> None:
        self._home = home
        self._keep = keep
        self._compress = compress
        self._workers = workers
        self._cluster = cluster
        self._done = before
        self._progress = progress
        self._tell = tell
        self._tries: dict[int, str] = {}
        self._failed: dict[int, str] = {}

    def make(self, waiting: Sequence[int]) -> dict[int, str]:
        """Make frames; those that failed, and why."""
        chunks = [
            tuple(waiting[begin : begin + _CHUNK]) for begin in range(0, len(waiting), _CHUNK)
        ]
        if self._workers == 1 and self._cluster is None:
            for chunk in chunks:
                self._here(chunk)
            return self._failed
        while chunks:
            chunks, suspects = self._shared_out(chunks)
            self._one_by_one(suspects)
        return self._failed

    def _here(self, chunk: tuple[int, ...]) -> None:
        for number in chunk:
            for _ in range(2):
                told = make_frames(self._task((number,)))
                again = self._taken(told)
                if not again:
                    break

    def _task(self, chunk: tuple[int, ...]) -> Any:
        plan: BatchPlan = self._home.plan
        identity = scene_id(plan.scene)
        folder = str(self._home.path.absolute())
        return identity, plan, self._keep, self._compress, folder, chunk

    def _shared_out(self, chunks: list[tuple[int, ...]]) -> tuple[list[tuple[int, ...]], list[int]]:
        """Hand out chunks until none is left or a process dies.

        What is still to be done, and the frames that were in hand when a process died.
        """
        rest = list(reversed(chunks))
        hands: dict[Future[Any], tuple[int, ...]] = {}
        with _executor(self._workers, self._cluster) as (executor, most):
            try:
                while rest or hands:
                    with holding_interrupts():
                        while rest and len(hands) < most:
                            chunk = rest.pop()
                            hands[executor.submit(make_frames, self._task(chunk))] = chunk
                    done, _ = wait(hands, return_when=FIRST_COMPLETED)
                    for future in done:
                        again = self._result(future, hands[future])
                        del hands[future]
                        rest += [(number,) for number in again]
            except BrokenProcessPool:
                suspects = [number for chunk in hands.values() for number in chunk]
                self._say(f"a process died; {len(suspects)} frames are tried once more")
                return list(reversed(rest)), suspects
        return [], []

    def _one_by_one(self, suspects: Sequence[int]) -> None:
        """Frames that were in hand when a process died, each in a process of its own."""
        for number in suspects:
            self._tries[number] = "its process died"
            with _executor(1, None) as (executor, _):
                try:
                    with holding_interrupts():
                        future = executor.submit(make_frames, self._task((number,)))
                    told = future.result()
                except BrokenProcessPool:
                    told = [(number, "its process died, twice")]
            self._taken(told)

    def _result(self, future: Future[Any], chunk: tuple[int, ...]) -> list[int]:
        """Take what a chunk came to; the frames to be tried once more."""
        try:
            return self._taken(future.result())
        except BrokenProcessPool:
            raise
        except Exception as error:
            if isinstance(error, OSError) and self._cluster is None:
                raise
            return self._taken([(number, described(error)) for number in chunk])

    def _taken(self, told: Sequence[tuple[int, str]]) -> list[int]:
        again = []
        for number, wrong in told:
            if not wrong or self._home.frame(number).exists():
                self._done += 1
            elif number in self._tries:
                self._failed[number] = wrong
                self._say(f"frame {number}: {wrong}")
            else:
                self._tries[number] = wrong
                again.append(number)
        if self._progress is not None:
            self._progress(self._done, self._home.plan.count)
        return again

    def _say(self, line: str) -> None:
        if self._tell is not None:
            self._tell(line)


@contextmanager
def _executor(workers: int, cluster: str | None) -> Iterator[tuple[Executor, int]]:
    """Who makes frames, and how many chunks may be under way."""
    if cluster is None:
        pool = ProcessPoolExecutor(workers, mp_context=multiprocessing.get_context("spawn"))
        try:
            yield pool, workers + 1
        finally:
            pool.shutdown(cancel_futures=True)
        return
    from simimg.study.workforce import cluster_client

    with cluster_client(cluster) as client:
        threads = sum(client.nthreads().values())
        yield client.get_executor(pure=False), max(2 * threads, 2)
