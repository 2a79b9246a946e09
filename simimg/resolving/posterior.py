"""How probable a separation and a magnitude difference are, beyond the Gaussian of their errors.

Where a separation is known to a few per cent only, its error is not the same at the limit as at the
fit: the closer a pair, the larger the error (as one over the separation). More of the closer pairs
are then measured at a given separation than of the wider ones, and a symmetric Gaussian about the
fit claims too often that a pair lies beyond a limit.

Here the likelihood itself is taken over a grid of separations and magnitude differences that covers
the Gaussian, with flat priors in all parameters: at each node the likelihood is integrated over
what is not asked for (place, light, position angle, background) by Laplace's approximation (Tierney
& Kadane 1986, J. Am. Stat. Assoc. 81, 82), from one Fisher-scoring step off the Gaussian's own
guess. The curvature that this asks for is that of the data's own likelihood (the expected one, of
data that are elsewhere than the node, would correct too much); its logarithm is taken to change
evenly over the grid. Detector pixels and magnitudes.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.interpolate import RectBivariateSpline

from simimg.arrays import FloatArray, frozen
from simimg.resolving.descent import covariance_of
from simimg.resolving.pairfit import MAGNITUDE, PairSearch, inner_vector
from simimg.resolving.starfit import Cutout, StarFit
from simimg.resolving.verdict import Limit

_REACH, _NODES = 3.6, 7  # standard errors of the grid to either side; nodes along each axis
_FINE = 41, 181  # steps of the sums over the magnitude difference, over the separation
_LEAST = 0.03  # FWHM: no node is closer
_SHORT = 1.5  # standard errors below the fit that the grid must hold
_STEP = 0.3  # standard errors, all else held, over which a slope's change is taken
_RATIO = 13.0  # natural logarithm of the stars' ratio beyond which no node lies


@dataclass(frozen=True, eq=False)
class PairPosterior:
    """The probability density of a pair's separation and magnitude difference.

    Attributes
    ----------
    differences : ndarray, shape (m,)
        Magnitude differences, second star minus first; increasing.
    separations : ndarray, shape (m, n)
        For each of them, evenly spaced.
    density : ndarray, shape (m, n)
        At each, in any unit.
    """

    differences: FloatArray
    separations: FloatArray
    density: FloatArray

    def beyond(self, limit: float | Limit) -> float:
        """Return the probability that the separation is beyond a limit.

        Parameters
        ----------
        limit : float or callable
            As for `simimg.resolving.verdict.probability_beyond`, pixels.
        """
        plain = np.full(self.differences.size, float(limit)) if not callable(limit) else None
        limits = limit(self.differences) if callable(limit) else plain
        assert limits is not None
        total = beyond = 0.0
        for separations, density, edge in zip(self.separations, self.density, limits):
            step = separations[1] - separations[0]
            below = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1])) * step])
            total += float(below[-1])
            inside = np.interp(np.nan_to_num(edge, nan=np.inf, posinf=1e300), separations, below)
            beyond += float(below[-1] - inside)
        return beyond / total if total > 0.0 else float("nan")


def pair_posterior(
    cutouts: Sequence[Cutout], fit: StarFit, *, first: int = 0, second: int = 1
) -> PairPosterior | None:
    """Work out the density about a fit of two stars; None where the grid cannot be laid.

    Parameters
    ----------
    cutouts : sequence of Cutout
        The data of the fit.
    fit : StarFit
    first, second : int
        Which of the two is the first star.
    """
    inner = inner_vector(fit)
    if (first, second) == (1, 0):
        inner[3:6] *= -1.0
    polar = inner.copy()
    polar[3:5] = np.hypot(*inner[3:5]), np.arctan2(inner[4], inner[3])
    grid = _Grid(PairSearch(cutouts, np.inf), polar)
    covariance = covariance_of(grid.expand(polar)[2])
    asked, rest = [5, 3], grid.rest
    if not (np.isfinite(covariance).all() and polar[3] > 0.0):
        return None
    own = covariance[np.ix_(asked, asked)]
    follow = covariance[np.ix_(rest, asked)] @ np.linalg.inv(own)
    root = np.linalg.cholesky(own)
    across = np.linspace(-_REACH, _REACH, _NODES)
    if np.abs(polar[5] + root[0, 0] * across).max() > _RATIO:
        return None
    least = _LEAST * cutouts[0].psf.fwhm
    lowest = float(((least - polar[3] - root[1, 0] * across) / root[1, 1]).max())
    if lowest > -_SHORT:
        return None
    along = np.linspace(max(-_REACH, lowest), _REACH, _NODES)

    def node(a: float, b: float) -> FloatArray:
        off = root @ np.array([a, b])
        vector = polar.copy()
        vector[asked] += off
        vector[rest] += follow @ off
        return vector

    logs = np.array([[grid.log_likelihood(node(a, b)) for b in along] for a in across])
    for axis, steps in enumerate((across[:, None], along)):
        one, other = (grid.log_curvature(node(*end)) for end in np.eye(2)[axis] * [[1.0], [-1.0]])
        logs -= 0.25 * (one - other) * steps
    if not np.isfinite(logs).all():
        return None
    surface = RectBivariateSpline(across, along, logs - logs.max(), kx=3, ky=3)
    a, b = np.linspace(-_REACH, _REACH, _FINE[0]), np.linspace(along[0], _REACH, _FINE[1])
    ratios = polar[5] + root[0, 0] * a
    separations = polar[3] + root[1, 0] * a[:, None] + root[1, 1] * b
    density = np.exp(surface(a, b))
    # A brighter second star has the smaller magnitude.
    return PairPosterior(
        differences=frozen((-MAGNITUDE * ratios)[::-1]),
        separations=frozen(separations[::-1]),
        density=frozen(density[::-1]),
    )


class _Grid:
    """The likelihood in polar coordinates, all but separation and ratio integrated over."""

    def __init__(self, search: PairSearch, polar: FloatArray) -> None:
        self._search = search
        self.rest = [i for i in range(polar.size) if i not in (3, 5)]

    def expand(self, polar: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        """Deviance, slope and information by photocentre, total, length, angle, ratio, the rest."""
        length, angle = polar[3:5]
        cosine, sine = np.cos(angle), np.sin(angle)
        inner = polar.copy()
        inner[3:5] = length * cosine, length * sine
        turn = np.eye(polar.size)
        turn[3:5, 3:5] = [[cosine, sine], [-length * sine, length * cosine]]
        plain = self._search.expand(inner)
        return plain.deviance, turn @ plain.slope, turn @ plain.information @ turn.T

    def log_likelihood(self, polar: FloatArray) -> float:
        """The most at a separation and ratio, from a guess at the rest."""
        deviance, slope, information = self.expand(polar)
        held = information[np.ix_(self.rest, self.rest)]
        scale = 1.0 / np.sqrt(np.diag(held))
        push = scale * slope[self.rest]
        gain = float(push @ np.linalg.solve(held * np.outer(scale, scale), push))
        return -0.5 * (deviance - gain)

    def log_curvature(self, polar: FloatArray) -> float:
        """Logarithm of the determinant of minus the log-likelihood's Hessian in the rest.

        NaN where that is no maximum.
        """
        lengths = _STEP / np.sqrt(np.diag(self.expand(polar)[2]))
        rows = []
        for i in self.rest:
            off = np.zeros(polar.size)
            off[i] = lengths[i]
            ahead, behind = (self.expand(polar + way * off)[1][self.rest] for way in (1.0, -1.0))
            rows.append(0.5 * (ahead - behind) / lengths[i])
        hessian = np.array(rows)
        scale = lengths[self.rest] / _STEP
        unit = 0.5 * (hessian + hessian.T) * np.outer(scale, scale)
        sign, logarithm = np.linalg.slogdet(unit)
        if not (sign > 0 and np.linalg.eigvalsh(unit)[0] > 0.0):
            return float("nan")
        return float(logarithm) - 2.0 * float(np.log(scale).sum())
