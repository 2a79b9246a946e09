"""The telescope of a scene: aperture, obstruction, vanes, segments, wavefront. SI inside."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from pydantic import GetCoreSchemaHandler, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from simimg.quantities import QuantityError, parse_quantity
from simimg.scene.keys import FileName, Quantity, Several, Text, Whole, fault
from simimg.scene.readers import UpTo
from simimg.scene.segments import Segments
from simimg.scene.table import Fault, Table, key
from simimg.scene.wavefront import FieldErrors, Wavefront

Angle = Quantity("angle", at_least="-360 deg", at_most="360 deg", sample="45 deg")
"""Reader of an orientation."""


class Vanes(Table):
    """The vanes that hold the secondary mirror."""

    heading: ClassVar[str] = "[telescope.vanes]"
    written: ClassVar[str] = 'vanes = { count = 4, width = "20 mm", angle = "45 deg" }'

    count: Annotated[int | None, Whole(1, 64, 4)] = key(
        "Number of vanes, evenly spread around the axis; None where their angles are given.", None
    )
    width: Annotated[float, Quantity("length", above="0 mm", at_most="100 m", sample="20 mm")] = (
        key("Width of each vane.")
    )
    angle: Annotated[float, Angle] = key(
        "Direction of the first vane, from the detector's +x towards its +y, in the pupil as "
        "projected on the detector.",
        0.0,
        absent="0 deg",
        meaning="the first vane lies along the detector's +x",
        unless=("angles",),
    )
    angles: Annotated[tuple[float, ...] | None, UpTo(Angle, 64)] = key(
        "Direction of each vane, as angle, in place of count and angle.", None
    )

    @property
    def directions(self) -> tuple[float, ...]:
        """Direction of every vane (rad), from the detector's +x towards its +y."""
        if self.angles is not None:
            return self.angles
        count = self.count or 0
        return tuple(self.angle + 2.0 * math.pi * one / count for one in range(count))

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """Evenly spread vanes, or the angle of each."""
        if "angles" not in given:
            if "count" not in given:
                yield Fault(("count",), "is required and missing", "add count = 4, or angles")
            return
        for name in ("count", "angle"):
            if name in given:
                yield Fault(
                    (name,),
                    "contradicts telescope.vanes.angles, which hold every vane",
                    f"leave out {name} or angles",
                )


@dataclass(frozen=True)
class Obstruction(Quantity):
    """A ratio of the aperture, or a length that is divided by it."""

    def __get_pydantic_core_schema__(
        self, source: Any, handler: GetCoreSchemaHandler
    ) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(self.of_aperture)

    def of_aperture(self, value: Any, info: ValidationInfo) -> float:
        """The ratio; a length needs an aperture that is itself right."""
        if not isinstance(value, str):
            return self.read(value)
        try:
            length = parse_quantity(value, "length")
        except QuantityError as error:
            try:
                ratio = parse_quantity(value, self.kind)
            except QuantityError:
                raise fault(
                    error.what.replace("a length", "a ratio of the aperture or a length"),
                    'write a ratio such as 0.3, or a length such as "0.6 m"',
                ) from None
            self.check(ratio, value)
            return ratio
        aperture = info.data.get("aperture")
        if length < 0.0 or (aperture is not None and length >= aperture):
            raise fault(
                f'must be from 0 m to less than the aperture, got "{value}"',
                'write a ratio below 1 such as 0.3, or a length such as "0.6 m"',
            )
        return 0.0 if aperture is None else length / aperture

    @property
    def range(self) -> str:
        """Both ways of giving it."""
        return "a ratio of at least 0 and below 1, or a length below the aperture"


PUPIL_PARTS = ("obstruction", "obstruction_offset", "vanes", "segments", "apodisation")
"""Keys of what shapes the pupil, each of which a map of the pupil excludes."""


