"""One frame out of a cube, and what it says: the long exposure, recentred, or the lucky frames.

A plain sum is a frame like any other, of a scene whose exposure is all the frames together; its PSF
is that of the long exposure. The PSF of recentred or chosen frames is known from no formula: the
model's single star, seen through air of its own by the same telescope and noise, is chosen and
added in the same way. Either PSF is a mean over more air than the frames saw: their own differs
from it as if it were drawn with few photons, one for each state of the air that they caught. The
fit is told of no more photons than that (`air_electrons`), so that a bright star's errors are those
of the air and no false companion is believed.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace as changed
from typing import Any, Literal

import numpy as np

from simimg.air.layers import effective_wind
from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.atmosphere import scene_layers
from simimg.assembly.detector import camera_settings
from simimg.assembly.instants import SceneInstants
from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.camera.chain import record
from simimg.camera.settings import CameraSettings
from simimg.cube import Cube
from simimg.errors import InputError, mistake
from simimg.frame import Frame, PsfImage
from simimg.imaging.sources import Sources, one_point
from simimg.resolving.given import Given
from simimg.resolving.lucky import Quality, Sharpness, judge_frames, shift_and_add
from simimg.resolving.measure import FrameMeasurement, measure_frame
from simimg.resolving.speckle import REFERENCE_STREAM, cube_scene, measure_speckle
from simimg.scene.file import replace, scene_id, scene_record
from simimg.scene.model import Scene

Method = Literal["sum", "recentred", "lucky", "speckle"]

REFERENCE_FRAMES = 400
"""Frames of the model's single star of which the best are chosen."""

_SPACED = 5
_LEAST_GAIN = 2e-6  # electrons to the count, below which a frame's gain is taken for a mistake


def measure_cube(
    cube: Cube,
    *,
    method: Method,
    keep: float = 0.05,
    quality: Quality = "peak",
    reference: Cube | None = None,
    near: Sequence[tuple[float, float]] | None = None,
) -> FrameMeasurement:
    """Measure the pairs of a cube.

    Parameters
    ----------
    cube : Cube
        With the scene that made it.
    method : {"sum", "recentred", "lucky", "speckle"}
    keep : float, optional
        Share of the frames that is kept, of ``lucky``.
    quality : {"peak", "sharpness"}, optional
        By which they are chosen.
    reference : Cube, optional
        Of a single star, for ``speckle``.
    near : sequence of (x, y), optional
        Places that are measured, too; not of ``speckle``.

    Returns
    -------
    FrameMeasurement

    Raises
    ------
    InputError
        As for `simimg.resolving.measure.measure` and `simimg.resolving.speckle.measure_speckle`.
    """
    if method == "speckle":
        if near:
            mend = "leave out --near"
            raise InputError(mistake("cube", "near", "speckles tell of the whole frame", mend))
        return measure_speckle(cube, reference=reference)
    if method == "sum":
        frame = sum_frame(cube)
    else:
        frame = chosen_frame(cube, method=method, keep=keep, quality=quality)
    scene = cube_scene(cube)
    settings = camera_settings(scene)
    count = int(str(frame.value("NCOMBINE")))
    gain = settings.gain / settings.readout.em_gain
    light = max(float((frame.counts - np.median(frame.counts)).sum()) * gain, 1.0)
    share = min(air_electrons(scene, cube, frame, method=method) / light, 1.0)
    share = max(share, min(_LEAST_GAIN / gain, 1.0))
    noise = settings.read_noise / settings.readout.em_gain * count**0.5
    given = None
    if share < 1.0:
        given = Given(gain=gain * share, read_noise=noise * share, bias=settings.bias)
    found = measure_frame(frame, near=near, given=given)
    if given is None:
        return found
    own = (
        f"{count} frames are too few states of the air to average it: errors are those of "
        f"{light * share:.0f} photons, not of the {light:.3g} that were detected"
    )
    warnings = [text for text in found.warnings if not text.startswith("the background scatters")]
    return changed(found, warnings=(*warnings, own))


