"""The optical train of a scene: from telescope, air and camera to transfer functions.

Each wavelength of the band has the pupil with its wavefront and the air's turbulence, and falls
where refraction puts it; together, weighted by detected photons, they make the PSF of a spectrum.
The telescope's motion and the square pixel are factors of the whole. The rule of the basis then
says which source has which PSF: by its spectrum, by its place in the field, and by whether the
telescope follows it. Lengths in metres, angles in radians, frequencies in cycles per radian.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from simimg.air.turbulence import fried_parameter
from simimg.arrays import FloatArray, frozen
from simimg.assembly.aperture import Aperture, scene_aperture
from simimg.assembly.atmosphere import (
    colour_shifts,
    scene_airmass,
    scene_dispersion,
    through_air,
)
from simimg.assembly.basis import StarTransfer, first_kind, one_for_all, scene_basis
from simimg.assembly.colours import Palette, scene_palette
from simimg.assembly.correction import Corrector, scene_corrector
from simimg.assembly.fieldplaces import field_unit, sky_offset
from simimg.assembly.measured import measured_transfer
from simimg.assembly.motion import trembling
from simimg.assembly.optics import Optics
from simimg.assembly.width import half_light_width as half_light_width
from simimg.errors import InputError, mistake
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.mixture import Part, mixture
from simimg.light.nodes import node_count
from simimg.optics.pupil import Pupil
from simimg.scene.model import Scene

NODE_ERROR = 1e-5
"""Largest error of an image by standing few wavelengths for a band, over its peak."""

NARROW = 3e-3
"""Width over centre of a band below which one wavelength stands for it within that error."""


@dataclass(frozen=True, eq=False)
class Train:
    """What the light of a scene passes.

    Attributes
    ----------
    wavelength : float
        Centre of the band (m).
    airmass : float or None
        None above the air.
    fried : float or None
        Fried's parameter at the centre of the band and the airmass (m); None above the air.
    seeing : float or None
        As a seeing monitor quotes it (rad); None above the air.
    pixel_scale : float or None
        Side of a pixel (rad); None without a route to it.
    aperture : Aperture
        Pupil and wavefront.
    palette : Palette
        Band, detector and spectra.
    wavelengths : ndarray
        Nodes that stand for the band (m).
    dispersion : float
        Angle between the images of the band's edges (rad).
    optics : Transfer
        The perfect pupil alone, at the centre of the band.
    perfect : Transfer
        The perfect pupil alone, over the band.
    focal, effective : Transfer
        What is delivered at the focal plane, over the band; with the pixel. Of the spectrum of the
        scene's first object, in the middle of the field.
    basis : PsfBasis
        What the engine paints with.
    star : callable
        ``star(kind, x, y)`` is the PSF with the pixel of one kind of source at one place (pixels).
    first : int
        Kind of the first pair's first star, or else of the first object.
    corrector : Corrector or None
        The corrected air; None where nothing corrects it.
    """

    wavelength: float
    airmass: float | None
    fried: float | None
    seeing: float | None
    pixel_scale: float | None
    aperture: Aperture
    palette: Palette
    wavelengths: FloatArray
    dispersion: float
    optics: Transfer
    perfect: Transfer
    focal: Transfer
    effective: Transfer
    basis: PsfBasis
    star: StarTransfer
    first: int
    corrector: Corrector | None = None

    @property
    def pupil(self) -> Pupil:
        """The aperture's pupil."""
        return self.aperture.pupil


