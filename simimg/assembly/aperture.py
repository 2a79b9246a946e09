"""The pupil and the wavefront of a scene's telescope, from its keys and files. Metres."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simimg.arrays import FloatArray
from simimg.errors import InputError, mistake
from simimg.optics.fieldaberration import FieldAberration
from simimg.optics.masks import Vane, apodised, gaussian_apodiser, with_obstruction, with_vanes
from simimg.optics.pupil import Pupil, annular_pupil, map_pupil
from simimg.optics.segments import (
    SegmentedPupil,
    draw_segment_errors,
    segment_wavefront,
    segmented_pupil,
)
from simimg.optics.wavefront import (
    defocus_wavefront,
    map_wavefront,
    polishing_wavefront,
    rms_over_pupil,
    without_tilt,
    zernike_wavefront,
)
from simimg.scene.model import Scene
from simimg.sky.pictures import read_map, read_picture

# Streams of the seeds of a mirror's errors, kept apart from those of frames.
_POLISHING, _SEGMENTS = 101, 102


@dataclass(frozen=True, eq=False)
class Aperture:
    """What the telescope's entrance does to the wave.

    Attributes
    ----------
    pupil : Pupil
    path : ndarray or None
        Error of the wavefront on the pupil's lattice (m of optical path); None for perfect optics.
    field : FieldAberration or None
        What grows off the axis.
    """

    pupil: Pupil
    path: FloatArray | None
    field: FieldAberration | None

    @property
    def rms(self) -> float:
        """Root mean square of the wavefront on the axis, its tilt taken out (m)."""
        if self.path is None:
            return 0.0
        return rms_over_pupil(without_tilt(self.path, self.pupil), self.pupil)


def scene_aperture(scene: Scene) -> Aperture:
    """The aperture of a scene's telescope.

    Raises
    ------
    InputError
        A map that cannot be read or does not fit.
    """
    pupil, segmented = _pupil(scene)
    return Aperture(pupil, _path(scene, pupil, segmented), _field(scene))


def _pupil(scene: Scene) -> tuple[Pupil, SegmentedPupil | None]:
    telescope = scene.telescope
    if telescope.pupil is not None:
        values = _map(scene, "telescope.pupil", telescope.pupil)
        try:
            return map_pupil(values, telescope.aperture), None
        except ValueError as error:
            line = mistake(
                scene.name,
                "telescope.pupil",
                f"{scene.inputs[telescope.pupil].name}: {error}",
                "write a square map of transmissions from 0 to 1 that spans the aperture",
            )
            raise InputError(line) from error
    segmented = None
    offset = telescope.obstruction_offset
    vanes, segments = telescope.vanes, telescope.segments
    plain = segments is None and offset is None and telescope.apodisation == 1.0
    if plain and (vanes is None or vanes.count is not None):
        even = None if vanes is None else (vanes.count or 0, vanes.width, vanes.angle)
        return annular_pupil(telescope.aperture, telescope.obstruction, vanes=even), None
    if segments is not None:
        segmented = segmented_pupil(
            segments.rings,
            width=segments.width,
            gap=segments.gap,
            missing_centre=segments.missing_centre,
        )
        pupil = segmented.pupil
    else:
        central = 0.0 if offset is not None else telescope.obstruction
        pupil = annular_pupil(telescope.aperture, central)
    if telescope.obstruction > 0.0 and (offset is not None or segments is not None):
        diameter = telescope.obstruction * telescope.aperture
        pupil = with_obstruction(pupil, diameter=diameter, centre=offset or (0.0, 0.0))
    if vanes is not None:
        pupil = with_vanes(pupil, [Vane(angle, vanes.width) for angle in vanes.directions])
    if telescope.apodisation < 1.0:
        # The key is the amplitude at the rim, the filter's transmission its square.
        pupil = apodised(pupil, gaussian_apodiser(pupil, telescope.apodisation**2))
    return pupil, segmented


def _path(scene: Scene, pupil: Pupil, segmented: SegmentedPupil | None) -> FloatArray | None:
    """The sum of all errors of the wavefront; None where there is none."""
    parts: list[FloatArray] = []
    wavefront, segments = scene.telescope.wavefront, scene.telescope.segments
    if wavefront is not None:
        if wavefront.zernike:
            parts.append(zernike_wavefront(pupil, wavefront.zernike))
        if wavefront.defocus and scene.telescope.focal_length is not None:
            focal_length = scene.telescope.focal_length
            parts.append(defocus_wavefront(pupil, wavefront.defocus, focal_length=focal_length))
        if wavefront.polishing is not None and wavefront.polishing.rms > 0.0:
            polishing = wavefront.polishing
            rng = np.random.default_rng([polishing.seed, _POLISHING])
            parts.append(
                polishing_wavefront(pupil, rms=polishing.rms, slope=polishing.slope, rng=rng)
            )
        if wavefront.file is not None:
            parts.append(_wavefront_map(scene, wavefront.file, pupil))
    if segmented is not None and segments is not None and (segments.piston or segments.tip_tilt):
        errors = draw_segment_errors(
            len(segmented.centres),
            piston=segments.piston,
            tip_tilt=segments.tip_tilt,
            rng=np.random.default_rng([segments.seed, _SEGMENTS]),
        )
        parts.append(segment_wavefront(segmented, errors))
    return np.sum(parts, axis=0) if parts else None


def _field(scene: Scene) -> FieldAberration | None:
    errors = scene.telescope.field
    if errors is None or not (errors.coma or errors.curvature):
        return None
    return FieldAberration(coma=errors.coma, curvature=errors.curvature)


def _map(scene: Scene, key: str, name: str) -> FloatArray:
    source = scene.inputs[name]
    try:
        return read_picture(source.read(), source.name)
    except InputError as error:
        lines = [mistake(scene.name, key, line) for line in error.lines]
        raise InputError(*lines) from error


def _wavefront_map(scene: Scene, name: str, pupil: Pupil) -> FloatArray:
    """A map of the wavefront in nm, which may be NaN where no light passes."""
    key, source = "telescope.wavefront.file", scene.inputs[name]
    try:
        return map_wavefront(read_map(source.read(), source.name) * 1e-9, pupil)
    except ValueError as error:
        line = mistake(
            scene.name,
            key,
            f"{source.name}: {error}",
            "write a square FITS map in nm that spans the aperture, finite where light passes",
        )
        raise InputError(line) from error
