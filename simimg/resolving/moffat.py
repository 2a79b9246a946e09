"""An elliptical Moffat profile fitted to the single stars of a frame, all at once.

Moffat (1969, A&A 3, 455) found that stars seen through the air fall off as
``(1 + r^2 / a^2)^-b``. Here r is measured in an ellipse, ``r^2 = d' Q d``, with the symmetric
matrix ``Q = exp(-2 w) exp([[e, f], [f, -e]])``: w is the logarithm of the mean radius, e and f
stretch it, and whatever their values Q is that of an ellipse. Every star has the same shape and its
own place, electrons and background (a plane). The profile is that of the light before the pixels,
averaged over each pixel, or that which the pixels show, whichever fits better.

The sum of squares over the variances is brought down by Gauss-Newton steps with damping; each
star's own parameters are eliminated from the step (Schur complement), so that it costs no more with
many stars than with few. Electrons and detector pixels.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import cosh, exp, log, pi, sinh, sqrt

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.resolving.layout import plane

_MOST_STEPS = 40
_CONVERGED = 1e-4  # relative fall of the sum of squares
_LARGEST_POWER = 300.0  # of b - 1: a Gaussian for all that matters
_NARROW = 2.0  # FWHM in pixels under which a pixel's mean takes more points


def _points(count: int) -> list[tuple[float, float, float]]:
    """Offsets and weights of Gauss-Legendre points over a pixel."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return [
        (0.5 * float(x), 0.5 * float(y), 0.25 * float(u * v))
        for x, u in zip(nodes, weights)
        for y, v in zip(nodes, weights)
    ]


_FEW, _MANY, _WHOLE = _points(3), _points(6), [(0.0, 0.0, 1.0)]
_SUSPECT = 1.5  # times the median chi-square from which a star counts for less in the fit
_OUTLIER = 3.0  # times the median chi-square from which a star is no star like the others


