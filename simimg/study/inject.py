"""Objects of a scene put into a frame that exists, ours or anyone's.

The objects alone are added, with the Poisson noise of their own electrons: the frame has its sky,
dark signal, bias and read noise already. They go where the frame's coordinates say, with the PSF
that the scene's telescope, air and band make at the frame's pixel scale, and become counts by the
frame's gain. Whole counts stay whole: what a converter cut off a pixel is put back as an even draw
of one count before the sum is rounded once more, so that neither faint wings are lost nor a second
rounding noise comes in. A pixel ends at the frame's own saturation level.

Electrons, counts, seconds; angles in radians, places in pixels from 0 at the centre of the first.
"""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.assembly.truth import truth_table
from simimg.camera.multiplication import multiply
from simimg.camera.poisson import arrivals
from simimg.camera.streams import BLOCK_ROWS, Stage, stream
from simimg.errors import InputError, mistake
from simimg.fits.rewriting import Original, read_original, write_changed
from simimg.frame import Frame
from simimg.imaging.render import expected_image
from simimg.resolving.given import Given
from simimg.resolving.headers import (
    header_excess,
    header_gain,
    header_saturation,
    header_section,
    header_time,
    header_unit,
    number,
)
from simimg.resolving.observation import foreign_sky
from simimg.resolving.skyplane import Sky
from simimg.scene.file import requirements_to_expose, scene_id
from simimg.scene.model import Scene
from simimg.study.injectplaces import matched_scene, placed_objects
from simimg.study.injecttruth import grown_images, grown_truth
from simimg.version import __version__

if TYPE_CHECKING:
    from astropy.table import Table

_SAYS = (
    "injected: true for an object that simimg put into a frame that existed; its electrons are of "
    "the frame's exposure.",
)


@dataclass(frozen=True, eq=False)
class Injection:
    """A frame with a scene's objects in it.

    Attributes
    ----------
    original : Original
        The file as it was.
    beside : mapping of str to ndarray
        EXPECTED and MASK of a frame of ours with what was put in, as they are to be stored.
    stored : ndarray, shape (rows, columns)
        The image as it is to be stored.
    expected : ndarray, shape (rows, columns)
        Expected electrons that were put in.
    truth : astropy.table.Table
        What the frame's TRUTH held, then the objects put in, with ``injected`` true.
    added : int
        Objects put in.
    gain : float
        Electrons to the count.
    saturation : float
        Counts at which a pixel ends.
    pixel_scale : float
        Side of a pixel (rad).
    saturated : int
        Pixels that reached the saturation level by what was put in.
    seed : int
    scene_id : str
        Of the scene whose objects were put in.
    notes : tuple of str
        What was assumed.
    """

    original: Original
    stored: AnyArray
    expected: FloatArray
    truth: Table
    added: int
    gain: float
    saturation: float
    pixel_scale: float
    saturated: int
    seed: int
    scene_id: str
    notes: tuple[str, ...] = ()
    beside: Mapping[str, AnyArray] = field(default_factory=dict)

    def write(self, path: str | os.PathLike[str], *, overwrite: bool = False) -> None:
        """Write the file again with the image changed and the truth grown: whole, or not at all.

        Raises
        ------
        InputError, RunError
            As `simimg.frame.Frame.write`.
        """
        write_changed(
            path,
            self.original,
            stored=self.stored,
            truth=self.truth,
            cards={"SIMULATE": (True, "holds simulated objects")},
            history=[
                f"simimg {__version__} put {self.added} simulated objects into this image, seed "
                f"{self.seed}, {self.gain:.9g} electron/adu: rows of TRUTH with injected = T; "
                f"scene of sha256 {self.scene_id}"
            ],
            truth_says=_SAYS,
            beside=self.beside,
            overwrite=overwrite,
        )


def inject(
    path: str | os.PathLike[str],
    scene: Scene,
    *,
    hdu: int | str | None = None,
    given: Given | None = None,
    seed: int | None = None,
    memory_bytes: int | None = None,
    threads: int | None = None,
) -> Injection:
    """Put the objects of a scene into a frame.

    Objects placed by ``x`` and ``y`` go to those pixels of the frame. Objects placed by ``ra`` and
    ``dec``, and by ``east`` and ``north`` in a scene that says where it points, go where the
    frame's coordinates show that place; without [pointing] in the scene ``east`` and ``north``
    count from the middle of the frame. The exposure time is the frame's where its header tells it.

    Parameters
    ----------
    path : path
        A FITS file with a 2-D image.
    scene : Scene
        Its objects are put in; its telescope, air and band make the PSF and the electrons. Its sky,
        its camera's noise and its pixels are of no effect.
    hdu : int or str, optional
        Number or name of the HDU that holds the image.
    given : Given, optional
        What goes before the frame's own header.
    seed : int, optional
        Of the objects' noise; the scene's unless given.
    memory_bytes, threads : int, optional
        As for `simimg.exposure.prepare`.

    Returns
    -------
    Injection

    Raises
    ------
    InputError
        A file that cannot be read, a frame that tells neither gain nor pixel scale, a scene that
        does not go with it.
    """
    given = given or Given()
    where = os.fspath(path)
    original = read_original(path, hdu=hdu)
    frame = Frame.read(path, hdu=hdu)
    notes: list[str] = []
    gain = _gain(frame, given, where, notes)
    sky = _named(where, frame, given, notes)
    matched = matched_scene(scene, frame, sky, notes)
    missing = requirements_to_expose(matched)
    if missing:
        raise InputError(*missing)
    train = assemble_train(matched)
    objects, ra, dec = placed_objects(matched, inventory(matched, train=train), frame, sky, where)
    geometry = objects.geometry
    expected = expected_image(
        train.basis,
        objects.sources,
        columns=geometry.columns,
        rows=geometry.rows,
        pixel_scale=geometry.pixel_scale,
        memory_bytes=memory_bytes,
        threads=threads or os.cpu_count() or 1,
    ).astype(np.float64)
    lit = header_section(frame, "DATASEC", "TRIMSEC")
    if lit is not None:
        light = np.zeros_like(expected)
        light[lit] = expected[lit]
        expected = light
    told = header_saturation(frame)
    saturation = given.saturation
    if saturation is None:
        saturation = told.value if told is not None else original.value_range[1]
    exposure = frame.value("EXPNUM", 0)
    if seed is None:
        seed = scene.exposure.seed if scene.exposure is not None else 0
    stored, full = _with_electrons(
        original,
        expected,
        gain=_gains(frame, given, gain),
        multiplied=_multiplied(frame),
        saturation=saturation,
        seed=seed,
        frame=exposure if isinstance(exposure, int) and 0 <= exposure < 2**31 else 0,
    )
    rows = truth_table(objects, train)
    if len(objects) and not rows["inside"].any():
        notes.append("none of the objects lies on the frame")
    rows["ra"], rows["dec"] = np.degrees(ra), np.degrees(dec)
    rows["ra"].unit = rows["dec"].unit = "deg"
    return Injection(
        original=original,
        stored=frozen(stored),
        expected=frozen(expected),
        truth=grown_truth(original.truth, rows, original.name),
        added=len(objects),
        gain=gain,
        saturation=float(saturation),
        pixel_scale=sky.pixel_scale,
        saturated=int(full.sum()),
        seed=seed,
        scene_id=scene_id(scene),
        notes=tuple(notes),
        beside=grown_images(original, frame, expected, full),
    )


