"""The air of a scene: seeing, airmass, extinction. SI inside, extinction in magnitudes."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

from simimg.scene.airlayer import MOST_LAYERS, AirLayer
from simimg.scene.keys import Choice, Flag, Quantity
from simimg.scene.table import Fault, Table, key
from simimg.scene.telescope import Angle

THICKEST = 38.0
"""Largest airmass that still has a zenith distance (Pickering 2002: the horizon's)."""


class Air(Table):
    """The atmosphere above the telescope; a scene without it is above the atmosphere."""

    heading: ClassVar[str] = "[air]"

    seeing: Annotated[
        float | None, Quantity("angle", at_least="0.001 arcsec", at_most="60 arcsec")
    ] = key(
        "Long-exposure FWHM at 500 nm at the zenith for an infinite outer scale, as a seeing "
        "monitor quotes it.",
        None,
    )
    image_quality: Annotated[
        float | None,
        Quantity("angle", at_least="0.001 arcsec", at_most="60 arcsec", sample="1.0 arcsec"),
    ] = key(
        "FWHM delivered at the focal plane in the band, in place of the seeing, which is solved "
        "from it.",
        None,
    )
    outer_scale: Annotated[
        float, Quantity("length", at_least="0.1 m", at_most="1000 km", sample="25 m")
    ] = key(
        "Outer scale of the turbulence (von Karman).",
        math.inf,
        absent="infinite",
        meaning="Kolmogorov turbulence without an outer scale",
    )
    airmass: Annotated[
        float | None, Quantity("number", at_least=1.0, at_most=40.0, sample="1.2")
    ] = key(
        "Airmass of the field; None where the altitude is given.",
        None,
        absent="1",
        meaning="the field is at the zenith",
        unless=("altitude",),
    )
    altitude: Annotated[
        float | None, Quantity("angle", at_least="1 deg", at_most="90 deg", sample="56 deg")
    ] = key("Altitude of the field above the horizon, in place of the airmass.", None)
    extinction: Annotated[
        float, Quantity("magnitude", at_least=0.0, at_most=20.0, sample="0.14")
    ] = key(
        "Extinction in the band, in magnitudes per airmass.",
        0.0,
        absent="0",
        meaning="the air dims nothing",
    )
    tilt_removed: Annotated[Literal["near", "far"] | None, Choice(("near", "far"))] = key(
        "Average of exposures whose image motion is removed (Fried 1966), in the near-field or "
        "the far-field approximation.",
        None,
        absent="no",
        meaning="image motion is part of the long exposure",
    )
    pressure: Annotated[
        float, Quantity("pressure", at_least="0 Pa", at_most="1400 hPa", sample="780 hPa")
    ] = key(
        "Pressure of the air at the telescope, which refraction depends on.",
        101325.0,
        absent="1013.25 hPa",
        meaning="the telescope stands at sea level",
        when=("dispersion",),
    )
    temperature: Annotated[
        float, Quantity("temperature", at_least="-100 degC", at_most="100 degC", sample="7 degC")
    ] = key(
        "Temperature of the air at the telescope, which refraction depends on.",
        288.15,
        absent="15 degC",
        meaning="the air at the telescope is mild",
        when=("dispersion",),
    )
    relative_humidity: Annotated[
        float, Quantity("ratio", at_least=0.0, at_most=1.0, sample="0.3")
    ] = key(
        "Relative humidity of the air at the telescope, which refraction depends on a little.",
        0.0,
        absent="0",
        meaning="the air at the telescope is dry",
        when=("dispersion",),
    )
    parallactic_angle: Annotated[float, Angle] = key(
        "Position angle of the zenith, north through east, along which the air disperses light.",
        0.0,
        absent="0 deg",
        meaning="the zenith lies north: light is dispersed from south to north",
        when=("dispersion",),
    )
    dispersion: Annotated[bool, Flag()] = key(
        "True: the air refracts each colour differently, and draws stars out along the parallactic "
        "angle.",
        False,
        absent="false",
        meaning="the air disperses no light",
    )
    dispersion_corrector: Annotated[bool, Flag()] = key(
        "True: a corrector takes the dispersion away.",
        False,
        absent="false",
        meaning="no corrector takes the dispersion away",
        when=("dispersion",),
    )

    layer: tuple[AirLayer, ...] = key(
        "Layers of the turbulence, on which hang how fast it changes and over which angle.",
        (),
        absent="one layer",
        meaning="all turbulence lies at the telescope, 0 m, in a wind of 10 m/s",
    )

    @classmethod
    def complete(cls, given: Mapping[str, Any]) -> Mapping[str, Any]:
        """Airmass 1 where neither airmass nor altitude is given."""
        if "airmass" in given or "altitude" in given:
            return given
        return {**given, "airmass": 1.0}

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """At most one of seeing and image_quality, and of airmass and altitude.

        The scene itself asks for one of the first two, unless it has a measured PSF.
        """
        if "seeing" in given and "image_quality" in given:
            yield Fault(
                ("image_quality",),
                "contradicts air.seeing: each fixes the turbulence",
                "leave out seeing or image_quality",
            )
        if "airmass" in given and "altitude" in given:
            yield Fault(
                ("altitude",),
                "contradicts air.airmass: each fixes the other",
                "leave out airmass or altitude",
            )
        layers = given.get("layer")
        if isinstance(layers, Mapping):
            yield Fault(("layer",), "is a single table", "write [[air.layer]], in double brackets")
        elif isinstance(layers, list) and len(layers) > MOST_LAYERS:
            yield Fault(
                ("layer",), f"there are {len(layers)} layers", f"write at most {MOST_LAYERS}"
            )

    def agree(self) -> Iterator[Fault]:
        """Refraction needs a zenith distance, turbulence a layer that has some."""
        if self.layer and not any(one.share for one in self.layer):
            yield Fault(
                ("layer", 0, "share"),
                "is 0 for every layer: there is no turbulence to share",
                "write share = 1 for one of them",
            )
        if self.dispersion and self.airmass is not None and self.airmass > THICKEST:
            yield Fault(
                ("dispersion",),
                f"needs an airmass of at most {THICKEST:g}, the horizon's",
                "write a smaller airmass, or dispersion = false",
            )
