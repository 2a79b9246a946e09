"""The adaptive optics of a scene: the corrected air before any star of the field.

The guide star stands at an offset from the field centre; a star elsewhere shines through other
parts of the layers, farther apart the higher they lie, and has a PSF of its own. Rows of actuators
run east and north. Metres, radians.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import cos, exp, inf, log, pi, sin, sqrt

import numpy as np

from simimg.air.correction import CorrectedAir
from simimg.air.errorbudget import ErrorBudget, error_budget
from simimg.air.layers import isoplanatic_angle
from simimg.air.residual import Loop, Turbulence
from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.atmosphere import scene_airmass, scene_layers, seeing_wings
from simimg.assembly.places import field_geometry
from simimg.imaging.basis import Transfer
from simimg.imaging.profile import strehl
from simimg.light.bands import photon_zero_point, standard_band
from simimg.scene.correction import Correction
from simimg.scene.model import Scene

ALIKE = 0.01
"""Share of the isoplanatic angle within which two stars have one PSF, to 5e-4 rad2."""


class Corrector:
    """The corrected air of a scene.

    Parameters
    ----------
    scene : Scene
        With air and a correction.
    fried : float
        Fried's parameter at the wavelength and the airmass (m).
    wavelength : float
        At which the phases are stated: the centre of the band (m).
    """

    def __init__(self, scene: Scene, *, fried: float, wavelength: float) -> None:
        air, correction = scene.air, scene.correction
        airmass = scene_airmass(air)
        if air is None or correction is None or airmass is None:
            raise ValueError("a correction needs air")
        self.wavelength = wavelength
        self._geometry = field_geometry(scene)
        self._turbulence = Turbulence(
            fried, inf if air.outer_scale is None else air.outer_scale, scene_layers(air)
        )
        diameter = scene.telescope.aperture
        laser = correction.guide == "laser"
        self._loop = Loop(
            diameter=diameter,
            pitch=diameter / correction.actuators,
            lag=correction.lag,
            noise=sensor_noise(
                correction, pitch=diameter / correction.actuators, fried=fried, at=wavelength
            ),
            aliasing=correction.aliasing,
            laser_height=airmass * correction.laser_height if laser else inf,
        )
        self._guide = _away(correction.guide_offset, correction.guide_position_angle)
        self._tilt = (
            _away(correction.tilt_star_offset, correction.tilt_star_position_angle)
            if laser
            else None
        )
        self._made: dict[tuple[float, float], CorrectedAir] = {}

    @property
    def varies(self) -> bool:
        """Whether the PSF hangs on the place in the field."""
        return any(one.height > 0.0 and one.share > 0.0 for one in self._turbulence.layers)

    @property
    def isoplanatic_angle(self) -> float:
        """Angle (rad) over which the air differs by 1 rad rms."""
        return isoplanatic_angle(self._turbulence.r0, self._turbulence.layers)

    @property
    def guide(self) -> tuple[float, float]:
        """The guide star's offset from the field centre, towards east and north (rad)."""
        return self._guide

    def towards(self, east: float, north: float) -> CorrectedAir:
        """The corrected air before a star at an offset from the field centre (rad)."""
        place = (east, north) if self.varies else (0.0, 0.0)
        if place not in self._made:
            offset, tilt_offset = _step(self._guide, place), self._off_tilt(place)
            loop = replace(self._loop, offset=offset, tilt_offset=tilt_offset)
            self._made[place] = CorrectedAir(self._turbulence, loop, self.wavelength)
        return self._made[place]

    def budget(self) -> ErrorBudget:
        """The error budget at the field centre."""
        return error_budget(self.towards(0.0, 0.0))

    def through(self, optics: Transfer, east: float, north: float, wavelength: float) -> Transfer:
        """Optics and corrected air for a star at an offset (rad), at one wavelength."""
        air = self.towards(east, north)
        geometry, limit = self._geometry, optics.band_limit
        c, s, p = cos(geometry.rotation), sin(geometry.rotation), geometry.parity

        def corrected(u: FloatArray, v: FloatArray) -> AnyArray:
            u, v = np.broadcast_arrays(u, v)
            value = np.zeros(u.shape)
            seen = np.hypot(u, v) < limit
            u, v = wavelength * u[seen], wavelength * v[seen]
            value[seen] = air.transfer(v * s - p * u * c, p * u * s + v * c, wavelength)
            return value

        fried = self._turbulence.r0 * (wavelength / self.wavelength) ** 1.2
        wings = seeing_wings(optics.wings, wavelength=wavelength, fried=fried, blur=1.0)
        # The halo begins where the mirror no longer follows.
        wings = replace(wings, core=wings.core + wavelength / self._loop.pitch)
        return replace(optics, planar=(*optics.planar, corrected), wings=wings)

    def _off_tilt(self, place: tuple[float, float]) -> tuple[float, float] | None:
        return None if self._tilt is None else _step(self._tilt, place)