def _named(where: str, frame: Frame, given: Given, notes: list[str]) -> Sky:
    try:
        return foreign_sky(frame, given, notes)
    except InputError as error:
        lines = (line.removeprefix("frame: ") for line in error.lines)
        raise InputError(*(f"{where}: {line}" for line in lines)) from error


def _gain(frame: Frame, given: Given, where: str, notes: list[str]) -> float:
    """Electrons to the count: given or told, never guessed."""
    if given.gain is not None:
        return given.gain
    unit, rate = header_unit(frame)
    time = header_time(frame) if rate else 1.0
    if time is None:
        what = "its unit is a rate and no exposure time is in its header"
        raise InputError(mistake(where, "gain", what, "give --gain, electrons to one of its units"))
    if unit == "electron":
        return time
    told, said = header_gain(frame)
    notes += said
    if told is None:
        what = "no gain is in its header"
        raise InputError(mistake(where, "gain", what, "give --gain, electrons to the count"))
    return told.value * time


def _gains(frame: Frame, given: Given, gain: float) -> FloatArray:
    """Electrons to the count of each pixel: where several amplifiers read, each its own.

    Told by ``GAIN1``, ``GAIN2``, ... for the sections ``AMPSEC1``, ``AMPSEC2``, ...
    """
    gains = np.full(frame.counts.shape, gain)
    if given.gain is not None:
        return gains
    for amplifier in range(1, 17):
        section = header_section(frame, f"AMPSEC{amplifier}")
        own = number(frame, f"GAIN{amplifier}")
        if section is not None and own is not None and own > 0.0:
            gains[section] = own
    return gains


def _multiplied(frame: Frame) -> float:
    """Gain of a multiplying register, by whose excess the electrons' noise grows; 1 for none."""
    gain = number(frame, "EMGAIN")
    return gain if gain is not None and header_excess(frame) > 1.0 else 1.0


def _with_electrons(
    original: Original,
    expected: FloatArray,
    *,
    gain: FloatArray,
    multiplied: float,
    saturation: float,
    seed: int,
    frame: int,
) -> tuple[AnyArray, AnyArray]:
    """The stored image with electrons added, and which pixels they filled."""
    before = original.stored
    stored = np.array(before)
    least, most = original.value_range
    whole = before.dtype.kind != "f"
    filled = np.zeros(before.shape, dtype=bool)
    for block in range(-(-before.shape[0] // BLOCK_ROWS)):
        rows = slice(block * BLOCK_ROWS, (block + 1) * BLOCK_ROWS)
        electrons = np.empty(expected[rows].shape)
        rng = stream(seed, frame=frame, stage=Stage.INJECTED, block=block)
        arrivals(np.array(expected[rows]), rng, out=electrons)
        if multiplied > 1.0:
            multiply(electrons, multiplied, rng, well=None)
            electrons /= multiplied
        value = original.values(before[rows])
        level = value + electrons / gain[rows]
        ceiling = np.minimum(np.maximum(saturation, value), most)
        touched = (electrons > 0.0) & np.isfinite(value)
        level = np.clip(level, least, ceiling)
        if whole:
            # The floor of a value plus an even draw from 0 to 1 has the value as its mean.
            draws = stream(seed, frame=frame, stage=Stage.INJECTED_ROUNDING, block=block).random(
                level.shape
            )
            steps = (level - original.zero) / original.scale
            top = (ceiling - original.zero) / original.scale
            made = np.floor(np.where(touched, steps, 0.0) + draws)
            highest = np.floor(np.where(touched, top, 0.0))
            made = np.minimum(made, highest) if original.scale > 0.0 else made
        else:
            made = (level - original.zero) / original.scale
        full = made * original.scale + original.zero >= (
            np.floor(saturation) if whole else saturation
        )
        filled[rows] = touched & full & (value < saturation)
        # A pixel whose whole number came out lower than it was took nothing in.
        stored[rows][touched] = made[touched].astype(before.dtype)
    return stored, filled
