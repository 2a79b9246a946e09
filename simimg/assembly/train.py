"""The optical train of a scene: from telescope, air and camera to transfer functions.

Four of them, each the one before with a factor more: the pupil alone; with the air; and with the
square pixel, which is the effective one that images and verdicts use. Monochromatic at the centre
of the band. Lengths in metres, angles in radians, frequencies in cycles per radian.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cache
from math import gamma, pi

import numpy as np
from scipy.optimize import brentq
from scipy.special import j0

from simimg.air.refraction import airmass_from_altitude
from simimg.air.turbulence import (
    KOLMOGOROV,
    fried_parameter,
    long_exposure_transfer,
    tilt_removed_transfer,
)
from simimg.arrays import FloatArray, frozen
from simimg.assembly.brightness import scene_band
from simimg.errors import InputError, mistake
from simimg.imaging.basis import PsfBasis, Transfer, WingLaw
from simimg.optics.pupil import Pupil, annular_pupil, map_pupil
from simimg.optics.transfer import PupilTransfer, annular_transfer, pupil_transfer
from simimg.scene.air import Air
from simimg.scene.model import Scene
from simimg.sky.pictures import read_picture

# exp(-D/2) ~ 1 - k f^(5/3) falls into a wing of theta^(-11/3): Stein & Weiss 1971.
_KOLMOGOROV_WING = (
    0.5 * KOLMOGOROV * pi ** (-8.0 / 3.0) * gamma(11.0 / 6.0) / abs(gamma(-5.0 / 6.0))
)


@dataclass(frozen=True)
class Train:
    """What the light of a scene passes.

    Attributes
    ----------
    wavelength : float
        Centre of the band (m).
    airmass : float or None
        None above the air.
    fried : float or None
        Fried's parameter at the wavelength and the airmass (m); None above the air.
    seeing : float or None
        As a seeing monitor quotes it (rad); None above the air.
    pixel_scale : float or None
        Side of a pixel (rad); None without a route to it.
    pupil : Pupil
    optics, focal, effective : Transfer
        Pupil alone; with the air; with the pixel (the same as `focal` without one).
    basis : PsfBasis
        What the engine paints with.
    """

    wavelength: float
    airmass: float | None
    fried: float | None
    seeing: float | None
    pixel_scale: float | None
    pupil: Pupil
    optics: Transfer
    focal: Transfer
    effective: Transfer
    basis: PsfBasis


def scene_airmass(air: Air | None) -> float | None:
    """Airmass of a scene: as given, or from the altitude (Pickering 2002); None above the air."""
    if air is None:
        return None
    if air.altitude is not None:
        return float(airmass_from_altitude(air.altitude))
    return 1.0 if air.airmass is None else air.airmass


def scene_pupil(scene: Scene) -> Pupil:
    """The pupil of a scene's telescope: disc, obstruction and vanes, or a map from a file.

    Raises
    ------
    InputError
        A map that cannot be read, is not square or lets no light through.
    """
    telescope = scene.telescope
    if telescope.pupil is not None:
        source = scene.inputs[telescope.pupil]
        transmission = read_picture(source.read(), source.name)
        try:
            return map_pupil(transmission, telescope.aperture)
        except ValueError as error:
            line = mistake(
                scene.name,
                "telescope.pupil",
                f"{source.name}: {error}",
                "write a square map of transmissions from 0 to 1 that spans the aperture",
            )
            raise InputError(line) from error
    vanes = telescope.vanes
    return annular_pupil(
        telescope.aperture,
        telescope.obstruction,
        vanes=None if vanes is None else (vanes.count, vanes.width, vanes.angle),
    )


def optics_transfer(pupil: Pupil, wavelength: float) -> Transfer:
    """Transfer function of a pupil alone at a wavelength (m)."""
    if pupil.round:
        diameter, obstruction = pupil.diameter, pupil.obstruction

        def annulus(f: FloatArray) -> FloatArray:
            return annular_transfer(wavelength * f, diameter=diameter, obstruction=obstruction)

        cusp = 4.0 * wavelength / (pi * diameter * (1.0 - obstruction))
        wings = WingLaw(cubic=2.0 * cusp / (4.0 * pi**2), core=3.0 * wavelength / diameter)
        return Transfer(diameter / wavelength, (annulus,), wings=wings)

    shifted = pupil_transfer(pupil)

    def planar(u: FloatArray, v: FloatArray) -> FloatArray:
        return shifted(wavelength * u, wavelength * v)

    return Transfer(
        pupil.reach / wavelength, planar=(planar,), wings=_pupil_wings(shifted, wavelength)
    )


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
    return WingLaw(
        cubic=2.0 * cusp / (4.0 * pi**2),
        spikes=((level, angle),),
        core=3.0 * angle,
    )


def _through_air(
    optics: Transfer, air: Air, wavelength: float, r0: float, pupil: Pupil
) -> Transfer:
    """The optics' transfer function times that of the air."""
    outer_scale = np.inf if air.outer_scale is None else air.outer_scale
    turbulence: Callable[[FloatArray], FloatArray]
    if air.tilt_removed is None:

        def turbulence(f: FloatArray) -> FloatArray:
            return long_exposure_transfer(wavelength * f, r0, outer_scale=outer_scale)

    else:
        field = air.tilt_removed

        def turbulence(f: FloatArray) -> FloatArray:
            return tilt_removed_transfer(
                wavelength * f, r0, diameter=pupil.diameter, field=field, outer_scale=outer_scale
            )

    # The air blurs rings and spikes but moves little of their light: the laws add, and a spike is
    # spread over the width of the seeing disc.
    blur = min(1.0, 2.0 * r0 / pupil.diameter)
    wings = replace(
        optics.wings,
        spikes=tuple((level * blur, angle) for level, angle in optics.wings.spikes),
        kolmogorov=_KOLMOGOROV_WING * (wavelength / r0) ** (5.0 / 3.0),
        core=optics.wings.core + 2.0 * wavelength / r0,
    )
    return replace(optics, radial=(*optics.radial, turbulence), wings=wings)