@dataclass(frozen=True)
class CorrectionFigures:
    """What a correction leaves at the field centre, at the centre of the band.

    Attributes
    ----------
    budget_nm : dict of str to float
        Rms optical path that each cause leaves alone, and their sum in quadrature, `total`.
    strehl : float
        Peak of the PSF of a perfect telescope behind the corrected air, over that without air.
    strehl_from_variance : float
        exp(-variance) of all causes together, without piston: Marechal's formula.
    remainder_nm : float
        Rms optical path of all causes together, without piston.
    """

    budget_nm: dict[str, float]
    strehl: float
    strehl_from_variance: float
    remainder_nm: float


def correction_figures(corrector: Corrector | None, perfect: Transfer) -> CorrectionFigures | None:
    """Figures of a correction; None without one.

    Parameters
    ----------
    corrector : Corrector or None
    perfect : Transfer
        The perfect pupil alone, at the centre of the band.
    """
    if corrector is None:
        return None
    budget, wavelength = corrector.budget(), corrector.wavelength
    behind = corrector.through(perfect, 0.0, 0.0, wavelength)
    return CorrectionFigures(
        budget_nm=budget.path_nm(wavelength),
        strehl=strehl(behind, perfect),
        strehl_from_variance=exp(-budget.remainder),
        remainder_nm=wavelength * 1e9 / (2.0 * pi) * sqrt(budget.remainder),
    )


def scene_corrector(scene: Scene, *, fried: float | None, wavelength: float) -> Corrector | None:
    """The corrected air of a scene; None above the air, without a correction, for a measured PSF.

    Parameters
    ----------
    scene : Scene
    fried : float or None
        At the wavelength and airmass (m).
    wavelength : float
    """
    if scene.correction is None or scene.air is None or fried is None or scene.psf is not None:
        return None
    return Corrector(scene, fried=fried, wavelength=wavelength)


def sensor_noise(correction: Correction, *, pitch: float, fried: float, at: float) -> float:
    """Variance (rad2) of the phase difference across a subaperture by the guide star's photons.

    ``pi^2 / (2 ln 2) / n (spot / (lambda/d))^2`` for n photons in a spot of that FWHM (Rousset
    1999, in Adaptive Optics in Astronomy, ed. Roddier), the spot as wide as diffraction by the
    subaperture and the seeing make it. The sensor's own read noise and the sky are left out.

    Parameters
    ----------
    correction : Correction
    pitch : float
        Side of a subaperture (m).
    fried : float
        At the wavelength `at` (m).
    at : float
        Wavelength for whose phase the variance is wanted (m).
    """
    photons = sensor_photons(correction, pitch=pitch)
    if photons is None:
        return 0.0
    sensed = standard_band(correction.sensor_band).centre
    there = fried * (sensed / at) ** 1.2
    spot_squared = 1.0 + (pitch / there) ** 2
    return float(pi**2 / (2.0 * log(2.0)) / photons * spot_squared * (sensed / at) ** 2)


def sensor_photons(correction: Correction, *, pitch: float) -> float | None:
    """Photons of the guide star that a subaperture detects in a period; None without noise."""
    if not correction.noise or correction.guide_magnitude is None:
        return None
    rate = photon_zero_point(standard_band(correction.sensor_band), "Vega")
    rate *= 10.0 ** (-0.4 * correction.guide_magnitude) * correction.sensor_efficiency
    return float(rate * pitch**2 / correction.rate)


def _away(distance: float, position_angle: float) -> tuple[float, float]:
    return distance * sin(position_angle), distance * cos(position_angle)


def _step(start: tuple[float, float], stop: tuple[float, float]) -> tuple[float, float]:
    return stop[0] - start[0], stop[1] - start[1]
