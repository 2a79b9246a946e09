"""The whole scene: what a telescope, through which air, with which camera, looks at.

A `Scene` is frozen and holds SI values. Beside them it carries what it was made from: the document
as run (plain nested dictionaries, values as written), and the files that the document names.
"""

from __future__ import annotations

import copy
import math
from collections.abc import Iterator, Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Annotated, Any, ClassVar, Self

from pydantic import PrivateAttr

from simimg.scene.agreement import scene_faults
from simimg.scene.air import Air
from simimg.scene.band import Band
from simimg.scene.camera import Camera
from simimg.scene.correction import Correction
from simimg.scene.draw import Draw, DrawnKeys
from simimg.scene.exposure import Exposure, Sky
from simimg.scene.header import Header
from simimg.scene.inputs import InputFile
from simimg.scene.keys import Text
from simimg.scene.mosaic import MosaicDetector, detector_faults
from simimg.scene.motion import Pointing
from simimg.scene.objects import (
    Catalogue,
    Disc,
    Galaxy,
    Pair,
    Picture,
    Placed,
    Ring,
    Star,
)
from simimg.scene.psf import Psf
from simimg.scene.study import Study
from simimg.scene.table import MANY, REPEATED, Fault, Table, key
from simimg.scene.telescope import Telescope

MOST_OBJECTS = 10_000
"""Most objects that a scene file may hold; more of them belong in a catalogue."""

FARTHEST = math.radians(60.0)
"""Largest distance of an object from the pointing, in radians."""


