"""One layer of turbulence above the telescope of a scene. SI inside."""

from __future__ import annotations

from typing import Annotated, ClassVar

from simimg.scene.keys import Quantity
from simimg.scene.table import Table, key
from simimg.scene.telescope import Angle

MOST_LAYERS = 64


class AirLayer(Table):
    """One layer of turbulence, carried past by the wind."""

    heading: ClassVar[str] = "[[air.layer]]"

    height: Annotated[
        float, Quantity("length", at_least="0 m", at_most="100 km", sample="8000 m")
    ] = key("Height above the telescope, at the zenith.")
    share: Annotated[float, Quantity("ratio", at_least=0.0, at_most=1e6, sample="0.3")] = key(
        "Strength of its turbulence (its integral of Cn2 dh) relative to that of the other layers: "
        "shares are divided by their sum.",
        1.0,
        absent="1",
        meaning="layers without a share are equally strong",
    )
    wind: Annotated[float, Quantity("speed", at_least="0 m/s", at_most="200 m/s")] = key(
        "Speed at which it moves across the line of sight.",
        10.0,
        absent="10 m/s",
        meaning="the layer moves as fast as the default one",
    )
    direction: Annotated[float, Angle] = key(
        "Position angle on the sky towards which it moves, north through east.",
        0.0,
        absent="0 deg",
        meaning="the layer moves towards north",
    )
