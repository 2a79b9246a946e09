"""Refractivity of moist air: how much n exceeds 1, by wavelength, pressure, temperature, humidity.

Two formulae: that of Ciddor (1996), in use today, and the older one of Edlen (1953) as Filippenko
(1982) tabulated differential refraction with it. Wavelengths are in vacuum and in metres, pressures
in pascal, temperatures in kelvin.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray

SHORTEST = 180e-9
"""Shortest wavelength (m) taken: beyond it the air's own absorption bends the formulae."""

MMHG = 133.322387415
"""A millimetre of mercury (Pa)."""

_ZERO_CELSIUS = 273.15
_GAS_CONSTANT = 8.314510
_WATER_MOLAR_MASS = 0.018015


def saturation_vapour_pressure(temperature: float) -> float:
    """Vapour pressure (Pa) of water at which air is saturated.

    Parameters
    ----------
    temperature : float
        173 to 373 K; below freezing it is that over supercooled water.

    Raises
    ------
    ValueError
        If the temperature is out of range.

    References
    ----------
    Davis, R. S. 1992, Metrologia 29, 67, as used by Ciddor 1996, appendix A.
    """
    if not 173.0 <= temperature <= 373.2:
        raise ValueError(f"air temperature must be from 173 to 373 K, got {temperature}")
    exponent = 1.2378847e-5 * temperature**2 - 1.9121316e-2 * temperature + 33.93711047
    return float(np.exp(exponent - 6.3431645e3 / temperature))


def refractivity_ciddor(
    wavelength: ArrayLike,
    *,
    pressure: float,
    temperature: float,
    relative_humidity: float = 0.0,
    carbon_dioxide: float = 450e-6,
) -> FloatArray:
    """Refractivity of moist air.

    Parameters
    ----------
    wavelength : array_like
        In vacuum (m), at least 180 nm. Made for 300 to 1690 nm, where it is good to some 1e-8;
        beyond, it goes on smoothly.
    pressure : float
        Total pressure (Pa), 0 to 140000.
    temperature : float
        Of the air (K), 173 to 373.
    relative_humidity : float
        0 to 1.
    carbon_dioxide : float
        Its part of the dry air's molecules.

    Returns
    -------
    ndarray of float64
        n - 1, the shape of ``wavelength``.

    Raises
    ------
    ValueError
        If an argument is out of range.

    References
    ----------
    Ciddor, P. E. 1996, Applied Optics 35, 1566.
    """
    square = _wavenumber_square(wavelength)
    _require_air(pressure)
    if not 0.0 <= relative_humidity <= 1.0:
        raise ValueError(f"relative humidity must be from 0 to 1, got {relative_humidity}")
    if not 0.0 <= carbon_dioxide <= 0.01:
        raise ValueError(f"carbon dioxide must be from 0 to 0.01, got {carbon_dioxide}")
    saturation = saturation_vapour_pressure(temperature)
    if pressure == 0.0:
        return np.zeros_like(square)
    celsius = temperature - _ZERO_CELSIUS
    enhancement = 1.00062 + 3.14e-8 * pressure + 5.6e-7 * celsius**2
    # Thin air cannot hold more vapour than its own pressure.
    water = min(relative_humidity * enhancement * saturation / pressure, 1.0)
    dry = 1e-8 * (5792105.0 / (238.0185 - square) + 167917.0 / (57.362 - square))
    dry = dry * (1.0 + 0.534 * (carbon_dioxide - 450e-6))
    vapour = 295.235 + square * (2.6422 + square * (-0.032380 + square * 0.004028))
    vapour = 1.022e-8 * vapour
    dry_molar_mass = 1e-3 * (28.9635 + 12.011 * (carbon_dioxide - 400e-6))

    def moles(p: float, t: float, x: float) -> float:
        """Moles a cubic metre at pressure p, temperature t, molar part x of water."""
        return p / (_compressibility(p, t, x) * _GAS_CONSTANT * t)

    here = moles(pressure, temperature, water)
    standard_dry = moles(101325.0, 288.15, 0.0) * dry_molar_mass
    standard_vapour = moles(1333.0, 293.15, 1.0) * _WATER_MOLAR_MASS
    dry_density = here * dry_molar_mass * (1.0 - water)
    vapour_density = here * _WATER_MOLAR_MASS * water
    return np.asarray(dry_density / standard_dry * dry + vapour_density / standard_vapour * vapour)


def _compressibility(pressure: float, temperature: float, water: float) -> float:
    """Of moist air (Davis 1992, as in Ciddor's appendix A)."""
    t, ratio = temperature - _ZERO_CELSIUS, pressure / temperature
    first = 1.58123e-6 - 2.9331e-8 * t + 1.1043e-10 * t * t
    first += (5.707e-6 - 2.051e-8 * t) * water + (1.9898e-4 - 2.376e-6 * t) * water**2
    return 1.0 - ratio * first + ratio**2 * (1.83e-11 - 0.765e-8 * water**2)


def refractivity_edlen(
    wavelength: ArrayLike, *, pressure: float, temperature: float, vapour_pressure: float = 0.0
) -> FloatArray:
    """Refractivity of moist air by the older formula.

    Parameters
    ----------
    wavelength : array_like
        In vacuum (m), at least 180 nm.
    pressure : float
        Total pressure (Pa).
    temperature : float
        Of the air (K), 173 to 373.
    vapour_pressure : float
        Of water (Pa), at most the pressure.

    Returns
    -------
    ndarray of float64
        n - 1, the shape of ``wavelength``.

    Raises
    ------
    ValueError
        If an argument is out of range.

    References
    ----------
    Edlen, B. 1953, J. Opt. Soc. Am. 43, 339; Filippenko, A. V. 1982, PASP 94, 715, eqs. 1 to 3.
    """
    square = _wavenumber_square(wavelength)
    _require_air(pressure)
    if not 0.0 <= vapour_pressure <= pressure:
        raise ValueError(f"vapour pressure must be from 0 to the air's own, got {vapour_pressure}")
    saturation_vapour_pressure(temperature)
    celsius, mercury = temperature - _ZERO_CELSIUS, pressure / MMHG
    standard = 64.328 + 29498.1 / (146.0 - square) + 255.4 / (41.0 - square)
    density = mercury * (1.0 + (1.049 - 0.0157 * celsius) * 1e-6 * mercury)
    expansion = 1.0 + 0.003661 * celsius
    lost = (0.0624 - 0.000680 * square) / expansion * vapour_pressure / MMHG
    return np.asarray(1e-6 * (standard * density / (720.883 * expansion) - lost))


def _wavenumber_square(wavelength: ArrayLike) -> FloatArray:
    """Square of the wave number, in inverse micrometres squared."""
    metres = np.asarray(wavelength, dtype=np.float64)
    if not (np.all(np.isfinite(metres)) and np.all(metres >= SHORTEST)):
        raise ValueError(f"wavelengths in air must be finite and at least {SHORTEST * 1e9:.0f} nm")
    return np.asarray((1e-6 / metres) ** 2)


def _require_air(pressure: float) -> None:
    if not 0.0 <= pressure <= 140000.0:
        raise ValueError(f"air pressure must be from 0 to 140000 Pa, got {pressure}")
