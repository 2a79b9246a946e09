"""Zernike polynomials of a clear or annular aperture in Noll's order, and what turbulence leaves.

The polynomials are those of Noll (1976) on the clear disc and of Mahajan (1981) on the annulus:
orthonormal there (the mean of the square is 1, and of the product of two 0), so that a
wavefront's coefficients are root mean squares. Of each azimuthal order m the radial parts are
``r^m`` times polynomials in ``r^2``, orthogonal with the weight ``(r^2)^m`` between the
obstruction and the rim; they come from their three-term recurrence, whose coefficients are sums
over Gauss-Legendre nodes and exact (the procedure of Stieltjes; Gautschi 2004). Coordinates are in
units of the aperture's radius, along the detector's +x and +y.

References
----------
Noll, R. J. 1976, J. Opt. Soc. Am. 66, 207.
Mahajan, V. N. 1981, J. Opt. Soc. Am. 71, 75.
Gautschi, W. 2004, Orthogonal Polynomials: Computation and Approximation (Oxford).
"""

from __future__ import annotations

from functools import lru_cache
from math import ceil, isqrt

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import beta, gamma, poch

from simimg.arrays import FloatArray, frozen

LARGEST_INDEX = 861
"""Largest index of Noll's here: all terms of radial order 40."""

KOLMOGOROV_HALF = (24.0 / 5.0 * gamma(6.0 / 5.0)) ** (5.0 / 6.0)
"""Half the factor of (r/r0)^(5/3) in the phase structure function of Kolmogorov's air, 3.4419."""