def assemble_train(scene: Scene) -> Train:
    """Everything between the sky and the electrons of a scene.

    Raises
    ------
    InputError
        A map or table that cannot serve, or an image quality sharper than diffraction.
    """
    palette = scene_palette(scene)
    wavelength = palette.band.centre
    aperture = scene_aperture(scene)
    optics = Optics(aperture)
    alone = optics.perfect(wavelength)
    airmass = scene_airmass(scene.air)
    seeing = _seeing(scene, palette, optics, airmass)
    fried = None
    if seeing is not None and airmass is not None:
        fried = fried_parameter(seeing, wavelength=wavelength, airmass=airmass)
    corrector = scene_corrector(scene, fried=fried, wavelength=wavelength)
    blurred = fried if corrector is None else None
    wavelengths, flat = palette.nodes(_count(scene, palette, aperture.pupil, blurred))
    unit = field_unit(scene, aperture)
    perfect = mixture([Part(optics.perfect(w), s) for w, s in zip(wavelengths, flat, strict=True)])
    shift_x, shift_y = colour_shifts(scene, wavelengths, palette.wavelength)

    def delivered(weights: FloatArray, place: tuple[float, float] | None) -> Transfer:
        """The PSF of one spectrum at one place of the field, without pixel."""
        if corrector is None:
            lights = [_one_colour(scene, optics, w, place, seeing, airmass) for w in wavelengths]
        else:
            offset = (0.0, 0.0) if place is None or unit is None else sky_offset(scene, place, unit)
            lights = [
                corrector.through(optics.aberrated(w, place), *offset, w) for w in wavelengths
            ]
        parts = [
            Part(
                light,
                float(share),
                float(dx),
                float(dy),
            )
            for light, share, dx, dy in zip(lights, weights, shift_x, shift_y, strict=True)
        ]
        return trembling(scene, mixture(parts))

    scale = scene.pixel_scale
    if scene.psf is not None:
        focal = measured_transfer(scene)
        basis, star = PsfBasis((focal,)), one_for_all(focal)
        effective = focal
    else:
        basis, focal, star = scene_basis(
            scene, palette, aperture, wavelengths, delivered, corrector=corrector
        )
        effective = focal if scale is None else focal.with_pixel(scale)
    return Train(
        wavelength=wavelength,
        airmass=airmass,
        fried=fried,
        seeing=seeing,
        pixel_scale=scale,
        aperture=aperture,
        palette=palette,
        wavelengths=frozen(wavelengths),
        dispersion=scene_dispersion(scene, palette.band),
        optics=alone,
        perfect=perfect,
        focal=focal,
        effective=effective,
        basis=basis,
        star=star,
        first=first_kind(scene, palette),
        corrector=corrector,
    )


def _one_colour(
    scene: Scene,
    optics: Optics,
    wavelength: float,
    place: tuple[float, float] | None,
    seeing: float | None,
    airmass: float | None,
) -> Transfer:
    """Optics and turbulence at one wavelength."""
    through = optics.aberrated(wavelength, place)
    if scene.air is None or seeing is None or airmass is None:
        return through
    fried = fried_parameter(seeing, wavelength=wavelength, airmass=airmass)
    diameter = optics.aperture.pupil.diameter
    return through_air(through, scene.air, wavelength=wavelength, fried=fried, diameter=diameter)


def _count(scene: Scene, palette: Palette, pupil: Pupil, fried: float | None) -> int:
    """How many wavelengths stand for the band."""
    if scene.band.nodes is not None:
        return scene.band.nodes
    centre = palette.band.centre
    lower, upper = palette.band.support
    if upper - lower < NARROW * centre and not scene_dispersion(scene, palette.band):
        return 1
    contrast = 1.0 if fried is None else float(np.exp(-3.44 * (pupil.diameter / fried) ** (5 / 3)))
    finest = pupil.diameter if fried is None else min(pupil.diameter, 1.5 * fried)
    phase = 2.0 * np.pi * finest / centre * scene_dispersion(scene, palette.band)
    return node_count(
        palette.band,
        NODE_ERROR,
        obstruction=min(pupil.obstruction, 0.95),
        contrast=contrast,
        phase=phase,
    )


def _seeing(scene: Scene, palette: Palette, optics: Optics, airmass: float | None) -> float | None:
    """The seeing as a monitor quotes it, given or solved for; None above the air.

    Raises
    ------
    InputError
        Where the optics alone are wider than the stated image quality.
    """
    air = scene.air
    if air is None or airmass is None:
        return None
    if air.seeing is not None or air.image_quality is None:
        return air.seeing
    wanted = air.image_quality
    narrowest = half_light_width(optics.aberrated(palette.band.centre, None))
    if wanted <= narrowest * 1.001:
        arcsec = np.degrees(narrowest) * 3600.0
        raise InputError(
            mistake(
                scene.name,
                "air.image_quality",
                f"is sharper than the optics allow, {arcsec:.3g} arcsec in this band",
                f'write more than "{arcsec:.3g} arcsec", or leave out [air]',
            )
        )
    fried = fried_parameter(wanted, wavelength=palette.band.centre, airmass=airmass)
    nodes = palette.nodes(_count(scene, palette, optics.aperture.pupil, fried))

    def excess(log_seeing: float) -> float:
        seeing = float(np.exp(log_seeing))
        parts = [
            Part(_one_colour(scene, optics, float(w), None, seeing, airmass), float(share))
            for w, share in zip(*nodes, strict=True)
        ]
        return half_light_width(trembling(scene, mixture(parts))) - wanted

    low, high = np.log(wanted) - 1.0, np.log(wanted) + 1.0
    while excess(low) > 0.0:
        low -= 2.0
        if low < np.log(wanted) - 12.0:
            what = "is sharper than the aim of the telescope allows"
            raise InputError(
                mistake(scene.name, "air.image_quality", what, "write more, or less [pointing]")
            )
    while excess(high) < 0.0:
        high += 1.0
    return float(np.exp(brentq(excess, low, high, xtol=1e-9)))
