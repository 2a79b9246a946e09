"""Photometric bands and the photons that a magnitude stands for.

A band is kept as a box: its pivot wavelength and its equivalent width, the integral of the
transmission over wavelength. For a source flat in f_nu the photon rate is f_nu/h times the integral
of T d(lambda)/lambda, and the box with those two numbers gives that integral within 0.2 % for the
broad bands here, for the pivot wavelength is defined by the same ratio of integrals. The
transmission peaks at 1: what glass, mirrors, detector and air take is the caller's.

UBVRI are Johnson-Cousins after the transmission tables of Bessell (1990), JHK after Bessell & Brett
(1988); u g r i z are the survey bands of Fukugita et al. (1996) as measured by Doi et al. (2010),
with AB magnitudes. A band from a table keeps its curve beside the box. Wavelengths in metres, flux
densities in jansky, photon rates per second and square metre above the atmosphere.

References
----------
Bessell, M. S. 1979, PASP 91, 589.
Bessell, M. S. & Brett, J. M. 1988, PASP 100, 1134.
Bessell, M. S. 1990, PASP 102, 1181.
Bessell, M. S., Castelli, F. & Plez, B. 1998, A&A 333, 231.
Doi, M. et al. 2010, AJ 139, 1628.
Fukugita, M. et al. 1996, AJ 111, 1748.
Oke, J. B. & Gunn, J. E. 1983, ApJ 266, 713.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray
from simimg.light.curves import Curve
from simimg.light.spectra import PLANCK

JANSKY = 1e-26
"""W / m2 / Hz."""

AB_ZERO_FLUX = 3631.0
"""Flux density (Jy) of magnitude 0 in the AB system at any wavelength (Oke & Gunn 1983)."""


@dataclass(frozen=True)
class Band:
    """A pass-band as a box in wavelength.

    Attributes
    ----------
    name : str
        Name of a standard band; empty for others.
    centre : float
        Pivot wavelength (m), the middle of the box.
    width : float
        Equivalent width (m), the width of the box.
    zero_flux_jy : mapping of str to float
        For each magnitude system, "Vega" or "AB", the flux density (Jy) of magnitude 0.
    curve : Curve or None
        Transmission as tabulated; None where the box is all there is.
    """

    name: str
    centre: float
    width: float
    zero_flux_jy: Mapping[str, float]
    curve: Curve | None = field(default=None, compare=False)

    def __post_init__(self) -> None:
        for key, value in (("centre", self.centre), ("width", self.width)):
            if not (np.isfinite(value) and value > 0.0):
                raise ValueError(f"band {key} must be finite and above 0 m, got {value}")
        if self.width >= 2.0 * self.centre:
            raise ValueError(
                f"a band of width {self.width} m about {self.centre} m reaches wavelength 0"
            )
        object.__setattr__(self, "zero_flux_jy", MappingProxyType(dict(self.zero_flux_jy)))

    @property
    def lower(self) -> float:
        """Short-wave edge of the box (m)."""
        return self.centre - 0.5 * self.width

    @property
    def upper(self) -> float:
        """Long-wave edge of the box (m)."""
        return self.centre + 0.5 * self.width

    @property
    def support(self) -> tuple[float, float]:
        """Wavelengths (m) between which light passes: of the curve, or else of the box."""
        return (self.lower, self.upper) if self.curve is None else self.curve.support

    @property
    def bends(self) -> FloatArray:
        """Wavelengths (m) where the curve's lines meet."""
        return np.empty(0) if self.curve is None else self.curve.wavelength

    def transmission(self, wavelength: ArrayLike) -> FloatArray:
        """Transmission at wavelengths (m): the curve, or else 1 within the box and 0 without."""
        if self.curve is not None:
            return self.curve(wavelength)
        place = np.asarray(wavelength, dtype=np.float64)
        return np.where((place >= self.lower) & (place <= self.upper), 1.0, 0.0)


def _standard(name: str, centre_nm: float, width_nm: float, vega_jy: float) -> Band:
    return Band(name, centre_nm * 1e-9, width_nm * 1e-9, {"Vega": vega_jy, "AB": AB_ZERO_FLUX})


# UBVRI: pivot wavelength and equivalent width computed from the transmissions of Bessell (1990,
# table 2). JHK: Bessell & Brett (1988). Zero fluxes: Bessell, Castelli & Plez (1998, table A2).
STANDARD_BANDS: Mapping[str, Band] = MappingProxyType(
    {
        band.name: band
        for band in (
            _standard("U", 359.8, 64.0, 1790.0),
            _standard("B", 439.9, 95.9, 4063.0),
            _standard("V", 550.0, 89.3, 3636.0),
            _standard("R", 655.6, 159.1, 3064.0),
            _standard("I", 804.7, 149.5, 2416.0),
            _standard("J", 1220.0, 213.0, 1589.0),
            _standard("H", 1630.0, 307.0, 1021.0),
            _standard("K", 2190.0, 390.0, 640.0),
        )
    }
)
"""The standard bands of the Vega system by name, from short to long wavelengths."""