class Telescope(Table):
    """What gathers the light."""

    heading: ClassVar[str] = "[telescope]"

    name: Annotated[str | None, Text()] = key(
        "Name of the telescope; TELESCOP in the header.",
        None,
    )
    aperture: Annotated[float, Quantity("length", at_least="1 mm", at_most="1 km")] = key(
        "Clear diameter of the aperture."
    )
    obstruction: Annotated[float, Obstruction("ratio", at_least=0.0, below=1.0, sample="0.3")] = (
        key(
            "Diameter of the central obstruction over the aperture, or as a length.",
            0.0,
            absent="0",
            meaning="no central obstruction",
            unless=("pupil",),
        )
    )
    obstruction_offset: Annotated[
        tuple[float, float] | None,
        Several(Quantity("length", at_least="-1 km", at_most="1 km", sample="0.1 m"), 2),
    ] = key(
        "Place of the obstruction's middle from the pupil's along the detector's x and y, in the "
        "pupil as projected on the detector.",
        None,
    )
    vanes: Vanes | None = key(
        "Vanes that hold the secondary mirror.",
        None,
        absent="none",
        meaning="no vanes: no diffraction spikes",
        unless=("pupil",),
    )
    throughput: Annotated[float, Quantity("ratio", above=0.0, at_most=1.0)] = key(
        "Fraction of the light that the optics and the filter pass.",
        1.0,
        absent="1",
        meaning="optics and filter lose no light",
    )
    focal_length: Annotated[
        float | None, Quantity("length", at_least="1 mm", at_most="100 km", sample="16 m")
    ] = key("Effective focal length; with camera.pixel_size it gives the pixel scale.", None)
    pupil: Annotated[str | None, FileName("pupil.fits")] = key(
        "FITS file with a map of the pupil's transmission, 0 to 1, one aperture wide, in place of "
        "obstruction, vanes, segments and apodisation.",
        None,
    )
    segments: Segments | None = key("Hexagonal segments that make up the primary mirror.", None)
    apodisation: Annotated[float, Quantity("ratio", above=0.0, at_most=1.0, sample="0.5")] = key(
        "Amplitude at the rim of the pupil, to which it falls as a Gaussian from 1 in the middle.",
        1.0,
    )
    wavefront: Wavefront | None = key(
        "Errors of the wavefront in the pupil.",
        None,
        absent="none",
        meaning="the optics are perfect",
    )
    field: FieldErrors | None = key(
        "What grows from the middle of the field outwards: coma, field curvature, distortion.",
        None,
        absent="none",
        meaning="the optics are the same all over the field",
    )

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """A map of the pupil leaves room for nothing else; what needs what."""
        if "obstruction_offset" in given and not {"obstruction", "pupil"} & set(given):
            yield Fault(
                ("obstruction",),
                "is required beside obstruction_offset and missing",
                "add obstruction = 0.3",
            )
        wavefront = given.get("wavefront")
        unfocused = isinstance(wavefront, Mapping) and "defocus" in wavefront
        if unfocused and "focal_length" not in given:
            yield Fault(
                ("focal_length",),
                "is required beside telescope.wavefront.defocus and missing",
                'add focal_length = "16 m" to [telescope]',
            )
        if "pupil" in given:
            for name in PUPIL_PARTS:
                if name in given:
                    yield Fault(
                        (name,),
                        "contradicts telescope.pupil, whose map holds the whole pupil",
                        f"leave out {name} or pupil",
                    )

    def agree(self) -> Iterator[Fault]:
        """Everything must fit the aperture."""
        if self.obstruction_offset is not None:
            away = math.hypot(*self.obstruction_offset)
            if self.obstruction == 0.0 or (
                away + 0.5 * self.obstruction * self.aperture > 0.5 * self.aperture * (1.0 + 1e-9)
            ):
                yield Fault(
                    ("obstruction_offset",),
                    "needs an obstruction, and must leave it inside the aperture",
                    "write a smaller offset, or leave it out",
                )
        if self.segments is not None:
            ratio = self.segments.diameter / self.aperture
            if not 0.8 <= ratio <= 1.25:
                yield Fault(
                    ("segments", "width"),
                    f"gives a mirror of {self.segments.diameter:.4g} m from corner to corner, "
                    f"{ratio:.3g} times telescope.aperture",
                    "write an aperture within a quarter of it, or another width or rings",
                )
        if self.vanes is not None and self.vanes.width >= self.aperture:
            yield Fault(
                ("vanes", "width"),
                "must be less than telescope.aperture",
                'write a width such as "20 mm"',
            )
