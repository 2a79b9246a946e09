"""What the air of a scene does to an image: blur, and colours drawn apart.

Turbulence blurs each wavelength by its own Fried parameter; refraction lifts the bluer light
farther towards the zenith, unless a corrector takes it away. Metres and radians.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import gamma, pi

import numpy as np

from simimg.air.layers import Layer, coherence_time, isoplanatic_angle, normalised
from simimg.air.refraction import (
    airmass_from_altitude,
    altitude_from_airmass,
    band_dispersion,
    differential_refraction,
)
from simimg.air.turbulence import KOLMOGOROV, long_exposure_transfer, tilt_removed_transfer
from simimg.arrays import FloatArray
from simimg.assembly.places import field_geometry
from simimg.imaging.basis import Transfer, WingLaw
from simimg.light.bands import Band
from simimg.scene.air import Air
from simimg.scene.model import Scene

# exp(-D/2) ~ 1 - k f^(5/3) falls into a wing of theta^(-11/3): Stein & Weiss 1971.
_WING = 0.5 * KOLMOGOROV * pi ** (-8.0 / 3.0) * gamma(11.0 / 6.0) / abs(gamma(-5.0 / 6.0))


def scene_airmass(air: Air | None) -> float | None:
    """Airmass of a scene: as given, or from the altitude (Pickering 2002); None above the air."""
    if air is None:
        return None
    if air.altitude is not None:
        return float(airmass_from_altitude(air.altitude))
    return 1.0 if air.airmass is None else air.airmass


GROUND = Layer(height=0.0, share=1.0, wind=10.0)
"""The one layer of a scene that names none."""


def scene_layers(air: Air | None) -> tuple[Layer, ...]:
    """Layers of a scene's turbulence as seen along the line of sight; none above the air.

    Their heights are distances along it (the airmass times the height above the telescope), and
    their shares add up to 1.
    """
    airmass = scene_airmass(air)
    if air is None or airmass is None:
        return ()
    if not air.layer:
        return (GROUND,)
    return normalised(
        [Layer(airmass * one.height, one.share, one.wind, one.direction) for one in air.layer]
    )


@dataclass(frozen=True)
class AirFigures:
    """What the layers of a scene come to, at the centre of the band and the airmass.

    Attributes
    ----------
    fried_m : float
        Fried's parameter.
    coherence_time_ms : float
        0.314 r0 over the effective wind; infinite where nothing moves.
    isoplanatic_angle_arcsec : float
        0.314 r0 over the effective distance; infinite where all lies at the telescope.
    """

    fried_m: float
    coherence_time_ms: float
    isoplanatic_angle_arcsec: float


def air_figures(air: Air | None, fried: float | None) -> AirFigures | None:
    """Figures of a scene's layers; None above the air and for a measured PSF.

    Parameters
    ----------
    air : Air or None
    fried : float or None
        Fried's parameter at the wavelength and airmass in hand (m).
    """
    layers = scene_layers(air)
    if fried is None or not layers:
        return None
    angle = isoplanatic_angle(fried, layers)
    return AirFigures(
        fried_m=fried,
        coherence_time_ms=coherence_time(fried, layers) * 1e3,
        isoplanatic_angle_arcsec=float(np.degrees(angle)) * 3600.0,
    )


def through_air(
    optics: Transfer, air: Air, *, wavelength: float, fried: float, diameter: float
) -> Transfer:
    """The optics' transfer function times that of turbulence.

    Parameters
    ----------
    optics : Transfer
    air : Air
    wavelength, fried : float
        Wavelength and Fried's parameter there, at the airmass (m).
    diameter : float
        Of the aperture (m).
    """
    outer_scale = np.inf if air.outer_scale is None else air.outer_scale

    def long_exposure(f: FloatArray) -> FloatArray:
        return long_exposure_transfer(wavelength * f, fried, outer_scale=outer_scale)

    def tilt_removed(f: FloatArray) -> FloatArray:
        return tilt_removed_transfer(
            wavelength * f,
            fried,
            diameter=diameter,
            field=air.tilt_removed or "near",
            outer_scale=outer_scale,
        )

    turbulence = long_exposure if air.tilt_removed is None else tilt_removed
    blur = min(1.0, 2.0 * fried / diameter)
    wings = seeing_wings(optics.wings, wavelength=wavelength, fried=fried, blur=blur)
    return replace(optics, radial=(*optics.radial, turbulence), wings=wings)


def seeing_wings(optics: WingLaw, *, wavelength: float, fried: float, blur: float) -> WingLaw:
    """Wings of the optics behind the air, whose laws add.

    Parameters
    ----------
    optics : WingLaw
    wavelength, fried : float
        Wavelength and Fried's parameter there, at the airmass (m).
    blur : float
        By which spikes are dimmed, which the air spreads over the width of the seeing disc; of
        rings and spikes it moves little light.
    """
    return replace(
        optics,
        spikes=tuple((level * blur, angle) for level, angle in optics.spikes),
        kolmogorov=_WING * (wavelength / fried) ** (5.0 / 3.0),
        core=optics.core + 2.0 * wavelength / fried,
    )


def _zenith_distance(airmass: float) -> float:
    return float(0.5 * pi - altitude_from_airmass(airmass))


def _refracts(air: Air | None) -> bool:
    return air is not None and air.dispersion and not air.dispersion_corrector


def colour_shifts(
    scene: Scene, wavelengths: FloatArray, reference: float
) -> tuple[FloatArray, FloatArray]:
    """Where refraction puts each wavelength (x, y; rad on the detector), the reference at 0."""
    air, airmass = scene.air, scene_airmass(scene.air)
    if air is None or airmass is None or not _refracts(air):
        return np.zeros_like(wavelengths), np.zeros_like(wavelengths)
    lifted = differential_refraction(
        wavelengths,
        reference,
        zenith_distance=_zenith_distance(airmass),
        pressure=air.pressure,
        temperature=air.temperature,
        relative_humidity=air.relative_humidity,
    )
    upward = field_geometry(scene).direction(air.parallactic_angle)
    return lifted * np.cos(upward), lifted * np.sin(upward)


def scene_dispersion(scene: Scene, band: Band) -> float:
    """Angle (rad) between the images of a band's two edges; 0 where nothing refracts."""
    air, airmass = scene.air, scene_airmass(scene.air)
    if air is None or airmass is None or not _refracts(air):
        return 0.0
    return abs(
        float(
            band_dispersion(
                band.lower,
                band.upper,
                zenith_distance=_zenith_distance(airmass),
                pressure=air.pressure,
                temperature=air.temperature,
                relative_humidity=air.relative_humidity,
            )
        )
    )
