"""Speckle interferometry: a pair from the mean power spectrum of a cube of short exposures.

The pair multiplies the power spectrum of a single star by its fringes (`simimg.resolving.fringes`).
The single star is another one seen in the same night, or the model: the cube's own telescope, air
and pixels with a star of our own, in air drawn anew. Which of the two stars is the brighter comes
from the lopsidedness of the images where the light allows, else the position angle may be half a
turn off and the record says so. Verdicts are about the limits of the pupil at the band, those that
this reduction can reach. It is taken for granted that the frames show one star, single or double.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from math import atan2, degrees, erfc, hypot, isfinite, log10, nan, radians, sqrt
from typing import Any

import numpy as np
import scipy.fft

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.brightness import dark_electrons, sky_electrons
from simimg.assembly.detector import camera_settings
from simimg.assembly.instants import SceneInstants
from simimg.assembly.objects import inventory
from simimg.assembly.places import FieldGeometry, field_geometry
from simimg.assembly.train import Train, assemble_train
from simimg.camera.multiplication import excess_noise
from simimg.cube import Cube
from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.imaging.sources import Sources, one_point
from simimg.resolving.fringes import Band, Fringes, fit_fringes, lopsidedness, noise_level
from simimg.resolving.limits import dark_ring
from simimg.resolving.measure import FrameMeasurement, named_pairs
from simimg.resolving.pairlimits import PairLimits
from simimg.resolving.psfquality import PsfReport
from simimg.resolving.records import CriterionVerdict, PairMeasurement
from simimg.resolving.resolution import Directions, to_arcsec
from simimg.resolving.specklesums import FEWEST, SpeckleSums, speckle_sums
from simimg.resolving.verdict import SURELY_DOUBLE, probability_beyond, verdict
from simimg.scene.file import scene_from_record
from simimg.scene.model import Scene

REFERENCE_FRAMES = 600
"""Frames of the model's single star, more than most cubes have, so that its error is less."""

REFERENCE_STREAM = 104
"""Stream of the seed that the model's air has."""

SETTLED = 3.0
"""Errors of lopsidedness from which it is certain which star is the brighter."""

_SPACED = 10  # frames from one of the model's to the next
_LOWEST, _HIGHEST = 1.3, 0.92  # of r0/wavelength, of the limit
_REACH = 2.5  # of the seeing's width


@dataclass(frozen=True, eq=False)
class _Observed:
    """A cube with what is known of it."""

    cube: Cube
    scene: Scene
    train: Train
    geometry: FieldGeometry
    gain: float
    bias: float
    background: float
    noise: float
    columns: slice

    @classmethod
    def of(cls, cube: Cube) -> _Observed:
        scene = cube_scene(cube)
        train = assemble_train(scene)
        settings = camera_settings(scene)
        readout = settings.readout
        gain = settings.gain / readout.em_gain
        background = sky_electrons(scene, area=train.pupil.area) + dark_electrons(scene)
        _, rows, columns = cube.shape
        seen = slice(readout.prescan, columns - readout.overscan)
        reading = (settings.read_noise / readout.em_gain) ** 2 + gain**2 / 12.0
        pixels = rows * (seen.stop - seen.start)
        noise = pixels * (reading + background * excess_noise(readout.em_gain))
        return cls(
            cube, scene, train, field_geometry(scene), gain, settings.bias, background, noise, seen
        )

    def sums(self) -> SpeckleSums:
        return speckle_sums(
            (frame[:, self.columns] for frame in self.cube),
            len(self.cube),
            bias=self.bias,
            gain=self.gain,
            background=self.background,
        )

    def known_noise(self, sums: SpeckleSums) -> float:
        assert self.scene.camera is not None
        excess = excess_noise(camera_settings(self.scene).readout.em_gain)
        return self.noise + excess * float(sums.electrons.mean())

    def band(self) -> Band:
        limit = self.train.pupil.diameter / self.train.wavelength * self.geometry.pixel_scale
        low = 0.05 * limit
        if self.train.fried is not None:
            low = self.train.fried / self.train.wavelength * self.geometry.pixel_scale * _LOWEST
        # Beyond the pixels' own limit frequencies fold back.
        high = min(_HIGHEST * limit, 0.5)
        return Band(min(max(low, 0.05 * limit), 0.4 * high), high, limit)


def cube_scene(cube: Cube) -> Scene:
    """The scene that a cube carries.

    Raises
    ------
    InputError
        It carries none.
    """
    if not cube.scene_files:
        what = "carries no scene, without which neither telescope nor noise are known"
        raise InputError(mistake("cube", "", what, "give a cube that simimg made"))
    return scene_from_record(cube.scene_files, name="cube", directory=cube.directory)


