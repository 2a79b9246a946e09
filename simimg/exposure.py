"""expose: a scene becomes a frame.

The expected electrons of objects and sky are computed once, exactly; the camera then counts them.
Everything random comes from the scene's seed and the number of the exposure, so that the same
scene gives the same frame.
"""

from __future__ import annotations

import os
from collections.abc import Collection
from dataclasses import dataclass, replace
from datetime import datetime, timedelta

import numpy as np

from simimg.arrays import AnyArray
from simimg.assembly.brightness import dark_electrons, sky_electrons
from simimg.assembly.detector import camera_settings
from simimg.assembly.dither import aimed_geometry, dither_offset
from simimg.assembly.image import scene_image
from simimg.assembly.objects import Inventory, inventory
from simimg.assembly.places import FieldGeometry, field_geometry
from simimg.assembly.sections import written_geometry, written_truth
from simimg.assembly.train import Train, assemble_train
from simimg.assembly.truth import truth_table
from simimg.camera.binning import binned
from simimg.camera.cards import detector_cards
from simimg.camera.chain import CameraSettings, record
from simimg.errors import InputError, mistake
from simimg.frame import Frame, PsfImage
from simimg.imaging.profile import sampled_psf
from simimg.scene.file import requirements_to_expose, scene_id, scene_record
from simimg.scene.model import Scene

PSF_OVERSAMPLING = 4
_PSF_HALF_WIDTH = 16

COUNTED = (91e-9, 30e-6)
"""Wavelengths (m) between which photon counting is the right noise: common practice of the trade.

Shortward interstellar hydrogen hides the sky and single photons make many electrons; longward
receivers measure waves, and thermal light fluctuates more than Poisson's law says.
"""


@dataclass(frozen=True, eq=False)
class Prepared:
    """What the exposures of one scene share: everything up to the first random draw.

    Attributes
    ----------
    scene : Scene
    train : Train
    objects : Inventory
    light : ndarray
        Expected electrons of objects and sky in the pixels of the detector.
    settings : CameraSettings
    base : FieldGeometry or None
        In which the objects are placed, where that is not the scene's own detector.
    memory_bytes : int or None
    first_draw : int
        Number of the first exposure's noise.
    """

    scene: Scene
    train: Train
    objects: Inventory
    light: AnyArray
    settings: CameraSettings
    base: FieldGeometry | None = None
    memory_bytes: int | None = None
    first_draw: int = 0

    def aimed(self, index: int, *, threads: int | None = None) -> Prepared:
        """The same at the aim of one exposure: itself unless the scene is dithered."""
        if dither_offset(self.scene, index) == (0.0, 0.0):
            return self
        geometry = aimed_geometry(self.scene, index)
        objects = inventory(self.scene, train=self.train, base=self.base, geometry=geometry)
        light = scene_image(
            self.scene,
            self.train,
            objects,
            memory_bytes=self.memory_bytes,
            threads=_threads(threads),
        )
        return replace(self, objects=objects, light=light)

    @property
    def expected(self) -> AnyArray:
        """Expected electrons of objects and sky in the pixels of the frame."""
        side = self.settings.readout.binning
        return self.light if side == 1 else binned(self.light, side)


def prepare(
    scene: Scene,
    *,
    memory_bytes: int | None = None,
    threads: int | None = None,
    base: FieldGeometry | None = None,
    first_draw: int = 0,
    train: Train | None = None,
) -> Prepared:
    """Compute what all exposures of a scene have in common.

    Parameters
    ----------
    scene : Scene
    memory_bytes : int, optional
        Most memory that the image may take; 2 GiB unless given.
    threads : int, optional
        All processors unless given; of no effect on the result.
    base : FieldGeometry, optional
        In which the objects are placed, where that is not the scene's own detector.
    first_draw : int, optional
        Number of the first exposure's noise.
    train : Train, optional
        Of a scene that differs in the places and brightnesses of its objects alone.

    Raises
    ------
    InputError
        The scene lacks what an exposure needs, or the image cannot fit into the memory.
    """
    if train is None:
        train = _ready(scene)
    _require_photons(scene, train)
    objects = inventory(scene, train=train, base=base, geometry=field_geometry(scene))
    light = scene_image(scene, train, objects, memory_bytes=memory_bytes, threads=_threads(threads))
    settings = camera_settings(scene)
    return Prepared(
        scene,
        train,
        objects,
        light,
        settings,
        base=base,
        memory_bytes=memory_bytes,
        first_draw=first_draw,
    )


