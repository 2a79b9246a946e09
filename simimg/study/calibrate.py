"""Calibration frames of a scene's camera: what an observer takes by day to reduce the night.

Bias frames of no time and no light; dark frames of the scene's exposure time; flats of an even
light; ramps of growing exposure to that light, and pairs of flats for photon transfer. Serial
number and fixed patterns are those of the science frames, the noise of each frame is its own.
"""

from __future__ import annotations

import os
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from simimg.assembly.brightness import exposure_time
from simimg.camera.calibration import (
    flat_electrons,
    ramp_electrons,
    recordable_electrons,
    transfer_electrons,
)
from simimg.camera.chain import record
from simimg.errors import InputError, mistake
from simimg.exposure import Prepared, frame_header, prepare
from simimg.frame import Frame
from simimg.mosaic import Mosaic, prepare_mosaic
from simimg.scene.file import replace as changed
from simimg.scene.file import scene_id
from simimg.scene.model import Scene
from simimg.scene.table import MANY

FLAT_TIME: Final = 5.0
"""Seconds of a flat unless told otherwise."""

_FIRST: Final = {"bias": 1, "dark": 2, "flat": 3, "ramp": 4, "transfer": 5}
_EACH: Final = 10_000_000
"""Numbers of exposures that each kind has for its noise; below are those of science frames."""

MOST_FRAMES: Final = 100_000


@dataclass(frozen=True)
class CalibrationFrame:
    """One frame to be made.

    Attributes
    ----------
    file : str
        Its name.
    kind : str
        bias, dark or flat: OBSTYPE in the header.
    time : float
        Exposure (s).
    light : float
        Mean electrons of light in a pixel of the detector.
    number : int
        Of the exposure among its like, from 0.
    draw : int
        Number of the exposure for its noise.
    """

    file: str
    kind: str
    time: float
    light: float
    number: int
    draw: int


@dataclass(frozen=True, eq=False)
class Calibration:
    """The calibration frames of a scene's camera.

    Attributes
    ----------
    scene : Scene
        As given.
    names : tuple of str
        Of the detectors of a mosaic; empty for a single camera.
    detectors : tuple of Prepared
        The camera before no sky, or each detector of a mosaic.
    frames : tuple of CalibrationFrame
    """

    scene: Scene
    names: tuple[str, ...]
    detectors: tuple[Prepared, ...]
    frames: tuple[CalibrationFrame, ...]

    def frame(self, one: CalibrationFrame, *, threads: int | None = None) -> Frame | Mosaic:
        """Record one of the frames; of a mosaic all detectors at once."""
        made = tuple(self._recorded(prepared, one, threads) for prepared in self.detectors)
        return Mosaic(self.names, made, truth=None) if self.names else made[0]

    def _recorded(self, prepared: Prepared, one: CalibrationFrame, threads: int | None) -> Frame:
        settings = replace(prepared.settings, time=one.time)
        if one.kind != "flat":
            settings = replace(settings, shutter=None)
        light = np.full(prepared.light.shape, one.light, dtype=np.float32)
        seed = self.scene.exposure.seed if self.scene.exposure is not None else 0
        recorded = record(
            light,
            settings=settings,
            seed=seed,
            frame=prepared.first_draw + one.draw,
            threads=threads or os.cpu_count() or 1,
        )
        return Frame(
            counts=recorded.counts,
            header=self._header(replace(prepared, settings=settings), one),
            mask=recorded.mask if recorded.mask.any() else None,
        )

    def _header(self, prepared: Prepared, one: CalibrationFrame) -> dict[str, object]:
        header = frame_header(prepared, one.number)
        header["OBJECT"] = (one.kind, "no object")
        header["OBSTYPE"] = (one.kind, "kind of frame")
        header["EXPTIME"] = (one.time, "[s] exposure time")
        header["DARKSIG"] = (
            prepared.settings.dark_current * one.time,
            "[electron] mean dark signal in a pixel",
        )
        header["SCENEID"] = (scene_id(self.scene), "sha256 of the scene")
        # Of the sky and the night nothing holds; no clock tells when a calibration is taken.
        absent = ["SKYLVL", "SEEING", "AIRMASS", "DATE-OBS", "MJD-OBS", "TIMESYS"]
        if one.kind == "flat":
            light = one.light * prepared.settings.readout.binning**2
            header["FLATLVL"] = (light, "[electron] mean light in a pixel of the frame")
        else:
            absent += ["FILTER", "WAVELEN"]
        return {key: value for key, value in header.items() if key not in absent}

    def made_before(self, one: CalibrationFrame, path: str | os.PathLike[str]) -> bool:
        """Whether a file holds this very frame, by its header."""
        try:
            frame = Frame.read(path)
        except InputError:
            return False
        first = self.detectors[0]
        wanted = self._header(replace(first, settings=replace(first.settings, time=one.time)), one)
        from simimg.version import __version__

        told = {"CREATOR": f"simimg {__version__}", "EXPNUM": one.number}
        for key in ("OBSTYPE", "EXPTIME", "SCENEID", "SEED", "FLATLVL"):
            value = wanted.get(key)
            told[key] = value[0] if isinstance(value, tuple) else None
        return all(frame.value(key) == value for key, value in told.items())


