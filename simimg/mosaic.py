"""A mosaic: several detectors that look at once, each with its gaps and turns, in one file.

Each detector is exposed as a camera of its own, with its own noise and patterns, under one
telescope and one sky. The file has an image extension for each, with its own coordinates and
gain, and one TRUTH in which every object stands once, on the detector that it falls on.
"""

from __future__ import annotations

import os
from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from simimg.arrays import AnyArray
from simimg.assembly.mosaic import detector_scene
from simimg.assembly.places import field_geometry
from simimg.camera.masks import MASK_BITS
from simimg.errors import InputError, mistake
from simimg.exposure import Prepared, expose_prepared, prepare
from simimg.fits.writer import write_mosaic_file
from simimg.frame import Frame
from simimg.scene.file import requirements_to_expose, scene_id, scene_record
from simimg.scene.model import Scene

if TYPE_CHECKING:
    from astropy.table import Table

DRAWS_OF_A_DETECTOR: Final = 1_000_000_000
"""Numbers of exposures that each detector has for its noise."""

_SAYS = (
    "detector: the one on which an object lies, or that it lies nearest to; x and y count on it. "
    "electrons_in_frame: of all detectors together.",
)
# What stands in the primary header must hold for all that follows, and be no matter of pixels.
_OF_PIXELS = ("BUNIT", "SATURATE", "GAIN", "RDNOISE", "BIASLVL", "DARKSIG", "SKYLVL", "PIXSCALE")


@dataclass(frozen=True, eq=False)
class PreparedMosaic:
    """What the exposures of a mosaic share.

    Attributes
    ----------
    scene : Scene
        With [[detector]] tables.
    names : tuple of str
        Of the detectors.
    detectors : tuple of Prepared
    """

    scene: Scene
    names: tuple[str, ...]
    detectors: tuple[Prepared, ...]


@dataclass(frozen=True, eq=False)
class Mosaic:
    """One exposure of a mosaic.

    Attributes
    ----------
    names : tuple of str
        Of the detectors, the image extensions of the file.
    frames : tuple of Frame
        Of each detector.
    truth : astropy.table.Table or None
        Every object once, with the ``detector`` that it falls on.
    scene_files : tuple of (name, sha256, content)
        As those of `simimg.frame.Frame`.
    """

    names: tuple[str, ...]
    frames: tuple[Frame, ...]
    truth: Table | None
    scene_files: Sequence[tuple[str, str, bytes]] = ()

    def __getitem__(self, name: str) -> Frame:
        return self.frames[self.names.index(name.upper())]

    def write(
        self, path: str | os.PathLike[str], *, overwrite: bool = False, compress: bool = False
    ) -> None:
        """Write the mosaic as FITS: whole, or not at all; arguments as for `simimg.Frame.write`.

        Raises
        ------
        InputError, RunError
            As `simimg.frame.Frame.write`.
        """
        masked = any(frame.mask is not None for frame in self.frames)
        write_mosaic_file(
            path,
            overwrite=overwrite,
            header=_common(self.frames),
            detectors=[
                (name, frame.header, frame.wcs, dict(_images(frame, masked)))
                for name, frame in zip(self.names, self.frames, strict=True)
            ],
            truth=self.truth,
            scene_files=self.scene_files,
            mask_says=tuple(f"{value}: {meaning}" for value, meaning in MASK_BITS.items()),
            truth_says=_SAYS,
            compress=compress,
        )


def prepare_mosaic(
    scene: Scene, *, memory_bytes: int | None = None, threads: int | None = None
) -> PreparedMosaic:
    """Compute what all exposures of a mosaic have in common; arguments as for `exposure.prepare`.

    Raises
    ------
    InputError
        The scene has no [[detector]], or lacks what an exposure needs.
    """
    missing = requirements_to_expose(scene)
    if not scene.detector:
        mend = "write [[detector]] tables, or use simimg.expose"
        missing.append(mistake(scene.name, "detector", "is required for a mosaic", mend))
    if missing:
        raise InputError(*missing)
    base = field_geometry(scene)
    detectors = tuple(
        prepare(
            detector_scene(scene, number),
            memory_bytes=memory_bytes,
            threads=threads,
            base=base,
            first_draw=DRAWS_OF_A_DETECTOR * number,
        )
        for number in range(len(scene.detector))
    )
    return PreparedMosaic(scene, tuple(one.name for one in scene.detector), detectors)


