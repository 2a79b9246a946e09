"""A frame as a fit sees it: electrons, pixels that count, effective PSF, limits, directions.

What the counts do not tell (gain, bias, read noise, optics and air) comes from the scene that a
frame of simimg carries. Detector pixels, counted from 0 at the centre of the first; electrons.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, degrees, floor, hypot, inf

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.places import FieldGeometry, field_geometry
from simimg.assembly.train import Train, assemble_train
from simimg.camera.converter import converter_top
from simimg.camera.masks import BAD_COLUMN, BLEEDING, COSMIC_RAY, DEAD, HOT, SATURATED
from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.imaging.basis import Transfer
from simimg.imaging.profile import sampled_psf
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.resolution import Directions
from simimg.resolving.starfit import Cutout
from simimg.scene.file import scene_from_record
from simimg.scene.model import Scene

_SPLINE_ERROR = 4e-7  # of the peak: what interpolation between the PSF's samples may cost
_UNFIT = SATURATED | BLEEDING | COSMIC_RAY | HOT | DEAD | BAD_COLUMN
_REACH = 12.0  # FWHM from a star beyond which its light is not modelled


@dataclass(frozen=True, eq=False)
class Observation:
    """What is needed to fit stars to a frame.

    Attributes
    ----------
    frame : Frame
    scene : Scene
        Of the frame.
    train : Train
        Of the scene.
    geometry : FieldGeometry
    delivered : Directions
        Limits of the effective PSF.
    psf : PsfModel
        The effective PSF.
    gain, bias, saturation : float
        Electrons to the count, counts, counts.
    variance : float
        Gaussian variance of a pixel (read noise, rounding), electrons squared.
    """

    frame: Frame
    scene: Scene
    train: Train
    geometry: FieldGeometry
    delivered: Directions
    psf: PsfModel
    gain: float
    bias: float
    saturation: float
    variance: float

    @property
    def fwhm(self) -> float:
        """Delivered full width at half maximum, pixels."""
        return self.psf.fwhm

    @property
    def arcsec(self) -> float:
        """Side of a pixel, arcseconds."""
        return degrees(self.geometry.pixel_scale) * 3600.0

    def holds(self, x: float, y: float) -> bool:
        """Whether a place lies on the detector."""
        rows, columns = self.frame.counts.shape
        return bool(-0.5 <= x <= columns - 0.5 and -0.5 <= y <= rows - 0.5)

    def electrons(self, box: tuple[slice, slice] = (slice(None), slice(None))) -> FloatArray:
        """Electrons above the bias of a box of the frame (rows, columns)."""
        return (np.asarray(self.frame.counts[box], dtype=np.float64) - self.bias) * self.gain

    def usable(self, box: tuple[slice, slice] = (slice(None), slice(None))) -> AnyArray:
        """Whether the pixels of a box are finite and neither saturated nor bad."""
        counts = self.frame.counts[box]
        good = np.isfinite(counts) & (counts < self.saturation)
        if self.frame.mask is not None:
            good &= (self.frame.mask[box] & _UNFIT) == 0
        return np.asarray(good)

    def cutout(self, x: float, y: float, half: float) -> Cutout:
        """Cut out the square of half side ``half`` about a place, as far as it is on the detector.

        Parameters
        ----------
        x, y : float
        half : float
            Pixels.
        """
        rows, columns = self.frame.counts.shape
        left, right = max(0, floor(x - half)), min(columns - 1, ceil(x + half))
        bottom, top = max(0, floor(y - half)), min(rows - 1, ceil(y + half))
        box = (slice(bottom, top + 1), slice(left, right + 1))
        return Cutout.of(
            self.electrons(box),
            variance=self.variance,
            psf=self.psf,
            x0=left,
            y0=bottom,
            used=self.usable(box),
        )

    def cutouts(
        self, place: tuple[float, float], other: tuple[float, float], margin: float
    ) -> list[Cutout]:
        """Cut out what two places need: one square about both, or one about each when far apart.

        Parameters
        ----------
        place, other : (x, y)
        margin : float
            Pixels to show on every side.
        """
        apart = hypot(other[0] - place[0], other[1] - place[1])
        if apart > 3.0 * margin:
            return [self.cutout(*place, margin), self.cutout(*other, margin)]
        middle = 0.5 * (place[0] + other[0]), 0.5 * (place[1] + other[1])
        return [self.cutout(*middle, margin + 0.5 * apart)]


def observe(frame: Frame, *, widest: float = 0.0) -> Observation:
    """Gather what is needed to fit stars to a frame.

    Parameters
    ----------
    frame : Frame
        With its scene, that is: made by simimg.
    widest : float, optional
        Largest separation that will be fitted, pixels.

    Raises
    ------
    InputError
        A frame without a scene, or whose scene no longer holds together.
    """
    if not frame.scene_files:
        raise InputError(
            mistake(
                "frame",
                "SCENE",
                "carries no scene, so that its PSF and noise are unknown",
                "measure a frame that simimg exposed",
            )
        )
    scene = scene_from_record(frame.scene_files, name="frame", directory=".")
    camera, scale = scene.camera, scene.pixel_scale
    if camera is None or scale is None:
        raise InputError(
            mistake("frame", "SCENE", "has no camera", "measure a frame that simimg exposed")
        )
    train = assemble_train(scene)
    delivered = Directions(train.effective)
    width = delivered.profile(0.0).width / scale
    oversampling = spline_oversampling(train.effective, scale)
    image = sampled_psf(
        train.effective,
        pixel_scale=scale,
        oversampling=oversampling,
        half_width_pixels=ceil(max(_REACH * width, widest + 5.0 * width, 8.0)),
    )
    full_well = inf if camera.full_well is None else camera.full_well
    top = float(converter_top(camera.bit_depth))
    rounding = 0.0 if camera.read_noise == 0.0 and camera.gain == 1.0 else camera.gain**2 / 12.0
    return Observation(
        frame=frame,
        scene=scene,
        train=train,
        geometry=field_geometry(scene),
        delivered=delivered,
        psf=PsfModel.from_image(image, oversampling=oversampling),
        gain=camera.gain,
        bias=camera.bias,
        # Read noise may bring a full pixel's count below the level of the full well.
        saturation=min(
            top,
            camera.bias + max(full_well - 6.0 * camera.read_noise, 0.5 * full_well) / camera.gain,
        ),
        variance=camera.read_noise**2 + rounding,
    )


def spline_oversampling(transfer: Transfer, pixel_scale: float) -> int:
    """Samples to the pixel that a quintic spline needs to render a PSF to 1e-6 of its peak.

    Parameters
    ----------
    transfer : Transfer
        Of the effective PSF.
    pixel_scale : float
        Side of a pixel, radians.

    Notes
    -----
    A quintic B-spline misses a wave of frequency f, sampled h apart, by about ``2 (f h)^6``
    (Unser 1999, IEEE Signal Process. Mag. 16, 22); the waves of the PSF are weighted by their
    strength.
    """
    radius = transfer.band_limit * (np.arange(600) + 0.5) / 600
    angle = np.pi * np.arange(8)[:, None] / 8
    strength = np.abs(transfer(radius * np.cos(angle), radius * np.sin(angle))).max(axis=0) * radius
    waves = (radius * pixel_scale) ** 6
    error = 2.0 * float((strength * waves).sum() / strength.sum())
    return int(max(1, ceil((error / _SPLINE_ERROR) ** (1.0 / 6.0))))
