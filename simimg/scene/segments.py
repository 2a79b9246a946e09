"""A primary mirror of hexagonal segments. Metres and radians inside."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Annotated, ClassVar

from simimg.scene.keys import Flag, Quantity, Whole
from simimg.scene.table import Fault, Table, key
from simimg.scene.wavefront import PathError, Seed


class Segments(Table):
    """Hexagons side by side, ring by ring around the middle."""

    heading: ClassVar[str] = "[telescope.segments]"

    rings: Annotated[int, Whole(1, 20, 2)] = key("Rings of segments about the central one.")
    width: Annotated[float, Quantity("length", above="0 mm", at_most="100 m", sample="1.2 m")] = (
        key("Width of a segment from flat to flat.")
    )
    gap: Annotated[float, Quantity("length", at_least="0 mm", at_most="10 m", sample="5 mm")] = key(
        "Gap between the flats of neighbours.",
        0.0,
        absent="0 mm",
        meaning="the segments touch one another",
    )
    piston: Annotated[float, PathError] = key(
        "Rms over the segments of their piston, of optical path.",
        0.0,
        absent="0 nm",
        meaning="the segments are in phase",
    )
    tip_tilt: Annotated[
        float, Quantity("angle", at_least="0 arcsec", at_most="1 deg", sample="0.01 arcsec")
    ] = key(
        "Rms over the segments of the wavefront's tilt along each axis.",
        0.0,
        absent="0 arcsec",
        meaning="the segments point the same way",
    )
    missing_centre: Annotated[bool, Flag()] = key(
        "True where there is no central segment.",
        False,
        absent="false",
        meaning="the central segment is there",
    )
    seed: Annotated[int, Seed] = key(
        "Seed from which the errors of the segments are drawn.",
        0,
        absent="0",
        meaning="the segments with the errors of seed 0",
    )

    @property
    def diameter(self) -> float:
        """Diameter of the circle about the outermost corners (m)."""
        farthest = self.rings * (self.width + self.gap) + 0.5 * self.width
        return 2.0 * math.hypot(farthest, 0.5 * self.width / math.sqrt(3.0))

    def agree(self) -> Iterator[Fault]:
        """A gap must be narrower than what it parts."""
        if self.gap >= self.width:
            yield Fault(("gap",), "must be less than width", 'write a gap such as "5 mm"')
