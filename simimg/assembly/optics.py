"""Transfer functions of a telescope's optics at any wavelength, and how far their light reaches.

The perfect pupil's is analytic where it is round; its autocorrelation is computed once and serves
every wavelength. A wavefront needs one for each. Metres; frequencies in cycles per radian.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cached_property
from math import pi

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.aperture import Aperture
from simimg.imaging.basis import Transfer, WingLaw
from simimg.optics.aberrated import aberrated_transfer
from simimg.optics.transfer import PupilTransfer, annular_transfer, pupil_transfer
from simimg.optics.wavefront import rms_over_pupil, steepest_step, zernike_wavefront


class Optics:
    """The optics of one aperture.

    Parameters
    ----------
    aperture : Aperture
    """

    def __init__(self, aperture: Aperture) -> None:
        self.aperture = aperture
        self._kept: dict[tuple[float, tuple[float, float] | None], Transfer] = {}

    @cached_property
    def _shifted(self) -> PupilTransfer:
        return pupil_transfer(self.aperture.pupil)

    def perfect(self, wavelength: float) -> Transfer:
        """The pupil alone, without any error of the wavefront."""
        pupil = self.aperture.pupil
        if pupil.round:
            diameter, obstruction = pupil.diameter, pupil.obstruction

            def annulus(f: FloatArray) -> FloatArray:
                return annular_transfer(wavelength * f, diameter=diameter, obstruction=obstruction)

            cusp = 4.0 * wavelength / (pi * diameter * (1.0 - obstruction))
            wings = WingLaw(cubic=2.0 * cusp / (4.0 * pi**2), core=3.0 * wavelength / diameter)
            return Transfer(diameter / wavelength, (annulus,), wings=wings)
        shifted = self._shifted

        def planar(u: FloatArray, v: FloatArray) -> FloatArray:
            return shifted(wavelength * u, wavelength * v)

        wings = _pupil_wings(shifted, wavelength)
        return Transfer(pupil.reach / wavelength, planar=(planar,), wings=wings)

    def aberrated(self, wavelength: float, place: tuple[float, float] | None) -> Transfer:
        """The pupil with its wavefront.

        Parameters
        ----------
        wavelength : float
        place : (x, y) or None
            In the field, in units of the radius at which its errors are stated; None for the axis.
        """
        key = wavelength, place
        if key not in self._kept:
            self._kept[key] = self._aberrated(wavelength, place)
        return self._kept[key]

    def _aberrated(self, wavelength: float, place: tuple[float, float] | None) -> Transfer:
        aperture, perfect = self.aperture, self.perfect(wavelength)
        path = aperture.path
        if place is not None and aperture.field is not None and place != (0.0, 0.0):
            grown = zernike_wavefront(aperture.pupil, aperture.field.terms(*place))
            path = grown if path is None else path + grown
        if path is None:
            return perfect
        made = aberrated_transfer(aperture.pupil, path, wavelength, perfect=self._shifted)
        if made.coefficients is None:
            return perfect

        def planar(u: FloatArray, v: FloatArray) -> AnyArray:
            value = made(wavelength * u, wavelength * v)
            return value.real if made.even else value

        # Geometric rays reach as far as the path is steep; beyond, the edges' wings go on.
        pupil = aperture.pupil
        steep = steepest_step(path, pupil) / pupil.pitch
        rms = 2.0 * pi * rms_over_pupil(path, pupil) / wavelength
        wings = replace(
            perfect.wings,
            core=perfect.wings.core + 2.0 * steep,
            cubic=perfect.wings.cubic * (1.0 + min(rms, 1.0) ** 2),
        )
        limit = max(pupil.reach / wavelength, perfect.band_limit)
        return Transfer(limit, planar=(planar,), even=made.even, wings=wings)


def _pupil_wings(shifted: PupilTransfer, wavelength: float) -> WingLaw:
    """Wing law of any pupil, from the fall of its transfer function over a small shift.

    Straight edges and vanes throw spikes. The share of the light that a shift across them takes
    away beyond its mean over all directions tells how bright: an edge of length l adds
    ``(l / 2 pi theta)^2 / A`` per steradian along its normal.
    """
    pupil = shifted.pupil
    step = 2.0 * pupil.pitch
    angles = np.arange(180) * pi / 180.0
    fall = 1.0 - shifted(step * np.cos(angles), step * np.sin(angles))
    cusp = wavelength * float(fall.max()) / step
    straight = (float(fall.max()) - float(fall.min())) * pupil.area / step
    length = max(straight, 0.1 * pupil.diameter)
    angle = wavelength / pupil.diameter
    level = (length / (2.0 * pi * angle)) ** 2 / pupil.area
    return WingLaw(cubic=2.0 * cusp / (4.0 * pi**2), spikes=((level, angle),), core=3.0 * angle)
