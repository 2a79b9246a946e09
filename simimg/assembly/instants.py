"""From a scene to its instants: what the telescope's pupil, the moving air and the stars make.

Turbulence of the scene's layers is carried by their winds; every wavelength that stands for the
band sees the same path, and so a phase that goes with its inverse. One frame is the mean over its
sub-steps. All sources share one wavefront, as stars within the isoplanatic angle do. The tremble of
the aim and the spread of charge are those of a long exposure, in each frame alike. SI.
"""

from __future__ import annotations

from collections.abc import Iterator
from math import ceil, cos, inf, sin

import numpy as np

from simimg.air.screens import Flow, Screens
from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.atmosphere import colour_shifts, scene_layers
from simimg.assembly.brightness import exposure_time, sky_electrons
from simimg.assembly.motion import trembling
from simimg.assembly.objects import Inventory
from simimg.assembly.train import NARROW, Train
from simimg.errors import InputError, mistake
from simimg.imaging.basis import Transfer
from simimg.imaging.instant import Instants, plan_instants, pupil_samples
from simimg.imaging.render import DEFAULT_MEMORY
from simimg.imaging.sources import Sources
from simimg.optics.wavefront import pupil_places
from simimg.scene.model import Scene

AIR_STREAM = 103
"""Stream of the seed that turbulence has, kept apart from those of frames and mirrors."""

PER_FRIED = 6.0
"""Samples of the pupil within Fried's parameter: the halo is seen to three times its FWHM."""

PER_DIAMETER = 64
"""Fewest samples across the aperture."""

MOST_WAVELENGTHS = 9
MOST_KINDS = 8

# Relative change of wavelength that changes the speckles, over (r0/D)^(5/6).
_SPECKLE_BAND = 0.45


