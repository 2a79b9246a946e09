"""The band of a scene: a standard one by name, a box by centre and width, or a table. Metres."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

from simimg.scene.keys import Choice, FileName, Quantity, Whole
from simimg.scene.table import Fault, Table, key

VEGA_NAMES = ("U", "B", "V", "R", "I", "J", "H", "K")
"""Names of the standard bands whose magnitudes are in the Vega system unless told otherwise."""

AB_NAMES = ("u", "g", "r", "i", "z")
"""Names of the standard bands whose magnitudes are in the AB system."""

STANDARD_NAMES = (*VEGA_NAMES, *AB_NAMES)
"""Names of the standard bands."""

BLUEST, REDDEST = 359.8e-9, 2190e-9
"""Wavelengths of U and K (m), between which any band has a Vega zero point."""


def usual_system(name: str | None) -> Literal["Vega", "AB"]:
    """System of magnitudes in the standard band of a name, or in any other band."""
    return "Vega" if name in VEGA_NAMES else "AB"


class Band(Table):
    """The wavelengths that are let through, and the system of the scene's magnitudes."""

    heading: ClassVar[str] = "[band]"
    name: Annotated[str | None, Choice(STANDARD_NAMES)] = key(
        "A standard band: Johnson-Cousins U B V R I, J H K, or u g r i z of the AB system.", None
    )
    centre: Annotated[
        float | None, Quantity("length", at_least="50 nm", at_most="100 m", sample="550 nm")
    ] = key("Central wavelength of a band without a name.", None)
    width: Annotated[
        float | None, Quantity("length", above="0 nm", at_most="100 m", sample="80 nm")
    ] = key("Full width of a band without a name.", None)
    file: Annotated[str | None, FileName("filter.ecsv")] = key(
        "Table of wavelength and transmission, in place of a name.", None
    )
    system: Annotated[Literal["Vega", "AB"] | None, Choice(("Vega", "AB"))] = key(
        "System of the magnitudes.",
        None,
        absent="Vega for the standard bands U to K, else AB",
        meaning="the system of every magnitude in the scene",
    )
    nodes: Annotated[int | None, Whole(1, 64, 7)] = key(
        "Number of wavelengths that stand for the band.",
        None,
        absent="as many as needed",
        meaning="so many wavelengths that the image keeps its stated error",
    )

    @property
    def resolved_system(self) -> Literal["Vega", "AB"]:
        """System of the magnitudes; unless told, Vega for the standard bands U to K, else AB."""
        return self.system or usual_system(self.name)

    @property
    def has_vega(self) -> bool:
        """False where there is no Vega zero point; of a table only its file can tell."""
        if self.centre is not None:
            return BLUEST <= self.centre <= REDDEST
        return self.name is None or self.name in VEGA_NAMES

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """A name, or a centre with a width, or a file."""
        if "name" in given and "file" in given:
            yield Fault(
                ("file",),
                "contradicts band.name: a standard band has its own",
                "leave out name or file",
            )
        if "name" in given or "file" in given:
            first = "name: a standard band" if "name" in given else "file: a table"
            for other in ("centre", "width"):
                if other in given:
                    yield Fault(
                        (other,),
                        f"contradicts band.{first} has its own",
                        f"leave out {first.split(':')[0]} or {other}",
                    )
        elif "centre" not in given and "width" not in given:
            yield Fault(
                ("name",),
                "is required and missing",
                'add name = "V", or centre and width, or the file of a table',
            )
        elif "centre" not in given:
            yield Fault(
                ("centre",), "is required beside width and missing", 'add centre = "550 nm"'
            )
        elif "width" not in given:
            yield Fault(("width",), "is required beside centre and missing", 'add width = "80 nm"')

    def agree(self) -> Iterator[Fault]:
        """The band must begin above wavelength zero."""
        if self.centre is not None and self.width is not None and self.width >= 1.9 * self.centre:
            yield Fault(
                ("width",),
                "must be below 1.9 times the centre, or the band reaches down to wavelength 0",
                "write a smaller width or a larger centre",
            )
        if self.centre is not None and self.system == "Vega" and not self.has_vega:
            yield Fault(
                ("system",),
                "has no Vega zero point at this centre, beyond the bands U and K",
                'write system = "AB" (and AB magnitudes)',
            )
        if self.name in AB_NAMES and self.system == "Vega":
            yield Fault(
                ("system",),
                f"has no Vega zero point in the band {self.name}",
                'write system = "AB" (and AB magnitudes)',
            )