@dataclass(frozen=True)
class Moffat:
    """An elliptical Moffat profile, of unit light.

    Attributes
    ----------
    log_radius, stretch, skew : float
        w, e and f of the head of this module (radius in pixels).
    power : float
        b, above 1.
    averaged : bool
        Whether a pixel shows the profile's mean over its square.
    """

    log_radius: float
    stretch: float
    skew: float
    power: float
    averaged: bool

    @property
    def quadratic(self) -> FloatArray:
        """The matrix Q."""
        size = float(np.hypot(self.stretch, self.skew))
        slope = sinh(size) / size if size > 1e-9 else 1.0
        traceless = np.array([[self.stretch, self.skew], [self.skew, -self.stretch]])
        matrix: FloatArray = exp(-2.0 * self.log_radius) * (
            cosh(size) * np.eye(2) + slope * traceless
        )
        return matrix

    @property
    def fwhm(self) -> float:
        """Full width at half maximum (geometric mean of the axes) before the pixels, pixels."""
        return 2.0 * exp(self.log_radius) * sqrt(2.0 ** (1.0 / self.power) - 1.0)

    def light(self, dx: AnyArray, dy: AnyArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Share of the light on pixels at offsets from the star, and its slopes by dx and dy."""
        (a, b), (_, c) = self.quadratic
        height = (self.power - 1.0) * exp(-2.0 * self.log_radius) / pi
        value, by_x, by_y = (np.zeros(np.broadcast(dx, dy).shape) for _ in range(3))
        points = _WHOLE if not self.averaged else _FEW if self.fwhm > _NARROW else _MANY
        for across, along, weight in points:
            x, y = dx + across, dy + along
            fall = 1.0 + a * x * x + 2.0 * b * x * y + c * y * y
            share = weight * height * fall**-self.power
            slope = -2.0 * self.power * share / fall
            value += share
            by_x += slope * (a * x + b * y)
            by_y += slope * (b * x + c * y)
        return value, by_x, by_y

    def sampled(self, *, oversampling: int, half_width: float) -> FloatArray:
        """Share of the light on pixels at every sample of a square, the star in the middle."""
        half = round(half_width * oversampling)
        axis = np.arange(-half, half + 1) / oversampling
        return self.light(axis[None, :], axis[:, None])[0]


@dataclass(frozen=True, eq=False)
class Stamp:
    """The pixels about one star.

    Attributes
    ----------
    electrons : ndarray, shape (rows, columns)
    used : ndarray, shape (rows, columns)
        1 for pixels that count.
    x, y : float
        The star's place, roughly, pixels from the first one's centre.
    """

    electrons: FloatArray
    used: FloatArray
    x: float
    y: float


@dataclass(frozen=True, eq=False)
class MoffatFit:
    """A profile fitted to stars.

    Attributes
    ----------
    profile : Moffat
    places : ndarray, shape (n, 2)
        Of the stars in their stamps.
    electrons : ndarray, shape (n,)
    chi_square : ndarray, shape (n,)
        Reduced, of each star.
    """

    profile: Moffat
    places: FloatArray
    electrons: FloatArray
    chi_square: FloatArray


def fit_moffat(stamps: Sequence[Stamp], *, width: float, variance: float) -> MoffatFit:
    """Fit a profile to stars.

    Parameters
    ----------
    stamps : sequence of Stamp, at least one
    width : float
        FWHM, roughly, pixels.
    variance : float
        Gaussian variance of a pixel, electrons squared.
    """
    # Of the light before the pixels a star is narrower than it looks.
    narrower = sqrt(max(width**2 - 0.7, 0.3 * width**2))
    fits = []
    for averaged, start in ((True, narrower), (False, width)):
        radius = 0.5 * start / sqrt(2.0 ** (1.0 / 3.0) - 1.0)
        first = Moffat(log(radius), 0.0, 0.0, 3.0, averaged)
        fits.append(_Descent(stamps, variance).run(first))
    return min(fits, key=lambda fit: float(np.median(fit.chi_square)))


def like_the_others(fit: MoffatFit) -> AnyArray:
    """Which stars the profile fits as well as most."""
    limit = _OUTLIER * max(float(np.median(fit.chi_square)), 1.0)
    return np.asarray(fit.chi_square <= limit)


class _Descent:
    """The fit under way: each star's own x, y, electrons, level and two rises."""

    def __init__(self, stamps: Sequence[Stamp], variance: float) -> None:
        self.variance = variance
        self.data = [stamp.electrons.ravel() for stamp in stamps]
        self.used = [stamp.used.ravel() for stamp in stamps]
        self.planes = [plane(*stamp.electrons.shape) for stamp in stamps]
        self.grids = [np.indices(stamp.electrons.shape)[::-1].reshape(2, -1) for stamp in stamps]
        self.own = np.zeros((len(stamps), 6))
        for own, stamp in zip(self.own, stamps):
            level = float(np.median(stamp.electrons[stamp.used > 0]))
            total = float(((stamp.electrons - level) * stamp.used).sum())
            own[:4] = stamp.x, stamp.y, max(total, 1.0), level

    def run(self, profile: Moffat) -> MoffatFit:
        damping = 1e-2
        weights = self._weights(profile)
        best, state = self._normal(profile, weights)
        for _ in range(_MOST_STEPS):
            shape_step, own_step = self._step(state, damping)
            trial, own = self._moved(profile, shape_step), self.own
            self.own = own + own_step
            value = self._squares(trial, weights)
            if value > best:
                self.own = own
                damping = max(8.0 * damping, 1e-4)
                if damping > 1e8:
                    break
                continue
            fall, damping = best - value, max(damping / 6.0, 1e-9)
            profile = trial
            weights = self._weights(profile)
            done = fall < _CONVERGED * value
            best, state = self._normal(profile, weights)
            if done:
                break
        return self._finished(profile)

    def _moved(self, profile: Moffat, step: FloatArray) -> Moffat:
        """The profile after a step in the logarithms of its FWHM and of b - 1, in e and in f."""
        step = np.clip(step, -0.5, 0.5)
        power = 1.0 + min((profile.power - 1.0) * exp(float(step[3])), _LARGEST_POWER)
        power = max(power, 1.05)
        # The width is what the data show; radius and power trade for one another.
        fwhm = profile.fwhm * exp(float(step[0]))
        return Moffat(
            log(0.5 * fwhm) - 0.5 * log(2.0 ** (1.0 / power) - 1.0),
            profile.stretch + float(step[1]),
            profile.skew + float(step[2]),
            power,
            profile.averaged,
        )

    def _model(self, profile: Moffat, index: int) -> FloatArray:
        x, y, electrons, level, *rises = self.own[index]
        column, row = self.grids[index]
        light = profile.light(column - x, row - y)[0]
        return np.asarray(electrons * light + level + np.array(rises) @ self.planes[index])

    def _weights(self, profile: Moffat) -> list[FloatArray]:
        """Weights by the model's own expectation: weights by the data favour low pixels.

        A star that fits much worse than most (a blend, a galaxy) counts for as much less.
        """
        weights, chi = [], np.empty(len(self.data))
        for index, used in enumerate(self.used):
            model = self._model(profile, index)
            weight = used / np.maximum(np.maximum(model, 0.0) + self.variance, 1e-6)
            chi[index] = float(weight @ (self.data[index] - model) ** 2) / max(used.sum(), 1.0)
            weights.append(weight)
        limit = _SUSPECT * float(np.median(chi))
        return [weight * min(1.0, (limit / one) ** 2) for weight, one in zip(weights, chi)]

    def _squares(self, profile: Moffat, weights: Sequence[FloatArray]) -> float:
        """Sum of squares over the variances."""
        return sum(
            float(weight @ (self.data[index] - self._model(profile, index)) ** 2)
            for index, weight in enumerate(weights)
        )

    def _normal(
        self, profile: Moffat, weights: Sequence[FloatArray]
    ) -> tuple[float, list[tuple[FloatArray, FloatArray]]]:
        """Sum of squares, and each star's normal equations: shape parameters, then its own."""
        total, parts = 0.0, []
        nudge = 1e-4
        steps = np.eye(4) * nudge
        shapes = [self._moved(profile, step) for step in steps]
        backs = [self._moved(profile, -step) for step in steps]
        for index, weight in enumerate(weights):
            x, y, electrons, level, *rises = self.own[index]
            column, row = self.grids[index]
            dx, dy = column - x, row - y
            light, by_x, by_y = profile.light(dx, dy)
            rest = self.data[index] - electrons * light - level
            rest -= np.array(rises) @ self.planes[index]
            slopes = [
                electrons * (a.light(dx, dy)[0] - b.light(dx, dy)[0]) / (2.0 * nudge)
                for a, b in zip(shapes, backs)
            ]
            rows = np.stack([*slopes, -electrons * by_x, -electrons * by_y, light])
            rows = np.concatenate([rows, np.ones((1, rest.size)), self.planes[index]])
            weighted = rows * weight
            total += float(weight @ rest**2)
            parts.append((weighted @ rows.T, weighted @ rest))
        return total, parts

    @staticmethod
    def _step(
        parts: Sequence[tuple[FloatArray, FloatArray]], damping: float
    ) -> tuple[FloatArray, FloatArray]:
        """Damped step of the shape, and of each star's own parameters."""
        shape, right = np.zeros((4, 4)), np.zeros(4)
        solved = []
        for normal, slope in parts:
            damped = normal + damping * np.diag(np.diag(normal))
            damped += 1e-12 * np.eye(len(damped)) * float(np.diag(normal).max() + 1e-300)
            across = damped[:4, 4:]
            both = np.linalg.solve(damped[4:, 4:], np.column_stack([across.T, slope[4:]]))
            shape += damped[:4, :4] - across @ both[:, :4]
            right += slope[:4] - across @ both[:, 4]
            solved.append(both)
        step = np.linalg.lstsq(shape, right, rcond=1e-12)[0]
        return step, np.array([both[:, 4] - both[:, :4] @ step for both in solved])

    def _finished(self, profile: Moffat) -> MoffatFit:
        chi = []
        for index, used in enumerate(self.used):
            model = self._model(profile, index)
            variance = np.maximum(np.maximum(model, 0.0) + self.variance, 1e-6)
            freedom = max(float(used.sum()) - 6.0, 1.0)
            chi.append(float((used / variance) @ (self.data[index] - model) ** 2) / freedom)
        return MoffatFit(profile, self.own[:, :2].copy(), self.own[:, 2].copy(), np.array(chi))
