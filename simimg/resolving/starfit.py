"""Maximum-likelihood fits of point sources to cutouts of a frame, under the frame's own noise.

The likelihood of a pixel is that of `simimg.resolving.pixelnoise`; its maximum is sought by Fisher
scoring (the expected information takes the place of the Hessian) with Levenberg-Marquardt damping.
Any number of stars, any number of cutouts, each with a free background (one level, or a plane):
several frames of the same stars are fitted together, each through its own air and, where it is not
the first, with a small free shift and transparency (`simimg.resolving.layout`).

Electrons and detector pixels; places are counted from 0 at the centre of the frame's first pixel.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy import ndimage

from simimg.arrays import FloatArray, frozen
from simimg.resolving.cutout import Cutout
from simimg.resolving.descent import Expansion, covariance_of, damped_step, next_damping
from simimg.resolving.layout import Layout, plane, turned
from simimg.resolving.pixelnoise import PixelNoise

__all__ = [
    "Cutout",
    "Expansion",
    "Likelihood",
    "StarFit",
    "covariance_of",
    "damped_step",
    "finished",
    "fit_stars",
    "next_damping",
]

_MOST_STEPS = 60
_CONVERGED = 1e-5  # deviance still to be won: far below the unit that an error stands for


@dataclass(frozen=True, eq=False)
class StarFit:
    """Point sources fitted to one or several cutouts.

    Attributes
    ----------
    places : ndarray, shape (n, 2)
        x and y of each star, pixels of the frame.
    electrons : ndarray, shape (n,)
    background : ndarray, shape (cutouts,)
        Electrons a pixel of sky and dark signal in each cutout (in the middle of a tilted one).
    covariance : ndarray, shape (p, p), p = 3 n + cutouts + extras
        Inverse Fisher information, in the order x1, y1, electrons1, x2, ..., backgrounds, extras;
        infinite where the information matrix is singular.
    deviance : float
        Minus twice the log-likelihood, up to a constant that the data fix.
    pixels : int
        Pixels used.
    converged : bool
    extras : ndarray
        Rises of tilted backgrounds, shifts and transparencies of frames: see `Layout`.
    layout : Layout or None
        Where everything stands; None for stars and one level a cutout.
    """

    places: FloatArray
    electrons: FloatArray
    background: FloatArray
    covariance: FloatArray
    deviance: float
    pixels: int
    converged: bool
    extras: FloatArray = field(default_factory=lambda: frozen(np.zeros(0)))
    layout: Layout | None = None

    @property
    def vector(self) -> FloatArray:
        """The parameters as one array, in the order of the covariance."""
        stars = np.column_stack([self.places, self.electrons]).ravel()
        return np.concatenate([stars, self.background, self.extras])

    def own(self, index: int) -> FloatArray:
        """The parameters of one cutout as it were the only one: stars, background, extras."""
        if self.layout is not None:
            return self.vector[list(self.layout.own[index])]
        stars = 3 * len(self.places)
        return np.concatenate([self.vector[:stars], self.background[index : index + 1]])


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
        self.layout = Layout(
            stars,
            [one.tilted for one in cutouts],
            [one.view.number * one.view.free for one in cutouts],
        )
        self.size = self.layout.size
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

    def star(
        self, vector: FloatArray, index: int, place: Sequence[float] | FloatArray, *, order: int
    ) -> FloatArray:
        """One electron of a star on the pixels of a cutout, and its derivatives by its place.

        Parameters
        ----------
        vector : ndarray, shape (p,)
            Tells the shift and transparency of the cutout's frame.
        index : int
            Of the cutout.
        place : (x, y)
            Of the star, pixels of the first frame.
        order : {0, 1, 2}

        Returns
        -------
        ndarray, shape (1, rows, columns), (3, ...) or (6, ...)
            As `PsfModel.evaluate`.
        """
        cutout = self.cutouts[index]
        view, (x, y) = cutout.view, (float(place[0]), float(place[1]))
        rows, columns = cutout.electrons.shape
        across, along, factor = self.layout.shift(vector, index)
        if view.number:
            x, y = view.place(x, y)
        planes = cutout.psf.evaluate(
            x + across - cutout.x0, y + along - cutout.y0, columns=columns, rows=rows, order=order
        )
        if not view.number:
            return planes
        return turned(planes, view.turn) * (view.factor * factor)

    def jacobian(self, vector: FloatArray, index: int) -> tuple[FloatArray, FloatArray]:
        """Return the expectation of a cutout and its derivatives.

        Returns
        -------
        expectation : ndarray, shape (pixels,)
        derivatives : ndarray, shape (q, pixels)
            By the parameters of ``layout.own[index]``: x, y and electrons of each star, this
            cutout's background, its rises, the shift and transparency of its frame.
        """
        cutout, layout = self.cutouts[index], self.layout
        rows, columns = cutout.electrons.shape
        background = 3 * self.stars
        derivatives = np.empty((len(layout.own[index]), rows * columns))
        derivatives[background] = 1.0
        expectation = cutout.known.ravel() + vector[layout.level[index]]
        rise = layout.rise[index]
        if rise is not None:
            derivatives[background + 1 : background + 3] = plane(rows, columns)
            expectation += vector[rise : rise + 2] @ derivatives[background + 1 : background + 3]
        if layout.view[index] is not None:
            derivatives[-3:] = 0.0
            back = np.linalg.inv(cutout.view.turn)
        for star in range(self.stars):
            x, y, electrons = vector[3 * star : 3 * star + 3]
            planes = self.star(vector, index, (x, y), order=1).reshape(3, -1)
            np.multiply(planes[1:], electrons, out=derivatives[3 * star : 3 * star + 2])
            derivatives[3 * star + 2] = planes[0]
            expectation += electrons * planes[0]
            if layout.view[index] is not None:
                derivatives[-3:-1] += back.T @ derivatives[3 * star : 3 * star + 2]
                derivatives[-1] += electrons * planes[0]
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
            chosen = list(self.layout.own[index])
            slope[chosen] += derivatives @ by_pixel
            information[np.ix_(chosen, chosen)] += (derivatives * weight) @ derivatives.T
        return Expansion(deviance, slope, information)


def fit_stars(
    cutouts: Sequence[Cutout],
    *,
    places: FloatArray | Sequence[Sequence[float]],
    electrons: FloatArray | Sequence[float] | None = None,
    most_shift: float | None = None,
    enough: float = _CONVERGED,
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
    enough : float, optional
        Fall of the deviance still to be won at which the search may end.

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
        if promised < enough and damping < 0.1:
            converged = True
            break
        trial = vector + _shortened(step, likelihood.layout, reach)
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
    begin = 3 * likelihood.stars
    levels = begin + len(likelihood.cutouts)
    stars = vector[:begin].reshape(-1, 3)
    return StarFit(
        places=frozen(stars[:, :2]),
        electrons=frozen(stars[:, 2]),
        background=frozen(vector[begin:levels]),
        covariance=frozen(covariance_of(expansion.information)),
        deviance=expansion.deviance,
        pixels=likelihood.pixels,
        converged=converged,
        extras=frozen(vector[levels:]),
        layout=likelihood.layout,
    )


def _linear_start(
    likelihood: Likelihood,
    vector: FloatArray,
    electrons: FloatArray | Sequence[float] | None,
) -> FloatArray:
    """Fill in electrons and backgrounds by least squares at the starting places."""
    stars, layout = likelihood.stars, likelihood.layout
    result = vector.copy()
    if electrons is not None:
        result[: 3 * stars].reshape(-1, 3)[:, 2] = electrons
    normal = np.zeros((likelihood.size, likelihood.size))
    right = np.zeros(likelihood.size)
    for index, cutout in enumerate(likelihood.cutouts):
        rise = layout.rise[index]
        chosen = [*range(2, 3 * stars, 3), layout.level[index]]
        planes = np.ones((stars + 1, cutout.electrons.size))
        for star in range(stars):
            place = vector[3 * star : 3 * star + 2]
            planes[star] = likelihood.star(vector, index, place, order=0).ravel()
        if rise is not None:
            planes = np.concatenate([planes, plane(*cutout.electrons.shape)])
            chosen += [rise, rise + 1]
        data = (cutout.electrons - cutout.known).ravel()
        weighted = planes * cutout.used.ravel()
        normal[np.ix_(chosen, chosen)] += weighted @ planes.T
        right[chosen] += weighted @ data
    rises = [first + i for first in layout.rise if first is not None for i in (0, 1)]
    fluxes = [*range(2, 3 * stars, 3)]
    wanted = [*fluxes, *layout.level, *rises]
    if electrons is not None:
        wanted = [*layout.level, *rises]
        right = right - normal[:, fluxes] @ result[fluxes]
    result[wanted] = np.linalg.lstsq(normal[np.ix_(wanted, wanted)], right[wanted], rcond=1e-12)[0]
    least = max([1.0, *(1e-3 * float(result[i]) for i in fluxes)])
    for i in fluxes:
        result[i] = max(float(result[i]), least)
    return result


def _shortened(step: FloatArray, layout: Layout, reach: float) -> FloatArray:
    """Scale a step down until no star and no frame moves farther than ``reach``."""
    moves = step[: 3 * layout.stars].reshape(-1, 3)[:, :2]
    longest = float(np.hypot(moves[:, 0], moves[:, 1]).max(initial=0.0)) / reach
    longest = max(longest, layout.longest(step, reach))
    return step if longest <= 1.0 else step / longest
