"""Photons of a magnitude, whatever the spectrum, the shape of the band and the detector.

A magnitude is that of a photon-counting band: the mean of f_nu weighted by T d(lambda)/lambda, over
the flux density of magnitude 0. The photons that pass the band follow from the magnitude alone;
the spectrum decides how a detector of uneven efficiency counts them, and what the magnitude is in
another band. Through the boxes of the standard bands the colours of blackbodies above 5000 K come
within 0.015 mag of those through the tabulated bands, at 3500 K within 0.03 mag. Wavelengths in
metres, rates per second and square metre above the atmosphere.

References
----------
Oke, J. B. & Gunn, J. E. 1983, ApJ 266, 713.
Fukugita, M. et al. 1996, AJ 111, 1748 (eq. 7: the mean over photons).
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import FloatArray
from simimg.light.bands import JANSKY, Band
from simimg.light.curves import Curve, panels
from simimg.light.spectra import FLAT, PLANCK, Spectrum

Response = Curve | float
"""What the light meets after the band: a curve of efficiency over wavelength, or one number."""


def photon_rate(
    band: Band, system: str, *, spectrum: Spectrum = FLAT, response: Response = 1.0
) -> float:
    """Photons detected per second and square metre from a source of magnitude 0.

    Parameters
    ----------
    band : Band
        Its curve where it has one, else its box.
    system : str
        "Vega" or "AB".
    spectrum : Spectrum
        Of the source.
    response : Curve or float
        Efficiency of all that follows, 0 to 1.

    Returns
    -------
    float
        Rate (1/s/m2). Of a box with one number it is that of
        `simimg.light.bands.photon_zero_point` times the number.

    Raises
    ------
    ValueError
        If the band has no zero flux in that system, or the spectrum or the response does not
        reach over the band.
    """
    wavelength, weight = band_quadrature(band, spectrum, response)
    photons = weight * spectrum.f_nu(wavelength)
    total = float(photons.sum())
    if not total > 0.0:
        raise ValueError(f"the spectrum sends no light through {_name(band)}")
    detected = float((photons * efficiency(response, wavelength)).sum()) / total
    return zero_flux(band, system) * JANSKY / PLANCK * float(weight.sum()) * detected


def band_colour(
    spectrum: Spectrum,
    from_band: Band,
    to_band: Band,
    *,
    from_system: str,
    to_system: str,
) -> float:
    """What to add to a source's magnitude in one band to have it in another.

    Parameters
    ----------
    spectrum : Spectrum
        Of the source.
    from_band, to_band : Band
        Where the magnitude is known and where it is wanted.
    from_system, to_system : str
        Magnitude systems, "Vega" or "AB".

    Returns
    -------
    float
        ``m(to) - m(from)``.

    Raises
    ------
    ValueError
        If a band has no zero flux in its system, or the spectrum sends no light through one or
        does not reach over it.
    """
    levels = [
        mean_flux(spectrum, band) / zero_flux(band, system)
        for band, system in ((from_band, from_system), (to_band, to_system))
    ]
    return float(2.5 * np.log10(levels[0] / levels[1]))


def mean_flux(spectrum: Spectrum, band: Band) -> float:
    """Mean of a spectrum's f_nu over a band, by photons; in the spectrum's own unit.

    Raises
    ------
    ValueError
        If the spectrum sends no light through the band or does not reach over it.
    """
    wavelength, weight = band_quadrature(band, spectrum)
    mean = float((weight * spectrum.f_nu(wavelength)).sum() / weight.sum())
    if not mean > 0.0:
        raise ValueError(f"the spectrum sends no light through {_name(band)}")
    return mean


def zero_flux(band: Band, system: str) -> float:
    """Flux density (Jy) of magnitude 0.

    Raises
    ------
    ValueError
        If the band has none in that system.
    """
    try:
        return band.zero_flux_jy[system]
    except KeyError:
        known = ", ".join(band.zero_flux_jy)
        raise ValueError(
            f"no zero flux in the {system!r} system for {_name(band)}; it has {known}"
        ) from None


def band_quadrature(
    band: Band, spectrum: Spectrum = FLAT, response: Response = 1.0
) -> tuple[FloatArray, FloatArray]:
    """Nodes and weights for integrals over a band.

    Parameters
    ----------
    band : Band
    spectrum, response
        What else the integrand holds: the nodes stop at their bends. They are not in the weights.

    Returns
    -------
    wavelength : (n,) ndarray of float64
        Nodes (m).
    weight : (n,) ndarray of float64
        Transmission times d(lambda)/lambda.

    Raises
    ------
    ValueError
        If the spectrum or the response does not reach over the band.
    """
    lower, upper = band.support
    bends = [band.bends, spectrum.bends]
    _require_cover("spectrum", spectrum.bounds, band)
    if isinstance(response, Curve):
        _require_cover("response", response.bounds, band)
        bends.append(response.wavelength)
    wavelength, weight = panels(lower, upper, bends)
    return wavelength, weight * band.transmission(wavelength) / wavelength


def efficiency(response: Response, wavelength: FloatArray) -> FloatArray:
    """Value of a response at wavelengths (m)."""
    if isinstance(response, Curve):
        return response(wavelength)
    return np.full(wavelength.shape, response)


def effective_wavelength(
    band: Band, *, spectrum: Spectrum = FLAT, response: Response = 1.0
) -> float:
    """Mean wavelength (m) of the detected photons.

    Raises
    ------
    ValueError
        If no light is detected, or the spectrum or the response does not reach over the band.
    """
    wavelength, weight = band_quadrature(band, spectrum, response)
    photons = weight * spectrum.f_nu(wavelength) * efficiency(response, wavelength)
    if not photons.sum() > 0.0:
        raise ValueError(f"no light is detected in {_name(band)}")
    return float((photons * wavelength).sum() / photons.sum())


def _require_cover(what: str, bounds: tuple[float, float], band: Band) -> None:
    lower, upper = band.support
    # Wavelengths converted from other units may miss the band's ends by their last digits.
    slack = 1e-9 * (upper - lower)
    if bounds[0] > lower + slack or bounds[1] < upper - slack:
        raise ValueError(
            f"the {what} is known from {bounds[0] * 1e9:.1f} to {bounds[1] * 1e9:.1f} nm, but "
            f"{_name(band)} reaches from {lower * 1e9:.1f} to {upper * 1e9:.1f} nm"
        )


def _name(band: Band) -> str:
    return f"band {band.name}" if band.name else f"the band at {band.centre * 1e9:.1f} nm"
