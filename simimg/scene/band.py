"""The band of a scene: a standard one by name, or a box by centre and width. Metres inside."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

from simimg.scene.keys import Choice, Quantity
from simimg.scene.table import Fault, Table, key

STANDARD_NAMES = ("U", "B", "V", "R", "I", "J", "H", "K")
"""Names of the standard bands."""

BLUEST, REDDEST = 359.8e-9, 2190e-9
"""Wavelengths of U and K (m), between which any band has a Vega zero point."""


class Band(Table):
    """The wavelengths that are let through, and the system of the scene's magnitudes."""

    heading: ClassVar[str] = "[band]"
    hints: ClassVar[Mapping[str, tuple[str, str]]] = {
        "file": (
            "is not available in this version: a band from a transmission table",
            "write a standard name, or centre and width",
        )
    }

    name: Annotated[str | None, Choice(STANDARD_NAMES)] = key(
        "A standard band: Johnson-Cousins U B V R I, or J H K.", None
    )
    centre: Annotated[
        float | None, Quantity("length", at_least="100 nm", at_most="1 mm", sample="550 nm")
    ] = key("Central wavelength of a band without a name.", None)
    width: Annotated[
        float | None, Quantity("length", above="0 nm", at_most="1 mm", sample="80 nm")
    ] = key("Full width of a band without a name.", None)
    system: Annotated[Literal["Vega", "AB"] | None, Choice(("Vega", "AB"))] = key(
        "System of the magnitudes.",
        None,
        absent="Vega for a standard band, AB for a band by centre and width",
        meaning="the system of every magnitude in the scene",
    )

    @property
    def resolved_system(self) -> Literal["Vega", "AB"]:
        """System of the magnitudes; Vega for a standard band unless told otherwise, else AB."""
        if self.system is not None:
            return self.system
        return "AB" if self.name is None else "Vega"

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """A name, or a centre with a width."""
        if "file" in given:
            return
        if "name" in given:
            for other in ("centre", "width"):
                if other in given:
                    yield Fault(
                        (other,),
                        "contradicts band.name: a standard band has its own",
                        f"leave out name or {other}",
                    )
        elif "centre" not in given and "width" not in given:
            yield Fault(("name",), "is required and missing", 'add name = "V", or centre and width')
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
        beyond = self.centre is not None and not BLUEST <= self.centre <= REDDEST
        if beyond and self.system == "Vega":
            yield Fault(
                ("system",),
                "has no Vega zero point at this centre, beyond the bands U and K",
                'write system = "AB" (and AB magnitudes)',
            )
