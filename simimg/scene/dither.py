"""Where the telescope points from exposure to exposure: a pattern of small offsets. Radians."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar

from simimg.scene.keys import Choice, Quantity, Several
from simimg.scene.readers import UpTo
from simimg.scene.table import Fault, Table, key
from simimg.scene.telescope import Angle

PATTERNS = ("line", "square", "random")
MOST_OFFSETS = 10_000

_Step = Quantity("angle", above="0 arcsec", at_most="10 deg", sample="3 arcsec")
_Offset = Quantity("angle", at_least="-10 deg", at_most="10 deg", sample="3 arcsec")


class Dither(Table):
    """Offsets of the aim between exposures: by a pattern, or one by one."""

    heading: ClassVar[str] = "[exposure.dither]"
    written: ClassVar[str] = 'dither = { pattern = "square", step = "3 arcsec" }'

    pattern: Annotated[str | None, Choice(PATTERNS)] = key(
        "line: steps in one direction; square: a square grid, from its middle outwards; random: "
        "anywhere in a disc. The first exposure is at the field centre.",
        None,
    )
    step: Annotated[float | None, _Step] = key(
        "From one exposure to the next on a line or a grid; radius of the disc.", None
    )
    position_angle: Annotated[float, Angle] = key(
        "Position angle of the line, or of the grid's columns, north through east.",
        0.0,
        absent="0 deg",
        meaning="the line, or the grid's columns, run north",
        when=("pattern",),
    )
    offsets: Annotated[
        tuple[tuple[float, float], ...] | None, UpTo(Several(_Offset, 2), MOST_OFFSETS)
    ] = key(
        "In place of a pattern: offset of the aim towards east and north, one pair for each "
        "exposure; of more exposures the first again.",
        None,
    )

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """A pattern with its step, or offsets."""
        if "offsets" in given:
            for name in ("pattern", "step", "position_angle"):
                if name in given:
                    yield Fault(
                        (name,),
                        "contradicts exposure.dither.offsets: they say every place",
                        f"leave out {name} or offsets",
                    )
        elif "pattern" not in given:
            yield Fault(
                ("pattern",),
                "is required in dither and missing",
                f"write {cls.written}, or offsets",
            )
        elif "step" not in given:
            yield Fault(
                ("step",), "is required beside pattern and missing", f"add {cls.sample('step')}"
            )