def measure_speckle(cube: Cube, *, reference: Cube | None = None) -> FrameMeasurement:
    """Measure the pair that a cube shows.

    Parameters
    ----------
    cube : Cube
        Of one pair, with the scene that made it.
    reference : Cube, optional
        Of a single star, with the same pixels; the model unless given.

    Returns
    -------
    FrameMeasurement
        One pair.

    Raises
    ------
    InputError
        Too few frames, a reference of another shape, pixels too coarse, or a cube without a scene.
    """
    for one in (cube, *(() if reference is None else (reference,))):
        if len(one) < FEWEST:
            what = f"has {len(one)} frames, and speckles need at least {FEWEST}"
            raise InputError(mistake("cube", "exposure.count", what, "give a longer cube"))
    seen = _Observed.of(cube)
    sums, band = seen.sums(), seen.band()
    if reference is None:
        single = _model_power(seen, sums.shape)
    else:
        other = _Observed.of(reference)
        theirs = other.sums()
        if theirs.shape != sums.shape:
            what = f"has frames of {theirs.shape[::-1]} pixels, the cube of {sums.shape[::-1]}"
            raise InputError(mistake("reference", "", what, "give one of the same pixels"))
        power = theirs.mean()
        single = power - noise_level(power, sums.shape, band, other.known_noise(theirs))
    reach = _REACH * _blur(seen)
    reach = min(max(reach, 3.0 / band.limit), 0.45 * min(sums.shape))
    try:
        fringes = fit_fringes(sums, single, band=band, noise=seen.known_noise(sums), reach=reach)
    except ValueError as error:
        mend = "use finer pixels or a larger frame"
        raise InputError(mistake("cube", "camera.pixels", str(error), mend)) from error
    return _answer(seen, sums, fringes)


def _blur(seen: _Observed) -> float:
    """Width of the seeing in pixels."""
    train = seen.train
    size = train.pupil.diameter if train.fried is None else train.fried
    return train.wavelength / size / seen.geometry.pixel_scale


def _model_power(seen: _Observed, shape: tuple[int, int]) -> FloatArray:
    """Mean power spectrum of a single star in other air, of unit light and without noise."""
    rows, columns = shape
    found = inventory(seen.scene, train=seen.train)
    star = Sources(one_point((columns - 1) / 2.0, (rows - 1) / 2.0, 1.0, seen.train.first))
    instants = SceneInstants(seen.scene, seen.train, found, sources=star, stream=REFERENCE_STREAM)
    sky = sky_electrons(seen.scene, area=seen.train.pupil.area)
    total: AnyArray = np.zeros(0)
    for index in range(REFERENCE_FRAMES):
        image = instants.light(instants.phases(_SPACED * index)).astype(np.float64) - sky
        own = scipy.fft.rfft2(image)
        power = own.real**2 + own.imag**2
        total = total + power if total.size else power
    even = seen.train.pupil.round and seen.train.aperture.path is None
    if even and seen.scene.exposure is not None and seen.scene.exposure.substeps == 1:
        total = _round(total, columns)
    return np.asarray(total / REFERENCE_FRAMES)


def _round(power: FloatArray, columns: int) -> FloatArray:
    """A half-plane power spectrum averaged over the turns and mirrors that keep the grid.

    That of a round pupil in still air is round; of a few hundred frames it is not yet.
    """
    rows = power.shape[0]
    opposite = (-np.arange(rows)) % rows
    power = 0.5 * (power + power[opposite])
    if rows != columns:
        return power
    rest = power[opposite][:, 1 : columns - power.shape[1] + 1][:, ::-1]
    whole = np.concatenate([power, rest], axis=1)
    return np.asarray((0.5 * (whole + whole.T))[:, : power.shape[1]])