class SceneInstants:
    """The frames of a scene's cube before any photon is counted.

    Parameters
    ----------
    scene : Scene
        With ``exposure.frame_time``.
    train : Train
    objects : Inventory
    memory_bytes : int, optional
        Most memory that an image may take; 2 GiB unless given.
    sources : Sources, optional
        What is seen in place of the scene's objects.
    stream : int, optional
        Of the seed that the air has.

    Raises
    ------
    InputError
        What cannot be seen in instants, or does not fit into the memory.
    """

    def __init__(
        self,
        scene: Scene,
        train: Train,
        objects: Inventory,
        *,
        memory_bytes: int | None = None,
        sources: Sources | None = None,
        stream: int = AIR_STREAM,
    ) -> None:
        refused = list(not_in_instants(scene))
        if refused:
            raise InputError(*refused)
        assert scene.exposure is not None
        geometry, pupil = objects.geometry, train.pupil
        shown = objects.sources if sources is None else sources
        kinds = _kinds(shown)
        if len(kinds) > MOST_KINDS:
            what = (
                f"has stars of {len(kinds)} spectra, and frames of instants can have {MOST_KINDS}"
            )
            mend = "leave out the catalogue's temperatures"
            raise InputError(mistake(scene.where, "exposure.frame_time", what, mend))
        wavelengths, _ = train.palette.nodes(_count(scene, train))
        shift_x, shift_y = colour_shifts(scene, wavelengths, train.palette.wavelength)
        finest = pupil.diameter / PER_DIAMETER
        if train.fried is not None:
            finest = min(finest, train.fried / PER_FRIED)
        plan = plan_instants(
            shown,
            columns=geometry.columns,
            rows=geometry.rows,
            pixel_scale=geometry.pixel_scale,
            wavelengths=[float(one) for one in wavelengths],
            diameter=pupil.reach,
            finest=finest,
            memory_bytes=DEFAULT_MEMORY if memory_bytes is None else memory_bytes,
        )
        x, y = pupil_places(pupil)
        path = np.zeros_like(x + y) if train.aperture.path is None else train.aperture.path
        path = np.where(np.isfinite(path), path, 0.0)
        waves = []
        for one, dx, dy in zip(plan.wavelengths, shift_x, shift_y, strict=True):
            angle = 2.0 * np.pi / one * (path + dx * x + dy * y)
            wave = pupil.amplitude * np.exp(1j * angle)
            waves.append(pupil_samples(wave, pupil.pitch, samples=plan.samples, step=plan.step))
        blur = trembling(scene, Transfer(inf)).with_pixel(geometry.pixel_scale)
        self._instants = Instants(
            plan,
            shown,
            columns=geometry.columns,
            rows=geometry.rows,
            pupils=waves,
            area=pupil.area,
            wavelength=train.wavelength,
            shares={
                k: train.palette.weights(train.palette.spectrum(k), wavelengths) for k in kinds
            },
            blur=blur,
        )
        self._sky = np.float32(sky_electrons(scene, area=pupil.area))
        self._substeps = scene.exposure.substeps
        self._frame = exposure_time(scene)
        self._cycle = self._frame + scene.exposure.overhead
        self._screens: Screens | None = None
        self._still = np.zeros((plan.samples, plan.samples), dtype=np.float32)
        if scene.air is not None and train.fried is not None:
            flows = []
            for layer in scene_layers(scene.air):
                angle = geometry.direction(layer.direction)
                velocity = layer.wind * cos(angle), layer.wind * sin(angle)
                flows.append(Flow(layer.share, velocity))
            self._screens = Screens(
                flows,
                r0=train.fried,
                outer_scale=scene.air.outer_scale,
                samples=plan.samples,
                step=plan.step,
                rng=np.random.default_rng([scene.exposure.seed, stream]),
            )

    def phases(self, index: int) -> list[FloatArray]:
        """Phases of the air during one frame, one for each sub-step (rad); one thread at a time."""
        if self._screens is None:
            return [self._still]
        start = index * self._cycle
        return [
            self._screens.phase(start + (step + 0.5) / self._substeps * self._frame)
            for step in range(self._substeps)
        ]

    def light(self, phases: list[FloatArray]) -> AnyArray:
        """Expected electrons of objects and sky in each pixel; any number of threads at a time."""
        image = self._instants.image(phases)
        image += self._sky
        return image

    def psfs(self, phases: list[FloatArray]) -> list[FloatArray]:
        """PSFs of the wavelengths without the pixel, as `simimg.imaging.instant.Instants.psfs`."""
        return self._instants.psfs(phases)

    @property
    def pitch(self) -> float:
        """Side of the cells of `psfs` (rad)."""
        return self._instants.plan.pitch


def not_in_instants(scene: Scene) -> Iterator[str]:
    """One line for each key with which frames of instants cannot be made."""
    refused = (
        (scene.psf is not None, "psf", "is a PSF that does not change"),
        (bool(scene.detector), "detector", "is a mosaic"),
        (
            scene.air is not None and scene.air.tilt_removed is not None,
            "air.tilt_removed",
            "is an average over instants",
        ),
        (scene.camera is not None and scene.camera.binning > 1, "camera.binning", "adds pixels"),
        (getattr(scene, "correction", None) is not None, "correction", "is known as an average"),
    )
    for wrong, name, why in refused:
        if wrong:
            yield mistake(
                scene.where,
                name,
                f"{why}, and exposure.frame_time asks for instants",
                f"leave out {name} or frame_time",
            )


def _kinds(sources: Sources) -> list[int]:
    kinds = {int(kind) for kind in np.unique(sources.points.kind)}
    return sorted(kinds | {int(one.kind) for one in sources.shapes})


def _count(scene: Scene, train: Train) -> int:
    """How many wavelengths stand for the band: one for each width over which speckles change."""
    if scene.band.nodes is not None:
        return min(scene.band.nodes, MOST_WAVELENGTHS)
    lower, upper = train.palette.band.support
    width = (upper - lower) / train.wavelength
    if width < NARROW:
        return 1
    speckle = _SPECKLE_BAND
    if train.fried is not None:
        speckle *= min(train.fried / train.pupil.diameter, 1.0) ** (5.0 / 6.0)
    return min(1 + ceil(width / speckle), MOST_WAVELENGTHS)
