"""Two stars fitted to a frame, from starts that cannot miss, with the errors of their geometry.

The fit moves in the photocentre, the total electrons, the vector from the first to the second star
and the logarithm of their ratio of electrons: a close pair shows its photocentre and total well,
its separation less and its ratio least, and in these coordinates the likelihood is closest to
quadratic. The ratio's logarithm keeps both stars positive.

Starts come from the scan of a second star's score over a disc about the single-star fit (its
highest places) and from the best infinitesimal pair (equal and unequal splits, both ways round);
the best likelihood wins.

Electrons and detector pixels; angles are measured from detector +x towards +y.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from simimg.arrays import FloatArray
from simimg.resolving.secondstar import SecondStarScan, scan_second_star
from simimg.resolving.starfit import (
    Cutout,
    Expansion,
    Likelihood,
    StarFit,
    damped_step,
    finished,
    fit_stars,
    next_damping,
)

_MOST_STEPS = 80
_FIRST_STEPS = 3  # taken from every start before the best are chosen
_ENOUGH = 1e-2  # deviance that may be left to win: half a per cent of a false-alarm probability
_CONVERGED = 1e-5  # where a second star is certain, for the sake of its place
_CERTAIN = 15.0
_FINALISTS = 3
_GAP = 30.0  # deviance behind the best after the first steps at which a start is given up
_MOST_RATIO = 14.0  # of the ratio's natural logarithm: fainter than that is no star
_MOST_STARTS = 3
_UNEQUAL = 1.7  # natural logarithm of the ratio of the unequal splits tried
MAGNITUDE = 2.5 / np.log(10.0)


@dataclass(frozen=True, eq=False)
class PairFit:
    """One and two stars fitted to the same cutouts.

    Attributes
    ----------
    single : StarFit
    double : StarFit or None
        None when no second star with positive electrons improves the likelihood.
    scan : SecondStarScan
    gain : float
        Fall of the deviance from one star to two, 0 or more.
    """

    single: StarFit
    double: StarFit | None
    scan: SecondStarScan
    gain: float


@dataclass(frozen=True)
class PairGeometry:
    """Separation, direction and magnitude difference of two fitted stars, with their covariance.

    Attributes
    ----------
    separation : float
        Pixels.
    angle : float
        Direction from the first to the second star, radians from detector +x towards +y.
    magnitude_difference : float
        Second minus first.
    covariance : tuple of tuple of float
        Of the three above, in that order.
    """

    separation: float
    angle: float
    magnitude_difference: float
    covariance: tuple[tuple[float, ...], ...]

    @property
    def errors(self) -> tuple[float, float, float]:
        """Standard errors of separation, angle and magnitude difference."""
        first, second, third = (float(np.sqrt(max(self.covariance[i][i], 0.0))) for i in range(3))
        return first, second, third


def pair_geometry(fit: StarFit, *, first: int = 0, second: int = 1) -> PairGeometry:
    """Return the geometry of two stars of a fit.

    Parameters
    ----------
    fit : StarFit
    first, second : int
        Which of its stars.
    """
    dx, dy = fit.places[second] - fit.places[first]
    separation = float(np.hypot(dx, dy))
    one, two = float(fit.electrons[first]), float(fit.electrons[second])
    slopes = np.zeros((3, len(fit.covariance)))
    a, b = 3 * first, 3 * second
    if separation > 0:
        along = np.array([dx, dy]) / separation
        across = np.array([-dy, dx]) / separation**2
        slopes[0, a : a + 2], slopes[0, b : b + 2] = -along, along
        slopes[1, a : a + 2], slopes[1, b : b + 2] = -across, across
    slopes[2, a + 2], slopes[2, b + 2] = MAGNITUDE / one, -MAGNITUDE / two
    if np.isfinite(fit.covariance).all():
        covariance = slopes @ fit.covariance @ slopes.T
    else:
        covariance = np.full((3, 3), np.inf)
    return PairGeometry(
        separation=separation,
        angle=float(np.arctan2(dy, dx)),
        magnitude_difference=float(-MAGNITUDE * np.log(two / one)),
        covariance=tuple(tuple(float(value) for value in row) for row in covariance),
    )


def fit_pair(
    cutouts: Sequence[Cutout],
    *,
    place: Sequence[float],
    radius: float,
    geometry: bool = True,
) -> PairFit:
    """Fit one star, then two, to what stands near a place.

    Parameters
    ----------
    cutouts : sequence of Cutout
    place : (x, y)
        Where to look, pixels of the frame; a FWHM off does no harm.
    radius : float
        The second star is sought within this distance of the first, pixels.
    geometry : bool, optional
        Whether the scan measures the disc, which the false-alarm probability needs.
    """
    single = fit_stars(cutouts, places=[place], enough=_ENOUGH)
    scan = scan_second_star(cutouts, single, radius=radius, geometry=geometry)
    double = refine_pair(cutouts, single, scan)
    gain = 0.0 if double is None else max(0.0, single.deviance - double.deviance)
    return PairFit(single, double if gain > 0.0 else None, scan, gain)


def refine_pair(cutouts: Sequence[Cutout], single: StarFit, scan: SecondStarScan) -> StarFit | None:
    """Fit two stars from every promising place of a scan; the best, or None."""
    search = PairSearch(cutouts, scan.radius)
    states = []
    for start in pair_starts(single, scan, cutouts[0].psf.fwhm):
        state = PairState(start, search.expand(start), 1e-3)
        states.append(search.run(state, _FIRST_STEPS, _ENOUGH))
    states.sort(key=lambda state: state.now.deviance)
    finals: list[PairState] = []
    for state in states[:_FINALISTS]:
        if state.now.deviance > states[0].now.deviance + _GAP:
            continue
        finals.append(search.run(state, _MOST_STEPS, _ENOUGH))
    if not finals:
        return None
    best = min(finals, key=lambda state: state.now.deviance)
    if single.deviance - best.now.deviance > _CERTAIN:
        best = search.run(best, _MOST_STEPS, _CONVERGED)
    outer = search.outer(best.vector)
    return finished(
        search.likelihood, outer, search.likelihood.expand(outer), converged=best.converged
    )


def inner_vector(fit: StarFit) -> FloatArray:
    """Photocentre x, y, total, dx, dy, log ratio and the rest of a fit of two stars."""
    vector = fit.vector
    one, two = vector[2], vector[5]
    centre = (one * vector[0:2] + two * vector[3:5]) / (one + two)
    pair = [*centre, one + two, *(vector[3:5] - vector[0:2]), np.log(two / one)]
    return np.concatenate([pair, vector[6:]])


def pair_starts(single: StarFit, scan: SecondStarScan, fwhm: float) -> list[FloatArray]:
    """Inner vectors to start from, as `inner_vector` gives them: every promising place."""
    (x, y), total = single.places[0], float(single.electrons[0])
    rest = np.concatenate([single.background, single.extras])
    starts: list[FloatArray] = []
    best = int(np.argmax(scan.direction_scores))
    if scan.direction_scores[best] > 0:
        strength = 2.0 * float(scan.direction_strengths[best]) / max(total, 1e-9)
        phi = float(scan.directions[best])
        for log_ratio in (0.0, _UNEQUAL, -_UNEQUAL):
            share = 1.0 / (1.0 + np.exp(-log_ratio))
            length = np.sqrt(strength / (share * (1.0 - share)))
            length = float(np.clip(length, 0.02 * fwhm, min(1.5 * fwhm, scan.radius)))
            vector = [x, y, total, length * np.cos(phi), length * np.sin(phi), log_ratio]
            starts.append(np.concatenate([vector, rest]))
    order = np.argsort(-scan.scores)
    taken: list[FloatArray] = []
    for index in order:
        if scan.scores[index] <= 0 or len(taken) == _MOST_STARTS:
            break
        offset = scan.offsets[index]
        if any(np.hypot(*(offset - other)) < 0.7 * fwhm for other in taken):
            continue
        taken.append(offset)
        share = float(np.clip(scan.electrons[index] / max(total, 1e-9), 1e-4, 0.6))
        centre = np.array([x, y]) + share * offset * float(np.hypot(*offset) > fwhm)
        log_ratio = float(np.log(share / (1.0 - share)))
        starts.append(np.concatenate([centre, [total], offset, [log_ratio], rest]))
    return starts


@dataclass
class PairState:
    """Where a descent stands: an inner vector (see `inner_vector`)."""

    vector: FloatArray
    now: Expansion
    damping: float
    converged: bool = False


class PairSearch:
    """Descent of the deviance in the inner coordinates, the separation kept within a radius.

    Parameters
    ----------
    cutouts : sequence of Cutout
    radius : float
        Pixels.
    held : bool, optional
        Whether the separation is to be the radius itself.
    """

    def __init__(self, cutouts: Sequence[Cutout], radius: float, *, held: bool = False) -> None:
        self.likelihood = Likelihood(cutouts, 2)
        self.radius = radius
        self.held = held
        self.reach = 0.5 * cutouts[0].psf.fwhm
        self.turn = min(self.reach, radius) if held else self.reach

    def outer(self, inner: FloatArray) -> FloatArray:
        """From the inner coordinates to x1, y1, electrons1, x2, y2, electrons2, the rest."""
        result = inner.copy()
        share = 1.0 / (1.0 + np.exp(-inner[5]))
        result[0:2] = inner[0:2] - share * inner[3:5]
        result[3:5] = inner[0:2] + (1.0 - share) * inner[3:5]
        result[2] = (1.0 - share) * inner[2]
        result[5] = share * inner[2]
        return result

    def expand(self, inner: FloatArray) -> Expansion:
        """Deviance, slope and information in the inner coordinates."""
        outer = self.likelihood.expand(self.outer(inner))
        share = 1.0 / (1.0 + np.exp(-inner[5]))
        turn = np.eye(len(inner))
        for axis in (0, 1):
            turn[axis, [axis, 3 + axis]] = 1.0
            turn[3 + axis, [axis, 3 + axis]] = -share, 1.0 - share
            turn[5, [axis, 3 + axis]] = -share * (1.0 - share) * inner[3 + axis]
        turn[2, [2, 5]] = 1.0 - share, share
        turn[5, [2, 5]] = np.array([-1.0, 1.0]) * share * (1.0 - share) * inner[2]
        return Expansion(outer.deviance, turn @ outer.slope, turn @ outer.information @ turn.T)

    def run(self, state: PairState, steps: int, enough: float) -> PairState:
        """Take up to ``steps`` trial steps, until less than ``enough`` deviance is to be won."""
        vector, now, damping = state.vector, state.now, state.damping
        for _ in range(steps):
            step, promised = self._step(vector, now, damping)
            if promised < enough and damping < 0.1:
                return PairState(vector, now, damping, True)
            trial = self._kept(vector + step)
            if abs(trial[5]) > _MOST_RATIO:
                return PairState(vector, now, damping, True)
            candidate = self.expand(trial)
            fall = now.deviance - candidate.deviance
            damping = next_damping(damping, fall, promised)
            if fall >= 0.0:
                vector, now = trial, candidate
            elif damping > 1e8:
                break
        return PairState(vector, now, damping)

    def along_rim(self, vector: FloatArray, now: Expansion) -> tuple[FloatArray, Expansion]:
        """The expansion at a held separation, and its directions, shape (p - 1, p).

        They are the photocentre, the total, the way along the rim (pixels), the log ratio, the
        rest.
        """
        dx, dy = vector[3:5] / float(np.hypot(*vector[3:5]))
        tangent = np.zeros((len(vector) - 1, len(vector)))
        tangent[[0, 1, 2], [0, 1, 2]] = 1.0
        tangent[3, 3:5] = -dy, dx
        tangent[range(4, len(vector) - 1), range(5, len(vector))] = 1.0
        information = tangent @ now.information @ tangent.T
        return tangent, Expansion(now.deviance, tangent @ now.slope, information)

    def _step(self, vector: FloatArray, now: Expansion, damping: float) -> tuple[FloatArray, float]:
        """One damped step; along the rim only where the rim holds the star back."""
        length = float(np.hypot(vector[3], vector[4]))
        along = self.held
        if not along:
            step, promised = damped_step(now, damping)
            outward = vector[3] * step[3] + vector[4] * step[4] > 0
            along = length >= self.radius * (1.0 - 1e-9) and outward
        if along:
            tangent, held = self.along_rim(vector, now)
            short, promised = damped_step(held, damping)
            step = tangent.T @ short
        longest = max(
            float(np.hypot(step[0], step[1])) / self.reach,
            float(np.hypot(step[3], step[4])) / self.turn,
            abs(float(step[5])) / 1.5,
            -float(step[2]) / (0.7 * vector[2]),
            self.likelihood.layout.longest(step, self.reach),
        )
        return (step / longest if longest > 1.0 else step), promised

    def _kept(self, trial: FloatArray) -> FloatArray:
        """Pull the second star back to the rim."""
        length = float(np.hypot(trial[3], trial[4]))
        if length > self.radius or self.held:
            trial[3:5] *= self.radius / length
        return trial
