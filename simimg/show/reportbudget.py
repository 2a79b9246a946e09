"""What limits the answer: each part of a set-up taken away in turn, and whose noise counts.

Widths of a PSF do not add, nor do bounds, so that a part's share of them has no meaning by itself.
What has one is what they would be without that part, everything else as it is. The variance behind
a signal to noise does add: that of the object's own photons, sky, dark signal and read noise.
Arcseconds and electrons, as the names say.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from dataclasses import replace as update
from math import degrees, inf, nan, radians
from typing import Any

import numpy as np

from simimg.assembly.objects import Inventory, inventory
from simimg.assembly.places import field_geometry
from simimg.assembly.train import Train, assemble_train
from simimg.errors import InputError
from simimg.imaging.basis import Transfer
from simimg.resolving.bound import pair_errors
from simimg.resolving.expectation import Expectation, pairs_of
from simimg.resolving.limits import Limits
from simimg.resolving.listing import ObjectLimits
from simimg.resolving.resolution import Directions, computable, to_arcsec
from simimg.resolving.signal import scene_detector
from simimg.resolving.starpsfs import StarPsfs
from simimg.scene.file import replace
from simimg.scene.model import Scene

_NOISE = ("sky", "dark signal", "read noise")


@dataclass(frozen=True)
class Without:
    """What is delivered without one part of the set-up; NaN where it has no meaning.

    Attributes
    ----------
    part : str
        What is taken away; empty for nothing.
    remark : str
    fwhm_arcsec : float
        Along the pair.
    sparrow_arcsec : float
        For the pair's magnitude difference, or an equal pair.
    separation_arcsec, position_angle_deg, magnitude_difference : float
        Cramer-Rao bounds of the pair.
    """

    part: str
    remark: str
    fwhm_arcsec: float
    sparrow_arcsec: float
    separation_arcsec: float = nan
    position_angle_deg: float = nan
    magnitude_difference: float = nan


@dataclass(frozen=True)
class NoiseShares:
    """Shares of the variance behind an object's signal to noise; they add up to 1."""

    label: str
    kind: str
    snr: float
    photons: float
    sky: float
    dark: float
    read: float


def width_budget(scene: Scene, found: Limits, pair: int | None) -> list[Without]:
    """What is delivered as the scene is, without each part of it, and by the pupil alone.

    Parameters
    ----------
    scene : Scene
        With a camera.
    found : Limits
        Of the scene.
    pair : int or None
        Number of the pair whose bounds are asked for, from 0; None for none.
    """
    train = assemble_train(scene)
    steady = _steady(scene, train)
    difference, angle, base = 0.0, radians(found.position_angle_deg), _whole(found)
    if pair is not None:
        own = [one for one in found.objects if one.kind == "pair"][pair]
        difference = own.magnitude_difference or 0.0
        angle = radians(own.position_angle_deg or 0.0)
        base = _whole_pair(own)
    asked = _Asked(angle, difference, pair)
    rows = [base]
    for part, remark, changes in _parts(steady, train):
        try:
            other = replace(steady, changes)
        except InputError:
            continue  # the scene does not hold together without it
        if part not in _NOISE:
            rows.append(asked.row(other, part, remark))
        elif pair is not None:
            bounds = asked.bounds(other, train)
            rows.append(Without(part, remark, base.fwhm_arcsec, base.sparrow_arcsec, *bounds))
    if scene.psf is None:
        rows.append(asked.width(steady, train.focal, "pixel", "in the focal plane"))
        remark = "diffraction at the centre of the band"
        rows.append(asked.width(steady, train.optics, "all but the pupil", remark))
    return rows


def _whole(found: Limits) -> Without:
    one = found.delivered
    return Without("", "as the scene is", one.fwhm_arcsec, one.sparrow_arcsec)


def _whole_pair(own: ObjectLimits) -> Without:
    one, bound = own.delivered, own.bound
    width = (nan, nan) if one is None else (one.fwhm_arcsec, one.sparrow_arcsec)
    bounds = (nan, nan, nan)
    if bound is not None:
        bounds = bound.separation_arcsec, bound.position_angle_deg, bound.magnitude_difference
    return Without("", "as the scene is", *width, *bounds)


def largest(rows: list[Without]) -> Without | None:
    """The part without which the PSF would be narrowest; None where none matters by 2 %."""
    whole, *parts = rows
    single = [one for one in parts if one.part != "all but the pupil"]
    best = min(single, key=lambda one: one.fwhm_arcsec, default=None)
    return best if best is not None and best.fwhm_arcsec < 0.98 * whole.fwhm_arcsec else None


