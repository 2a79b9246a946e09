"""Maximum-likelihood fits of point sources to cutouts of a frame, under the frame's own noise.

The likelihood of a pixel is that of `simimg.resolving.pixelnoise`; its maximum is sought by Fisher
scoring (the expected information takes the place of the Hessian) with Levenberg-Marquardt damping.
Any number of stars, one free constant background for each cutout, any number of cutouts: several
exposures of the same stars are fitted together.

Electrons and detector pixels; places are counted from 0 at the centre of the frame's first pixel.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy import ndimage

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.resolving.pixelnoise import PixelNoise
from simimg.resolving.psfmodel import PsfModel

_MOST_STEPS = 60
_CONVERGED = 1e-5  # deviance still to be won: far below the unit that an error stands for


@dataclass(frozen=True, eq=False)
class Cutout:
    """A piece of a frame, in electrons, with all that its likelihood needs.

    Attributes
    ----------
    electrons : ndarray, shape (rows, columns)
        Electrons above the bias; 0 where `used` is 0.
    used : ndarray, shape (rows, columns)
        1 for pixels that count, 0 for saturated, bad and missing ones.
    variance : float
        Variance of the Gaussian part: read noise squared and the rounding, electrons squared.
    x0, y0 : float
        Place of the first pixel's centre in the frame.
    psf : PsfModel
        The effective PSF here.
    known : ndarray, shape (rows, columns)
        Expected electrons of whatever is not fitted (other stars); zeros for an isolated object.
    """

    electrons: FloatArray
    used: FloatArray
    variance: float
    x0: float
    y0: float
    psf: PsfModel
    known: FloatArray

    @classmethod
    def of(
        cls,
        electrons: AnyArray,
        *,
        variance: float,
        psf: PsfModel,
        x0: float = 0.0,
        y0: float = 0.0,
        used: AnyArray | None = None,
        known: FloatArray | None = None,
    ) -> Cutout:
        """Make a cutout; pixels that are not finite are left out.

        Raises
        ------
        ValueError
            When shapes differ or the variance is negative or not finite.
        """
        values = np.array(electrons, dtype=np.float64)
        finite = np.isfinite(values)
        if used is not None:
            finite &= np.asarray(used, dtype=bool)
        values[~finite] = 0.0
        other = np.zeros(values.shape) if known is None else np.asarray(known, dtype=np.float64)
        if values.ndim != 2 or other.shape != values.shape:
            raise ValueError(f"cutout arrays differ in shape: {values.shape}, {other.shape}")
        if not (np.isfinite(variance) and variance >= 0):
            raise ValueError(f"variance must be finite and not negative, got {variance}")
        return cls(
            electrons=frozen(values),
            used=frozen(finite.astype(np.float64)),
            variance=float(variance),
            x0=float(x0),
            y0=float(y0),
            psf=psf,
            known=frozen(other),
        )

    def with_known(self, known: FloatArray) -> Cutout:
        """The same cutout with other expected electrons of what is not fitted."""
        return replace(self, known=frozen(np.asarray(known, dtype=np.float64)))


@dataclass(frozen=True, eq=False)
class StarFit:
    """Point sources fitted to one or several cutouts.

    Attributes
    ----------
    places : ndarray, shape (n, 2)
        x and y of each star, pixels of the frame.
    electrons : ndarray, shape (n,)
    background : ndarray, shape (cutouts,)
        Electrons a pixel of sky and dark signal in each cutout.
    covariance : ndarray, shape (3 n + cutouts, 3 n + cutouts)
        Inverse Fisher information, in the order x1, y1, electrons1, x2, ..., backgrounds; infinite
        where the information matrix is singular.
    deviance : float
        Minus twice the log-likelihood, up to a constant that the data fix.
    pixels : int
        Pixels used.
    converged : bool
    """

    places: FloatArray
    electrons: FloatArray
    background: FloatArray
    covariance: FloatArray
    deviance: float
    pixels: int
    converged: bool

    @property
    def vector(self) -> FloatArray:
        """The parameters as one array, in the order of the covariance."""
        stars = np.column_stack([self.places, self.electrons]).ravel()
        return np.concatenate([stars, self.background])


@dataclass(frozen=True, eq=False)
class Expansion:
    """The likelihood at one set of parameters, to second order.

    Attributes
    ----------
    deviance : float
    slope : ndarray, shape (p,)
        Half the gradient of the deviance.
    information : ndarray, shape (p, p)
        Fisher information (half the expected Hessian of the deviance).
    """

    deviance: float
    slope: FloatArray
    information: FloatArray


class Likelihood:
    """The likelihood of ``stars`` point sources in the cutouts.

    Parameters
    ----------
    cutouts : sequence of Cutout, at least one
    stars : int, 0 or more
    """

    def __init__(self, cutouts: Sequence[Cutout], stars: int) -> None:
        self.cutouts = tuple(cutouts)
        self.stars = stars
        self.size = 3 * stars + len(self.cutouts)
        self.pixels = int(sum(cutout.used.sum() for cutout in self.cutouts))
        self.noise = [
            PixelNoise(
                cutout.electrons.ravel(),
                cutout.used.ravel(),
                cutout.variance,
                ndimage.uniform_filter(cutout.electrons, 3).ravel(),
            )
            for cutout in self.cutouts
        ]

    def jacobian(self, vector: FloatArray, index: int) -> tuple[FloatArray, FloatArray]:
        """Return the expectation of a cutout and its derivatives.

        Returns
        -------
        expectation : ndarray, shape (pixels,)
        derivatives : ndarray, shape (3 stars + 1, pixels)
            By x, y and electrons of each star, then by this cutout's background.
        """
        cutout = self.cutouts[index]
        rows, columns = cutout.electrons.shape
        derivatives = np.empty((3 * self.stars + 1, rows * columns))
        derivatives[-1] = 1.0
        expectation = cutout.known.ravel() + vector[3 * self.stars + index]
        for star in range(self.stars):
            x, y, electrons = vector[3 * star : 3 * star + 3]
            planes = cutout.psf.evaluate(
                x - cutout.x0, y - cutout.y0, columns=columns, rows=rows, order=1
            ).reshape(3, -1)
            np.multiply(planes[1:], electrons, out=derivatives[3 * star : 3 * star + 2])
            derivatives[3 * star + 2] = planes[0]
            expectation += electrons * planes[0]
        return expectation, derivatives

    def expand(self, vector: FloatArray) -> Expansion:
        """Return deviance, slope and information at a parameter vector."""
        deviance = 0.0
        slope = np.zeros(self.size)
        information = np.zeros((self.size, self.size))
        for index, noise in enumerate(self.noise):
            expectation, derivatives = self.jacobian(vector, index)
            part, by_pixel, weight = noise.judge(expectation)
            deviance += part
            chosen = [*range(3 * self.stars), 3 * self.stars + index]
            slope[chosen] += derivatives @ by_pixel
            information[np.ix_(chosen, chosen)] += (derivatives * weight) @ derivatives.T
        return Expansion(deviance, slope, information)


def covariance_of(information: FloatArray) -> FloatArray:
    """Invert a Fisher information; infinite variances where it is singular.

    Parameters
    ----------
    information : ndarray, shape (p, p)
    """
    scale = np.sqrt(np.diag(information))
    result = np.full(information.shape, np.inf)
    if not (np.isfinite(scale).all() and (scale > 0).all()):
        return result
    unit = information / np.outer(scale, scale)
    values, vectors = np.linalg.eigh(unit)
    if values[0] < 1e-13 * values[-1]:
        return result
    inverse: FloatArray = (vectors / values) @ vectors.T / np.outer(scale, scale)
    return inverse


def damped_step(expansion: Expansion, damping: float) -> tuple[FloatArray, float]:
    """Return a Levenberg-Marquardt step and the fall of the deviance that it promises."""
    diagonal = np.diag(expansion.information)
    floor = 1e-14 * float(diagonal.max(initial=0.0)) + 1e-300
    scale = 1.0 / np.sqrt(np.maximum(diagonal, floor))
    unit = expansion.information * np.outer(scale, scale)
    unit[np.diag_indices_from(unit)] += damping + 1e-13
    step = -scale * np.linalg.solve(unit, scale * expansion.slope)
    promised = -(2.0 * expansion.slope @ step + step @ expansion.information @ step)
    return step, float(promised)


def next_damping(damping: float, fall: float, promised: float) -> float:
    """Return the damping after a step that lowered the deviance by ``fall``, not ``promised``."""
    if fall < 0.0:
        return max(8.0 * damping, 1e-3)
    if fall > 0.7 * promised:
        return max(damping / 10.0, 1e-9)
    return damping if fall > 0.2 * promised else max(3.0 * damping, 1e-3)


def fit_stars(
    cutouts: Sequence[Cutout],
    *,
    places: FloatArray | Sequence[Sequence[float]],
    electrons: FloatArray | Sequence[float] | None = None,
    most_shift: float | None = None,
) -> StarFit:
    """Fit point sources from given starting places.

    Parameters
    ----------
    cutouts : sequence of Cutout
    places : array_like, shape (n, 2)
        Starting x, y of each star, pixels of the frame.
    electrons : array_like, shape (n,), optional
        Starting electrons; when left out, the linear best fit at the starting places.
    most_shift : float, optional
        Longest move of a star in one step, pixels; default half the PSF's FWHM.

    Returns
    -------
    StarFit
        A star that the data would make negative ends with no electrons.
    """
    start = np.asarray(places, dtype=np.float64).reshape(-1, 2)
    likelihood = Likelihood(cutouts, len(start))
    vector: FloatArray = np.zeros(likelihood.size)
    vector[: 3 * len(start)].reshape(-1, 3)[:, :2] = start
    vector = _linear_start(likelihood, vector, electrons)
    reach = 0.5 * cutouts[0].psf.fwhm if most_shift is None else most_shift
    current = likelihood.expand(vector)
    damping, converged = 1e-3, False
    for _ in range(_MOST_STEPS):
        step, promised = damped_step(current, damping)
        if promised < _CONVERGED and damping < 0.1:
            converged = True
            break
        trial = vector + _shortened(step, len(start), reach)
        stars = trial[: 3 * len(start)].reshape(-1, 3)
        old = vector[: 3 * len(start)].reshape(-1, 3)
        stars[:, 2] = np.maximum(stars[:, 2], 0.1 * old[:, 2])
        candidate = likelihood.expand(trial)
        fall = current.deviance - candidate.deviance
        damping = next_damping(damping, fall, promised)
        if fall >= 0.0:
            vector, current = trial, candidate
        elif damping > 1e8:
            break
    return finished(likelihood, vector, current, converged=converged)


def finished(
    likelihood: Likelihood, vector: FloatArray, expansion: Expansion, *, converged: bool
) -> StarFit:
    """Put a solution into a `StarFit`."""
    stars = vector[: 3 * likelihood.stars].reshape(-1, 3)
    return StarFit(
        places=frozen(stars[:, :2]),
        electrons=frozen(stars[:, 2]),
        background=frozen(vector[3 * likelihood.stars :]),
        covariance=frozen(covariance_of(expansion.information)),
        deviance=expansion.deviance,
        pixels=likelihood.pixels,
        converged=converged,
    )


def _linear_start(
    likelihood: Likelihood,
    vector: FloatArray,
    electrons: FloatArray | Sequence[float] | None,
) -> FloatArray:
    """Fill in electrons and backgrounds by least squares at the starting places."""
    stars = likelihood.stars
    result = vector.copy()
    if electrons is not None:
        result[: 3 * stars].reshape(-1, 3)[:, 2] = electrons
    normal = np.zeros((likelihood.size, likelihood.size))
    right = np.zeros(likelihood.size)
    for index, cutout in enumerate(likelihood.cutouts):
        rows, columns = cutout.electrons.shape
        planes = np.ones((stars + 1, rows * columns))
        for star in range(stars):
            x, y = vector[3 * star : 3 * star + 2]
            planes[star] = cutout.psf.evaluate(
                x - cutout.x0, y - cutout.y0, columns=columns, rows=rows, order=0
            ).ravel()
        chosen = [*range(2, 3 * stars, 3), 3 * stars + index]
        data = (cutout.electrons - cutout.known).ravel()
        weighted = planes * cutout.used.ravel()
        normal[np.ix_(chosen, chosen)] += weighted @ planes.T
        right[chosen] += weighted @ data
    wanted = [*range(2, 3 * stars, 3), *range(3 * stars, likelihood.size)]
    if electrons is not None:
        fixed = [*range(2, 3 * stars, 3)]
        wanted = [*range(3 * stars, likelihood.size)]
        right = right - normal[:, fixed] @ result[fixed]
    result[wanted] = np.linalg.lstsq(normal[np.ix_(wanted, wanted)], right[wanted], rcond=1e-12)[0]
    fluxes = range(2, 3 * stars, 3)
    least = max([1.0, *(1e-3 * float(result[i]) for i in fluxes)])
    for i in fluxes:
        result[i] = max(float(result[i]), least)
    return result


def _shortened(step: FloatArray, stars: int, reach: float) -> FloatArray:
    """Scale a step down until no star moves farther than ``reach``."""
    moves = step[: 3 * stars].reshape(-1, 3)[:, :2]
    longest = float(np.hypot(moves[:, 0], moves[:, 1]).max(initial=0.0))
    return step if longest <= reach else step * (reach / longest)
