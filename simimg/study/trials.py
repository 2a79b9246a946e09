"""trials: how often a pair would be resolved, and how well measured, over many noise draws.

Everything up to the noise is worked out once; then exposure after exposure is drawn and measured as
`simimg.measure` would measure it, only without advice. Trial i of single frames is the exposure of
number i, so that any of them can be made and looked at. Where a scene asks for several exposures
(``exposure.count``, n), trial i of those fitted together is the exposures n i to n i + n - 1.

Each process works on one thread, and no result depends on which process made it.
"""

from __future__ import annotations

import multiprocessing
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor, as_completed
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, fields, is_dataclass
from math import isfinite
from typing import Any

import numpy as np

from simimg.arrays import FloatArray
from simimg.assembly.truth import truth_table
from simimg.errors import RunError
from simimg.exposure import Prepared, prepare
from simimg.frame import Frame
from simimg.interrupts import holding_interrupts
from simimg.resolving.bound import PairPrecision, pair_precision
from simimg.resolving.expectation import Expectation, StarPair, pairs_of
from simimg.resolving.judging import NamedPair
from simimg.resolving.measure import named_pairs
from simimg.scene.model import Scene
from simimg.study.exposures import Recipe
from simimg.study.stand import Setup, Stand
from simimg.study.tally import Tally, tally

Progress = Callable[[int, int], None]
Take = Callable[[range, FloatArray], None]
_CHUNK = 16  # trials that a process takes at a time
_STRAY = 1.0  # standard deviations of other objects' light that would not show


@dataclass(frozen=True, kw_only=True)
class PairTrials(Tally):
    """What the trials say of one pair: of single frames, and of several fitted together.

    Attributes
    ----------
    label : str
        Of the pair.
    x, y : float
        Place of its first star, pixels.
    exposures : int
        How many exposures the scene asks for.
    together : Tally or None
        Of all these fitted together; None where it is one.
    trials, measured : int
        How many single frames, and in how many of them two stars were fitted.
    double, rayleigh, sparrow : Fraction
        Shares of single frames in which a single star is ruled out, and in which either criterion
        says ``resolved``, with their 95 % intervals (Wilson 1927).
    bias, scatter, error : Geometry
        Mean of measured minus true, standard deviation, and median of the errors quoted; arcsec,
        degrees, magnitudes.
    bound : PairPrecision
        Cramer-Rao bounds of a single frame.
    """

    label: str
    x: float
    y: float
    exposures: int
    together: Tally | None

    def to_dict(self) -> dict[str, Any]:
        """For JSON: nested dictionaries; None for what is not finite."""
        result: dict[str, Any] = _plain(self)
        return result


def trials(
    scene: Scene,
    *,
    count: int,
    seed: int | None = None,
    workers: int | None = None,
    progress: Progress | None = None,
) -> list[PairTrials]:
    """Expose and measure a scene's pairs over and over, and say how often and how well it went.

    Parameters
    ----------
    scene : Scene
    count : int
        Trials, 1 or more; as many again where the scene asks for several exposures, each of all
        these fitted together.
    seed : int, optional
        In place of the scene's own.
    workers : int, optional
        Processes to work in, of no effect on the result; 1 unless given, which starts none. A
        script that asks for more must guard its main part by ``if __name__ == "__main__":``.
    progress : callable, optional
        Called with the trials done and their whole number, now and then.

    Returns
    -------
    list of PairTrials
        One for each pair both of whose stars lie in the frame, in the order of the scene.

    Raises
    ------
    InputError
        The scene lacks what an exposure needs, or cannot be computed in the memory.
    RunError
        A process was stopped from outside.
    ValueError
        A count or a number of workers below 1, a seed below 0.
    """
    if count < 1 or (workers is not None and workers < 1) or (seed is not None and seed < 0):
        raise ValueError(
            "count and workers must be 1 or more and seed 0 or more, "
            f"got {count}, {workers}, {seed}"
        )
    prepared = prepare(scene)
    exposures = scene.exposure.count if scene.exposure is not None else 1
    own = scene.exposure.seed if scene.exposure is not None else 0
    view = Expectation.of(scene, prepared.train, prepared.objects)
    named = _named(prepared)
    if not named or view is None:
        return []
    setup = Setup(
        recipe=Recipe.of(prepared, [one for one, _ in named], seed=own if seed is None else seed),
        alone=tuple(_alone(view, pair, exposures) for _, pair in named),
        exposures=exposures,
    )
    results = _all(setup, count, workers or 1, progress)
    return [
        _summed(one, pair, view, results[:, :, index], exposures)
        for index, (one, pair) in enumerate(named)
    ]


