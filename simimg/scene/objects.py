"""What may stand in the sky of a scene: stars, pairs, shapes, pictures, catalogues. SI inside.

What they have in common, a place, a brightness and a colour, is in `simimg.scene.placed`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field

from simimg.quantities import KINDS, QuantityError, shown, unit_factor
from simimg.scene import colours
from simimg.scene.keys import FileName, Quantity, Reader, Several, Text, fault, nearest
from simimg.scene.orbit import Orbit
from simimg.scene.placed import Electrons, Luminous, Magnitude, Placed
from simimg.scene.places import brightness_faults, place_faults
from simimg.scene.table import Fault, Table, key
from simimg.scene.telescope import Angle

__all__ = [
    "COLUMNS",
    "COLUMN_KINDS",
    "Catalogue",
    "Disc",
    "Galaxy",
    "Luminous",
    "Names",
    "Pair",
    "Picture",
    "Placed",
    "Ring",
    "Star",
]

_Size = Quantity("angle", at_least="0.000001 arcsec", at_most="10 deg", sample="2 arcsec")
_AxisRatio = Quantity("ratio", at_least=0.01, at_most=1.0, sample="0.7")


class Star(Luminous):
    """A point."""

    heading: ClassVar[str] = "[[star]]"


class Pair(Placed):
    """Two points; the place is that of the first."""

    heading: ClassVar[str] = "[[pair]]"

    magnitudes: Annotated[tuple[float, float] | None, Several(Magnitude, 2)] = key(
        "Magnitudes of the first and the second star in the band, above the air.", None
    )
    electrons: Annotated[tuple[float, float] | None, Several(Electrons, 2)] = key(
        "Electrons detected per exposure of each star, in place of the magnitudes.", None
    )
    separation: Annotated[
        float | None, Quantity("angle", above="0 arcsec", at_most="10 deg", sample="0.35 arcsec")
    ] = key("Separation of the two stars; None where an orbit gives it.", None)
    position_angle: Annotated[float, Angle] = key(
        "Position angle of the second star from the first, north through east.",
        0.0,
        absent="0 deg",
        meaning="the second star lies north of the first",
        unless=("orbit",),
    )
    orbit: Orbit | None = key(
        "Orbit of the second star about the first, in place of separation and position angle, "
        "which then hang on exposure.start.",
        None,
    )
    temperatures: Annotated[tuple[float, float] | None, Several(colours.Temperature, 2)] = key(
        "Temperatures of blackbodies of the two stars' colours.",
        None,
        absent="none",
        meaning="both spectra are flat in f_nu",
        unless=("spectra",),
    )
    spectra: Annotated[tuple[str, str] | None, Several(colours.SpectrumFile, 2)] = key(
        "Tables of wavelength and flux, with units, in place of the temperatures.", None
    )

    hints: ClassVar[Mapping[str, tuple[str, str]]] = {
        "temperature": ("is not a key of a pair", 'write temperatures = ["9000 K", "4000 K"]'),
        "spectrum": ("is not a key of a pair", 'write spectra = ["first.ecsv", "second.ecsv"]'),
        "spectral_index": ("is not a key of a pair", "write temperatures or spectra, two of them"),
    }

    @property
    def coloured(self) -> bool:
        """True where the two colours are given."""
        return self.temperatures is not None or self.spectra is not None

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """One way to each place, one to the two brightnesses, one to the colours at most."""
        yield from super().together(given)
        if "magnitude" in given and "magnitudes" not in given:
            yield Fault(("magnitude",), "is not a key of a pair", "write magnitudes = [11.2, 11.9]")
        else:
            yield from brightness_faults(given, "magnitudes", ("[11.2, 11.9]", "[5e5, 2e5]"))
        yield from colours.colour_faults(given, colours.PAIR_COLOURS)
        if "orbit" not in given:
            if "separation" not in given:
                sample = cls.sample("separation")
                yield Fault(("separation",), "is required and missing", f"add {sample}, or orbit")
            return
        for name in ("separation", "position_angle"):
            if name in given:
                yield Fault(
                    (name,),
                    "contradicts orbit, which gives it",
                    f"leave out {name} or orbit",
                )


class Galaxy(Luminous):
    """A Sersic profile."""

    heading: ClassVar[str] = "[[galaxy]]"

    sersic_index: Annotated[float, Quantity("number", at_least=0.3, at_most=10.0, sample="1.0")] = (
        key(
            "Sersic index: 1 an exponential disc, 4 a de Vaucouleurs profile.",
            1.0,
            absent="1",
            meaning="an exponential disc",
        )
    )
    effective_radius: Annotated[float, _Size] = key(
        "Radius along the major axis that holds half of the light."
    )
    axis_ratio: Annotated[float, _AxisRatio] = key(
        "Minor over major axis.", 1.0, absent="1", meaning="round"
    )
    position_angle: Annotated[float, Angle] = key(
        "Position angle of the major axis.",
        0.0,
        absent="0 deg",
        meaning="the major axis lies north to south",
    )


class Disc(Luminous):
    """A disc such as a planet's, full or in phase."""

    heading: ClassVar[str] = "[[disc]]"

    diameter: Annotated[float, _Size] = key("Diameter of the disc along its longer axis.")
    limb_darkening: Annotated[
        float, Quantity("number", at_least=0.0, at_most=1.0, sample="0.5")
    ] = key("Linear coefficient of limb darkening.", 0.0, absent="0", meaning="evenly bright")
    phase_angle: Annotated[
        float, Quantity("angle", at_least="0 deg", at_most="179 deg", sample="60 deg")
    ] = key(
        "Angle between the light and the line of sight: 0 full, 90 deg half lit.",
        0.0,
        absent="0 deg",
        meaning="fully lit",
    )
    position_angle: Annotated[float, Angle] = key(
        "Position angle of the lit limb.",
        0.0,
        absent="0 deg",
        meaning="the lit limb lies north",
    )
    axis_ratio: Annotated[float, _AxisRatio] = key(
        "Shorter over longer axis of the outline.", 1.0, absent="1", meaning="round"
    )


