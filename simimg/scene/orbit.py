"""The orbit of a pair's second star about its first. Radians and seconds, years for its epoch."""

from __future__ import annotations

from typing import Annotated, ClassVar

from simimg.scene.keys import Quantity
from simimg.scene.table import Table, key
from simimg.scene.telescope import Angle


class Orbit(Table):
    """The seven elements of a visual binary."""

    heading: ClassVar[str] = "[pair.orbit]"

    period: Annotated[
        float, Quantity("time", at_least="1 s", at_most="1000000 yr", sample="41.6 yr")
    ] = key("Period; a year is a Julian one of 365.25 days.")
    periastron: Annotated[
        float, Quantity("Julian year", at_least=-1000000.0, at_most=1000000.0)
    ] = key("Julian year of a passage through periastron.")
    eccentricity: Annotated[float, Quantity("number", at_least=0.0, below=1.0, sample="0.28")] = (
        key("Eccentricity.")
    )
    semi_major_axis: Annotated[
        float, Quantity("angle", above="0 arcsec", at_most="10 deg", sample="0.9 arcsec")
    ] = key("Semi-major axis of the orbit of the second star about the first.")
    inclination: Annotated[
        float, Quantity("angle", at_least="0 deg", at_most="180 deg", sample="59 deg")
    ] = key("Angle between the orbit and the plane of the sky; above 90 deg it runs clockwise.")
    node: Annotated[float, Angle] = key("Position angle of the node, north through east.")
    argument: Annotated[float, Angle] = key(
        "Angle in the orbit from the node to periastron, in the direction of motion."
    )
