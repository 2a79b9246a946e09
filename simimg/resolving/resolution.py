"""The limits of one PSF along any direction: FWHM, Rayleigh and Sparrow, in arcseconds.

`Directions` holds a transfer function and cuts its PSF when asked; a PSF that is round is cut once.
What the words mean stands in `simimg.resolving.criteria`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import degrees, nan, pi

import numpy as np

from simimg.arrays import FloatArray
from simimg.imaging.basis import Transfer
from simimg.imaging.profile import PsfCut, peak_place, psf_cut
from simimg.resolving.criteria import (
    SampledProfile,
    first_minimum,
    fwhm,
    rayleigh_saddle,
    sample_far_enough,
    sparrow,
)

BRIGHTEST_DIFFERENCE = 12.0
"""Magnitude difference beyond which Sparrow's limit is not worked out."""

_WIDEST = 32.0  # pixels in wavelengths over diameters from which the optics' detail is smoothed


@dataclass(frozen=True)
class Resolution:
    """Limits of one PSF along one direction; NaN or infinite where there is none.

    Attributes
    ----------
    fwhm_arcsec : float
    rayleigh_arcsec : float
        Of diffraction: the first dark ring. Delivered: the saddle of an equal pair at 0.735.
    sparrow_arcsec : float
        Of an equal pair, or in a pair's own limits for its own magnitude difference.
    """

    fwhm_arcsec: float
    rayleigh_arcsec: float
    sparrow_arcsec: float


def to_arcsec(angle: float) -> float:
    """Radians to arcseconds."""
    return degrees(angle) * 3600.0


def computable(transfer: Transfer) -> Transfer:
    """The same PSF, its finest detail smoothed where a pixel is very much wider.

    A pixel of 32 lambda/D and more leaves of the optics nothing but sharp edges; smoothed over a
    hundredth of the pixel they keep the sums over frequencies short.
    """
    if transfer.box * transfer.band_limit <= _WIDEST:
        return transfer
    edge = _WIDEST / transfer.box

    def taper(f: FloatArray) -> FloatArray:
        return np.asarray(np.cos(0.5 * pi * np.minimum(f / edge, 1.0)) ** 2)

    return replace(transfer, band_limit=edge, radial=(*transfer.radial, taper))


class Directions:
    """The limits of a PSF along any direction.

    Parameters
    ----------
    transfer : Transfer
        Of the PSF.
    dark_ring : float, optional
        Rayleigh's limit (rad) in every direction, where it is that of an annulus.
    saddle : bool, optional
        Rayleigh's limit by the saddle of an equal pair; by the first minimum otherwise.
    """

    def __init__(
        self, transfer: Transfer, *, dark_ring: float | None = None, saddle: bool = True
    ) -> None:
        self.transfer = transfer
        self._dark_ring = dark_ring
        self._rayleigh = rayleigh_saddle if saddle else first_minimum
        self._peak = peak_place(transfer)
        self._cuts: dict[float, PsfCut] = {}
        self._samples: dict[float, SampledProfile] = {}
        self._saddles: dict[float, float] = {}

    @property
    def even(self) -> bool:
        """Whether opposite directions show the same cut."""
        return self.transfer.even

    def cut(self, angle: float) -> PsfCut:
        """The PSF along `angle` (rad, from the detector's +x towards +y), through its peak."""
        angle = self._key(angle)
        if angle not in self._cuts:
            self._cuts[angle] = psf_cut(self.transfer, angle, through=self._peak)
        return self._cuts[angle]

    def profile(self, angle: float, magnitude_difference: float = 0.0) -> SampledProfile:
        """The same, sampled as far out as a companion that much fainter asks."""
        key = self._key(angle)
        ratio = 10.0 ** (-0.4 * abs(magnitude_difference))
        self._samples[key] = sample_far_enough(self._samples.get(key, self.cut(angle)), ratio)
        return self._samples[key]

    def _key(self, angle: float) -> float:
        if self.transfer.round:
            return 0.0
        # Opposite directions show the same cut of a symmetric PSF.
        return angle % (pi if self.transfer.even else 2.0 * pi)

    def resolution(self, angle: float, magnitude_difference: float = 0.0) -> Resolution:
        """Limits along `angle`; Sparrow's for a pair whose second star lies that way.

        Parameters
        ----------
        angle : float
            Direction of the second star (rad, from the detector's +x towards +y).
        magnitude_difference : float, optional
            Second minus first; beyond 12 Sparrow's limit is NaN.
        """
        wanted = abs(magnitude_difference) <= BRIGHTEST_DIFFERENCE
        sampled = self.profile(angle, magnitude_difference if wanted else 0.0)
        key = self._key(angle)
        if key not in self._saddles:
            ring = self._dark_ring
            self._saddles[key] = self._rayleigh(sampled) if ring is None else ring
        closest = sparrow(sampled, magnitude_difference) if wanted else nan
        return Resolution(
            to_arcsec(fwhm(sampled)), to_arcsec(self._saddles[key]), to_arcsec(closest)
        )

    def peak(self, angle: float) -> float:
        """Height of the PSF at its peak (per steradian), read from the cut along `angle`."""
        return float(self.cut(angle)(0.0))

    def saddle_limit(self, angle: float) -> float:
        """Separation (arcsec) of an equal pair whose saddle is 0.735 of its peaks."""
        return to_arcsec(rayleigh_saddle(self.profile(angle)))