class Ring(Luminous):
    """A flat ring, seen at an inclination."""

    heading: ClassVar[str] = "[[ring]]"

    inner_diameter: Annotated[
        float, Quantity("angle", at_least="0 arcsec", at_most="10 deg", sample="4 arcsec")
    ] = key("Inner diameter along the longer axis.")
    outer_diameter: Annotated[float, _Size] = key("Outer diameter along the longer axis.")
    inclination: Annotated[
        float, Quantity("angle", at_least="0 deg", at_most="90 deg", sample="60 deg")
    ] = key(
        "Angle between the ring's axis and the line of sight.",
        0.0,
        absent="0 deg",
        meaning="seen face on",
    )
    position_angle: Annotated[float, Angle] = key(
        "Position angle of the longer axis.",
        0.0,
        absent="0 deg",
        meaning="the longer axis lies north to south",
    )

    def agree(self) -> Iterator[Fault]:
        """The ring must have a width."""
        if self.inner_diameter >= self.outer_diameter:
            yield Fault(
                ("inner_diameter",),
                "must be below outer_diameter",
                'write, say, inner_diameter = "4 arcsec" and outer_diameter = "6 arcsec"',
            )


class Picture(Luminous):
    """A picture from a file, as a map of surface brightness."""

    heading: ClassVar[str] = "[[picture]]"

    file: Annotated[str, FileName("spiral.png")] = key(
        "FITS, PNG or TIFF file; its values are taken as surface brightness."
    )
    width: Annotated[float, _Size] = key("Angle that the picture's width spans on the sky.")
    position_angle: Annotated[float, Angle] = key(
        "Position angle of the picture's upward direction.",
        0.0,
        absent="0 deg",
        meaning="the picture's top lies north",
    )


COLUMN_KINDS: Mapping[str, str] = {
    "east": "angle",
    "north": "angle",
    "ra": "angle",
    "dec": "angle",
    "x": "pixels",
    "y": "pixels",
    "magnitude": "magnitude",
    "electrons": "electrons",
    "temperature": "temperature",
}
"""Kind of quantity in each column of a catalogue that may have a unit."""

COLUMNS = (*COLUMN_KINDS, "label")
"""What a catalogue's columns may hold."""


class Names(Reader):
    """A small table from the meanings of columns to text."""

    def __init__(self, known: tuple[str, ...], sample: str, what: str) -> None:
        self.known = known
        self.sample = sample
        self.what = what

    def read(self, value: Any) -> dict[str, str]:
        """The names, each as text."""
        if not isinstance(value, Mapping):
            raise fault(f"must be a table, got {shown(value)}", f"write {self.example}")
        for name, text in value.items():
            if name not in self.known:
                raise fault(
                    f"{shown(name)} is not a column of a catalogue", nearest(name, [*self.known])
                )
            if not isinstance(text, str) or not text.strip() or len(text) > 200:
                raise fault(
                    f"{name} must be {self.what}, got {shown(text)}", f"write {self.example}, say"
                )
        return dict(value)

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return self.sample

    @property
    def range(self) -> str:
        """The keys of the table."""
        return f"{self.what} for some of " + ", ".join(self.known)


class Catalogue(Table):
    """Stars from the rows of a table."""

    heading: ClassVar[str] = "[[catalogue]]"

    label: Annotated[str | None, Text(64, sample="field stars")] = key(
        "Name of the catalogue in messages.", None
    )
    file: Annotated[str, FileName("stars.ecsv")] = key("ECSV, CSV, FITS or VOTable file.")
    columns: Annotated[
        dict[str, str],
        Names(COLUMNS, '{ east = "dx", north = "dy", magnitude = "m" }', "the name of a column"),
    ] = Field(
        default_factory=dict,
        description="Which columns hold the place, the brightness, the temperature and the labels; "
        "those of the same names where it names none.",
    )
    units: Annotated[
        dict[str, str], Names(tuple(COLUMN_KINDS), '{ east = "arcsec" }', "a unit")
    ] = Field(
        default_factory=dict,
        description="Units of columns for which the file gives none.",
    )
    magnitude_band: Annotated[str | None, colours.MagnitudeBand] = key(colours.BAND_WORDS, None)
    magnitude_system: Annotated[Literal["Vega", "AB"] | None, colours.MagnitudeSystem] = key(
        colours.SYSTEM_WORDS, None
    )

    def agree(self) -> Iterator[Fault]:
        """One place and one brightness; units of the right kind."""
        yield from place_faults(self.columns, ("columns",))
        if "magnitude" in self.columns and "electrons" in self.columns:
            yield from brightness_faults(self.columns, "magnitude", ("", ""), ("columns",))
        given = self.model_fields_set
        yield from colours.abroad_faults(dict.fromkeys(given), self.columns)
        wrong = colours.vega_fault(self.magnitude_band, self.magnitude_system)
        if wrong is not None:
            yield Fault(("magnitude_system",), *wrong)
        for name, unit in self.units.items():
            kind = COLUMN_KINDS[name]
            if unit.strip() in (KINDS[kind].offsets or {}):
                yield Fault(("units", name), "must be an absolute unit", 'write "K"')
                continue
            try:
                unit_factor(unit, kind)
            except QuantityError as error:
                usual = KINDS[kind].usual or next(iter(KINDS[kind].units))
                yield Fault(("units", name), error.what, f'write "{usual}", say')