def noll_order(index: int) -> tuple[int, int]:
    """Radial and azimuthal order of a term, by Noll's single index.

    Parameters
    ----------
    index : int
        From 1 (piston); 2 and 3 are the tilts along x and y, 4 defocus, 5 and 6 astigmatism, 7 and
        8 coma, 11 spherical aberration.

    Returns
    -------
    n : int
        Radial order.
    m : int
        Azimuthal order: positive for the cosine of m theta, negative for the sine of ``-m`` theta;
        theta runs from +x towards +y.

    Raises
    ------
    ValueError
        If the index is not from 1 to `LARGEST_INDEX`.

    References
    ----------
    Noll 1976, table I: even indices are cosines.
    """
    if not 1 <= index <= LARGEST_INDEX:
        raise ValueError(f"a Zernike index must be from 1 to {LARGEST_INDEX}, got {index}")
    n = (isqrt(8 * index - 7) - 1) // 2
    place = index - n * (n + 1) // 2
    m = 2 * (place // 2) if n % 2 == 0 else 2 * ((place + 1) // 2) - 1
    return n, m if index % 2 == 0 or m == 0 else -m


def zernike(index: int, x: ArrayLike, y: ArrayLike, *, obstruction: float = 0.0) -> FloatArray:
    """Value of one polynomial.

    Parameters
    ----------
    index : int
        Noll's index, 1 to `LARGEST_INDEX`.
    x, y : array_like
        Coordinates in units of the aperture's radius; they broadcast. Beyond the rim and within
        the obstruction the polynomial goes on.
    obstruction : float
        Diameter of the central obstruction over that of the aperture, 0 <= obstruction < 1.

    Returns
    -------
    ndarray of float64
        Orthonormal over the open aperture; the radial part is positive at the rim.

    Raises
    ------
    ValueError
        If the index or the obstruction is out of range.

    References
    ----------
    Noll 1976; Mahajan 1981.
    """
    n, m = noll_order(index)
    if not 0.0 <= obstruction < 1.0:
        raise ValueError(f"obstruction must be at least 0 and below 1, got {obstruction}")
    place_x, place_y = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    square = place_x * place_x + place_y * place_y
    radial = _radial(n, abs(m), float(obstruction), square)
    if m == 0:
        return radial
    turning = (place_x + 1j * place_y) ** abs(m)
    return np.asarray(radial * (turning.real if m > 0 else turning.imag))


def _radial(n: int, m: int, obstruction: float, square: FloatArray) -> FloatArray:
    """The radial part over r^m, at squared radii, normalised with the angular part."""
    centres, weights, norm = _recurrence(m, (n - m) // 2, obstruction)
    previous, value = np.zeros_like(square), np.ones_like(square)
    for centre, weight in zip(centres, weights):
        previous, value = value, (square - centre) * value - weight * previous
    return np.asarray(value / norm)


@lru_cache(maxsize=1024)
def _recurrence(m: int, degree: int, obstruction: float) -> tuple[FloatArray, FloatArray, float]:
    """Recurrence of the monic polynomials in t = r^2, and the root mean square of the last.

    Gauss-Legendre nodes integrate the products of polynomials without error.
    """
    nodes, parts = np.polynomial.legendre.leggauss(degree + ceil(0.5 * m) + 1)
    low = obstruction * obstruction
    t = low + 0.5 * (1.0 - low) * (nodes + 1.0)
    # The mean over the open area; the cosine's or sine's square has the mean 1/2.
    measure = 0.5 * parts * t**m * (0.5 if m else 1.0)
    centres, weights = np.empty(degree), np.zeros(degree)
    previous, value = np.zeros_like(t), np.ones_like(t)
    size = float(measure.sum())
    for k in range(degree):
        centres[k] = (measure * t * value * value).sum() / size
        previous, value = value, (t - centres[k]) * value - weights[k] * previous
        smaller = float((measure * value * value).sum())
        if k + 1 < degree:
            weights[k + 1] = smaller / size
        size = smaller
    return frozen(centres), frozen(weights), float(np.sqrt(size))


def noll_residual(count: int) -> float:
    """Phase variance that Kolmogorov's turbulence leaves after the first terms are taken out.

    Parameters
    ----------
    count : int
        Number of Zernike terms taken out of the clear aperture, from 1 (piston alone).

    Returns
    -------
    float
        Variance in rad2 over (D/r0)^(5/3), infinite outer scale.

    Raises
    ------
    ValueError
        If the count is not from 1 to `LARGEST_INDEX`.

    References
    ----------
    Noll 1976, eq. 25 and table IV, with every digit of the constants (his 1.0299 is 1.03242).
    """
    noll_order(count)
    power = 5.0 / 3.0
    # Mean of distance^(5/3) between two points of a disc of diameter 1, times half the factor of
    # the structure function: the variance about the mean.
    distance = 16.0 / np.pi * beta(0.5 * (power + 3.0), 0.5) / ((power + 2.0) * (power + 4.0))
    variance = KOLMOGOROV_HALF * distance
    for index in range(2, count + 1):
        variance -= noll_variance(index)
    return float(variance)


def noll_variance(index: int) -> float:
    """Variance of one coefficient in Kolmogorov's turbulence.

    Parameters
    ----------
    index : int
        Noll's index, 2 to `LARGEST_INDEX` (the variance of piston is infinite).

    Returns
    -------
    float
        In rad2 over (D/r0)^(5/3), infinite outer scale.

    Raises
    ------
    ValueError
        If the index is out of range.

    References
    ----------
    Noll 1976, eq. 22 to 25.
    """
    n, _ = noll_order(index)
    if n == 0:
        raise ValueError("the variance of piston is infinite: write an index of at least 2")
    # 8 pi^(8/3) c times the integral of J_(n+1)^2(z) z^(-14/3), with the power spectrum
    # c r0^(-5/3) f^(-11/3) of the phase, c = 0.0229.
    factor = 4.0 / np.pi * 2.0 ** (-14.0 / 3.0) * gamma(14.0 / 3.0) * gamma(11.0 / 6.0) ** 2
    # Gamma(n - 5/6) / Gamma(n + 23/6), without the large numbers themselves.
    ratio = poch(n + 23.0 / 6.0, -14.0 / 3.0) / gamma(17.0 / 6.0) ** 2
    return float(KOLMOGOROV_HALF * factor * (n + 1) * ratio)