def _answer(seen: _Observed, sums: SpeckleSums, fringes: Fringes) -> FrameMeasurement:
    named = list(_named(seen.cube))
    sense = lopsidedness(sums, fringes.dx, fringes.dy)
    dx, dy = (fringes.dx, fringes.dy) if sense >= 0.0 else (-fringes.dx, -fringes.dy)
    contrast, error = fringes.contrast, sqrt(max(float(fringes.covariance[2, 2]), 0.0))
    difference = _magnitudes(contrast)
    spread = 0.5 * (_magnitudes(contrast - error) - _magnitudes(contrast + error))
    ambiguous = abs(sense) < SETTLED or difference < 2.0 * spread
    geometry, truth = seen.geometry, named[0].truth if named else None
    angle = geometry.position_angle(dx, dy)
    if truth is not None:
        # TRUTH says which star is called the first.
        turned = abs((angle - radians(truth.position_angle_deg) + np.pi) % (2 * np.pi) - np.pi)
        if turned > 0.5 * np.pi:
            angle, dx, dy, difference = (angle + np.pi) % (2 * np.pi), -dx, -dy, -difference
    length = hypot(fringes.dx, fringes.dy)
    along = np.array([fringes.dx, fringes.dy, 0.0]) / length
    across = np.array([-along[1], along[0], 0.0])
    scale = to_arcsec(geometry.pixel_scale)
    variance = float(along @ fringes.covariance @ along) * scale**2
    sideways = float(across @ fringes.covariance @ across)
    single = float(
        np.clip(fringes.trials * 0.5 * erfc(contrast / max(error, 1e-12) / sqrt(2.0)), 0.0, 1.0)
    )
    separation = length * scale
    joint = [[variance, 0.0], [0.0, spread**2]]
    train = seen.train
    pupil = Directions(train.optics, dark_ring=dark_ring(train), saddle=False)
    direction = atan2(dy, dx)
    rayleigh = pupil.resolution(direction).rayleigh_arcsec
    limit = PairLimits(pupil).of(direction, difference, 6.0 * min(spread, 2.0))

    def sparrow_arcsec(differences: FloatArray) -> FloatArray:
        return np.degrees(limit.sparrow_for(differences)) * 3600.0

    verdicts = []
    for one, told in ((rayleigh, rayleigh), (sparrow_arcsec, to_arcsec(limit.sparrow))):
        probability = probability_beyond(
            one,
            separation=separation,
            magnitude_difference=difference,
            covariance=joint,
        )
        verdicts.append(
            CriterionVerdict(
                limit_arcsec=told,
                probability=probability,
                verdict=verdict(probability, probability_single=single),
            )
        )
    x, y = _place(seen, named, dx, dy, difference)
    ra, dec = geometry.to_sky(np.array(x), np.array(y))
    resolved = any(one.verdict == "resolved" for one in verdicts)
    record = PairMeasurement(
        label=named[0].label if named else "",
        x=x,
        y=y,
        ra_deg=degrees(float(ra)),
        dec_deg=degrees(float(dec)),
        separation_arcsec=separation,
        separation_error_arcsec=sqrt(max(variance, 0.0)),
        position_angle_deg=degrees(angle) % 360.0,
        position_angle_error_deg=degrees(sqrt(max(sideways, 0.0)) / length),
        magnitude_difference=difference,
        magnitude_difference_error=spread,
        probability_single=single,
        elongated=single < SURELY_DOUBLE and not resolved,
        ambiguous_180=bool(ambiguous),
        saddle_ratio=nan,
        saddle_ratio_error=nan,
        rayleigh=verdicts[0],
        sparrow=verdicts[1],
        truth=truth,
    )
    width = pupil.resolution(direction).fwhm_arcsec
    return FrameMeasurement(
        pairs=(replace(record, advice=_advice(record)),),
        psf=PsfReport(source="scene", reduced_chi_square=nan, stars=0, fwhm_arcsec=width),
        warnings=tuple(_warnings(seen, len(named))),
    )


def _named(cube: Cube) -> Iterator[Any]:
    """Pairs that TRUTH names within the frames."""
    if cube.truth is not None:
        blank = np.zeros(cube.shape[1:], dtype=np.uint8)
        yield from named_pairs(Frame(counts=blank, truth=cube.truth))


def _place(
    seen: _Observed, named: list[Any], dx: float, dy: float, difference: float
) -> tuple[float, float]:
    """Pixel of the first star: from the mean image's light about its brightest place."""
    total: AnyArray = np.zeros(0)
    for frame in seen.cube:
        total = total + frame if total.size else frame.astype(np.float64)
    light = total / len(seen.cube)
    light = np.maximum(light - np.median(light), 0.0)
    if named:
        x, y = named[0].first
    else:
        y, x = (float(k) for k in np.unravel_index(int(light.argmax()), light.shape))
    reach = max(int(np.ceil(_blur(seen))), 2)
    for _ in range(3):
        rows = slice(max(round(y) - reach, 0), round(y) + reach + 1)
        columns = slice(max(round(x) - reach, 0), round(x) + reach + 1)
        part = light[rows, columns]
        whole = part.sum()
        if not whole > 0.0:
            return x, y
        x = float((part.sum(axis=0) @ (np.arange(part.shape[1]) + columns.start)) / whole)
        y = float((part.sum(axis=1) @ (np.arange(part.shape[0]) + rows.start)) / whole)
        x, y = min(max(x, 0.0), light.shape[1] - 1.0), min(max(y, 0.0), light.shape[0] - 1.0)
    ratio = 10.0 ** (-0.4 * difference)
    share = ratio / (1.0 + ratio)
    return x - share * dx, y - share * dy


def _magnitudes(contrast: float) -> float:
    """Magnitude difference of fringes of a contrast, 0 or more; as for 12 magnitudes below that."""
    if contrast >= 1.0:
        return 0.0
    contrast = max(contrast, 3e-5)
    ratio = (1.0 - sqrt(1.0 - contrast**2)) / contrast
    return -2.5 * log10(ratio)


def _advice(record: PairMeasurement) -> str:
    if not record.probability_single < SURELY_DOUBLE:
        return "No fringes are certain: more frames, or shorter ones, would show fainter ones."
    sense = " Which star is the brighter is not certain." if record.ambiguous_180 else ""
    if not isfinite(record.sparrow.limit_arcsec) or record.sparrow.verdict != "resolved":
        return "Fringes show two stars, closer than the telescope's own limit tells apart." + sense
    return "Fringes show two stars, down to the telescope's own limit." + sense


def _warnings(seen: _Observed, pairs: int) -> Iterator[str]:
    if pairs > 1:
        yield f"the frames show {pairs} pairs, and speckles are taken for those of the first alone"
    if seen.train.pupil.diameter / seen.train.wavelength * seen.geometry.pixel_scale > 0.5:
        yield "pixels are wider than lambda/2D: fine fringes fold back, and errors are too small"
