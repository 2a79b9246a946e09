"""Work on one observation shared among processes, with the same result whatever their number.

Tasks are independent and come back in their order; each process works on one thread and holds the
frame once. What comes back leaves the PSF behind, which all share. Spawn-safe: functions are those
of modules, and few tasks are done at once in this process.
"""

from __future__ import annotations

import multiprocessing
from collections.abc import Callable, Sequence
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from dataclasses import replace
from typing import Any, TypeVar, cast

from simimg.arrays import AnyArray
from simimg.errors import RunError
from simimg.frame import Frame
from simimg.interrupts import holding_interrupts
from simimg.resolving.observation import Observation

Task = TypeVar("Task")
Result = TypeVar("Result")
_LEAST = 200  # stars, fewer of which are not worth the start of a process


def crew_map(
    function: Callable[[Observation, Task], Result],
    observation: Observation,
    tasks: Sequence[Task],
    *,
    workers: int,
    stars: int,
) -> list[Result]:
    """Return ``function(observation, task)`` of every task, in order.

    Parameters
    ----------
    function : callable
        Of a module; may use all of the observation but its sky, scene and limits.
    observation : Observation
    tasks : sequence
    workers : int
        Processes at most, 1 or more.
    stars : int
        How much there is to do, which settles whether processes are worth their start.

    Raises
    ------
    RunError
        A process could not start or was stopped.
    """
    from threadpoolctl import threadpool_limits

    if workers <= 1 or len(tasks) < 2 or stars < _LEAST:
        with threadpool_limits(limits=1):
            return [function(observation, task) for task in tasks]
    pool = ProcessPoolExecutor(
        min(workers, len(tasks)),
        mp_context=multiprocessing.get_context("spawn"),
        initializer=_begin,
        initargs=(_bare(observation), observation.frame.counts, observation.frame.mask),
    )
    try:
        with holding_interrupts():
            results = pool.map(_Job(function), tasks, chunksize=1)
        return list(results)
    except BrokenProcessPool as error:
        raise RunError(
            "a process could not start or was stopped; try one worker, and guard the main part of "
            'a script by if __name__ == "__main__":'
        ) from error
    finally:
        pool.shutdown(cancel_futures=True)


def _bare(observation: Observation) -> Observation:
    """What fits need of an observation besides the pixels, and no more."""
    nothing = cast(Any, None)
    return replace(
        observation,
        frame=nothing,
        scene=None,
        train=None,
        sky=nothing,
        delivered=nothing,
        sourced=nothing,
    )


class _Job:
    """A function to be called with the process's own observation."""

    def __init__(self, function: Callable[[Observation, Any], Any]) -> None:
        self._function = function

    def __call__(self, task: Any) -> Any:
        return self._function(_held[0], task)


_held: list[Observation] = []


def _begin(observation: Observation, counts: AnyArray, mask: AnyArray | None) -> None:
    from threadpoolctl import threadpool_limits

    threadpool_limits(limits=1)
    _held[:] = [replace(observation, frame=Frame(counts=counts, mask=mask))]
