"""What a scene's set-up can resolve, and how well it sees each object, before any photon is drawn.

Two sets of limits are kept apart: those of diffraction (the pupil alone, monochromatic at the
centre of the band) and those delivered (optics, air and pixel together), each along a stated
direction; and for each pair its own, along its own position angle and for its own magnitude
difference. What the words mean stands in `simimg.resolving.criteria`, the signal to noise in
`simimg.resolving.signal`. Arcseconds, degrees and electrons, as the names say.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, is_dataclass
from math import degrees, isfinite, pi
from typing import Any

from simimg.assembly.atmosphere import AirFigures, air_figures
from simimg.assembly.brightness import exposure_time, photometry
from simimg.assembly.correction import CorrectionFigures, correction_figures
from simimg.assembly.objects import inventory
from simimg.assembly.train import Train, assemble_train
from simimg.imaging.circles import encircled_diameters
from simimg.imaging.profile import psf_peak
from simimg.optics.wavefront import marechal_strehl
from simimg.resolving.bound import PairPrecision
from simimg.resolving.criteria import first_dark_ring
from simimg.resolving.expectation import Expectation
from simimg.resolving.listing import Listing, ObjectLimits
from simimg.resolving.notes import bound_notes, limit_notes, nyquist_pixel
from simimg.resolving.resolution import Directions, Resolution, computable, to_arcsec
from simimg.resolving.signal import scene_detector
from simimg.resolving.starpsfs import StarPsfs, psf_notes
from simimg.scene.model import Scene

DAWES = 116.0
"""Arcsec times mm: observers' custom for equal pairs of the sixth magnitude (Dawes 1867)."""

_OF_PAIRS = (
    "separation_arcsec",
    "position_angle_deg",
    "magnitude_difference",
    "diffraction",
    "delivered",
    "bound",
    "stars",
)


@dataclass(frozen=True)
class Limits:
    """Diffraction and delivered limits of a scene, and its objects.

    Attributes
    ----------
    wavelength_nm : float
        Centre of the band.
    pixel_scale_arcsec, r0_m : float or None
        None without a pixel; None above the air.
    air : AirFigures or None
        Coherence time, isoplanatic angle, Fried's parameter; None above the air.
    correction : CorrectionFigures or None
        Error budget and Strehl ratio of the adaptive optics; None without them.
    position_angle_deg : float
        Direction in which the PSF is cut.
    diffraction, delivered : Resolution
        For an equal pair.
    dawes_arcsec : float
        116 over the aperture in mm, for reference.
    strehl : float
        Peak of the PSF over that of the perfect pupil, both over the band and without a pixel.
    strehl_from_rms : float
        By the extended Marechal formula from the rms of the optics' own wavefront, without air.
    wavefront_rms_nm : float
        Of the optics on the axis, tilt taken out.
    dispersion_arcsec : float
        Between the images of the band's edges, by the air's refraction; 0 where it is corrected.
    ee50_arcsec, ee80_arcsec : float
        Diameters of the circles that hold 50 and 80 % of the delivered light.
    nyquist_pixel_arcsec : float
        lambda/2D, the largest pixel that keeps all detail of the optics.
    objects : tuple of ObjectLimits
    notes : tuple of str
        What should be known beside the figures.
    """

    wavelength_nm: float
    pixel_scale_arcsec: float | None
    r0_m: float | None
    air: AirFigures | None
    correction: CorrectionFigures | None
    position_angle_deg: float
    diffraction: Resolution
    delivered: Resolution
    dawes_arcsec: float
    strehl: float
    strehl_from_rms: float
    wavefront_rms_nm: float
    dispersion_arcsec: float
    ee50_arcsec: float
    ee80_arcsec: float
    nyquist_pixel_arcsec: float
    objects: tuple[ObjectLimits, ...]
    notes: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """For JSON: what is not finite becomes None; a single object has no keys of a pair."""
        result: dict[str, Any] = _plain(self)
        for one in result["objects"]:
            if one["kind"] != "pair":
                for name in _OF_PAIRS:
                    del one[name]
        return result


def _plain(value: Any) -> Any:
    """Dictionaries, lists and finite numbers."""
    if isinstance(value, float):
        return value if isfinite(value) else None
    if isinstance(value, tuple):
        return [_plain(one) for one in value]
    if isinstance(value, dict):
        return {name: _plain(one) for name, one in value.items()}
    if isinstance(value, PairPrecision):
        return value.to_dict()
    if is_dataclass(value):
        return {one.name: _plain(getattr(value, one.name)) for one in fields(value)}
    return value


