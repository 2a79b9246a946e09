"""The air of a scene: seeing, airmass, extinction. SI inside, extinction in magnitudes."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar, Literal

from simimg.scene.keys import Choice, Quantity
from simimg.scene.table import Fault, Table, key


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

    @classmethod
    def complete(cls, given: Mapping[str, Any]) -> Mapping[str, Any]:
        """Airmass 1 where neither airmass nor altitude is given."""
        if "airmass" in given or "altitude" in given:
            return given
        return {**given, "airmass": 1.0}

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """One of seeing and image_quality; at most one of airmass and altitude."""
        if "seeing" in given and "image_quality" in given:
            yield Fault(
                ("image_quality",),
                "contradicts air.seeing: each fixes the turbulence",
                "leave out seeing or image_quality",
            )
        elif "seeing" not in given and "image_quality" not in given:
            yield Fault(
                ("seeing",),
                "is required in [air] and missing",
                'add seeing = "0.8 arcsec" (or image_quality), or leave out [air] to be above it',
            )
        if "airmass" in given and "altitude" in given:
            yield Fault(
                ("altitude",),
                "contradicts air.airmass: each fixes the other",
                "leave out airmass or altitude",
            )
