"""From a sighting to the record of a pair: geometry on the sky, limits, verdicts, saddle.

Arcseconds and degrees in the record; detector pixels before.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import degrees, hypot, nan

import numpy as np

from simimg.resolving.interval import is_lopsided, separation_interval
from simimg.resolving.observation import Observation
from simimg.resolving.pairfit import PairGeometry, pair_geometry
from simimg.resolving.pairlimits import PairLimits
from simimg.resolving.posterior import PairPosterior, pair_posterior
from simimg.resolving.records import CriterionVerdict, PairMeasurement, PairTruth
from simimg.resolving.resolution import to_arcsec
from simimg.resolving.saddle import saddle_seen
from simimg.resolving.sighting import Sighting
from simimg.resolving.skyplane import SkyStep, sky_step
from simimg.resolving.starfit import StarFit
from simimg.resolving.verdict import SURELY_DOUBLE, Limit, probability_beyond, verdict

_SMALL = 0.015  # of the separation: smaller errors are the same at the limit as at the fit
_PLAIN = 1e-3  # probability that needs no better figure, nor its complement
_REST = 6.0  # standard errors of the magnitude difference over which Sparrow's limit is tabulated


@dataclass(frozen=True)
class NamedPair:
    """A pair as TRUTH names it: where its two stars are, and what they are to each other."""

    label: str
    first: tuple[float, float]
    second: tuple[float, float]
    truth: PairTruth


@dataclass(frozen=True, eq=False)
class Judgement:
    """A pair's record and what advice needs beside it.

    Attributes
    ----------
    record : PairMeasurement
        Without advice.
    sighting : Sighting
    geometry : PairGeometry or None
        Pixels and radians; None without a second star.
    """

    record: PairMeasurement
    sighting: Sighting
    geometry: PairGeometry | None


def judge(
    observation: Observation,
    sighting: Sighting,
    limits: PairLimits,
    *,
    named: NamedPair | None = None,
    verdicts_only: bool = False,
) -> Judgement:
    """Turn a sighting into a record.

    Parameters
    ----------
    observation : Observation
    sighting : Sighting
    limits : PairLimits
        Of the observation's PSF.
    named : NamedPair, optional
        The pair of TRUTH that stands here: it settles which star is first, and nothing else.
    verdicts_only : bool, optional
        Leave out what takes time and no verdict needs: the saddle, the separation's interval.
    """
    fit = sighting.double
    if fit is None or sighting.empty:
        return Judgement(_single(observation, sighting, limits, named), sighting, None)
    first, second = _order(fit, named)
    geometry = pair_geometry(fit, first=first, second=second)
    chance = sighting.probability_single
    x, y = (float(value) for value in fit.places[first])
    axes = observation.sky.axes(x, y)
    step = sky_step(axes, length=geometry.separation, angle=geometry.angle)
    asked = _Asked(sighting, fit, first, second, geometry)
    rayleigh, sparrow_verdict = _criteria(observation, limits, asked, step.scale_arcsec)
    resolved = "resolved" in (rayleigh.verdict, sparrow_verdict.verdict)
    saddle = saddle_error = low = high = nan
    if not verdicts_only:
        saddle, saddle_error = _saddle(sighting, fit, first, second)
        low, high = _interval(sighting, geometry, step.length_arcsec)
    difference, spread = geometry.magnitude_difference, geometry.errors[2]
    ra, dec = _sky(observation, x, y)
    errors = _errors(step, geometry)
    record = PairMeasurement(
        label="" if named is None else named.label,
        x=x,
        y=y,
        ra_deg=ra,
        dec_deg=dec,
        separation_arcsec=step.length_arcsec,
        separation_error_arcsec=errors[0],
        separation_low_arcsec=low,
        separation_high_arcsec=high,
        position_angle_deg=step.position_angle_deg,
        position_angle_error_deg=errors[1],
        magnitude_difference=difference,
        magnitude_difference_error=spread,
        probability_single=chance,
        elongated=chance < SURELY_DOUBLE and not resolved,
        ambiguous_180=named is None and not abs(difference) >= 2.0 * spread,
        saddle_ratio=saddle,
        saddle_ratio_error=saddle_error,
        rayleigh=rayleigh,
        sparrow=sparrow_verdict,
        truth=None if named is None else named.truth,
    )
    return Judgement(record, sighting, geometry)


def _order(fit: StarFit, named: NamedPair | None) -> tuple[int, int]:
    """Which fitted star is the first: by place where TRUTH names them, else the brighter."""
    if named is None:
        return (0, 1) if fit.electrons[0] >= fit.electrons[1] else (1, 0)
    wanted = np.array([named.first, named.second])
    straight = float(((fit.places - wanted) ** 2).sum())
    crossed = float(((fit.places[::-1] - wanted) ** 2).sum())
    return (0, 1) if straight <= crossed else (1, 0)


def _sky(observation: Observation, x: float, y: float) -> tuple[float, float]:
    """Right ascension and declination of a place, degrees."""
    ra, dec = observation.sky.to_sky(x, y)
    return degrees(ra), degrees(dec)


def _errors(step: SkyStep, geometry: PairGeometry) -> tuple[float, float]:
    """Errors of separation (arcsec) and position angle (deg) on the sky."""
    slopes = np.array(step.slopes)
    covariance = np.array(geometry.covariance)[:2, :2]
    if not np.isfinite(covariance).all():
        return float("inf"), float("inf")
    variances = np.einsum("ij,jk,ik->i", slopes, covariance, slopes)
    length, angle = (float(value) for value in np.sqrt(np.maximum(variances, 0.0)))
    return length, angle


def _interval(sighting: Sighting, geometry: PairGeometry, arcsec: float) -> tuple[float, float]:
    """The separation's interval (arcsec), NaN where its error says all.

    `arcsec` is the separation on the sky.
    """
    double, cutouts, chance = sighting.double, sighting.cutouts, sighting.probability_single
    if double is None or not geometry.separation > 0.0:
        return nan, nan
    if not is_lopsided(geometry, chance=chance, fwhm=cutouts[0].psf.fwhm):
        return nan, nan
    found = separation_interval(cutouts, single=sighting.single, double=double, chance=chance)
    scale = arcsec / geometry.separation
    return found.low * scale, found.high * scale


def _criteria(
    observation: Observation,
    limits: PairLimits,
    asked: _Asked,
    arcsec: float,
) -> tuple[CriterionVerdict, CriterionVerdict]:
    """Both delivered limits along the pair's own line, with probabilities and verdicts.

    `arcsec` is the length of a pixel along that line.
    """
    scale = observation.sky.pixel_scale
    geometry = asked.geometry
    spread = geometry.errors[2]
    reach = _REST * spread if np.isfinite(spread) else 0.0
    limit = limits.of(geometry.angle, geometry.magnitude_difference, reach)

    def answer(value: float, beyond: float | Limit) -> CriterionVerdict:
        probability = asked.beyond(beyond)
        chance = asked.sighting.probability_single
        return CriterionVerdict(
            limit_arcsec=value / scale * arcsec,
            probability=probability,
            verdict=verdict(probability, probability_single=chance),
        )

    return (
        answer(limit.rayleigh, limit.rayleigh / scale),
        answer(limit.sparrow, lambda differences: limit.sparrow_for(differences) / scale),
    )


class _Asked:
    """A fitted pair, asked whether it lies beyond a limit.

    Where the errors are small against the separation, or the answer is plain, the Gaussian of the
    errors tells; elsewhere the likelihood itself (`simimg.resolving.posterior`), once for all
    limits.
    """

    def __init__(
        self, sighting: Sighting, fit: StarFit, first: int, second: int, geometry: PairGeometry
    ) -> None:
        self.sighting = sighting
        self.geometry = geometry
        self._fit, self._order = fit, (first, second)
        self._covariance = [geometry.covariance[i][::2] for i in (0, 2)]

    def beyond(self, limit: float | Limit) -> float:
        """The probability that the pair's separation (pixels) is beyond a limit."""
        geometry = self.geometry
        plain = probability_beyond(
            limit,
            separation=geometry.separation,
            magnitude_difference=geometry.magnitude_difference,
            covariance=self._covariance,
        )
        rough = geometry.errors[0] > _SMALL * geometry.separation
        if not (rough and _PLAIN < plain < 1.0 - _PLAIN) or self._posterior is None:
            return plain
        return self._posterior.beyond(limit)

    @cached_property
    def _posterior(self) -> PairPosterior | None:
        first, second = self._order
        return pair_posterior(self.sighting.cutouts, self._fit, first=first, second=second)


