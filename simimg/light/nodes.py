"""Wavelengths and weights that stand for the light of a band.

A polychromatic image is a sum of monochromatic ones, each weighted by its share of the detected
photons. Gauss's rule for that very distribution of photons (band, spectrum, detector) takes the
fewest: K wavelengths are exact for images that change over the band as polynomials of degree
2K - 1. For a flat spectrum in a narrow box the rule is that of Gauss and Legendre. Several spectra
can share the wavelengths of one of them: their weights are then integrals of the interpolating
polynomials over their own photons, exact to degree K - 1, and may be a little negative. Wavelengths
in metres.

References
----------
Gautschi, W. 2004, Orthogonal Polynomials: Computation and Approximation (Oxford), ch. 2 and 3.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import eigh_tridiagonal

from simimg.arrays import FloatArray
from simimg.light.bands import Band
from simimg.light.photons import Response, band_quadrature, efficiency
from simimg.light.spectra import FLAT, Spectrum

MOST_NODES = 64
"""Most wavelengths of a rule."""


def photon_nodes(
    band: Band, count: int, *, spectrum: Spectrum = FLAT, response: Response = 1.0
) -> tuple[FloatArray, FloatArray]:
    """Gauss's rule for the detected photons of a band.

    Parameters
    ----------
    band : Band
    count : int
        Number of wavelengths, 1 to `MOST_NODES`; see `node_count`. One alone is the effective
        wavelength.
    spectrum : Spectrum
        Of the source.
    response : Curve or float
        Efficiency of all that follows the band.

    Returns
    -------
    wavelength : (count,) ndarray of float64
        Increasing, within the band (m).
    weight : (count,) ndarray of float64
        Shares of the detected photons, above 0, of sum 1.

    Raises
    ------
    ValueError
        If the count is out of range, no light is detected, or the spectrum or the response does
        not reach over the band.
    """
    if not 1 <= count <= MOST_NODES:
        raise ValueError(f"a rule needs 1 to {MOST_NODES} wavelengths, got {count}")
    wavelength, share = _shares(band, spectrum, response)
    middle, half = 0.5 * (wavelength[0] + wavelength[-1]), 0.5 * (wavelength[-1] - wavelength[0])
    t = (wavelength - middle) / half
    # Stieltjes' procedure: the recurrence of the polynomials orthonormal over the photons.
    centres, links = np.empty(count), np.empty(count - 1)
    previous, value, link = np.zeros_like(t), np.ones_like(t), 0.0
    for k in range(count):
        centres[k] = (share * t * value * value).sum()
        following = (t - centres[k]) * value - link * previous
        if k < count - 1:
            link = float(np.sqrt((share * following * following).sum()))
            links[k] = link
            previous, value = value, following / link
    nodes, vectors = eigh_tridiagonal(centres, links)
    return np.asarray(middle + half * nodes), np.asarray(vectors[0] ** 2)


def node_weights(
    wavelengths: FloatArray,
    band: Band,
    *,
    spectrum: Spectrum = FLAT,
    response: Response = 1.0,
) -> FloatArray:
    """Weights of given wavelengths for another spectrum.

    Parameters
    ----------
    wavelengths : (k,) ndarray
        Nodes of `photon_nodes` for the band with a spectrum not too unlike.
    band, spectrum, response
        As for `photon_nodes`.

    Returns
    -------
    (k,) ndarray of float64
        Of sum 1.

    Raises
    ------
    ValueError
        If no light is detected, or the spectrum or the response does not reach over the band.
    """
    fine, share = _shares(band, spectrum, response)
    return np.asarray(share @ lagrange(fine, np.asarray(wavelengths, dtype=np.float64)))


def lagrange(place: FloatArray, nodes: FloatArray) -> FloatArray:
    """Values of the polynomials that are 1 at one node and 0 at the others.

    Parameters
    ----------
    place : (n,) ndarray
        Where they are wanted.
    nodes : (k,) ndarray
        All different, in any order; stable for nodes of a Gauss rule.

    Returns
    -------
    (n, k) ndarray of float64
        Rows of sum 1.
    """
    scale = 4.0 / float(np.ptp(nodes)) if nodes.size > 1 else 1.0
    apart = (nodes[:, np.newaxis] - nodes) * scale
    np.fill_diagonal(apart, 1.0)
    barycentric = 1.0 / apart.prod(axis=1)
    away = (place[:, np.newaxis] - nodes) * scale
    met = away == 0.0
    terms = barycentric / np.where(met, 1.0, away)
    terms = np.where(met.any(axis=1, keepdims=True), met.astype(np.float64), terms)
    return np.asarray(terms / terms.sum(axis=1, keepdims=True))


def node_count(
    band: Band,
    tolerance: float,
    *,
    obstruction: float = 0.0,
    contrast: float = 1.0,
    phase: float = 0.0,
) -> int:
    """How many wavelengths a polychromatic image needs.

    What asks for them is diffraction's rings: at k wavelengths/diameter from the centre they run
    through ``k width / centre`` of their period over the band, with a height that falls as
    ``8 / (pi^4 k^3)`` of the peak. The count is the least at which a Gauss-Legendre rule keeps
    every ring's error under the tolerance.

    Parameters
    ----------
    band : Band
        Its support counts.
    tolerance : float
        Largest error over the image's peak, 1e-8 to 0.1.
    obstruction : float
        Ratio of the central obstruction: it makes the rings higher.
    contrast : float
        What air and jitter leave of the finest detail, their transfer function at the cut-off, 0
        to 1: where it is 0 there are no rings.
    phase : float
        Any other change of the transfer function's phase over the band (rad) at the frequencies
        that matter: 2 pi times the frequency (cycles/rad) times the dispersion across the band
        (rad).

    Returns
    -------
    int
        3 to `MOST_NODES`.

    Raises
    ------
    ValueError
        If a value is out of range.
    """
    if not 1e-8 <= tolerance <= 0.1:
        raise ValueError(f"tolerance must be from 1e-8 to 0.1, got {tolerance}")
    if not 0.0 <= obstruction < 1.0:
        raise ValueError(f"obstruction must be at least 0 and below 1, got {obstruction}")
    if not 0.0 <= contrast <= 1.0:
        raise ValueError(f"contrast must be from 0 to 1, got {contrast}")
    if not (np.isfinite(phase) and phase >= 0.0):
        raise ValueError(f"phase must be finite and at least 0 rad, got {phase}")
    lower, upper = band.support
    k = np.linspace(1.0, 200.0, 800)
    # Both edges of an annulus throw rings: their amplitudes add.
    edges = (1.0 + np.sqrt(obstruction)) / (1.0 - obstruction**2)
    height = np.append(contrast * 8.0 / (np.pi**4 * k**3) * edges**2, 1.0)
    turns = np.append(2.0 * np.pi * k * (upper - lower) / band.centre, phase)
    for count in range(3, MOST_NODES):
        nodes, weights = np.polynomial.legendre.leggauss(count)
        cosine = np.cos(0.5 * turns[:, np.newaxis] * nodes) @ (0.5 * weights)
        error = np.abs(cosine - np.sinc(0.5 * turns / np.pi))
        if float((height * error).max()) <= tolerance:
            return count
    return MOST_NODES


def _shares(band: Band, spectrum: Spectrum, response: Response) -> tuple[FloatArray, FloatArray]:
    """Fine wavelengths and their shares of the detected photons."""
    wavelength, weight = band_quadrature(band, spectrum, response)
    photons = weight * spectrum.f_nu(wavelength) * efficiency(response, wavelength)
    total = float(photons.sum())
    if not total > 0.0:
        raise ValueError(f"no light is detected in the band at {band.centre * 1e9:.1f} nm")
    return wavelength, photons / total
