"""The test stand: one noise draw after another, each measured.

A stand holds what all trials of a scene share and can be set up in any process from a `Setup`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from simimg.arrays import FloatArray
from simimg.resolving.judging import judge
from simimg.resolving.observation import Observation
from simimg.resolving.ownpsfs import OwnPsfs
from simimg.resolving.pairlimits import PairLimits
from simimg.study.exposures import Exposures, Recipe
from simimg.study.knownpair import KnownPair
from simimg.study.tally import FIGURES, kept

_MANY = 10_000  # pairs: limits of neighbouring directions are shared


@dataclass(frozen=True, eq=False)
class Setup:
    """What a stand is set up from; can be sent to another process.

    Attributes
    ----------
    recipe : Recipe
    alone : tuple of bool
        For each of its pairs, whether no other object shines in.
    exposures : int
        How many are fitted together, besides each alone; 1 for none.
    """

    recipe: Recipe
    alone: tuple[bool, ...]
    exposures: int


class Stand:
    """Draws exposures and measures the pairs in them.

    Parameters
    ----------
    setup : Setup
    """

    def __init__(self, setup: Setup) -> None:
        self._draws = Exposures(setup.recipe)
        self._count = setup.exposures
        counts = [1] if self._count == 1 else [1, self._count]
        own = OwnPsfs(self._draws.blank)
        self._seen = [own.pair(pair) for pair in setup.recipe.pairs]
        cuts = dict.fromkeys(one.delivered for one in self._seen)
        self._limits = {one: PairLimits(one, pairs=_MANY) for one in cuts}
        self._pairs = [
            [
                KnownPair.prepare(_as(self._draws.noiseless(count), seen), pair, alone=alone)
                for pair, seen, alone in zip(setup.recipe.pairs, self._seen, setup.alone)
            ]
            for count in counts
        ]

    def run(self, number: int) -> FloatArray:
        """Make one trial.

        Parameters
        ----------
        number : int
            Of the trial, from 0.

        Returns
        -------
        ndarray, shape (1 or 2, pairs, 9)
            For one frame, and for those fitted together, what `kept` keeps of each pair.
        """
        results = np.empty((len(self._pairs), len(self._pairs[0]), FIGURES))
        for kind, pairs in enumerate(self._pairs):
            if kind == 0:
                observation = self._draws.one(number)
            else:
                begin = number * self._count
                observation = self._draws.together(range(begin, begin + self._count))
            for index, (pair, seen) in enumerate(zip(pairs, self._seen)):
                results[kind, index] = self._measured(_as(observation, seen), pair)
        return results

    def _measured(self, observation: Observation, pair: KnownPair) -> FloatArray:
        sighting, limits = pair.look(observation), self._limits[observation.delivered]
        judgement = judge(observation, sighting, limits, named=pair.named, verdicts_only=True)
        return kept(judgement.record)


def _as(observation: Observation, seen: Observation) -> Observation:
    """An exposure with the PSF of one of its pairs."""
    return replace(observation, psf=seen.psf, delivered=seen.delivered, sourced=seen.sourced)