# Pivot wavelength and equivalent width computed from the responses of Doi et al. (2010, table 4)
# without the air, over their peak.
AB_BANDS: Mapping[str, Band] = MappingProxyType(
    {
        name: Band(name, centre_nm * 1e-9, width_nm * 1e-9, {"AB": AB_ZERO_FLUX})
        for name, centre_nm, width_nm in (
            ("u", 355.1, 57.0),
            ("g", 467.7, 123.0),
            ("r", 616.9, 113.0),
            ("i", 749.5, 112.3),
            ("z", 892.8, 116.6),
        )
    }
)
"""The standard bands of the AB system by name, from short to long wavelengths."""


def standard_band(name: str) -> Band:
    """The standard band of that name.

    Parameters
    ----------
    name : str
        One of U, B, V, R, I, J, H, K (Vega and AB zero fluxes) and u, g, r, i, z (AB alone).

    Raises
    ------
    KeyError
        For any other name; the message lists the known ones.
    """
    known = {**STANDARD_BANDS, **AB_BANDS}
    try:
        return known[name]
    except KeyError:
        raise KeyError(f"no standard band {name!r}; known are {', '.join(known)}") from None


def custom_band(centre: float, width: float, *, name: str = "") -> Band:
    """A band by centre and width, transmission 1 within.

    Its AB zero flux is 3631 Jy. Its Vega zero flux is interpolated between those of the standard
    bands (straight in the logarithms of flux density and pivot wavelength), which is good to a few
    per cent redward of B but rough between U and B, across the Balmer jump; beyond U and K there is
    none.

    Parameters
    ----------
    centre, width : float
        Wavelengths (m).
    name : str
        A name to carry along.

    Raises
    ------
    ValueError
        If one is not finite and above 0, or the band would reach wavelength 0.
    """
    flux = {"AB": AB_ZERO_FLUX}
    known = list(STANDARD_BANDS.values())
    centres = np.array([band.centre for band in known])
    if centres[0] <= centre <= centres[-1]:
        fluxes = np.array([band.zero_flux_jy["Vega"] for band in known])
        flux["Vega"] = float(np.exp(np.interp(np.log(centre), np.log(centres), np.log(fluxes))))
    return Band(name, centre, width, flux)


def tabulated_band(wavelength: ArrayLike, transmission: ArrayLike, *, name: str = "") -> Band:
    """A band from a tabulated transmission, with the box that stands for it.

    Parameters
    ----------
    wavelength : (n,) array_like
        Wavelengths (m), increasing, at least two.
    transmission : (n,) array_like
        Photon transmission, 0 to 1; straight lines join the points. A filter that peaks at 0.9
        keeps its loss: the width is the integral as it stands.
    name : str
        A name to carry along.

    Returns
    -------
    Band
        Pivot wavelength and equivalent width, and the curve itself.

    Raises
    ------
    ValueError
        If the table is not of this kind or lets no light through.
    """
    x, y = np.asarray(wavelength, dtype=np.float64), np.asarray(transmission, dtype=np.float64)
    if x.ndim != 1 or x.shape != y.shape or x.size < 2:
        raise ValueError("wavelength and transmission must be two columns of the same length")
    if not (np.all(np.isfinite(x)) and x[0] > 0.0 and np.all(np.diff(x) > 0.0)):
        raise ValueError("wavelengths must be finite, above 0 and increasing")
    if not np.all((y >= 0.0) & (y <= 1.0)):
        raise ValueError("transmissions must lie between 0 and 1")
    width = float(np.trapezoid(y, x))
    if not width > 0.0:
        raise ValueError("the band lets no light through")
    pivot = float(np.sqrt(np.trapezoid(y * x, x) / np.trapezoid(y / x, x)))
    return replace(custom_band(pivot, width, name=name), curve=Curve(x, y))


def photon_zero_point(band: Band, system: str) -> float:
    """Photons per second and square metre, above the air, of magnitude 0 in the band.

    Parameters
    ----------
    band : Band
        Its box is integrated: f_nu/h ln(upper/lower) for a source flat in f_nu. Bessell (1979)
        writes f_nu/h width/centre, which is lower by (width/centre)^2/12, 0.2 % in V and 0.5 % in
        R; the logarithm is the integral itself.
    system : str
        "Vega" or "AB".

    Returns
    -------
    float
        Photon rate (1/s/m2).

    Raises
    ------
    ValueError
        If the band has no zero flux in that system.
    """
    if system not in band.zero_flux_jy:
        known = ", ".join(band.zero_flux_jy)
        raise ValueError(
            f"no zero flux in the {system!r} system for a band at {band.centre * 1e9:.1f} nm; "
            f"it has {known}"
        )
    flux = band.zero_flux_jy[system] * JANSKY
    return float(flux / PLANCK * np.log(band.upper / band.lower))
