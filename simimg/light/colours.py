"""Few images for stars of every colour.

The photons of stars of different temperatures spread over a band in much the same way but for a
slope and a bend. A few reference temperatures, each with its weights of the band's wavelengths,
therefore stand for all: a star's weights are the nearest mixture of theirs (least squares, shares
of sum 1, some possibly negative). The references lie at Chebyshev's points of the slope of the
spectrum in the middle of the band. What a mixture misses bounds the error of the star's image.
Temperatures in kelvin, wavelengths in metres.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray, frozen
from simimg.light.bands import Band
from simimg.light.nodes import lagrange
from simimg.light.photons import Response, band_quadrature, efficiency
from simimg.light.spectra import BOLTZMANN, LIGHT_SPEED, PLANCK, planck

MOST_MEMBERS = 8
"""Most reference temperatures."""

_TABLE = 4096
_CHECKED = 400


@dataclass(frozen=True, eq=False)
class ColourMembers:
    """Reference temperatures and how stars mix them; made by `colour_members`.

    Attributes
    ----------
    temperatures : (m,) ndarray of float64
        References (K), falling.
    weights : (m, k) ndarray of float64
        Of each reference, the weights of the k wavelengths; rows of sum 1.
    error : float
        Largest `missed` from the coolest to the hottest blackbody.
    places, table : (n,) and (n, m) ndarray of float64
        Mixtures over 1/temperature.
    """

    temperatures: FloatArray
    weights: FloatArray
    error: float
    places: FloatArray
    table: FloatArray

    def __post_init__(self) -> None:
        for name in ("temperatures", "weights", "places", "table"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    def mixture(self, temperatures: ArrayLike) -> FloatArray:
        """Shares of the references in stars of these temperatures.

        Parameters
        ----------
        temperatures : (n,) array_like
            In kelvin, within the range that the members were made for.

        Returns
        -------
        (n, m) ndarray of float64
            Possibly negative, rows of sum 1.

        Raises
        ------
        ValueError
            If a temperature is out of that range.
        """
        inverse = 1.0 / np.asarray(temperatures, dtype=np.float64)
        slack = 1e-9
        low, high = self.places[0] * (1.0 - slack), self.places[-1] * (1.0 + slack)
        if not np.all((inverse >= low) & (inverse <= high)):
            raise ValueError(
                f"temperatures must be from {1.0 / self.places[-1]:.0f} to "
                f"{1.0 / self.places[0]:.0f} K, for which the colours were made"
            )
        columns = [np.interp(inverse, self.places, column) for column in self.table.T]
        return np.stack(columns, axis=-1)

    def mixture_of(self, weights: ArrayLike) -> FloatArray:
        """Shares of the references in sources of any spectra, (n, k) weights -> (n, m)."""
        return _nearest_mixture(self.weights, np.atleast_2d(np.asarray(weights, np.float64)))

    def missed(self, weights: ArrayLike) -> FloatArray:
        """Half the sum of what the mixtures miss of weights, (n, k) -> (n,).

        It bounds the error of the image over the peak of the sharpest monochromatic one, for the
        misses add up to nothing.
        """
        given = np.atleast_2d(np.asarray(weights, dtype=np.float64))
        miss = self.mixture_of(given) @ self.weights - given
        return np.asarray(0.5 * np.abs(miss).sum(axis=1))


def _nearest_mixture(references: FloatArray, weights: FloatArray) -> FloatArray:
    """Least squares with shares of sum 1."""
    rest = (weights - references[0]) @ np.linalg.pinv(references[1:] - references[0])
    first = 1.0 - rest.sum(axis=1, keepdims=True)
    return np.concatenate([first, rest], axis=1)


def blackbody_weights(
    wavelengths: FloatArray,
    band: Band,
    temperatures: ArrayLike,
    *,
    response: Response = 1.0,
) -> FloatArray:
    """Weights of given wavelengths for many temperatures at once.

    Parameters
    ----------
    wavelengths : (k,) ndarray
        Nodes of `simimg.light.nodes.photon_nodes` (m).
    band : Band
    temperatures : (n,) array_like
        In kelvin, above 0.
    response : Curve or float
        Efficiency of all that follows the band.

    Returns
    -------
    (n, k) ndarray of float64
        Rows of sum 1, as `simimg.light.nodes.node_weights` gives them one by one.

    Raises
    ------
    ValueError
        If a temperature is out of range or sends no light through the band.
    """
    stars = np.asarray(temperatures, dtype=np.float64)
    if not (np.all(np.isfinite(stars)) and np.all(stars > 0.0)):
        raise ValueError("temperatures must be finite and above 0 K")
    fine, weight = band_quadrature(band, response=response)
    weight = weight * efficiency(response, fine)
    photons = planck(fine, stars[:, np.newaxis]) * weight
    total = photons.sum(axis=1, keepdims=True)
    if not np.all(total > 0.0):
        raise ValueError(f"a star of {stars.min():.0f} K sends no light through the band")
    shape = lagrange(fine, np.asarray(wavelengths, dtype=np.float64))
    return np.asarray((photons / total) @ shape)


def colour_members(
    wavelengths: FloatArray,
    band: Band,
    *,
    coolest: float,
    hottest: float,
    tolerance: float,
    response: Response = 1.0,
) -> ColourMembers:
    """The fewest reference temperatures for a tolerance.

    In V, 3 references hold blackbodies from 2500 to 40000 K to 2e-4 and 4 hold them to 4e-6.

    Parameters
    ----------
    wavelengths : (k,) ndarray
        Nodes of `simimg.light.nodes.photon_nodes` (m).
    band : Band
    coolest, hottest : float
        Range of the stars' temperatures (K).
    tolerance : float
        Of `ColourMembers.error`. Where `MOST_MEMBERS` do not reach it the error says by how much.
    response : Curve or float
        Efficiency of all that follows the band.

    Returns
    -------
    ColourMembers
        A single member where all stars have one temperature or there is one wavelength.

    Raises
    ------
    ValueError
        If a temperature is out of range or sends no light through the band, or the tolerance is
        not above 0.
    """
    if not (np.isfinite(hottest) and 0.0 < coolest <= hottest):
        raise ValueError(f"temperatures must rise from above 0 K, got {coolest} to {hottest} K")
    if not tolerance > 0.0:
        raise ValueError(f"tolerance must be above 0, got {tolerance}")
    nodes = np.asarray(wavelengths, dtype=np.float64)
    if nodes.size == 1 or hottest <= coolest * (1.0 + 1e-9):
        star = np.array([hottest])
        weights = blackbody_weights(nodes, band, star, response=response)
        ends = np.array([1.0 / hottest, 1.0 / coolest])
        return ColourMembers(star, weights, 0.0, ends, np.ones((2, 1)))
    places = np.linspace(1.0 / hottest, 1.0 / coolest, _TABLE)
    exact = blackbody_weights(nodes, band, 1.0 / places, response=response)
    x = PLANCK * LIGHT_SPEED / (BOLTZMANN * band.centre) * places
    # Slope of log f_nu over log wavelength, but for a constant.
    slope = x / -np.expm1(-x)
    step = _TABLE // _CHECKED
    for count in range(2, min(MOST_MEMBERS, nodes.size) + 1):
        angles = np.pi * (np.arange(count) + 0.5) / count
        wanted = 0.5 * (slope[0] + slope[-1]) - 0.5 * (slope[-1] - slope[0]) * np.cos(angles)
        references = 1.0 / np.interp(wanted, slope, places)
        weights = blackbody_weights(nodes, band, references, response=response)
        table = _nearest_mixture(weights, exact)
        miss = (table @ weights - exact)[::step]
        error = 0.5 * float(np.abs(miss).sum(axis=1).max())
        if error <= tolerance:
            break
    return ColourMembers(references, weights, error, places, table)
