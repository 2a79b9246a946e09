"""What turbulent air does to a long exposure: structure functions, transfer functions, seeing.

The wavefront's phase structure function D(r), in rad2, follows Kolmogorov, or von Karman where an
outer scale bounds the largest eddies. A long exposure through the air has the transfer function
exp(-D/2) (Fried 1966; Roddier 1981), to be multiplied by that of the telescope; r is the shift in
the pupil, wavelength times frequency. Fried's parameter r0, at the wavelength and airmass in hand,
carries the strength. Lengths in metres, angles in radians.

References
----------
Fried, D. L. 1966, J. Opt. Soc. Am. 56, 1372.
Roddier, F. 1981, Progress in Optics 19, 281.
Conan, R. 2000, thesis, Universite de Nice.
Tokovinin, A. 2002, PASP 114, 1156.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import gamma, kv

from simimg.arrays import FloatArray

KOLMOGOROV = 6.883877
"""2 (24/5 Gamma(6/5))^(5/6), the factor of (r/r0)^(5/3) (Fried 1966 rounds it to 6.88)."""

LONG_EXPOSURE_FWHM = 0.9758634
"""Full width at half maximum of the Kolmogorov long exposure over wavelength/r0 (Fried: 0.98)."""

SEEING_WAVELENGTH = 500e-9
"""Wavelength (m) to which a quoted seeing refers, at the zenith."""

_NU = 5.0 / 6.0
_SERIES_TERMS = 12


def fried_parameter(seeing: float, *, wavelength: float, airmass: float = 1.0) -> float:
    """Fried's parameter at a wavelength and airmass, from the seeing that a monitor quotes.

    Parameters
    ----------
    seeing : float
        Full width at half maximum (rad) of a long exposure at 500 nm at the zenith, for an infinite
        outer scale.
    wavelength : float
        Wavelength (m) at which r0 is wanted.
    airmass : float
        At least 1 (to rounding).

    Returns
    -------
    float
        r0 (m) = 0.9758634 * 500 nm / seeing, times (wavelength / 500 nm)^(6/5) airmass^(-3/5).

    Raises
    ------
    ValueError
        If an argument is not finite and above 0.

    References
    ----------
    Roddier 1981.
    """
    _require_positive(seeing=seeing, wavelength=wavelength, airmass=airmass)
    zenith = LONG_EXPOSURE_FWHM * SEEING_WAVELENGTH / seeing
    return float(zenith * (wavelength / SEEING_WAVELENGTH) ** 1.2 * airmass**-0.6)


def seeing_from_fried(r0: float, *, wavelength: float, airmass: float = 1.0) -> float:
    """The seeing (rad, 500 nm, zenith) that gives ``r0``; the inverse of `fried_parameter`."""
    _require_positive(r0=r0, wavelength=wavelength, airmass=airmass)
    zenith = r0 * (wavelength / SEEING_WAVELENGTH) ** -1.2 * airmass**0.6
    return float(LONG_EXPOSURE_FWHM * SEEING_WAVELENGTH / zenith)


def kolmogorov_structure(r: ArrayLike, r0: float) -> FloatArray:
    """Phase structure function without an outer scale, 6.883877 (r/r0)^(5/3).

    Parameters
    ----------
    r : array_like
        Distance in the pupil (m), 0 or more.
    r0 : float
        Fried's parameter (m).

    Returns
    -------
    ndarray of float64
        In rad2, the shape of ``r``.

    Raises
    ------
    ValueError
        If r0 is not finite and above 0.

    References
    ----------
    Fried 1966.
    """
    _require_positive(r0=r0)
    return np.asarray(KOLMOGOROV * (np.asarray(r, dtype=np.float64) / r0) ** (5.0 / 3.0))


def von_karman_structure(r: ArrayLike, r0: float, outer_scale: float) -> FloatArray:
    """Phase structure function with an outer scale.

    Parameters
    ----------
    r : array_like
        Distance in the pupil (m), 0 or more.
    r0 : float
        Fried's parameter (m).
    outer_scale : float
        L0 (m), above 0; infinity gives `kolmogorov_structure`.

    Returns
    -------
    ndarray of float64
        In rad2, the shape of ``r``; relative error below 1e-13 at any distance down to 0.

    Raises
    ------
    ValueError
        If r0 or the outer scale is out of range.

    References
    ----------
    Conan 2000; Tokovinin 2002, eq. 16. Below 2 pi r = L0, where the formula is a small difference
    of large terms, the Bessel function's power series, less its first term, takes its place.
    """
    if outer_scale == np.inf:
        return kolmogorov_structure(r, r0)
    _require_positive(r0=r0, outer_scale=outer_scale)
    x = np.asarray(r, dtype=np.float64) * (2.0 * np.pi / outer_scale)
    shape = x.shape
    x = x.ravel()
    near = x < 1.0
    bracket = np.empty(x.size)
    bracket[near] = _bracket_series(x[near])
    far = x[~near]
    bracket[~near] = 2.0 ** (-1.0 / 6.0) * gamma(_NU) - far**_NU * kv(_NU, far)
    # The published factor, 2^(1/6) Gamma(11/6) pi^(-8/3) (24/5 Gamma(6/5))^(5/6), written with
    # Kolmogorov's constant so that both structure functions agree to the last digit at small r.
    factor = 2.0 ** (1.0 / 6.0) * gamma(11.0 / 6.0) * np.pi ** (-8.0 / 3.0) * 0.5 * KOLMOGOROV
    return np.asarray(factor * (outer_scale / r0) ** (5.0 / 3.0) * bracket).reshape(shape)


def _bracket_series(x: FloatArray) -> FloatArray:
    """2^(-1/6) Gamma(5/6) - x^(5/6) K_5/6(x) for 0 <= x <= 1, without cancellation.

    K is half pi over sin(nu pi) times the difference of I_-nu and I_nu; the first term of I_-nu is
    the constant and is left out.
    """
    square = 0.25 * x * x
    even, odd = np.zeros_like(x), np.zeros_like(x)
    # Horner's rule over the terms (x^2/4)^k / (k! Gamma(k + 1 -/+ nu)).
    factorial = gamma(np.arange(_SERIES_TERMS) + 1.0)
    for k in range(_SERIES_TERMS - 1, -1, -1):
        odd = odd * square + 1.0 / (factorial[k] * gamma(k + 1.0 + _NU))
        if k > 0:
            even = even * square + 1.0 / (factorial[k] * gamma(k + 1.0 - _NU))
    difference = 2.0**-_NU * x ** (2.0 * _NU) * odd - 2.0**_NU * square * even
    return np.asarray(0.5 * np.pi / np.sin(_NU * np.pi) * difference)


def long_exposure_transfer(r: ArrayLike, r0: float, *, outer_scale: float = np.inf) -> FloatArray:
    """Transfer function of the air in a long exposure, exp(-D(r)/2).

    Parameters
    ----------
    r : array_like
        Shift in the pupil, wavelength times frequency (m), 0 or more.
    r0 : float
        Fried's parameter at the wavelength and airmass in hand (m).
    outer_scale : float
        L0 (m), or infinity.

    Returns
    -------
    ndarray of float64
        1 at zero shift, decreasing. With an outer scale it levels out at exp of minus the whole
        phase variance.

    Raises
    ------
    ValueError
        If r0 or the outer scale is out of range.

    References
    ----------
    Fried 1966; Roddier 1981; Tokovinin 2002.
    """
    return np.asarray(np.exp(-0.5 * von_karman_structure(r, r0, outer_scale)))


def tilt_removed_transfer(
    r: ArrayLike,
    r0: float,
    *,
    diameter: float,
    field: Literal["near", "far"] = "near",
    outer_scale: float = np.inf,
) -> FloatArray:
    """Transfer function of the air averaged over exposures that are each recentred.

    Fried's (1966) short-exposure average, exp(-3.44 (r/r0)^(5/3) (1 - a (r/D)^(1/3))) with a = 1 in
    the near field of the turbulence (r0 well above the square root of wavelength times distance)
    and 1/2 in the far field. It is an approximation: it takes the tilt of the wavefront over the
    aperture as uncorrelated with the rest of the phase, which it is not, and in the near field it
    flatters the highest frequencies: it leaves them untouched at the cut-off. It is the average of
    many frames, not one of them; a single frame has speckles.

    With a finite outer scale there is less tilt to remove. Fried's tilt term is the square of r/D
    times what the structure function reaches at r = D, and so it is taken here of von Karman's
    function, too: D_vK(r) - a (r/D)^2 D_vK(D). This extension goes over into Fried's formula as the
    outer scale grows.

    Parameters
    ----------
    r : array_like
        Shift in the pupil (m), 0 or more. Two points of a round aperture are never further apart
        than D; beyond it (the corners of a square pupil) no more than the structure function itself
        is removed, so that the transfer function never exceeds 1.
    r0 : float
        Fried's parameter at the wavelength and airmass in hand (m).
    diameter : float
        Diameter D of the aperture (m) over which the tilt is taken out.
    field : {"near", "far"}
        Near or far field.
    outer_scale : float
        L0 (m), or infinity.

    Returns
    -------
    ndarray of float64
        Between 0 and 1; not monotonic in the near field, where it returns to 1 at r = D.

    Raises
    ------
    ValueError
        If a length is out of range or the field is neither.

    References
    ----------
    Fried 1966.
    """
    _require_positive(diameter=diameter)
    if field not in ("near", "far"):
        raise ValueError(f'field must be "near" or "far", got {field!r}')
    share = 1.0 if field == "near" else 0.5
    distance = np.asarray(r, dtype=np.float64)
    whole = von_karman_structure(distance, r0, outer_scale)
    at_edge = von_karman_structure(diameter, r0, outer_scale)
    tilt = np.minimum((distance / diameter) ** 2 * at_edge, whole)
    return np.asarray(np.exp(-0.5 * (whole - share * tilt)))


def fwhm_kolmogorov(r0: float, *, wavelength: float) -> float:
    """Full width at half maximum (rad) of the Kolmogorov long exposure, 0.9758634 wavelength/r0.

    Of the air alone: a telescope of diameter D adds its own width (exactly so only for D >> r0).

    Parameters
    ----------
    r0 : float
        Fried's parameter at this wavelength (m).
    wavelength : float
        Wavelength (m).

    Raises
    ------
    ValueError
        If an argument is not finite and above 0.

    References
    ----------
    Fried 1966 (0.98).
    """
    _require_positive(r0=r0, wavelength=wavelength)
    return LONG_EXPOSURE_FWHM * wavelength / r0


def fwhm_von_karman_tokovinin(r0: float, *, wavelength: float, outer_scale: float) -> float:
    """Tokovinin's approximation of the von Karman long exposure's full width at half maximum.

    The Kolmogorov width times sqrt(1 - 2.183 (r0/L0)^0.356), within 1.5 % of the exact width.

    Parameters
    ----------
    r0 : float
        Fried's parameter at this wavelength (m).
    wavelength : float
        Wavelength (m).
    outer_scale : float
        L0 (m), or infinity.

    Returns
    -------
    float
        Width (rad) of the air alone; nan below L0 = 20 r0, where the formula does not hold.

    Raises
    ------
    ValueError
        If an argument is out of range.

    References
    ----------
    Tokovinin 2002, eq. 19.
    """
    kolmogorov = fwhm_kolmogorov(r0, wavelength=wavelength)
    if outer_scale == np.inf:
        return kolmogorov
    _require_positive(outer_scale=outer_scale)
    if outer_scale < 20.0 * r0:
        return float("nan")
    return float(kolmogorov * np.sqrt(1.0 - 2.183 * (r0 / outer_scale) ** 0.356))


def _require_positive(**lengths: float) -> None:
    for name, value in lengths.items():
        if not (np.isfinite(value) and value > 0.0):
            raise ValueError(f"{name} must be finite and above 0, got {value}")
