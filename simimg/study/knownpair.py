"""Looking at a pair whose truth is known, many times over: the same answer, sooner.

`simimg.resolving.sighting.look` searches for a second star as if nothing were known. For a pair
that has been put into the frame the search would end, time after time, at one of two places: where
the second star is, or (the mirror solution of a close unequal pair) at the other side of the first.
The fit is therefore begun there, which takes a fraction of the time and finds the same maximum of
the likelihood. Wherever that is not beyond doubt - the second star is not certain, the fit has not
settled, other objects shine in - the whole search is made.

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
    starts : tuple of ndarray, shape (2, 3)
        The same of the two stars, and of the mirror solution where noise may prefer it.
    """

    named: NamedPair
    quick: bool
    boxes: tuple[tuple[slice, slice], ...]
    single: FloatArray
    starts: tuple[FloatArray, ...]

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
        nothing = frozen(np.empty((0, 3)))
        if not alone or seen.neighbours or seen.double is None or seen.gain < _CERTAIN:
            return cls(named, False, (), nothing, ())
        return cls(
            named=named,
            quick=True,
            boxes=tuple(_box(cutout) for cutout in seen.cutouts),
            single=_stars(seen.single),
            starts=_starts(seen.cutouts, seen.double),
        )

    def look(self, observation: Observation) -> Sighting:
        """Look at the pair in one frame."""
        return (self._quickly(observation) if self.quick else None) or look(
            observation, self.named.first, other=self.named.second
        )

    def _quickly(self, observation: Observation) -> Sighting | None:
        """One star and two, from known starts; None where doubt remains."""
        cutouts = tuple(_cut(observation, box) for box in self.boxes)
        fits = [
            fit_stars(cutouts, places=start[:, :2], electrons=start[:, 2])
            for start in (self.single, *self.starts)
        ]
        single, double = fits[0], min(fits[1:], key=lambda fit: fit.deviance)
        gain = single.deviance - double.deviance
        true = self.starts[0][1, :2] - self.starts[0][0, :2]
        off = abs(hypot(*(double.places[1] - double.places[0])) - hypot(*true))
        certain = gain > _CERTAIN and all(fit.converged for fit in fits)
        if not certain or off > _SETTLED * observation.fwhm or double.electrons.min() <= 0.0:
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


def _starts(cutouts: tuple[Cutout, ...], double: StarFit) -> tuple[FloatArray, ...]:
    """The two stars, and their mirror solution where the noise may prefer it."""
    true = _stars(double)
    light = true[:, 2] / true[:, 2].sum()
    mirrored = true.copy()
    mirrored[:, :2] = 2.0 * (light @ true[:, :2]) - true[:, :2]
    other = fit_stars(cutouts, places=mirrored[:, :2], electrons=mirrored[:, 2])
    if other.deviance - double.deviance > _CERTAIN or _same(other, double):
        return (true,)
    return true, _stars(other)


def _same(one: StarFit, two: StarFit) -> bool:
    """Whether two fits are one solution, the stars in either order."""
    offs = [float(np.abs(one.places - places).max()) for places in (two.places, two.places[::-1])]
    return min(offs) < 0.1 * float(np.hypot(*(two.places[1] - two.places[0])))