def _saddle(sighting: Sighting, fit: StarFit, first: int, second: int) -> tuple[float, float]:
    """The saddle in the first cutout that holds both stars; NaN when none does."""
    for index, cutout in enumerate(sighting.cutouts):
        if cutout.view.number:
            continue
        rows, columns = cutout.electrons.shape
        inside = [
            0 <= x - cutout.x0 <= columns - 1 and 0 <= y - cutout.y0 <= rows - 1
            for x, y in fit.places[[first, second]]
        ]
        if all(inside):
            return saddle_seen(cutout, fit, first=first, second=second, index=index)
    return nan, nan


def _single(
    observation: Observation, sighting: Sighting, limits: PairLimits, named: NamedPair | None
) -> PairMeasurement:
    """The record of a place where the fit wants no second star."""
    x, y = (float(value) for value in sighting.single.places[0])
    if sighting.empty or not observation.holds(x, y):
        x, y = sighting.place
    limit = limits.of(0.0, 0.0, 0.0)
    east, north = observation.sky.axes(x, y)[:, 0]
    stretch = hypot(east, north) / observation.sky.pixel_scale

    def unresolved(limit: float) -> CriterionVerdict:
        return CriterionVerdict(
            limit_arcsec=to_arcsec(limit * stretch), probability=0.0, verdict="unresolved"
        )

    ra, dec = _sky(observation, x, y)
    return PairMeasurement(
        label="" if named is None else named.label,
        x=x,
        y=y,
        ra_deg=ra,
        dec_deg=dec,
        separation_arcsec=nan,
        separation_error_arcsec=nan,
        position_angle_deg=nan,
        position_angle_error_deg=nan,
        magnitude_difference=nan,
        magnitude_difference_error=nan,
        probability_single=1.0,
        elongated=False,
        ambiguous_180=False,
        saddle_ratio=nan,
        saddle_ratio_error=nan,
        rayleigh=unresolved(limit.rayleigh),
        sparrow=unresolved(limit.sparrow),
        truth=None if named is None else named.truth,
    )