@cache
def _panels() -> tuple[FloatArray, FloatArray]:
    """Nodes and weights of 20 Gauss-Legendre panels on the unit interval."""
    nodes, weights = np.polynomial.legendre.leggauss(32)
    t = (np.arange(20)[:, None] + 0.5 * (nodes + 1.0)) / 20.0
    return frozen(t.ravel()), frozen(np.tile(weights / 40.0, 20))


def half_light_width(transfer: Transfer) -> float:
    """Full width at half maximum (rad) of a PSF's azimuthal mean, without pixel.

    The Hankel transform of the mean transfer function, by Gauss-Legendre quadrature.
    """
    t, weights = _panels()
    # The square crowds the nodes where the air leaves something.
    f = transfer.band_limit * t * t
    weight = weights * transfer.band_limit * t * f
    if transfer.planar:
        angles = (np.arange(24) + 0.5) * pi / 24.0
        mean = np.real(transfer(f * np.cos(angles)[:, None], f * np.sin(angles)[:, None])).mean(0)
    else:
        mean = transfer.modulus(f)
    peak = float(weight @ mean)

    def above(r: float) -> float:
        return float(weight @ (mean * j0(2.0 * pi * f * r))) / peak - 0.5

    outer = 0.2 / transfer.band_limit
    while above(outer) > 0.0:
        outer *= 1.5
    return 2.0 * float(brentq(above, outer / 1.5, outer, rtol=1e-12))


def _seeing_for(
    scene: Scene, air: Air, optics: Transfer, wavelength: float, airmass: float, pupil: Pupil
) -> float:
    """The seeing that delivers the stated image quality through these optics.

    Raises
    ------
    InputError
        Where diffraction alone is wider than the image quality.
    """
    assert air.image_quality is not None
    wanted = air.image_quality
    narrowest = half_light_width(optics)
    if wanted <= narrowest * 1.001:
        arcsec = np.degrees(narrowest) * 3600.0
        raise InputError(
            mistake(
                scene.name,
                "air.image_quality",
                f"is sharper than diffraction allows, {arcsec:.3g} arcsec in this band",
                f'write more than "{arcsec:.3g} arcsec", or leave out [air]',
            )
        )

    def excess(log_seeing: float) -> float:
        r0 = fried_parameter(float(np.exp(log_seeing)), wavelength=wavelength, airmass=airmass)
        through = _through_air(optics, air, wavelength, r0, pupil)
        return half_light_width(through) - wanted

    low, high = np.log(wanted) - 1.0, np.log(wanted) + 1.0
    while excess(low) > 0.0:
        low -= 2.0
    while excess(high) < 0.0:
        high += 1.0
    return float(np.exp(brentq(excess, low, high, xtol=1e-10)))


def assemble_train(scene: Scene) -> Train:
    """Everything between the sky and the electrons of a scene.

    Raises
    ------
    InputError
        A pupil map that cannot serve, or an image quality sharper than diffraction.
    """
    wavelength = scene_band(scene).centre
    pupil = scene_pupil(scene)
    optics = optics_transfer(pupil, wavelength)
    focal, r0, seeing, airmass = optics, None, None, scene_airmass(scene.air)
    if scene.air is not None and airmass is not None:
        seeing = scene.air.seeing
        if seeing is None:
            seeing = _seeing_for(scene, scene.air, optics, wavelength, airmass, pupil)
        r0 = fried_parameter(seeing, wavelength=wavelength, airmass=airmass)
        focal = _through_air(optics, scene.air, wavelength, r0, pupil)
    pixel_scale = scene.pixel_scale
    effective = focal if pixel_scale is None else focal.with_pixel(pixel_scale)
    return Train(
        wavelength=wavelength,
        airmass=airmass,
        fried=r0,
        seeing=seeing,
        pixel_scale=pixel_scale,
        pupil=pupil,
        optics=optics,
        focal=focal,
        effective=effective,
        basis=PsfBasis((effective,)),
    )