def calibration(
    scene: Scene,
    *,
    bias: int = 0,
    dark: int = 0,
    flat: int = 0,
    ramp: int = 0,
    transfer: int = 0,
    flat_time: float = FLAT_TIME,
    threads: int | None = None,
) -> Calibration:
    """Plan the calibration frames of a scene's camera.

    Parameters
    ----------
    scene : Scene
    bias, dark, flat : int, optional
        Frames of each kind.
    ramp : int, optional
        Flats of growing exposure, up to all that a pixel can record.
    transfer : int, optional
        Pairs of flats, each of its own level.
    flat_time : float, optional
        Exposure of a flat (s); the light is such that it reaches half of what a pixel can record.
    threads : int, optional

    Raises
    ------
    InputError
        The scene lacks what an exposure needs; dark frames without an exposure time; more than
        `MOST_FRAMES`.
    """
    counts = {"bias": bias, "dark": dark, "flat": flat, "ramp": ramp, "transfer": 2 * transfer}
    if sum(counts.values()) > MOST_FRAMES:
        what = f"{sum(counts.values())} frames are too many"
        raise InputError(mistake(scene.name, "", what, f"ask for at most {MOST_FRAMES}"))
    time = exposure_time(scene)
    if dark and time == 0.0:
        raise InputError(
            mistake(
                scene.name,
                "exposure.time",
                "is required for dark frames and missing",
                'add time = "30 s" to [exposure], or leave out the dark frames',
            )
        )
    unlit = _dark_scene(scene)
    if scene.detector:
        several = prepare_mosaic(unlit, threads=threads)
        names, detectors = several.names, several.detectors
    else:
        names, detectors = (), (prepare(unlit, threads=threads),)
    # One light shines on all detectors of a mosaic: none may get too much.
    settings = min((one.settings for one in detectors), key=recordable_electrons)
    level = flat_electrons(settings)

    def of(kind: str, file: str, number: int, seconds: float, light: float) -> CalibrationFrame:
        shown = kind if kind in ("bias", "dark") else "flat"
        draw = _FIRST[kind] * _EACH + number
        return CalibrationFrame(file, shown, seconds, light, number, draw)

    frames = [of("bias", f"bias-{_n(i, bias)}.fits", i, 0.0, 0.0) for i in range(bias)]
    frames += [of("dark", f"dark-{_n(i, dark)}.fits", i, time, 0.0) for i in range(dark)]
    frames += [of("flat", f"flat-{_n(i, flat)}.fits", i, flat_time, level) for i in range(flat)]
    for i, light in enumerate(ramp_electrons(settings, ramp)):
        seconds = flat_time * float(light) / level
        frames.append(of("ramp", f"ramp-{_n(i, ramp)}.fits", i, seconds, float(light)))
    for i, light in enumerate(transfer_electrons(settings, transfer)):
        seconds = flat_time * float(light) / level
        for j, letter in enumerate("ab"):
            name = f"transfer-{_n(i, transfer)}{letter}.fits"
            frames.append(of("transfer", name, 2 * i + j, seconds, float(light)))
    return Calibration(scene, names, detectors, tuple(frames))


def _n(number: int, count: int) -> str:
    return f"{number:0{max(3, len(str(count - 1)))}d}"


def _dark_scene(scene: Scene) -> Scene:
    """The scene with nothing to be seen."""
    document = scene.document
    changes: dict[str, object] = {
        name: None for name in (*MANY, "sky", "study") if name in document
    }
    pointing = document.get("pointing")
    if isinstance(pointing, dict):
        moving = ("track", "drift", "rotation_rate")
        changes |= {f"pointing.{name}": None for name in moving if name in pointing}
    exposure = document.get("exposure")
    if isinstance(exposure, dict) and "dither" in exposure:
        changes["exposure.dither"] = None
    return changed(scene, changes) if changes else scene
