"""Other stars near a measured one: found in what a fit leaves, and their light to be allowed for.

A matched filter (the PSF over the noise) runs over the residual of a fit; its highest peaks are
fitted as single stars, brightest first, each with the light of all others taken off. Only peaks far
above any chance are taken, so that an isolated star is left as it is.

Electrons and detector pixels of the frame.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil, hypot
from typing import NamedTuple

import numpy as np
from scipy import signal

from simimg.arrays import FloatArray
from simimg.resolving.observation import Observation
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.starfit import Cutout, StarFit, fit_stars

_SURE = 6.5  # standard deviations of a peak that is no chance
_MOST = 12
CLEAR = 2.0
"""FWHM around a measured star within which a second one is its companion, no neighbour."""


class PlacedStar(NamedTuple):
    """A star: place in pixels of the frame, electrons."""

    x: float
    y: float
    electrons: float


def placed_stars(fit: StarFit) -> list[PlacedStar]:
    """The stars of a fit, in its order."""
    return [
        PlacedStar(float(x), float(y), float(light))
        for (x, y), light in zip(fit.places, fit.electrons)
    ]


def star_light(stars: Sequence[PlacedStar], cutout: Cutout) -> FloatArray:
    """Return the expected electrons of stars on the pixels of a cutout."""
    rows, columns = cutout.electrons.shape
    total = np.zeros((rows, columns))
    for star in stars:
        total += (
            star.electrons
            * cutout.psf.evaluate(
                star.x - cutout.x0, star.y - cutout.y0, columns=columns, rows=rows, order=0
            )[0]
        )
    return total


def matched_filter(residual: FloatArray, inverse_variance: FloatArray, psf: PsfModel) -> FloatArray:
    """Return the significance of a star centred on each pixel, in standard deviations.

    Parameters
    ----------
    residual : ndarray, shape (rows, columns)
        Electrons; 0 where `inverse_variance` is 0.
    inverse_variance : ndarray, shape (rows, columns)
        0 for pixels that do not count.
    psf : PsfModel
    """
    half = max(1, ceil(1.5 * psf.fwhm))
    kernel = psf.evaluate(half, half, columns=2 * half + 1, rows=2 * half + 1, order=0)[0]
    turned = kernel[::-1, ::-1]
    light = signal.fftconvolve(residual * inverse_variance, turned, mode="same")
    power = signal.fftconvolve(inverse_variance, turned**2, mode="same")
    # Rounding of the transforms must not pass for weight.
    known = power > 1e-9 * float(power.max(initial=0.0))
    return np.where(known, light / np.sqrt(np.where(known, power, 1.0)), 0.0)


def find_neighbours(
    observation: Observation, stars: Sequence[PlacedStar], *, half: float
) -> list[PlacedStar]:
    """Find the stars around measured ones, from two FWHM off.

    Parameters
    ----------
    observation : Observation
    stars : sequence of PlacedStar
        What is measured, as fitted.
    half : float
        How far about the first of them to look, pixels.
    """
    fwhm = observation.fwhm
    cutout = observation.cutout(stars[0].x, stars[0].y, half)
    rows, columns = cutout.electrons.shape
    x = cutout.x0 + np.arange(columns)
    y = cutout.y0 + np.arange(rows)[:, None]
    outside = np.ones((rows, columns), dtype=bool)
    for star in stars:
        outside &= np.hypot(x - star.x, y - star.y) > CLEAR * fwhm
    found: list[PlacedStar] = []
    model = star_light(stars, cutout)
    while len(found) < _MOST:
        rest = cutout.electrons - model
        counted = cutout.used > 0
        background = float(np.median(rest[counted])) if counted.any() else 0.0
        variance = np.maximum(model + background, 0.0) + cutout.variance + 1e-3
        height = matched_filter(
            (rest - background) * cutout.used, cutout.used / variance, cutout.psf
        )
        height = np.where(outside, height, -np.inf)
        row, column = np.unravel_index(int(np.argmax(height)), height.shape)
        if not height[row, column] > _SURE:
            break
        peak = _fitted(
            observation, (cutout.x0 + int(column), cutout.y0 + int(row)), [*stars, *found]
        )
        if peak is None or any(
            hypot(peak.x - other.x, peak.y - other.y) < 0.5 * fwhm for other in (*stars, *found)
        ):
            outside[max(0, row - 1) : row + 2, max(0, column - 1) : column + 2] = False
            continue
        found.append(peak)
        model += star_light([peak], cutout)
    return _refined(observation, stars, found)


def _fitted(
    observation: Observation, place: tuple[float, float], others: Sequence[PlacedStar]
) -> PlacedStar | None:
    """One star fitted at a place, the light of others allowed for; None where there is none."""
    cutout = observation.cutout(*place, 1.5 * observation.fwhm)
    if cutout.used.sum() < 8:
        return None
    cutout = cutout.with_known(star_light(others, cutout))
    fit = fit_stars([cutout], places=[place])
    x, y = fit.places[0]
    error = float(np.sqrt(fit.covariance[2, 2]))
    if not fit.electrons[0] > 0.5 * _SURE * error or hypot(x - place[0], y - place[1]) > 2.0 * (
        observation.fwhm
    ):
        return None
    return PlacedStar(float(x), float(y), float(fit.electrons[0]))


def _refined(
    observation: Observation, stars: Sequence[PlacedStar], found: list[PlacedStar]
) -> list[PlacedStar]:
    """Once more, each with all the others known."""
    if len(found) < 2:
        return found
    for index, star in enumerate(list(found)):
        others = [*stars, *found[:index], *found[index + 1 :]]
        again = _fitted(observation, (star.x, star.y), others)
        if again is not None:
            found[index] = again
    return found