def expose_mosaic(
    scene: Scene,
    *,
    index: int = 0,
    keep: Collection[str] = (),
    memory_bytes: int | None = None,
    threads: int | None = None,
) -> Mosaic:
    """The frames that the detectors of a mosaic would record at once.

    Parameters
    ----------
    scene : Scene
        With [[detector]] tables.
    index : int, optional
        Number of the exposure, from 0.
    keep : collection of {"expected"}, optional
        What to keep beside the counts.
    memory_bytes, threads : int, optional
        As for `simimg.exposure.prepare`.

    Raises
    ------
    InputError
        As for `prepare_mosaic`.
    """
    prepared = prepare_mosaic(scene, memory_bytes=memory_bytes, threads=threads)
    return expose_prepared_mosaic(prepared, index=index, keep=keep, threads=threads)


def expose_prepared_mosaic(
    prepared: PreparedMosaic,
    *,
    index: int = 0,
    keep: Collection[str] = (),
    threads: int | None = None,
) -> Mosaic:
    """One exposure of a prepared mosaic; arguments as for `expose_mosaic`."""
    identity = scene_id(prepared.scene)
    frames = []
    for one in prepared.detectors:
        made = expose_prepared(one, index=index, keep=keep, threads=threads)
        header = {**made.header, "SCENEID": (identity, "sha256 of the scene")}
        frames.append(
            Frame(
                counts=made.counts,
                header=header,
                wcs=made.wcs,
                truth=made.truth,
                expected=made.expected,
                mask=made.mask,
            )
        )
    return Mosaic(
        prepared.names,
        tuple(frames),
        joined_truth(prepared.names, frames),
        tuple(scene_record(prepared.scene)),
    )


def joined_truth(names: Sequence[str], frames: Sequence[Frame]) -> Table:
    """The truths of all detectors as one: each object on the detector that it falls on."""
    truths = [frame.truth for frame in frames if frame.truth is not None]
    outside = []
    for frame, truth in zip(frames, truths, strict=True):
        rows, columns = frame.counts.shape
        dx = np.maximum(np.maximum(-0.5 - truth["x"], truth["x"] - columns + 0.5), 0.0)
        dy = np.maximum(np.maximum(-0.5 - truth["y"], truth["y"] - rows + 0.5), 0.0)
        outside.append(np.where(truth["inside"], -1.0, np.hypot(dx, dy)))
    chosen = np.argmin(np.array(outside), axis=0)
    joined = truths[0].copy()
    every = np.arange(len(joined))
    for name in ("x", "y", "inside"):
        joined[name] = np.array([truth[name] for truth in truths])[chosen, every]
    for name in ("x", "y"):
        joined[name].unit = "pix"
    joined["electrons_in_frame"] = np.sum(
        [np.asarray(truth["electrons_in_frame"]) for truth in truths], axis=0
    )
    joined["electrons_in_frame"].unit = "electron"
    joined["detector"] = np.array(names, dtype=str)[chosen]
    return joined


def _common(frames: Sequence[Frame]) -> dict[str, object]:
    """The cards that are the same for all detectors."""
    first = frames[0].header
    return {
        key: card
        for key, card in first.items()
        if key not in _OF_PIXELS and all(frame.header.get(key) == card for frame in frames)
    }


def _images(frame: Frame, masked: bool) -> Iterator[tuple[str, AnyArray]]:
    yield "counts", frame.counts
    if masked:
        blank = np.zeros(frame.counts.shape, dtype=np.uint8)
        yield "MASK", blank if frame.mask is None else frame.mask
    if frame.expected is not None:
        yield "EXPECTED", frame.expected