def noise_shares(
    scene: Scene, train: Train, objects: tuple[ObjectLimits, ...]
) -> list[NoiseShares]:
    """Whose noise counts in the signal to noise of each object that has one."""
    detector = scene_detector(scene, train)
    rows: list[NoiseShares] = []
    if detector is None:
        return rows
    per_pixel = (
        detector.sky / detector.excess,
        detector.dark / detector.excess,
        (detector.read_noise / detector.excess) ** 2,
    )
    for one in objects:
        if one.electrons is None or not one.snr:
            continue
        # Of S / sqrt(S + n B), all but n is known.
        photons = float(np.sum(one.electrons)) / detector.excess
        total = (photons / one.snr) ** 2
        rest = max(total - photons, 0.0) / max(sum(per_pixel), 1e-300)
        shares = [rest * variance / total for variance in per_pixel]
        rows.append(NoiseShares(one.label, one.kind, one.snr, photons / total, *shares))
    return rows


def _steady(scene: Scene, train: Train) -> Scene:
    """The scene with its seeing stated, so that it stays when other parts are taken away."""
    if scene.air is None or scene.air.image_quality is None or train.seeing is None:
        return scene
    seeing = f"{to_arcsec(train.seeing):.12g} arcsec"
    return replace(scene, {"air.image_quality": None, "air.seeing": seeing})


def _parts(scene: Scene, train: Train) -> Iterator[tuple[str, str, Mapping[str, Any]]]:
    """Parts that a scene has: name, remark, and what takes them away."""
    camera, pointing = scene.camera, scene.pointing
    if scene.psf is None:
        if scene.air is not None:
            nothing = {"air": None, "correction": None}
            yield "air", "no turbulence, no extinction", nothing
        if scene.air is not None and scene.correction is not None:
            yield "correction of the air", "adaptive optics off", {"correction": None}
        if train.dispersion > 0.0:
            yield "refraction", "the air's colours not drawn apart", {"air.dispersion": None}
        if scene.telescope.wavefront is not None:
            yield "wavefront errors", "perfect optics", {"telescope.wavefront": None}
    if pointing is not None and (any(pointing.jitter) or pointing.drift is not None):
        changes = {"pointing.jitter": None, "pointing.drift": None}
        yield "motion of the aim", "no jitter, no drift", changes
    if camera is not None and camera.charge_diffusion:
        yield "charge diffusion", "", {"camera.charge_diffusion": None}
    if scene.sky is not None:
        yield "sky", "a dark sky", {"sky": None}
    if camera is not None and camera.dark_current:
        yield "dark signal", "", {"camera.dark_current": None}
    if camera is not None and camera.read_noise:
        yield "read noise", "", {"camera.read_noise": None}


@dataclass(frozen=True, eq=False)
class _Asked:
    """Along which direction, for which difference, of which pair."""

    angle: float
    difference: float
    pair: int | None
    _views: dict[Train, Expectation] = field(default_factory=dict)

    def row(self, scene: Scene, part: str, remark: str) -> Without:
        """Width and bounds of a scene."""
        train = assemble_train(scene)
        psf = train.effective
        if self.pair is not None:
            found = inventory(scene, train=train)
            first, second = pairs_of(found)[self.pair]
            psfs = StarPsfs(found)
            if not psfs.shared:
                psf = psfs.pair(second.partner, first.partner).mean
        one = self.width(scene, psf, part, remark)
        bounds = self.bounds(scene, train)
        return Without(part, remark, one.fwhm_arcsec, one.sparrow_arcsec, *bounds)

    def bounds(self, scene: Scene, train: Train) -> tuple[float, float, float]:
        """Cramer-Rao bounds: arcseconds, degrees, magnitudes; NaN without a pair."""
        found = inventory(scene, train=train)
        view = None if self.pair is None else self._view(scene, train, found)
        if view is None or self.pair is None:
            return nan, nan, nan
        stars = pairs_of(found)[self.pair]
        images, rows = view.cutouts(stars), view.rows(stars)
        if not images or float(rows[:, 2].min()) <= 0.0:
            return inf, inf, inf
        sky = np.full(len(images), view.sky)
        separation, angle, difference = pair_errors(
            images, stars=rows, background=sky, psfs=view.models(stars)[:2]
        )
        return to_arcsec(separation * view.scale), degrees(angle), difference

    def _view(self, scene: Scene, train: Train, found: Inventory) -> Expectation | None:
        """The expected image about the pairs; that of another sky through the same optics."""
        known, detector = self._views.get(train), scene_detector(scene, train)
        noise = None if detector is None else detector.read_noise
        if known is not None and detector is not None and known.detector.read_noise == noise:
            return update(known, detector=detector)
        view = Expectation.of(scene, train, found)
        if view is not None:
            self._views[train] = view
        return view

    def width(self, scene: Scene, psf: Transfer, part: str, remark: str) -> Without:
        """Width and limit of one PSF."""
        direction = field_geometry(scene).direction(self.angle)
        one = Directions(computable(psf)).resolution(direction, self.difference)
        return Without(part, remark, one.fwhm_arcsec, one.sparrow_arcsec)
