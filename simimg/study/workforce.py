"""Independent jobs, done here, in processes of this machine, or by the workers of a cluster.

Each process works on one thread, so that no result depends on which of them made it. Results come
as they are done, with the number of their job.
"""

from __future__ import annotations

import multiprocessing
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass
from typing import Any, TypeVar

from simimg.errors import InputError, RunError, mistake
from simimg.interrupts import holding_interrupts

Task = TypeVar("Task")
Result = TypeVar("Result")


@dataclass(frozen=True, kw_only=True)
class Jobs:
    """Who does the work.

    Attributes
    ----------
    workers : int
        Processes, 1 or more; 1 starts none.
    cluster : str or None
        Address of a Dask scheduler whose workers take the jobs instead.
    """

    workers: int = 1
    cluster: str | None = None

    def run(
        self, function: Callable[[Task], Result], tasks: Sequence[Task]
    ) -> Iterator[tuple[int, Result]]:
        """The result of every task, as they are done, each with the number of its task.

        Parameters
        ----------
        function : callable
            Of a module, so that other processes can find it.
        tasks : sequence

        Raises
        ------
        RunError
            A process was stopped from outside.
        InputError
            No scheduler answers at the address, or what it needs is not installed.
        """
        if not tasks:
            return
        if self.cluster is not None:
            yield from _abroad(self.cluster, function, tasks)
        elif self.workers == 1 or len(tasks) == 1:
            for number, task in enumerate(tasks):
                yield number, single_threaded(function, task)
        else:
            yield from _elsewhere(min(self.workers, len(tasks)), function, tasks)


def _elsewhere(
    workers: int, function: Callable[[Task], Result], tasks: Sequence[Task]
) -> Iterator[tuple[int, Result]]:
    pool = ProcessPoolExecutor(workers, mp_context=multiprocessing.get_context("spawn"))
    try:
        with holding_interrupts():
            waiting = {
                pool.submit(single_threaded, function, task): number
                for number, task in enumerate(tasks)
            }
        for future in as_completed(waiting):
            yield waiting.pop(future), future.result()
    except BrokenProcessPool as error:
        raise RunError(
            "a process could not start or was stopped; try one worker, and guard the main part of "
            'a script by if __name__ == "__main__":'
        ) from error
    finally:
        pool.shutdown(cancel_futures=True)


def single_threaded(function: Callable[[Task], Result], task: Task) -> Result:
    """What a function gives on one thread.

    The same library on the same number of threads gives the same bits.

    Parameters
    ----------
    function : callable
    task : object
    """
    # A library that is loaded later would not be held back.
    import scipy.linalg  # noqa: F401
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1):
        return function(task)


def _abroad(
    address: str, function: Callable[[Task], Result], tasks: Sequence[Task]
) -> Iterator[tuple[int, Result]]:
    with cluster_client(address) as client:
        executor = client.get_executor(pure=False)
        waiting = {
            executor.submit(single_threaded, function, task): number
            for number, task in enumerate(tasks)
        }
        for future in as_completed(waiting):
            yield waiting[future], future.result()


def cluster_client(address: str) -> Any:
    """A client of a Dask scheduler.

    Raises
    ------
    InputError
        No scheduler answers at the address, or what it needs is not installed.
    """
    try:
        from distributed import Client
    except ImportError:
        mend = "install simimg with its extra: pip install 'simimg[cluster]'"
        raise InputError(mistake("--cluster", "", "needs dask.distributed", mend)) from None
    try:
        return Client(address, timeout="15 s", set_as_default=False)
    except (OSError, ValueError) as error:
        what = f"no scheduler answers at {address}: {' '.join(str(error).split())}"
        mend = "give the address that the scheduler printed, as tcp://HOST:8786"
        raise InputError(mistake("--cluster", "", what, mend)) from None
