"""The telescope of a scene: aperture, obstruction, vanes, or a map of the pupil. SI inside."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from pydantic import GetCoreSchemaHandler, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from simimg.quantities import QuantityError, parse_quantity
from simimg.scene.keys import FileName, Quantity, Text, Whole, fault
from simimg.scene.table import Fault, Table, key

Angle = Quantity("angle", at_least="-360 deg", at_most="360 deg", sample="45 deg")
"""Reader of an orientation."""


class Vanes(Table):
    """The vanes that hold the secondary mirror."""

    heading: ClassVar[str] = "[telescope.vanes]"

    count: Annotated[int, Whole(1, 64, 4)] = key("Number of vanes, evenly spread around the axis.")
    width: Annotated[float, Quantity("length", above="0 mm", at_most="100 m", sample="20 mm")] = (
        key("Width of each vane.")
    )
    angle: Annotated[float, Angle] = key(
        "Direction of the first vane, from the detector's +x towards its +y, in the pupil as "
        "projected on the detector.",
        0.0,
        absent="0 deg",
        meaning="the first vane lies along the detector's +x",
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
        "obstruction and vanes.",
        None,
    )

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """A map of the pupil leaves no room for an obstruction or vanes."""
        if "pupil" in given:
            for name in ("obstruction", "vanes"):
                if name in given:
                    yield Fault(
                        (name,),
                        "contradicts telescope.pupil, whose map holds the whole pupil",
                        f"leave out {name} or pupil",
                    )

    def agree(self) -> Iterator[Fault]:
        """Vanes must be narrower than the aperture."""
        if self.vanes is not None and self.vanes.width >= self.aperture:
            yield Fault(
                ("vanes", "width"),
                "must be less than telescope.aperture",
                'write a width such as "20 mm"',
            )
