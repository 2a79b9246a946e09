"""Spectra of stars, as the shape of their flux density over wavelength.

Only the shape matters: a magnitude sets the level. Every spectrum gives f_nu, flux density per unit
of frequency, in a unit of its own; the photons per unit of wavelength go as f_nu over wavelength,
for a photon's energy goes as its frequency. Wavelengths in metres.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal, Protocol

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray
from simimg.light.curves import Curve

LIGHT_SPEED = 299792458.0
"""Speed of light (m/s), exact in the SI."""

PLANCK = 6.62607015e-34
"""Planck's constant (J s), exact in the SI."""

BOLTZMANN = 1.380649e-23
"""Boltzmann's constant (J/K), exact in the SI."""

_NO_BENDS = np.empty(0)

FluxKind = Literal["f_nu", "f_lambda", "photons"]
"""What a table holds: energy per frequency, energy per wavelength, or photons per wavelength."""


class Spectrum(Protocol):
    """What a star sends, in shape."""

    @property
    def bounds(self) -> tuple[float, float]:
        """Wavelengths (m) between which it is known."""
        ...

    @property
    def bends(self) -> FloatArray:
        """Wavelengths (m) where a table's lines meet."""
        ...

    def f_nu(self, wavelength: ArrayLike) -> FloatArray:
        """Flux density per unit of frequency at wavelengths (m), in a unit of its own."""
        ...


@dataclass(frozen=True)
class PowerLaw:
    """f_nu as a power of frequency.

    Attributes
    ----------
    index : float
        f_nu goes as frequency to this power, -20 to 20; 0 is flat in f_nu, -2 flat in f_lambda.
    """

    index: float

    def __post_init__(self) -> None:
        if not -20.0 <= self.index <= 20.0:
            raise ValueError(f"a power law's index must be from -20 to 20, got {self.index}")

    @property
    def bounds(self) -> tuple[float, float]:
        """Every wavelength."""
        return 0.0, np.inf

    @property
    def bends(self) -> FloatArray:
        """None."""
        return _NO_BENDS

    def f_nu(self, wavelength: ArrayLike) -> FloatArray:
        """Over its value at 1 micrometre."""
        return np.asarray((np.asarray(wavelength, dtype=np.float64) * 1e6) ** -self.index)


FLAT = PowerLaw(0.0)
"""The spectrum that magnitudes of the AB system take as their unit."""


@dataclass(frozen=True)
class Blackbody:
    """Planck's law.

    Attributes
    ----------
    temperature : float
        In kelvin, above 0.
    """

    temperature: float

    def __post_init__(self) -> None:
        if not (np.isfinite(self.temperature) and self.temperature > 0.0):
            raise ValueError(f"temperature must be finite and above 0 K, got {self.temperature}")

    @property
    def bounds(self) -> tuple[float, float]:
        """Every wavelength."""
        return 0.0, np.inf

    @property
    def bends(self) -> FloatArray:
        """None."""
        return _NO_BENDS

    def f_nu(self, wavelength: ArrayLike) -> FloatArray:
        """Radiance per frequency (W / m2 / Hz / sr)."""
        return planck(wavelength, self.temperature)


@dataclass(frozen=True, eq=False)
class TabulatedSpectrum:
    """A spectrum from a table, straight lines between its points.

    Attributes
    ----------
    curve : Curve
        Wavelengths (m) and flux, in any unit.
    kind : {"f_nu", "f_lambda", "photons"}
        Flux per frequency, per wavelength, or photons per wavelength.
    """

    curve: Curve
    kind: FluxKind = field(default="f_lambda")

    def __post_init__(self) -> None:
        if self.kind not in ("f_nu", "f_lambda", "photons"):
            raise ValueError(f'kind must be "f_nu", "f_lambda" or "photons", got {self.kind!r}')

    @property
    def bounds(self) -> tuple[float, float]:
        """Ends of the table (m)."""
        return self.curve.bounds

    @property
    def bends(self) -> FloatArray:
        """Its points."""
        return self.curve.wavelength

    def f_nu(self, wavelength: ArrayLike) -> FloatArray:
        """Interpolated as tabulated, then carried to f_nu; 0 beyond the table."""
        micrometres = np.asarray(wavelength, dtype=np.float64) * 1e6
        power = {"f_nu": 0, "photons": 1, "f_lambda": 2}[self.kind]
        return np.asarray(self.curve(wavelength) * micrometres**power)


def planck(wavelength: ArrayLike, temperature: ArrayLike) -> FloatArray:
    """Radiance of a blackbody.

    Parameters
    ----------
    wavelength, temperature : array_like
        In metres and kelvin, above 0; they broadcast.

    Returns
    -------
    ndarray of float64
        B_nu in W / m2 / Hz / sr; 0 where it is below the smallest number.

    References
    ----------
    Planck 1901: 2 h nu^3 / c^2 / (exp(h nu / k T) - 1).
    """
    frequency = LIGHT_SPEED / np.asarray(wavelength, dtype=np.float64)
    x = PLANCK * frequency / (BOLTZMANN * np.asarray(temperature, dtype=np.float64))
    # exp(-x) runs to 0 quietly where exp(x) would overflow.
    occupation = np.exp(-x) / -np.expm1(-x)
    return np.asarray(2.0 * PLANCK / LIGHT_SPEED**2 * frequency**3 * occupation)