def air_electrons(scene: Scene, cube: Cube, frame: Frame, *, method: Method) -> float:
    """Photons that would draw a PSF as roughly as the air did, to an order of magnitude.

    A long exposure is drawn by image motion, along two axes, which changes as the wind crosses the
    aperture and makes half of its width; recentred, by what changes five times as fast. Of lucky
    frames each has speckles of its own: their core is drawn as if each frame brought one photon.

    Parameters
    ----------
    scene : Scene
    cube : Cube
    frame : Frame
        Made of it; of lucky frames with its PSF.
    method : {"sum", "recentred", "lucky"}
    """
    count = int(str(frame.value("NCOMBINE")))
    if scene.air is None or scene.exposure is None:
        return float("inf")
    if method == "lucky" and frame.psf is not None:
        psf = frame.psf.image
        return count / float(psf[psf > 0.5 * psf.max()].sum())
    elapsed = len(cube) * ((scene.exposure.time or 0.0) + scene.exposure.overhead)
    crossings = elapsed * effective_wind(scene_layers(scene.air)) / scene.telescope.aperture
    return 4.0 * max(crossings, 1.0) * (5.0 if method == "recentred" else 1.0)


def sum_frame(cube: Cube) -> Frame:
    """The sum of all frames: one exposure as long as all of them.

    Raises
    ------
    InputError
        The cube carries no scene.
    """
    scene = cube_scene(cube)
    total = np.zeros(cube.shape[1:])
    for frame in cube:
        total += frame
    return _as_exposure(cube, scene, total, len(cube))


def chosen_frame(
    cube: Cube, *, method: Method, keep: float = 0.05, quality: Quality = "peak"
) -> Frame:
    """The sum of the best frames laid on their brightest place, or of all on their centroids.

    The frame has the PSF with which it is to be measured.

    Parameters
    ----------
    cube : Cube
    method : {"recentred", "lucky"}
    keep, quality
        As for `measure_cube`.

    Raises
    ------
    InputError
        The cube carries no scene.
    ValueError
        A share that is not above 0 and at most 1, or an unknown quality.
    """
    scene = cube_scene(cube)
    settings = camera_settings(scene)
    sharp = judge_frames(cube, background=settings.bias, quality=quality)
    places, chosen = _chosen(sharp, method, keep)
    middle = np.median(places[chosen], axis=0)
    target = round(float(middle[0])), round(float(middle[1]))
    total = shift_and_add(
        cube, places, chosen=chosen, target=target, background=round(settings.bias)
    )
    made = _as_exposure(cube, scene, total, len(chosen))
    psf = _model_psf(scene, settings, cube.shape[1:], method=method, keep=keep, quality=quality)
    # Without a scene the frame is measured with its own PSF.
    return changed(made, scene_files=(), psf=PsfImage(psf, 1))


def _chosen(sharp: Sharpness, method: Method, keep: float) -> tuple[FloatArray, AnyArray]:
    if method == "recentred":
        return sharp.centroid, np.arange(sharp.quality.size)
    return sharp.brightest.astype(float), sharp.best(keep)


