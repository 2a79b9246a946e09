"""What a frame knows of its making: its scene, the width of its PSF, its light without noise.

All come from the scene that the frame carries. A frame that carries none, or one that cannot be
read (a large file that it named is gone), has no models; it is shown all the same.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from simimg.arrays import FloatArray
from simimg.assembly.train import Train, assemble_train
from simimg.errors import InputError
from simimg.exposure import prepare
from simimg.frame import Frame
from simimg.imaging.profile import psf_cut
from simimg.resolving.criteria import fwhm
from simimg.scene.file import scene_from_record
from simimg.scene.model import Scene
from simimg.show.signal import header_number

_MOST_PIXELS = 1 << 22  # of a frame whose light without noise is worth computing for a figure


@dataclass(frozen=True, eq=False)
class Setup:
    """The scene of a frame and its train; the train has a pixel scale."""

    scene: Scene
    train: Train

    @property
    def pixel_scale(self) -> float:
        """Side of a pixel (rad)."""
        scale = self.train.pixel_scale
        if scale is None:
            raise ValueError("a set-up needs a pixel scale")
        return scale

    def psf_fwhm(self, angle: float) -> float:
        """FWHM of the effective PSF (pixels) along a direction of the detector (rad)."""
        return float(fwhm(psf_cut(self.train.effective, angle))) / self.pixel_scale


def frame_setup(frame: Frame) -> Setup | None:
    """The set-up of a frame; None where it carries no scene that can be read and imaged."""
    if not frame.simulated or not frame.scene_files:
        return None
    try:
        scene = scene_from_record(frame.scene_files, name="SCENE", directory=Path())
        train = assemble_train(scene)
    except InputError:
        return None
    return None if train.pixel_scale is None else Setup(scene, train)


def light_without_noise(frame: Frame, setup: Setup | None) -> FloatArray | None:
    """Electrons of objects and sky and dark signal without noise; None where not to be had.

    Parameters
    ----------
    frame : Frame
        Its EXPECTED is used where it has one.
    setup : Setup or None
        Its scene is imaged anew otherwise, unless the frame is large.
    """
    dark = header_number(frame, "DARKSIG") or 0.0
    if frame.expected is not None:
        return np.asarray(frame.expected, dtype=np.float64) + dark
    if setup is None or frame.counts.size > _MOST_PIXELS:
        return None
    try:
        expected = prepare(setup.scene).expected
    except InputError:
        return None
    if expected.shape != frame.counts.shape:
        return None
    return np.asarray(expected, dtype=np.float64) + dark