class Scene(Table):
    """A telescope, the air, a band, a camera, an exposure, and what is in the sky."""

    title: Annotated[str | None, Text(200, sample="A close pair")] = key(
        "Title of the scene; OBJECT in the header.", None
    )
    telescope: Telescope = key("What gathers the light.")
    air: Air | None = key(
        "The atmosphere.",
        None,
        absent="none",
        meaning="the telescope is above the atmosphere",
    )
    correction: Correction | None = key(
        "Adaptive optics, which correct the air.",
        None,
        absent="none",
        meaning="nothing corrects the air",
    )
    band: Band = key("The wavelengths, and the system of magnitudes.")
    camera: Camera | None = key(
        "The detector.", None, absent="none", meaning="limits are without a pixel"
    )
    sky: Sky | None = key(
        "The uniform light of the sky.", None, absent="none", meaning="the sky is dark"
    )
    exposure: Exposure | None = key(
        "How long, how often, with which noise.",
        None,
        absent="none",
        meaning="one exposure, the noise of seed 0",
    )
    pointing: Pointing | None = key(
        "Where the centre of the field lies.",
        None,
        absent="ra 0 deg, dec 0 deg",
        meaning="the centre of the field in the header's world coordinates",
    )
    psf: Psf | None = key("A measured PSF in place of optics and air.", None)
    draw: Annotated[dict[str, Draw], DrawnKeys()] = key(
        "Keys that are drawn anew for every frame of a batch.", {}
    )
    study: Study | None = key("What `simimg study` varies.", None)
    header: Annotated[dict[str, str | int | float | bool], Header()] = key(
        "Extra keywords for the frame's header.", {}
    )
    star: tuple[Star, ...] = key("Single stars.", ())
    pair: tuple[Pair, ...] = key("Pairs of stars.", ())
    galaxy: tuple[Galaxy, ...] = key("Sersic profiles.", ())
    disc: tuple[Disc, ...] = key("Discs, with limb darkening and phase.", ())
    ring: tuple[Ring, ...] = key("Flat rings.", ())
    picture: tuple[Picture, ...] = key("Pictures from files.", ())
    catalogue: tuple[Catalogue, ...] = key("Stars from tables.", ())
    detector: tuple[MosaicDetector, ...] = key("Detectors of a mosaic, in place of one.", ())

    hints: ClassVar[Mapping[str, tuple[str, str]]] = {
        "base": ("is read only at the top of a scene file", "write base in the file itself"),
    }

    _document: dict[str, Any] = PrivateAttr(default_factory=dict)
    _name: str = PrivateAttr("scene.toml")
    _where: str = PrivateAttr("scene.toml")
    _directory: Path = PrivateAttr(default_factory=Path)
    _inputs: dict[str, InputFile] = PrivateAttr(default_factory=dict)

    @property
    def document(self) -> dict[str, Any]:
        """A copy of the scene as run: base and overrides applied, values as written."""
        return copy.deepcopy(self._document)

    @property
    def name(self) -> str:
        """Name of the scene's file, without its folder."""
        return self._name

    @property
    def where(self) -> str:
        """What messages call the scene: the path as given."""
        return self._where

    @property
    def directory(self) -> Path:
        """Folder that the paths in the scene are relative to."""
        return self._directory

    @property
    def inputs(self) -> Mapping[str, InputFile]:
        """The files that the scene names, by their path as written."""
        return MappingProxyType(self._inputs)

    @property
    def pixel_scale(self) -> float | None:
        """Angle of a side of a pixel of the frame, radians; None without a route to it."""
        if self.camera is None:
            return None
        if self.camera.pixel_scale is not None:
            return self.camera.pixel_scale * self.camera.binning
        if self.camera.pixel_size is not None and self.telescope.focal_length is not None:
            return self.camera.pixel_size / self.telescope.focal_length * self.camera.binning
        return None

    @property
    def image_size(self) -> tuple[int, int] | None:
        """Columns and rows of the frame's pixels that see the sky; None where none are given."""
        if self.camera is None or self.camera.read_pixels is None:
            return None
        columns, rows = self.camera.read_pixels
        return columns // self.camera.binning, rows // self.camera.binning

    @property
    def objects(self) -> tuple[Star | Pair | Galaxy | Disc | Ring | Picture, ...]:
        """Every object that is written in the scene itself, kind by kind."""
        return (*self.star, *self.pair, *self.galaxy, *self.disc, *self.ring, *self.picture)

    def made_from(
        self,
        document: Mapping[str, Any],
        *,
        name: str,
        where: str,
        directory: Path,
        inputs: Mapping[str, InputFile],
    ) -> Self:
        """The same scene, carrying what it was made from.

        Parameters
        ----------
        document : mapping
            The scene as run: base and overrides applied, values as written.
        name : str
            Of the scene's file, without its folder.
        where : str
            What messages call the scene.
        directory : Path
            Folder that the paths in the scene are relative to.
        inputs : mapping of str to InputFile
            The files that the scene names, by their path as written.

        Returns
        -------
        Scene
        """
        made = self.model_copy()
        made._document = copy.deepcopy(dict(document))
        made._name = name
        made._where = where
        made._directory = directory
        made._inputs = dict(inputs)
        return made

    @classmethod
    def complete(cls, given: Mapping[str, Any]) -> Mapping[str, Any]:
        """Leave out the objects beyond the bound, which is a mistake by itself."""
        total, _ = _count(given)
        if total <= MOST_OBJECTS:
            return given
        return {name: value for name, value in given.items() if name not in MANY}

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """Header keywords; a bounded number of objects; what right places and pixels need."""
        header = given.get("header")
        if isinstance(header, Mapping):
            for keyword, value in header.items():
                wrong = Header.check(keyword, value)
                if wrong is not None:
                    yield Fault(("header", keyword), *wrong)
        for kind in REPEATED:
            tables = given.get(kind, [])
            if isinstance(tables, Mapping):
                yield Fault((kind,), "is a single table", f"write [[{kind}]], in double brackets")
            elif isinstance(tables, list) and not _points(given.get("pointing")):
                yield from _unpointed(kind, tables[:MOST_OBJECTS])
        air = given.get("air")
        if isinstance(air, Mapping) and "psf" not in given and not _says_seeing(air):
            yield Fault(
                ("air", "seeing"),
                "is required in [air] and missing",
                'add seeing = "0.8 arcsec" (or image_quality), or leave out [air] to be above it',
            )
        total, fullest = _count(given)
        if total > MOST_OBJECTS:
            yield Fault(
                (fullest,),
                f"too many objects in one scene file, {total}",
                f"keep at most {MOST_OBJECTS}, and put stars in a [[catalogue]]",
            )

    def agree(self) -> Iterator[Fault]:
        """One route to the pixel scale; objects where the telescope looks; what needs what."""
        yield from self._pixel_scale_faults()
        yield from scene_faults(self)
        yield from detector_faults(self.detector, self.camera)
        if self.pointing is not None:
            for kind in MANY:
                for index, one in enumerate(getattr(self, kind)):
                    if isinstance(one, Placed) and self._distance(one) > FARTHEST:
                        yield Fault(
                            (kind, index, "ra"),
                            f"lies {math.degrees(self._distance(one)):.1f} deg from the pointing",
                            "write a place within 60 deg of [pointing]",
                        )

    def _pixel_scale_faults(self) -> Iterator[Fault]:
        camera, focal_length = self.camera, self.telescope.focal_length
        if camera is None or camera.pixel_size is None:
            return
        if focal_length is None:
            if camera.pixel_scale is None:
                yield Fault(
                    ("telescope", "focal_length"),
                    "is required beside camera.pixel_size and missing",
                    'add focal_length = "16 m" to [telescope], or camera.pixel_scale',
                )
            return
        scale = camera.pixel_size / focal_length
        arcsec = math.degrees(scale) * 3600.0
        if camera.pixel_scale is not None and abs(camera.pixel_scale / scale - 1.0) > 1e-3:
            yield Fault(
                ("camera", "pixel_scale"),
                "contradicts camera.pixel_size over telescope.focal_length, "
                f"which is {arcsec:.6g} arcsec",
                "leave out pixel_scale or pixel_size",
            )
        elif not 1e-6 <= arcsec <= 3600.0:
            yield Fault(
                ("camera", "pixel_size"),
                f"gives a pixel of {arcsec:.3g} arcsec over telescope.focal_length",
                "write sizes that give from 0.000001 arcsec to 1 deg",
            )

    def _distance(self, one: Placed) -> float:
        """Distance of an object from the pointing, radians; 0 where it has no coordinates."""
        if self.pointing is None or one.ra is None or one.dec is None:
            return 0.0
        half_dec = math.sin((one.dec - self.pointing.dec) / 2.0)
        half_ra = math.sin((one.ra - self.pointing.ra) / 2.0)
        squared = half_dec**2 + math.cos(one.dec) * math.cos(self.pointing.dec) * half_ra**2
        return 2.0 * math.asin(min(1.0, math.sqrt(squared)))


def _count(given: Mapping[str, Any]) -> tuple[int, str]:
    """Number of objects written in a scene, and the kind of which there are most."""
    counts = {kind: len(given[kind]) for kind in MANY if isinstance(given.get(kind), list)}
    return sum(counts.values()), max(counts, key=lambda kind: counts[kind], default="star")


def _says_seeing(air: Mapping[str, Any]) -> bool:
    return "seeing" in air or "image_quality" in air


def _points(pointing: Any) -> bool:
    """False where a scene does not say where it points; what is no table is told elsewhere."""
    if isinstance(pointing, Mapping):
        return "ra" in pointing or "dec" in pointing
    return pointing is not None


def _unpointed(kind: str, tables: list[Any]) -> Iterator[Fault]:
    """Objects placed by ra and dec in a scene that does not say where it points."""
    for index, table in enumerate(tables):
        place = table.get("columns", table) if isinstance(table, Mapping) else {}
        if isinstance(place, Mapping) and "ra" in place and "dec" in place:
            yield Fault(
                (kind, index, "ra"),
                "needs ra and dec in [pointing], which are missing",
                "add [pointing] with the ra and dec of the field centre",
            )