def _model_psf(
    scene: Scene,
    settings: CameraSettings,
    shape: tuple[int, int],
    *,
    method: Method,
    keep: float,
    quality: Quality,
) -> FloatArray:
    """Image of the model's single star, chosen and added as the frames are; of sum 1."""
    train = assemble_train(scene)
    found = inventory(scene, train=train)
    geometry = found.geometry
    x, y = (geometry.columns - 1) // 2, (geometry.rows - 1) // 2
    light = float(found.electrons.sum())
    star = Sources(one_point(float(x), float(y), light, train.first))
    instants = SceneInstants(scene, train, found, sources=star, stream=REFERENCE_STREAM)
    pure = [instants.light(instants.phases(_SPACED * index)) for index in range(REFERENCE_FRAMES)]
    assert scene.exposure is not None

    def counted() -> Iterator[AnyArray]:
        assert scene.exposure is not None
        for index, image in enumerate(pure):
            # Frames are chosen as noise lets them be; numbers that no cube has.
            number = 10**9 + index
            yield record(image, settings=settings, seed=scene.exposure.seed, frame=number).counts

    sharp = judge_frames(counted(), background=settings.bias, quality=quality)
    places, chosen = _chosen(sharp, method, keep)
    places = places - (0, settings.readout.prescan)
    image = shift_and_add(pure, places, chosen=chosen, target=(y, x), background=0.0)
    half = min(x, y, shape[0] - 1 - y, geometry.columns - 1 - x)
    image = image[y - half : y + half + 1, x - half : x + half + 1]
    image = np.maximum(image - np.median(image[[0, -1]]), 0.0)
    return np.asarray(image / image.sum())


def _as_exposure(cube: Cube, scene: Scene, total: FloatArray, count: int) -> Frame:
    """A sum of counts as the frame of one exposure of so many frames' time."""
    assert scene.camera is not None
    bias = camera_settings(scene).bias
    counts = np.rint(total - (count - 1) * bias)
    longer = replace(scene, _changes(scene, count))
    header: dict[str, object] = dict(cube.header)
    for key in ("FRAMES", "CYCLE", "SUBSTEPS", "SATURATE"):
        header.pop(key, None)
    for key, factor in (
        ("EXPTIME", count),
        ("RDNOISE", count**0.5),
        ("DARKSIG", count),
        ("SKYLVL", count),
    ):
        _scale(header, key, float(factor))
    header["NCOMBINE"] = (count, "short exposures summed")
    header["SCENEID"] = (scene_id(longer), "sha256 of the scene")
    truth = None
    if cube.truth is not None:
        truth = cube.truth.copy()
        for name in ("electrons", "electrons_in_frame"):
            truth[name] = truth[name] * count
    return Frame(
        counts=counts.astype(np.int32),
        header=header,
        wcs=cube.wcs,
        truth=truth,
        scene_files=tuple(scene_record(longer)),
        simulated=cube.simulated,
        directory=cube.directory,
    )


def _scale(header: dict[str, object], key: str, factor: float) -> None:
    card = header.get(key)
    if isinstance(card, tuple) and isinstance(card[0], int | float):
        header[key] = (card[0] * factor, card[1])


def _changes(scene: Scene, count: int) -> dict[str, Any]:
    """What makes a scene of one frame that of a sum of frames."""
    assert scene.exposure is not None
    assert scene.camera is not None
    changes: dict[str, Any] = {
        "exposure.frame_time": None,
        "exposure.substeps": None,
        "exposure.count": None,
        "exposure.time": f"{(scene.exposure.time or 0.0) * count!r} s",
        "camera.bit_depth": 31,
        "camera.full_well": None,
        "camera.read_noise": f"{scene.camera.read_noise * count**0.5!r} electron",
    }
    document: Mapping[str, Any] = scene.document
    if "electrons" in document.get("sky", {}):
        changes["sky.electrons"] = float(scene.sky.electrons or 0.0) * count if scene.sky else 0.0
    for kind, tables in document.items():
        if not isinstance(tables, list):
            continue
        for number, table in enumerate(tables):
            told = table.get("electrons") if isinstance(table, Mapping) else None
            if isinstance(told, list):
                changes[f"{kind}.{number}.electrons"] = [float(one) * count for one in told]
            elif isinstance(told, int | float):
                changes[f"{kind}.{number}.electrons"] = float(told) * count
    # A key that is not there needs no taking away.
    return {
        name: value
        for name, value in changes.items()
        if value is not None or name.split(".")[1] in document.get(name.split(".")[0], {})
    }