def noise_free(
    scene: Scene, *, memory_bytes: int | None = None, threads: int | None = None
) -> AnyArray:
    """The image of a scene without noise, at any wavelength.

    Parameters
    ----------
    scene : Scene
    memory_bytes, threads : int, optional
        As for `prepare`.

    Returns
    -------
    ndarray, shape (rows, columns)
        Expected electrons of objects and sky in each pixel (``[y, x]``). Outside `COUNTED` they
        are a measure of the energy received, in quanta, and not what a counter would count.

    Raises
    ------
    InputError
        The scene lacks what an image needs, or the image cannot fit into the memory.
    """
    train = _ready(scene)
    objects = inventory(scene, train=train)
    light = scene_image(scene, train, objects, memory_bytes=memory_bytes, threads=_threads(threads))
    side = scene.camera.binning if scene.camera is not None else 1
    return light if side == 1 else binned(light, side)


def _ready(scene: Scene) -> Train:
    missing = requirements_to_expose(scene)
    if scene.detector:
        what = "a mosaic has a frame of its own kind"
        mend = "use simimg expose, or simimg.mosaic.expose_mosaic in Python"
        missing.append(mistake(scene.name, "detector", what, mend))
    if missing:
        raise InputError(*missing)
    return assemble_train(scene)


def expose(
    scene: Scene,
    *,
    index: int = 0,
    keep: Collection[str] = (),
    memory_bytes: int | None = None,
    threads: int | None = None,
) -> Frame:
    """The frame that a scene's set-up would record.

    Parameters
    ----------
    scene : Scene
    index : int, optional
        Number of the exposure, from 0; each has its own noise.
    keep : collection of {"expected", "psf"}, optional
        What to keep beside the counts.
    memory_bytes, threads : int, optional
        As for `prepare`.

    Returns
    -------
    Frame

    Raises
    ------
    InputError
        The scene lacks what an exposure needs, or cannot be computed in the memory.
    ValueError
        An index below 0 or an unknown word in `keep`.
    """
    prepared = prepare(scene, memory_bytes=memory_bytes, threads=threads)
    return expose_prepared(prepared, index=index, keep=keep, threads=threads)


def expose_prepared(
    prepared: Prepared, *, index: int = 0, keep: Collection[str] = (), threads: int | None = None
) -> Frame:
    """One exposure of a prepared scene; arguments as for `expose`."""
    unknown = set(keep) - {"expected", "psf"}
    if index < 0 or unknown:
        raise ValueError(f"index must be 0 or more, got {index}; keep may not hold {unknown}")
    prepared = prepared.aimed(index, threads=threads)
    scene, train = prepared.scene, prepared.train
    seed = scene.exposure.seed if scene.exposure is not None else 0
    recorded = record(
        prepared.light,
        settings=prepared.settings,
        seed=seed,
        frame=prepared.first_draw + index,
        threads=_threads(threads),
    )
    psf = None
    if "psf" in keep:
        assert train.pixel_scale is not None
        image = sampled_psf(
            train.effective,
            pixel_scale=train.pixel_scale,
            oversampling=PSF_OVERSAMPLING,
            half_width_pixels=_PSF_HALF_WIDTH,
        )
        psf = PsfImage(image, PSF_OVERSAMPLING)
    readout = prepared.settings.readout
    written = written_geometry(
        prepared.objects.geometry, prescan=readout.prescan, overscan=readout.overscan
    )
    return Frame(
        counts=recorded.counts,
        header=frame_header(prepared, index),
        wcs=written.wcs(),
        truth=written_truth(truth_table(prepared.objects, train), prescan=readout.prescan),
        expected=_kept_expected(prepared) if "expected" in keep else None,
        psf=psf,
        mask=recorded.mask if recorded.mask.any() else None,
        scene_files=tuple(scene_record(scene)),
        directory=str(scene.directory.absolute()),
    )


def _kept_expected(prepared: Prepared) -> AnyArray:
    """The expected image as a frame keeps it; 0 in columns without charge."""
    readout = prepared.settings.readout
    around = ((0, 0), (readout.prescan, readout.overscan))
    return np.pad(prepared.expected.astype(np.float32), around)


