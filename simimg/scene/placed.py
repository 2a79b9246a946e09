"""What every object of a scene has: a place, a motion, a brightness and a colour. SI inside.

A place is given in one of three ways (offsets, right ascension and declination, pixels), a
brightness in one of two (magnitudes, electrons detected per exposure).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

from simimg.scene import colours
from simimg.scene.keys import Quantity, Text
from simimg.scene.motion import Motion
from simimg.scene.places import ROUTES, brightness_faults, place_faults
from simimg.scene.table import Fault, Table, key

Magnitude = Quantity("magnitude", at_least=-50.0, at_most=60.0)
Electrons = Quantity("signal", above=0.0, at_most=1e18)

_Offset = Quantity("angle", at_least="-60 deg", at_most="60 deg", sample="1.5 arcsec")
_Pixel = Quantity("pixels", at_least=-1e6, at_most=1e6)


class Placed(Table):
    """A label and a place, given in one way; default the field centre."""

    label: Annotated[str | None, Text(64, sample="SR-014")] = key(
        "Name of the object in every table.", None
    )
    east: Annotated[float | None, _Offset] = key(
        "Offset towards east from the field centre; None where the place is given otherwise.",
        None,
        absent="0 arcsec",
        meaning="in the middle of the field",
        unless=("ra", "dec", "x", "y"),
    )
    north: Annotated[float | None, _Offset] = key(
        "Offset towards north from the field centre; None where the place is given otherwise.",
        None,
        absent="0 arcsec",
        meaning="in the middle of the field",
        unless=("ra", "dec", "x", "y"),
    )
    ra: Annotated[
        float | None, Quantity("right ascension", at_least="0 deg", at_most="360 deg")
    ] = key("Right ascension, with dec in place of the offsets; needs [pointing].", None)
    dec: Annotated[float | None, Quantity("declination", at_least="-90 deg", at_most="90 deg")] = (
        key("Declination, with ra in place of the offsets; needs [pointing].", None)
    )
    x: Annotated[float | None, _Pixel] = key(
        "Column, from 0 at the centre of the first pixel, with y in place of the offsets.", None
    )
    y: Annotated[float | None, _Pixel] = key(
        "Row, from 0 at the centre of the first pixel, with x in place of the offsets.", None
    )
    motion: Motion | None = key("Motion among the stars; the place is that at mid-exposure.", None)
    magnitude_band: Annotated[str | None, colours.MagnitudeBand] = key(colours.BAND_WORDS, None)
    magnitude_system: Annotated[Literal["Vega", "AB"] | None, colours.MagnitudeSystem] = key(
        colours.SYSTEM_WORDS, None
    )

    @classmethod
    def complete(cls, given: Mapping[str, Any]) -> Mapping[str, Any]:
        """The field centre where no place is given."""
        if any(k in given for route in ROUTES[1:] for k in route):
            return given
        return {"east": "0 arcsec", "north": "0 arcsec", **given}

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """One way to the place; another band only for a magnitude."""
        yield from place_faults(given)
        yield from colours.abroad_faults(given, given)

    def agree(self) -> Iterator[Fault]:
        """The system must be one of the band's."""
        wrong = colours.vega_fault(self.magnitude_band, self.magnitude_system)
        if wrong is not None:
            yield Fault(("magnitude_system",), *wrong)


class Luminous(Placed):
    """An object with one brightness and one colour."""

    magnitude: Annotated[float | None, Magnitude] = key(
        "Magnitude in the band, above the air.", None
    )
    electrons: Annotated[float | None, Electrons] = key(
        "Electrons detected per exposure over the whole image, in place of the magnitude.", None
    )
    temperature: Annotated[float | None, colours.Temperature] = key(
        "Temperature of a blackbody of this colour.",
        None,
        absent="none",
        meaning="its spectrum is flat in f_nu",
        unless=("spectrum", "spectral_index"),
    )
    spectrum: Annotated[str | None, colours.SpectrumFile] = key(
        "Table of wavelength and flux, with units, in place of the temperature.", None
    )
    spectral_index: Annotated[float | None, colours.SpectralIndex] = key(
        "Power of frequency by which f_nu goes, in place of the temperature.", None
    )

    hints: ClassVar[Mapping[str, tuple[str, str]]] = {
        "temperatures": ("is a key of a pair", 'write temperature = "5800 K"'),
        "spectra": ("is a key of a pair", 'write spectrum = "spectrum.ecsv"'),
    }

    @property
    def coloured(self) -> bool:
        """True where a colour is given."""
        return any(getattr(self, name) is not None for name in colours.COLOURS)

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """One way to the place, one to the brightness, one colour at most."""
        yield from super().together(given)
        yield from brightness_faults(given, "magnitude", ("11.2", "1e5"))
        yield from colours.colour_faults(given)
