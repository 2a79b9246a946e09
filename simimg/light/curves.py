"""A curve over wavelength: transmissions, efficiencies, tabulated spectra.

Straight lines join the points of a table; beyond its ends it says nothing and counts as 0. What
integrates over curves must stop at their points, where the lines bend. Wavelengths in metres.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray, frozen


@dataclass(frozen=True, eq=False)
class Curve:
    """A table of values over wavelength.

    Attributes
    ----------
    wavelength : (n,) ndarray of float64
        Increasing, above 0 (m); at least two.
    value : (n,) ndarray of float64
        At least 0, not all 0.
    """

    wavelength: FloatArray
    value: FloatArray

    def __post_init__(self) -> None:
        x = np.asarray(self.wavelength, dtype=np.float64)
        y = np.asarray(self.value, dtype=np.float64)
        if x.ndim != 1 or x.shape != y.shape or x.size < 2:
            raise ValueError("a curve needs two columns of the same length, at least two rows")
        if not (np.all(np.isfinite(x)) and x[0] > 0.0 and np.all(np.diff(x) > 0.0)):
            raise ValueError("wavelengths must be finite, above 0 and increasing")
        if not (np.all(np.isfinite(y)) and np.all(y >= 0.0) and y.any()):
            raise ValueError("the values of a curve must be finite, at least 0 and not all 0")
        object.__setattr__(self, "wavelength", frozen(x))
        object.__setattr__(self, "value", frozen(y))

    def __call__(self, wavelength: ArrayLike) -> FloatArray:
        """Value at wavelengths (m), any shape; 0 beyond the ends."""
        place = np.asarray(wavelength, dtype=np.float64)
        return np.asarray(np.interp(place, self.wavelength, self.value, left=0.0, right=0.0))

    @property
    def support(self) -> tuple[float, float]:
        """Wavelengths (m) between which it is not 0."""
        lit = np.nonzero(self.value)[0]
        first, last = max(lit[0] - 1, 0), min(lit[-1] + 1, self.value.size - 1)
        return float(self.wavelength[first]), float(self.wavelength[last])

    @property
    def bounds(self) -> tuple[float, float]:
        """Wavelengths (m) between which it says something."""
        return float(self.wavelength[0]), float(self.wavelength[-1])


def efficiency_curve(wavelength: ArrayLike, efficiency: ArrayLike) -> Curve:
    """A detector's quantum efficiency or a throughput, tabulated.

    Parameters
    ----------
    wavelength : (n,) array_like
        Increasing (m).
    efficiency : (n,) array_like
        From 0 to 1.

    Raises
    ------
    ValueError
        If it is not such a table.
    """
    curve = Curve(np.asarray(wavelength, np.float64), np.asarray(efficiency, np.float64))
    if curve.value.max() > 1.0:
        raise ValueError("efficiencies must lie between 0 and 1")
    return curve


def panels(
    lower: float, upper: float, bends: Iterable[FloatArray]
) -> tuple[FloatArray, FloatArray]:
    """Nodes and weights of a quadrature that stops at every bend.

    Parameters
    ----------
    lower, upper : float
        Ends (m).
    bends : iterable of ndarray
        Wavelengths (m) at which the integrand or its slope may jump.

    Returns
    -------
    wavelength, weight : (n,) ndarray of float64
        Gauss-Legendre in each piece, at least 64 nodes in all and four in each piece.
    """
    places = np.concatenate([np.array([lower, upper]), *(np.ravel(bend) for bend in bends)])
    edges = np.unique(np.clip(places, lower, upper))
    order = max(4, -(-64 // (edges.size - 1)))
    nodes, weights = np.polynomial.legendre.leggauss(order)
    half = 0.5 * np.diff(edges)[:, np.newaxis]
    middle = 0.5 * (edges[1:] + edges[:-1])[:, np.newaxis]
    return (middle + half * nodes).ravel(), (half * weights).ravel()