def frame_header(prepared: Prepared, index: int) -> dict[str, object]:
    """Header of an exposure: standard keywords where there is one, values in the trade's units."""
    scene, train, settings = prepared.scene, prepared.train, prepared.settings
    seed = scene.exposure.seed if scene.exposure is not None else 0
    band, geometry = scene.band, prepared.objects.geometry
    filter_name = band.name or f"{(band.centre or 0) * 1e9:.6g} nm"
    header: dict[str, object] = {
        "OBJECT": (scene.title or "", "title of the scene"),
        "OBSTYPE": ("object", "kind of frame"),
        "EXPTIME": (settings.time, "[s] exposure time"),
    }
    start = scene.exposure.start if scene.exposure is not None else None
    if start is not None and scene.exposure is not None:
        header |= _times(start, index * (settings.time + scene.exposure.overhead))
    detector = detector_cards(settings, geometry.columns, geometry.rows)
    saturation = detector.pop("SATURATE")
    header |= {
        "FILTER": (filter_name, "band"),
        "WAVELEN": (train.wavelength * 1e9, "[nm] centre of the band"),
        **detector,
        "DARKSIG": (dark_electrons(scene), "[electron] dark signal in a pixel"),
        "SKYLVL": (sky_electrons(scene, area=train.pupil.area), "[electron] sky in a pixel"),
        "SATURATE": saturation,
        "BUNIT": ("adu", "unit of the counts"),
        "PIXSCALE": (np.degrees(train.pixel_scale or 0.0) * 3600.0, "[arcsec] pixel scale"),
        "SEED": (seed, "seed of the noise"),
        "EXPNUM": (index, "number of the exposure, from 0"),
        "SCENEID": (scene_id(scene), "sha256 of the scene"),
    }
    if scene.telescope.name is not None:
        header["TELESCOP"] = (scene.telescope.name, "telescope (simulated)")
    if scene.camera is not None and scene.camera.name is not None:
        header["INSTRUME"] = (scene.camera.name, "camera (simulated)")
    if scene.exposure is not None and scene.exposure.dither is not None:
        east, north = np.degrees(dither_offset(scene, index)) * 3600.0
        header["OFFEAST"] = (float(east), "[arcsec] offset of the aim towards east")
        header["OFFNORTH"] = (float(north), "[arcsec] offset of the aim towards north")
    if train.airmass is not None:
        header["AIRMASS"] = (train.airmass, "airmass")
    if train.seeing is not None:
        header["SEEING"] = (
            np.degrees(train.seeing) * 3600.0,
            "[arcsec] FWHM at 500 nm, zenith",
        )
    return header | dict(scene.header)


def _times(start: str, later: float) -> dict[str, object]:
    """Date keywords of an exposure that begins `later` seconds after the scene's start."""
    began = datetime.fromisoformat(start.rstrip("Z")) + timedelta(seconds=later)
    days = (began - datetime(1858, 11, 17)) / timedelta(days=1)
    return {
        "DATE-OBS": (began.isoformat(timespec="milliseconds"), "start of the exposure"),
        "MJD-OBS": (days, "[d] start of the exposure"),
        "TIMESYS": ("UTC", "time scale"),
    }


def _require_photons(scene: Scene, train: Train) -> None:
    """Refuse to count photons where detectors do not.

    Raises
    ------
    InputError
        A band outside the far ultraviolet to the mid-infrared.
    """
    shortest, longest = COUNTED
    if shortest <= train.wavelength <= longest:
        return
    why = (
        "a photon frees many electrons and interstellar hydrogen hides the sky"
        if train.wavelength < shortest
        else "receivers measure waves, and thermal light fluctuates more than counted photons do"
    )
    raise InputError(
        mistake(
            scene.name,
            "band",
            f"lies at {train.wavelength:.3g} m, where the noise is not that of counted photons: "
            f"{why}; frames are made from {shortest * 1e9:.0f} nm to {longest * 1e6:.0f} um",
            "use limits, figure --what psf, or noise_free in Python, which hold at any wavelength",
        )
    )


def _threads(threads: int | None) -> int:
    return threads if threads is not None else (os.cpu_count() or 1)
