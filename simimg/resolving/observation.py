"""A frame as a fit sees it: electrons, pixels that count, effective PSF, limits, directions.

What the counts do not tell comes from the scene that a frame of simimg carries; of any other frame
from its header, from what the user gives, and from the pixels themselves
(`simimg.resolving.readout`, `simimg.resolving.psfsource`, `simimg.resolving.skyplane`). Detector
pixels, counted from 0 at the centre of the first; electrons.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, degrees, floor, hypot, radians

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.dither import aimed_geometry
from simimg.assembly.sections import written_geometry
from simimg.assembly.train import Train, assemble_train
from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.resolving.backdrop import Backdrop
from simimg.resolving.evened import evened
from simimg.resolving.given import Given
from simimg.resolving.headers import header_pixel_scale
from simimg.resolving.pairlimits import Cuts
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.psfsource import PsfChoice, SourcedPsf, source_psf
from simimg.resolving.psfsource import spline_oversampling as spline_oversampling
from simimg.resolving.readout import UNFIT, foreign_readout, scene_readout
from simimg.resolving.skyplane import BareSky, FieldSky, Sky, coordinate_sky
from simimg.resolving.starfit import Cutout
from simimg.scene.file import scene_from_record
from simimg.scene.model import Scene


@dataclass(frozen=True, eq=False)
class Observation:
    """What is needed to fit stars to a frame.

    Attributes
    ----------
    frame : Frame
    scene : Scene or None
        Of the frame; None for a foreign one.
    train : Train or None
        Of the scene.
    sky : Sky
    delivered : Cuts
        Of the effective PSF, for the limits.
    psf : PsfModel
        The effective PSF.
    gain, bias, saturation : float
        Electrons to the count, counts, counts.
    variance : float
        Gaussian variance of a pixel (read noise, rounding), electrons squared.
    sourced : SourcedPsf
        Where the PSF comes from.
    barred : ndarray of bool or None
        Pixels that do not count, besides what the frame itself says.
    backdrop : Backdrop or None
        Of a foreign frame, whose background may slope: it is then fitted as a plane.
    notes : tuple of str
        What was assumed.
    excess : float
        Electrons of the camera that one electron here stands for; 1 without multiplication.
    """

    frame: Frame
    scene: Scene | None
    train: Train | None
    sky: Sky
    delivered: Cuts
    psf: PsfModel
    gain: float
    bias: float
    saturation: float
    variance: float
    sourced: SourcedPsf
    barred: AnyArray | None = None
    backdrop: Backdrop | None = None
    notes: tuple[str, ...] = ()
    excess: float = 1.0

    @property
    def fwhm(self) -> float:
        """Delivered full width at half maximum, pixels."""
        return self.psf.fwhm

    @property
    def arcsec(self) -> float:
        """Side of a pixel, arcseconds."""
        return degrees(self.sky.pixel_scale) * 3600.0

    def holds(self, x: float, y: float) -> bool:
        """Whether a place lies on the detector."""
        rows, columns = self.frame.counts.shape
        return bool(-0.5 <= x <= columns - 0.5 and -0.5 <= y <= rows - 0.5)

    def electrons(self, box: tuple[slice, slice] = (slice(None), slice(None))) -> FloatArray:
        """Electrons above the bias of a box of the frame (rows, columns)."""
        return (np.asarray(self.frame.counts[box], dtype=np.float64) - self.bias) * self.gain

    def flattened(self, box: tuple[slice, slice] = (slice(None), slice(None))) -> FloatArray:
        """Electrons of a box with an even background: for finding and showing, not for fits."""
        if self.backdrop is None:
            return self.electrons(box)
        rows, columns = self.frame.counts.shape
        return self.electrons(box) - self.gain * self.backdrop.relief(box, (rows, columns))

    def usable(self, box: tuple[slice, slice] = (slice(None), slice(None))) -> AnyArray:
        """Whether the pixels of a box are finite and neither saturated nor bad."""
        counts = self.frame.counts[box]
        good = np.isfinite(counts) & (counts < self.saturation)
        if self.frame.mask is not None:
            good &= (self.frame.mask[box] & UNFIT) == 0
        if self.barred is not None:
            good &= ~self.barred[box]
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
        electrons = self.electrons(box)
        if self.backdrop is not None and electrons.size:
            rise = self.gain * self.backdrop.rise(box, (rows, columns))
            electrons -= rise - rise.mean()
        return Cutout.of(
            electrons,
            variance=self.variance,
            psf=self.psf,
            x0=left,
            y0=bottom,
            used=self.usable(box),
            tilted=self.backdrop is not None,
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


def observe(
    frame: Frame,
    *,
    widest: float = 0.0,
    given: Given | None = None,
    psf: PsfChoice | None = None,
    apart: Sequence[tuple[float, float]] = (),
) -> Observation:
    """Gather what is needed to fit stars to a frame.

    Parameters
    ----------
    frame : Frame
        Of simimg or of anyone.
    widest : float, optional
        Largest separation that will be fitted, pixels.
    given : Given, optional
        What goes before the frame's own header.
    psf : PsfChoice, optional
        Where the PSF is to come from.
    apart : sequence of (x, y), optional
        Places of what may be no single stars.

    Raises
    ------
    InputError
        A scene that no longer holds together, a frame without a pixel scale, or no PSF to be had.
    """
    given, psf = given or Given(), psf or PsfChoice()
    scene, train = _scene(frame)
    notes: list[str] = []
    sky: Sky
    if scene is not None and scene.camera is not None:
        if given.pixel_scale_arcsec is not None:
            what = "the frame carries its scene, which tells it"
            raise InputError(mistake("frame", "pixel scale", what, "leave it out"))
        number = frame.value("EXPNUM")
        index = number if isinstance(number, int) and 0 <= number < 2**31 else 0
        sky = FieldSky(
            written_geometry(
                aimed_geometry(scene, index),
                prescan=scene.camera.prescan,
                overscan=scene.camera.overscan,
            )
        )
        readout = scene_readout(scene.camera, given, frame.counts.shape)
        frame = evened(frame, scene.camera)
    else:
        sky = foreign_sky(frame, given, notes)
        readout = foreign_readout(frame, given)
    sourced = source_psf(
        frame,
        psf,
        train=train,
        readout=readout,
        pixel_scale=sky.pixel_scale,
        widest=widest,
        apart=apart,
    )
    return Observation(
        frame=frame,
        scene=scene,
        train=train,
        sky=sky,
        delivered=sourced.delivered,
        psf=sourced.model,
        gain=readout.gain,
        bias=readout.bias,
        saturation=readout.saturation,
        variance=readout.variance,
        sourced=sourced,
        barred=readout.barred,
        backdrop=readout.backdrop,
        notes=(*notes, *readout.notes, *sourced.notes),
        excess=readout.excess,
    )


def _scene(frame: Frame) -> tuple[Scene | None, Train | None]:
    """The scene that a frame carries, and its train."""
    if not frame.scene_files:
        return None, None
    scene = scene_from_record(frame.scene_files, name="frame", directory=frame.directory)
    if scene.camera is None or scene.pixel_scale is None:
        raise InputError(
            mistake("frame", "SCENE", "has no camera", "measure a frame that simimg exposed")
        )
    return scene, assemble_train(scene)


def foreign_sky(frame: Frame, given: Given, notes: list[str]) -> Sky:
    """Directions and scale of a foreign frame; what was assumed goes to `notes`.

    Raises
    ------
    InputError
        Neither coordinates nor a pixel scale.
    """
    told = given.pixel_scale_arcsec
    scale = None if told is None else radians(told / 3600.0)
    rows, columns = frame.counts.shape
    if frame.wcs is not None:
        sky = coordinate_sky(frame.wcs, (rows, columns), pixel_scale=scale)
        if sky is not None:
            return sky
        notes.append("the header's coordinates do not hold in the middle of the frame: not used")
    notes.append("no coordinates in the header: north is taken as up and east as left")
    if scale is None:
        found = header_pixel_scale(frame)
        if found is None:
            what = "neither coordinates nor a pixel scale are in the header"
            raise InputError(
                mistake("frame", "pixel scale", what, "give --pixel-scale, arcseconds to the pixel")
            )
        scale = radians(found.value / 3600.0)
        notes.append(f"{found.value:.4g} arcseconds to the pixel, by {found.keyword}")
    return BareSky(scale)
