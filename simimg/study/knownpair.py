"""Looking at a pair whose truth is known, many times over: the same answer, sooner.

`simimg.resolving.sighting.look` searches for a second star as if nothing were known. For a pair
that has been put into the frame the search ends, time after time, near where the second star is;
a fit begun there takes a fraction of the time and finds the same maximum of the likelihood.
Wherever that is not beyond doubt - the second star is not certain, the mirror solution of a close
unequal pair cannot be ruled out, the fit has not settled, other objects shine in - the whole search
is made.

Detector pixels and electrons.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.resolving.doubles import probability_single
from simimg.resolving.judging import NamedPair
from simimg.resolving.observation import Observation
from simimg.resolving.sighting import Sighting, look
from simimg.resolving.starfit import Cutout, StarFit, fit_stars

_CERTAIN = 60.0  # fall of the deviance with which no other place of the second star can compete
_SETTLED = 1.5  # FWHM by which the separation may differ from the true one
_WIDEST = 1e3  # more than the area and the rim of any search disc, in the metric of its scores


@dataclass(frozen=True, eq=False)
class KnownPair:
    """A pair to be looked at in many frames of one kind.

    Attributes
    ----------
    named : NamedPair
    quick : bool
        False where the whole search is always made.
    boxes : tuple of (slice, slice)
        Rows and columns of what is cut out.
    single : ndarray, shape (1, 3)
        x, y and electrons of the best single star in the frame without noise.
    double : ndarray, shape (2, 3)
        The same of the two stars.
    """

    named: NamedPair
    quick: bool
    boxes: tuple[tuple[slice, slice], ...]
    single: FloatArray
    double: FloatArray

    @classmethod
    def prepare(cls, noiseless: Observation, named: NamedPair, *, alone: bool) -> KnownPair:
        """Learn what is the same in every frame.

        Parameters
        ----------
        noiseless : Observation
            Of the expected counts.
        named : NamedPair
        alone : bool
            Whether no other object shines in.
        """
        seen = look(noiseless, named.first, other=named.second)
        quick = alone and not seen.neighbours and seen.gain > _CERTAIN
        two = seen.double
        if two is None or not quick or _mirrored(seen.cutouts, two):
            nothing = frozen(np.empty((0, 3)))
            return cls(named, False, (), nothing, nothing)
        boxes = tuple(_box(cutout) for cutout in seen.cutouts)
        return cls(named, True, boxes, _stars(seen.single), _stars(two))

    def look(self, observation: Observation) -> Sighting:
        """Look at the pair in one frame."""
        return (self._quickly(observation) if self.quick else None) or look(
            observation, self.named.first, other=self.named.second
        )

    def _quickly(self, observation: Observation) -> Sighting | None:
        """One star and two, from known starts; None where doubt remains."""
        cutouts = tuple(_cut(observation, box) for box in self.boxes)
        single, double = (
            fit_stars(cutouts, places=start[:, :2], electrons=start[:, 2])
            for start in (self.single, self.double)
        )
        gain = single.deviance - double.deviance
        if not (gain > _CERTAIN and single.converged and double.converged):
            return None
        lengths = [hypot(*(p[1] - p[0])) for p in (double.places, self.double[:, :2])]
        astray = abs(lengths[1] - lengths[0]) > _SETTLED * observation.fwhm
        if astray or double.electrons.min() <= 0.0:
            return None
        chance = probability_single(gain, area=_WIDEST, rim=_WIDEST)
        return Sighting(cutouts, single, double, gain, chance, (), self.named.first)


def _stars(fit: StarFit) -> FloatArray:
    return frozen(np.column_stack([fit.places, fit.electrons]))


def _box(cutout: Cutout) -> tuple[slice, slice]:
    rows, columns = cutout.electrons.shape
    left, bottom = round(cutout.x0), round(cutout.y0)
    return slice(bottom, bottom + rows), slice(left, left + columns)


def _cut(observation: Observation, box: tuple[slice, slice]) -> Cutout:
    return Cutout.of(
        observation.electrons(box),
        variance=observation.variance,
        psf=observation.psf,
        x0=box[1].start,
        y0=box[0].start,
        used=observation.usable(box),
    )


def _mirrored(cutouts: tuple[Cutout, ...], double: StarFit) -> bool:
    """Whether the noise may prefer the second star on the other side of the first."""
    mirrored = _stars(double).copy()
    light = mirrored[:, 2] / mirrored[:, 2].sum()
    mirrored[:, :2] = 2.0 * (light @ mirrored[:, :2]) - mirrored[:, :2]
    other = fit_stars(cutouts, places=mirrored[:, :2], electrons=mirrored[:, 2])
    orders = other.places, other.places[::-1]
    offs = [float(np.abs(places - double.places).max()) for places in orders]
    same = min(offs) < 0.1 * hypot(*(double.places[1] - double.places[0]))
    return not same and other.deviance - double.deviance < _CERTAIN
