"""What should be known beside the figures: of a table of limits, of a measured pair. Arcseconds."""

from __future__ import annotations

from collections.abc import Sequence
from math import isfinite

from simimg.assembly.train import Train
from simimg.optics.wavefront import depth_of_focus, marechal_holds
from simimg.resolving.bound import PairPrecision
from simimg.resolving.records import PairMeasurement
from simimg.resolving.resolution import Directions, Resolution, to_arcsec
from simimg.scene.model import Scene

CLOSE = 0.5
"""FWHM below which a pair's errors grow as theory says that they must."""
_TRUSTED = 0.2, 0.15  # bounds (of the separation, in it; magnitudes) up to which they are reached


def measured_notes(record: PairMeasurement, *, fwhm_arcsec: float) -> list[str]:
    """What should be known beside a measured pair's errors.

    Parameters
    ----------
    record : PairMeasurement
    fwhm_arcsec : float
        Of the delivered PSF.
    """
    if not isfinite(record.separation_arcsec):
        return []
    notes = []
    low, high = record.separation_low_arcsec, record.separation_high_arcsec
    if isfinite(high):
        notes.append(
            "The likelihood of the separation is lopsided: with 68 % confidence it lies from "
            f"{low:.3g} to {high:.3g} arcsec."
        )
    if record.separation_arcsec < CLOSE * fwhm_arcsec:
        notes.append(_degraded(record.separation_arcsec / fwhm_arcsec) + ".")
    return notes


def bound_notes(
    pairs: Sequence[tuple[float, PairPrecision | None]], *, fwhm_arcsec: float
) -> list[str]:
    """What should be known beside the bounds of pairs far closer than the PSF is wide.

    Parameters
    ----------
    pairs : sequence of (float, PairPrecision or None)
        Separation (arcsec) and bounds of each.
    fwhm_arcsec : float
        Of the delivered PSF.
    """
    notes = []
    for separation, bound in pairs:
        if bound is None or not separation < CLOSE * fwhm_arcsec:
            continue
        text = _degraded(separation / fwhm_arcsec)
        part, spread = bound.separation_arcsec / separation, bound.magnitude_difference
        if part > _TRUSTED[0] or spread > _TRUSTED[1]:
            text += "; with these bounds estimates scatter more, and lopsidedly"
        notes.append(f"{bound.label or 'The pair'}: {text[0].lower()}{text[1:]}.")
    return notes


def _degraded(ratio: float) -> str:
    """What theory says of a separation so far below the FWHM."""
    return (
        f"At {ratio:.2g} of the FWHM errors of the separation grow as 1/separation, and a pair of "
        "equal stars can hardly be told from a wider one of unequal stars"
    )


def nyquist_pixel(train: Train) -> float:
    """lambda/2D (rad), the largest pixel that keeps all detail of the optics."""
    return train.wavelength / (2.0 * train.pupil.diameter)


def limit_notes(
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
    notes += _wavefront_notes(scene, train)
    if to_arcsec(train.dispersion) > of_all.fwhm_arcsec / 3.0:
        notes.append(
            f"The air draws the band out over {to_arcsec(train.dispersion):.3g} arcsec, more than "
            "a third of the FWHM: use a narrower band, a smaller airmass or a dispersion corrector."
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
    if train.pixel_scale > nyquist_pixel(train) and train.fried is None:
        notes.append(
            f"A pixel of {scale:.4g} arcsec loses the finest detail of the optics, which needs "
            f"{to_arcsec(nyquist_pixel(train)):.4g} or less."
        )
    if of_all.fwhm_arcsec < 2.0 * scale:
        notes.append(
            "Undersampled: what a single frame shows of a close pair depends on where it falls on "
            "the pixels."
        )
    return notes


def _wavefront_notes(scene: Scene, train: Train) -> list[str]:
    """Where Marechal's formula ends; how deep the focus is."""
    notes = []
    rms = train.aperture.rms
    if rms > 0.0 and not marechal_holds(rms, train.wavelength):
        notes.append(
            f"The wavefront's rms is {rms / train.wavelength:.2g} waves: the Strehl ratio from the "
            "rms (extended Marechal formula) is out of its range, trust that from the PSF."
        )
    wavefront, focal_length = scene.telescope.wavefront, scene.telescope.focal_length
    if wavefront is not None and wavefront.defocus and focal_length is not None:
        depth = depth_of_focus(train.wavelength, focal_length / train.pupil.diameter)
        notes.append(
            f"The detector is {wavefront.defocus * 1e6:.4g} um out of focus; the depth of focus "
            f"is +/- {depth * 1e6:.4g} um."
        )
    return notes
