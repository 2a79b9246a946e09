"""What a camera's detector does to a frame beyond ideal counting; off unless asked for. SI."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Annotated, ClassVar

from simimg.scene.electronics import Electronics
from simimg.scene.keys import Choice, Flag, Quantity, Whole
from simimg.scene.table import Fault, Table, key

_SHARE = Quantity("ratio", at_least=0.0, below=1.0, sample="0.001")


class Shutter(Table):
    """A shutter that takes time to open and to close."""

    heading: ClassVar[str] = "[camera.shutter]"
    written: ClassVar[str] = 'shutter = { kind = "iris", travel = "20 ms" }'

    kind: Annotated[str, Choice(("iris", "blade"))] = key(
        "An iris opens from the middle outwards, a blade from the first column to the last; both "
        "close the other way."
    )
    travel: Annotated[float, Quantity("time", above="0 s", at_most="100 s", sample="20 ms")] = key(
        "Time that opening takes, and closing."
    )


class Detector(Electronics):
    """Fixed patterns, cosmic rays, bleeding, the shutter; all of one serial number."""

    flat_rms: Annotated[float, Quantity("ratio", at_least=0.0, at_most=0.2, sample="0.01")] = key(
        "Relative scatter of the response from pixel to pixel, rms.",
        0.0,
        absent="0",
        meaning="all pixels respond alike",
    )
    vignetting: Annotated[float, Quantity("ratio", at_least=0.0, at_most=0.95, sample="0.15")] = (
        key(
            "Share of the light that is lost in the corners of the detector.",
            0.0,
            absent="0",
            meaning="the field is evenly lit",
        )
    )
    dust_rings: Annotated[int, Whole(0, 10_000, 8)] = key(
        "Grains of dust whose shadows lie on the detector.", 0, absent="0", meaning="no dust"
    )
    dark_rms: Annotated[float, Quantity("ratio", at_least=0.0, at_most=2.0, sample="0.1")] = key(
        "Relative scatter of the dark current from pixel to pixel, rms.",
        0.0,
        absent="0",
        meaning="all pixels have the same dark current",
    )
    hot_pixel_fraction: Annotated[float, _SHARE] = key(
        "Share of the pixels that are hot.", 0.0, absent="0", meaning="no hot pixels"
    )
    hot_pixel_current: Annotated[
        float, Quantity("electron rate", at_least="0 electron/s", at_most="1000000 electron/s")
    ] = key(
        "Mean extra dark current of a hot pixel, exponentially distributed among them.",
        20.0,
        absent="20 electron/s",
        meaning="hot pixels of a common kind",
        when=("hot_pixel_fraction",),
    )
    flickering_pixel_fraction: Annotated[float, _SHARE] = key(
        "Share of the pixels whose dark current jumps between two levels from frame to frame.",
        0.0,
        absent="0",
        meaning="no flickering pixels",
    )
    flicker_current: Annotated[
        float, Quantity("electron rate", at_least="0 electron/s", at_most="1000000 electron/s")
    ] = key(
        "Mean height of that jump.",
        5.0,
        absent="5 electron/s",
        meaning="jumps of a common height",
        when=("flickering_pixel_fraction",),
    )
    dead_pixel_fraction: Annotated[float, _SHARE] = key(
        "Share of the pixels that do not respond to light.",
        0.0,
        absent="0",
        meaning="no dead pixels",
    )
    bad_columns: Annotated[int, Whole(0, 32768, 2)] = key(
        "Columns that respond badly from some row on.", 0, absent="0", meaning="no bad columns"
    )
    cosmic_ray_rate: Annotated[
        float, Quantity("hit rate", at_least="0 /(cm2 min)", at_most="1000000 /(cm2 min)")
    ] = key(
        "Cosmic rays that hit the detector, by area and time; needs pixel_size.",
        0.0,
        absent="0 / (cm2 min)",
        meaning="no cosmic rays",
    )
    detector_thickness: Annotated[
        float, Quantity("length", at_least="0.1 um", at_most="10 mm", sample="15 um")
    ] = key(
        "Thickness of the sensitive layer, through which cosmic rays leave their tracks.",
        15.0 * 1e-6,
        absent="15 um",
        meaning="tracks through a thin detector",
        when=("cosmic_ray_rate",),
    )
    bleeding: Annotated[bool, Flag()] = key(
        "True where a full pixel spills its excess along its column; needs full_well.",
        False,
        absent="false",
        meaning="the excess of a full pixel is lost",
        when=("full_well",),
    )
    shutter: Shutter | None = key(
        "A shutter that takes time to open and to close.",
        None,
        absent="none",
        meaning="the shutter takes no time",
    )

    def agree(self) -> Iterator[Fault]:
        """Bleeding needs a full well."""
        yield from super().agree()
        if self.bleeding and getattr(self, "full_well", None) is None:
            yield Fault(
                ("bleeding",),
                "needs camera.full_well, which is missing",
                'add full_well = "90000 electron"',
            )