def limits(scene: Scene, *, position_angle: float = 0.5 * pi, all_stars: bool = False) -> Limits:
    """Work out what a scene's set-up resolves and how well it sees the scene's objects.

    Parameters
    ----------
    scene : Scene
        A camera is not needed; without one the limits are those of the focal plane.
    position_angle : float, optional
        Direction (rad, north through east) in which a PSF that is not round is cut.
    all_stars : bool, optional
        List the stars of catalogues, too.

    Returns
    -------
    Limits
        Lengths are right to 1e-4 for a pupil without a map and a pixel below 32 lambda/D.

    Raises
    ------
    InputError
        A pupil map, picture or catalogue that cannot serve, or an image quality sharper than
        diffraction.
    ValueError
        For a position angle that is not finite.

    Notes
    -----
    Diffraction's Rayleigh limit of an annulus, with vanes or without, is its first dark ring; that
    of a pupil from a map the first minimum of its PSF along the direction, NaN if there is none.
    """
    if not isfinite(position_angle):
        raise ValueError(f"position_angle must be finite, got {position_angle}")
    train = assemble_train(scene)
    listed = scene if all_stars else scene.model_copy(update={"catalogue": ()})
    found = inventory(listed, train=train)
    expectation = None
    if scene.pair:
        # The stars of catalogues shine on the pairs, listed or not.
        shown = inventory(scene, train=train) if scene.catalogue and not all_stars else found
        expectation = Expectation.of(scene, train, shown)
    angle = found.geometry.direction(position_angle)
    diffraction = Directions(train.optics, dark_ring=dark_ring(train), saddle=False)
    effective = computable(train.effective)
    delivered, focal = Directions(effective), Directions(train.focal)
    psfs = StarPsfs(found)
    light = photometry(scene, area=train.pupil.area, airmass=train.airmass, palette=train.palette)
    of_optics, of_all = diffraction.resolution(angle), delivered.resolution(angle)
    listing = Listing(
        train=train,
        timed=exposure_time(scene) > 0.0,
        detector=scene_detector(scene, train),
        diffraction=diffraction,
        delivered=delivered,
        psfs=psfs,
        width=delivered.profile(angle).width,
        expectation=expectation,
        differences=tuple(light.difference(pair) for pair in scene.pair),
    )
    objects = listing.objects(found)
    apart = [(o.separation_arcsec, o.bound) for o in objects if o.separation_arcsec is not None]
    notes = limit_notes(scene, train, diffraction, focal, angle, of_optics, of_all)
    notes += psf_notes(psfs, catalogue=all_stars and bool(scene.catalogue))
    notes += bound_notes(apart, fwhm_arcsec=of_all.fwhm_arcsec)
    half_light, most_light = encircled_diameters(effective, (0.5, 0.8))
    scale = train.pixel_scale
    return Limits(
        wavelength_nm=train.wavelength * 1e9,
        pixel_scale_arcsec=None if scale is None else to_arcsec(scale),
        r0_m=train.fried,
        air=air_figures(scene.air, train.fried),
        correction=correction_figures(train.corrector, train.optics),
        position_angle_deg=degrees(position_angle) % 360.0,
        diffraction=of_optics,
        delivered=of_all,
        dawes_arcsec=DAWES / (train.pupil.diameter * 1e3),
        strehl=_strehl(train),
        strehl_from_rms=marechal_strehl(train.aperture.rms, train.wavelength),
        wavefront_rms_nm=train.aperture.rms * 1e9,
        dispersion_arcsec=to_arcsec(train.dispersion),
        ee50_arcsec=to_arcsec(half_light),
        ee80_arcsec=to_arcsec(most_light),
        nyquist_pixel_arcsec=to_arcsec(nyquist_pixel(train)),
        objects=objects,
        notes=tuple(notes),
    )


def _strehl(train: Train) -> float:
    """Peak of what is delivered at the focal plane over the perfect pupil's, over the band."""
    if train.focal is train.perfect:
        return 1.0
    return min(1.0, psf_peak(train.focal) / psf_peak(train.perfect))


def dark_ring(train: Train) -> float | None:
    """First dark ring (rad) of the pupil's outline; None for a map."""
    if not train.pupil.enveloped:
        return None
    ring = first_dark_ring(train.pupil.obstruction)
    return ring * train.wavelength / train.pupil.diameter