def _named(prepared: Prepared) -> list[tuple[NamedPair, StarPair]]:
    """The pairs that lie in the frame, as TRUTH names them and as the inventory holds them."""
    rows, columns = prepared.expected.shape
    truth = truth_table(prepared.objects, prepared.train)
    blank = Frame(counts=np.zeros((rows, columns), np.uint16), truth=truth)
    pairs = {
        (first.x, first.y, second.x, second.y): (first, second)
        for first, second in pairs_of(prepared.objects)
    }
    return [(one, pairs[(*one.first, *one.second)]) for one in named_pairs(blank)]


def _alone(view: Expectation, pair: StarPair, exposures: int) -> bool:
    """Whether the light of other objects is lost in the noise about a pair."""
    power = sum(
        float((image.used * image.known**2 / (image.electrons + image.variance + 1e-9)).sum())
        for image in view.cutouts(pair)
    )
    return power * exposures < _STRAY**2


def _summed(
    one: NamedPair, pair: StarPair, view: Expectation, results: FloatArray, exposures: int
) -> PairTrials:
    """One pair's trials, shape (trials, kinds, figures), put together."""

    def of(kind: int, number: int) -> Tally:
        bound = pair_precision(view, pair, exposures=number)
        return tally(results[:, kind], truth=one.truth, bound=bound)

    alone = of(0, 1)
    return PairTrials(
        **{field.name: getattr(alone, field.name) for field in fields(alone)},
        label=one.label,
        x=one.first[0],
        y=one.first[1],
        exposures=exposures,
        together=of(1, exposures) if exposures > 1 else None,
    )


def _all(setup: Setup, count: int, workers: int, progress: Progress | None) -> FloatArray:
    """Every trial, shape (trials, kinds, pairs, figures)."""
    chunks = [range(begin, min(begin + _CHUNK, count)) for begin in range(0, count, _CHUNK)]
    results: dict[int, FloatArray] = {}

    def take(chunk: range, part: FloatArray) -> None:
        results[chunk.start] = part
        if progress is not None:
            progress(sum(len(one) for one in results.values()), count)

    if workers == 1 or len(chunks) == 1:
        _here(setup, chunks, take)
    else:
        _elsewhere(setup, chunks, min(workers, len(chunks)), take)
    return np.concatenate([results[chunk.start] for chunk in chunks])


def _here(setup: Setup, chunks: list[range], take: Take) -> None:
    from threadpoolctl import threadpool_limits

    # The same library on the same number of threads gives the same bits.
    with threadpool_limits(limits=1):
        stand = Stand(setup)
        for chunk in chunks:
            take(chunk, _run(stand, chunk))


def _elsewhere(setup: Setup, chunks: list[range], workers: int, take: Take) -> None:
    pool = ProcessPoolExecutor(
        workers,
        mp_context=multiprocessing.get_context("spawn"),
        initializer=_begin,
        initargs=(setup,),
    )
    try:
        with holding_interrupts():
            waiting = {pool.submit(_run_here, chunk): chunk for chunk in chunks}
        for future in as_completed(waiting):
            take(waiting.pop(future), future.result())
    except BrokenProcessPool as error:
        raise RunError(
            "a process of the trials could not start or was stopped; try one worker, and guard the "
            'main part of a script by if __name__ == "__main__":'
        ) from error
    finally:
        pool.shutdown(cancel_futures=True)


_stands: list[Stand] = []


def _begin(setup: Setup) -> None:
    """Set up a process."""
    from threadpoolctl import threadpool_limits

    threadpool_limits(limits=1)
    _stands[:] = [Stand(setup)]


def _run_here(chunk: range) -> FloatArray:
    return _run(_stands[0], chunk)


def _run(stand: Stand, chunk: range) -> FloatArray:
    return np.stack([stand.run(number) for number in chunk])


def _plain(value: Any) -> Any:
    """Dictionaries and finite numbers."""
    if isinstance(value, float):
        return value if isfinite(value) else None
    if isinstance(value, PairPrecision):
        return value.to_dict()
    if is_dataclass(value):
        return {one.name: _plain(getattr(value, one.name)) for one in fields(value)}
    return value
