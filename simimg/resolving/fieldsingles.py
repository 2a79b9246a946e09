"""What is single in a field: each object as a point and with a width, in its neighbours' company.

A large object is found more than once where the fit of a point leaves its outskirts; what stands
within the light of an extended object and is no point source in its own right belongs to it.

Electrons and detector pixels.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import hypot, sqrt

from simimg.resolving.neighbours import CLEAR, PlacedStar, star_light
from simimg.resolving.observation import Observation
from simimg.resolving.starfit import StarFit, fit_stars
from simimg.resolving.width import WidthFit, fit_width

_COMPANY = 6  # neighbours fitted with a star
_OUTSKIRTS = 3.5  # standard deviations of an extended object's light within which it may be split
_FWHM_SIGMA = 2.3548


@dataclass(frozen=True, eq=False)
class SingleStar:
    """A single object: its fit as a point and with a width, in the company of its neighbours."""

    point: StarFit
    wide: WidthFit


def single_at(
    observation: Observation, star: PlacedStar, others: Sequence[PlacedStar]
) -> SingleStar | None:
    """A star fitted as a point and with a width, those within two FWHM fitted with it.

    Returns
    -------
    SingleStar or None
        None where no light is left for it.
    """
    fwhm = observation.fwhm
    away = [hypot(one.x - star.x, one.y - star.y) for one in others]
    close = [one for one, far in zip(others, away) if 0.0 < far <= CLEAR * fwhm][:_COMPANY]
    known = [one for one, far in zip(others, away) if far > 0.0 and one not in close]
    half = 3.0 * fwhm
    for _ in range(2):
        cutout = observation.cutout(star.x, star.y, half)
        cutout = cutout.with_known(star_light(known, cutout))
        point = fit_stars([cutout], places=[one[:2] for one in (star, *close)])
        if not point.electrons[0] > 0.0:
            return None
        wide = fit_width(cutout, point)
        wanted = 3.0 * fwhm + 2.5 * wide.width
        if not wide.extended or wanted < half + fwhm:
            break
        half = wanted
    return SingleStar(point, wide)


def without_fragments(singles: Sequence[SingleStar], fwhm: float) -> list[SingleStar]:
    """Leave out what belongs to a brighter extended object.

    Parameters
    ----------
    singles : sequence of SingleStar
        By decreasing brightness.
    fwhm : float
        Of the PSF, pixels.
    """
    kept: list[SingleStar] = []
    large: list[SingleStar] = []
    for one in singles:
        if one.wide.extended and any(_within(one, other, fwhm) for other in large):
            continue
        kept.append(one)
        if one.wide.extended and one.wide.width > fwhm / _FWHM_SIGMA:
            large.append(one)
    return kept


def _within(one: SingleStar, large: SingleStar, fwhm: float) -> bool:
    """Whether an extended object lies in the light of a larger one that outshines it."""
    reach = _OUTSKIRTS * sqrt(large.wide.variance + (fwhm / _FWHM_SIGMA) ** 2)
    away = hypot(*(one.wide.place - large.wide.place))
    return away < reach and one.wide.electrons < large.wide.electrons
