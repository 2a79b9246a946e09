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

from simimg.assembly.brightness import exposure_time
from simimg.assembly.objects import inventory
from simimg.assembly.train import Train, assemble_train
from simimg.imaging.circles import encircled_diameters
from simimg.resolving.criteria import first_dark_ring
from simimg.resolving.listing import Listing, ObjectLimits
from simimg.resolving.resolution import Directions, Resolution, computable, to_arcsec
from simimg.resolving.signal import scene_detector
from simimg.scene.model import Scene

DAWES = 116.0
"""Arcsec times mm: observers' custom for equal pairs of the sixth magnitude (Dawes 1867)."""

_OF_PAIRS = (
    "separation_arcsec",
    "position_angle_deg",
    "magnitude_difference",
    "diffraction",
    "delivered",
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
    position_angle_deg : float
        Direction in which the PSF is cut.
    diffraction, delivered : Resolution
        For an equal pair.
    dawes_arcsec : float
        116 over the aperture in mm, for reference.
    strehl : float
        Peak of the PSF over that of the pupil without air, neither with a pixel.
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
    position_angle_deg: float
    diffraction: Resolution
    delivered: Resolution
    dawes_arcsec: float
    strehl: float
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
    if scene.catalogue and not all_stars:
        scene = scene.model_copy(update={"catalogue": ()})
    found = inventory(scene, train=train)
    angle = found.geometry.direction(position_angle)
    diffraction = Directions(train.optics, dark_ring=_dark_ring(train), saddle=False)
    effective = computable(train.effective)
    delivered, focal = Directions(effective), Directions(train.focal)
    of_optics, of_all = diffraction.resolution(angle), delivered.resolution(angle)
    listing = Listing(
        train=train,
        timed=exposure_time(scene) > 0.0,
        detector=scene_detector(scene, train),
        diffraction=diffraction,
        delivered=delivered,
        width=delivered.profile(angle).width,
    )
    half_light, most_light = encircled_diameters(effective, (0.5, 0.8))
    scale = train.pixel_scale
    return Limits(
        wavelength_nm=train.wavelength * 1e9,
        pixel_scale_arcsec=None if scale is None else to_arcsec(scale),
        r0_m=train.fried,
        position_angle_deg=degrees(position_angle) % 360.0,
        diffraction=of_optics,
        delivered=of_all,
        dawes_arcsec=DAWES / (train.pupil.diameter * 1e3),
        strehl=1.0 if train.fried is None else focal.peak(angle) / diffraction.peak(angle),
        ee50_arcsec=to_arcsec(half_light),
        ee80_arcsec=to_arcsec(most_light),
        nyquist_pixel_arcsec=to_arcsec(_nyquist(train)),
        objects=listing.objects(found),
        notes=tuple(_notes(scene, train, diffraction, focal, angle, of_optics, of_all)),
    )


def _nyquist(train: Train) -> float:
    return train.wavelength / (2.0 * train.pupil.diameter)


def _dark_ring(train: Train) -> float | None:
    """First dark ring (rad) of the pupil's outline; None for a map."""
    if not train.pupil.enveloped:
        return None
    ring = first_dark_ring(train.pupil.obstruction)
    return ring * train.wavelength / train.pupil.diameter


def _notes(
    scene: Scene,
    train: Train,
    diffraction: Directions,
    focal: Directions,
    angle: float,
    of_optics: Resolution,
    of_all: Resolution,
) -> list[str]:
    """What should be known beside the figures."""
    notes = []
    pupil = train.pupil
    if pupil.enveloped and pupil.obstruction > 0.0:
        notes.append(
            f"With an obstruction of {pupil.obstruction:.3g} the saddle of an equal pair falls to "
            f"0.735 of its peaks only at {diffraction.saddle_limit(angle):.4g} arcsec, beyond the "
            f"first dark ring at {of_optics.rayleigh_arcsec:.4g}, even without air and pixel."
        )
    if pupil.enveloped and not pupil.round:
        notes.append(
            "Diffraction's Rayleigh limit is the first dark ring of the aperture without its vanes."
        )
    if not pupil.enveloped:
        notes.append(
            "Diffraction's Rayleigh limit is the first minimum of the pupil map's PSF along the "
            "position angle."
        )
    if scene.air is not None and scene.air.tilt_removed is not None:
        notes.append(
            "The tilt-removed average is an approximation: it takes the tilt of the wavefront as "
            "uncorrelated with the rest."
        )
    if train.pixel_scale is None:
        notes.append(
            "No pixel: delivered limits are those of the focal plane, and there is no signal to "
            "noise."
        )
        return notes
    scale = to_arcsec(train.pixel_scale)
    without = focal.resolution(angle)
    notes.append(
        f"There are {of_all.fwhm_arcsec / scale:.2g} pixels to the delivered FWHM; the pixel "
        f"widens it from {without.fwhm_arcsec:.4g} to {of_all.fwhm_arcsec:.4g} arcsec and "
        f"Sparrow's limit from {without.sparrow_arcsec:.4g} to {of_all.sparrow_arcsec:.4g}."
    )
    if train.pixel_scale > _nyquist(train) and train.fried is None:
        notes.append(
            f"A pixel of {scale:.4g} arcsec loses the finest detail of the optics, which needs "
            f"{to_arcsec(_nyquist(train)):.4g} or less."
        )
    if of_all.fwhm_arcsec < 2.0 * scale:
        notes.append(
            "Undersampled: what a single frame shows of a close pair depends on where it falls on "
            "the pixels."
        )
    return notes
