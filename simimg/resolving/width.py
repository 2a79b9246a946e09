"""Whether a single object is wider than the PSF: an intrinsic width, its error, and a verdict.

The object is the effective PSF convolved with a round Gaussian of standard deviation sigma along
each axis, the simplest thing that is not a point: to first order in the variance ``w = sigma^2``
any round source adds ``w / 2`` times the PSF's Laplacian, whatever its own profile, so that a small
disc of diameter ``d`` shows ``sigma = d / 4`` and a galaxy its second moment. The fit is by maximum
likelihood in ``w``, which may go a little below 0 (a point, made narrow by noise): there the
likelihood is smooth and the estimate without bias, where sigma itself has an edge.

The verdict is one-sided: ``extended`` where the signed root of the likelihood ratio against a point
exceeds what a point exceeds once in a hundred times. Electrons and detector pixels.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import copysign, sqrt

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.resolving.starfit import (
    Cutout,
    Expansion,
    Likelihood,
    StarFit,
    covariance_of,
    damped_step,
    next_damping,
)

EXTENDED = 2.3263478740408408
"""Standard deviations that a point source exceeds with a chance of 0.01."""
_MOST_STEPS = 60
_ENOUGH = 1e-3  # deviance that may be left to win
_NARROWEST = -0.03  # variance over FWHM squared: a sixth of a Gaussian PSF's own
_WIDEST = 9.0


@dataclass(frozen=True, eq=False)
class WidthFit:
    """A source of some width fitted to a cutout, beside the point sources next to it.

    Attributes
    ----------
    place : ndarray, shape (2,)
        x and y, pixels.
    electrons, electrons_error : float
    variance, variance_error : float
        Intrinsic variance along each axis and its standard error, pixels squared; the variance of
        a point source is as often below 0 as above.
    significance : float
        Signed root of the fall of the deviance from a point to this width: of a point source a
        standard normal deviate.
    deviance : float
        Minus twice the log-likelihood, as `StarFit.deviance` on the same cutout.
    """

    place: FloatArray
    electrons: float
    electrons_error: float
    variance: float
    variance_error: float
    significance: float
    deviance: float

    @property
    def extended(self) -> bool:
        """Whether a point source would look so wide with a chance below 0.01."""
        return self.significance > EXTENDED

    @property
    def width(self) -> float:
        """Intrinsic width sigma, pixels; 0 where the fit is no wider than the PSF."""
        return sqrt(max(self.variance, 0.0))

    @property
    def width_error(self) -> float:
        """How far sigma rises for one standard error of the variance, pixels.

        For a significant width the usual standard error; near 0, where the likelihood is not
        quadratic in sigma, the width that one standard error still allows.
        """
        variance = max(self.variance, 0.0)
        return sqrt(variance + self.variance_error) - sqrt(variance)


class _WideLikelihood:
    """The likelihood of point sources of which the first has a width; the variance comes last."""

    def __init__(self, cutout: Cutout, stars: int) -> None:
        self._points = Likelihood([cutout], stars)
        self._cutout = cutout

    def expand(self, vector: FloatArray) -> Expansion:
        """Return deviance, slope and information at a parameter vector."""
        cutout = self._cutout
        rows, columns = cutout.electrons.shape
        x, y, electrons = vector[:3]
        expectation, derivatives = self._points.jacobian(vector[:-1], 0)
        planes = cutout.psf.blurred(
            x - cutout.x0, y - cutout.y0, columns=columns, rows=rows, variance=float(vector[-1])
        ).reshape(6, -1)
        laplacian = 0.5 * electrons * (planes[3] + planes[5])
        if vector[-1] < 0.0:
            # There the model is linear in the variance, and its shift with the place follows.
            planes[1:3] = derivatives[:2] / electrons
        expectation = expectation + electrons * (planes[0] - derivatives[2])
        derivatives[:2] = electrons * planes[1:3]
        derivatives[2] = planes[0]
        derivatives = np.vstack([derivatives, laplacian])
        deviance, by_pixel, weight = self._points.noise[0].judge(expectation)
        information = (derivatives * weight) @ derivatives.T
        return Expansion(deviance, derivatives @ by_pixel, information)


def fit_width(cutout: Cutout, points: StarFit) -> WidthFit:
    """Fit the width of the first of some sources.

    Parameters
    ----------
    cutout : Cutout
        Of the first frame.
    points : StarFit
        Point sources fitted to this cutout: the first is tried for a width, the others stay points
        and are fitted along.
    """
    likelihood = _WideLikelihood(cutout, len(points.places))
    fwhm = cutout.psf.fwhm
    vector = np.append(points.vector, 0.0)
    now = likelihood.expand(vector)
    least, most = _NARROWEST * fwhm**2, _WIDEST * fwhm**2
    damping = 1e-3
    for _ in range(_MOST_STEPS):
        step, promised = damped_step(now, damping)
        if promised < _ENOUGH and damping < 0.1:
            break
        trial = vector + _shortened(step, vector, fwhm, len(points.places))
        trial[-1] = min(max(trial[-1], least), most)
        candidate = likelihood.expand(trial)
        fall = now.deviance - candidate.deviance
        damping = next_damping(damping, fall, promised)
        if fall >= 0.0:
            held = trial[-1] == vector[-1] and trial[-1] in (least, most)
            vector, now = trial, candidate
            if held and fall < _ENOUGH:
                break
        elif damping > 1e8:
            break
    covariance = covariance_of(now.information)
    gain = max(0.0, points.deviance - now.deviance)
    return WidthFit(
        place=frozen(vector[:2]),
        electrons=float(vector[2]),
        electrons_error=float(np.sqrt(covariance[2, 2])),
        variance=float(vector[-1]),
        variance_error=float(np.sqrt(covariance[-1, -1])),
        significance=copysign(sqrt(gain), float(vector[-1])),
        deviance=now.deviance,
    )


def _shortened(step: FloatArray, vector: FloatArray, fwhm: float, stars: int) -> FloatArray:
    """Scale a step down to what the linear model may be trusted with."""
    longest = abs(float(step[-1])) / (0.1 * fwhm**2 + 0.7 * max(float(vector[-1]), 0.0))
    for star in range(stars):
        dx, dy, light = step[3 * star : 3 * star + 3]
        longest = max(longest, float(np.hypot(dx, dy)) / (0.5 * fwhm))
        if vector[3 * star + 2] > 0.0:
            longest = max(longest, -float(light) / (0.7 * float(vector[3 * star + 2])))
    return step if longest <= 1.0 else step / longest
