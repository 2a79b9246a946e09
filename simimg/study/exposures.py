"""Many exposures of one scene as a fit sees them: what they share is worked out once.

Each exposure is the one that `simimg.exposure.expose` makes under the same number; only what a
fit does not need is left out. Exposures that are fitted together are added up: they share one PSF
and one background, so that the sum of their electrons, a Poisson number plus Gaussian noise like
each of them, says all that they say about the stars (the sum of Poisson numbers of one mean is
sufficient for it). Electrons, counts and detector pixels.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot, inf

import numpy as np

from simimg.arrays import AnyArray
from simimg.camera.binning import binned
from simimg.camera.chain import CameraSettings, record
from simimg.camera.dark import dark_signal
from simimg.exposure import Prepared
from simimg.frame import Frame
from simimg.resolving.judging import NamedPair
from simimg.resolving.observation import Observation, observe
from simimg.scene.file import scene_record


@dataclass(frozen=True, eq=False)
class Recipe:
    """What is needed to draw and observe exposures; can be sent to another process.

    Attributes
    ----------
    light : ndarray, shape (rows, columns)
        Expected electrons of objects and sky, in the pixels of the detector.
    settings : CameraSettings
    seed : int
    pairs : tuple of NamedPair
        Pairs that will be looked at.
    scene_files : tuple of (name, sha256, content)
        The scene as a frame carries it.
    directory : str
        Folder in which files are that it keeps only by their hash.
    """

    light: AnyArray
    settings: CameraSettings
    seed: int
    pairs: tuple[NamedPair, ...]
    scene_files: tuple[tuple[str, str, bytes], ...]
    directory: str

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of a frame."""
        rows, columns = self.light.shape
        side = self.settings.readout.binning
        return rows // side, columns // side

    @classmethod
    def of(cls, prepared: Prepared, pairs: Sequence[NamedPair], *, seed: int) -> Recipe:
        """The recipe of a prepared scene."""
        return cls(
            light=prepared.light,
            settings=replace(
                prepared.settings,
                readout=replace(prepared.settings.readout, prescan=0, overscan=0),
            ),
            seed=seed,
            pairs=tuple(pairs),
            scene_files=tuple(scene_record(prepared.scene)),
            directory=str(prepared.scene.directory.absolute()),
        )


class Exposures:
    """Draws of a recipe, each as an observation.

    Parameters
    ----------
    recipe : Recipe
    """

    def __init__(self, recipe: Recipe) -> None:
        self._recipe = recipe
        widest = max(
            (hypot(p.second[0] - p.first[0], p.second[1] - p.first[1]) for p in recipe.pairs),
            default=0.0,
        )
        blank = Frame(
            counts=np.zeros(recipe.shape, np.uint16),
            scene_files=recipe.scene_files,
            directory=recipe.directory,
        )
        self._observation = observe(blank, widest=widest)

    @property
    def blank(self) -> Observation:
        """The observation without any exposure in it."""
        return self._observation

    def one(self, number: int) -> Observation:
        """Exposure of this number."""
        return replace(self._observation, frame=self._frame(number))

    def together(self, numbers: Sequence[int]) -> Observation:
        """Several exposures, added up; a pixel that is full in one of them does not count."""
        if len(numbers) == 1:
            return self.one(numbers[0])
        total = np.zeros(self._recipe.shape)
        for number in numbers:
            one = self.one(number)
            total += np.where(one.usable(), one.frame.counts, np.nan)
        total -= (len(numbers) - 1) * self._observation.bias
        return self._added(total, len(numbers))

    def noiseless(self, count: int = 1) -> Observation:
        """The expectation of as many exposures, added up."""
        settings = self._recipe.settings
        readout = settings.readout
        light = binned(self._recipe.light.astype(np.float64), readout.binning)
        light += dark_signal(settings.dark_current, settings.time) * readout.binning**2
        counts = light * readout.em_gain / settings.gain + settings.bias
        counts[counts >= self._observation.saturation] = np.nan
        return self._added((counts - settings.bias) * count + settings.bias, count)

    def _added(self, counts: AnyArray, count: int) -> Observation:
        return replace(
            self._observation,
            frame=Frame(counts=counts),
            variance=self._observation.variance * count,
            saturation=inf,
        )

    def _frame(self, number: int) -> Frame:
        recipe = self._recipe
        made = record(recipe.light, settings=recipe.settings, seed=recipe.seed, frame=number)
        return Frame(counts=made.counts, mask=made.mask if made.mask.any() else None)
