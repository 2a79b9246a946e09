"""The sky's light and the exposure. SI inside."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar

from simimg.scene.dither import Dither
from simimg.scene.keys import Instant, Quantity, Whole
from simimg.scene.table import Fault, Table, key


class Sky(Table):
    """The uniform light of the sky; a scene without it has a dark sky."""

    heading: ClassVar[str] = "[sky]"

    surface_brightness: Annotated[
        float | None, Quantity("surface brightness", at_least=-30.0, at_most=50.0)
    ] = key("Magnitudes per square arcsecond in the band, as observed.", None)
    electrons: Annotated[float | None, Quantity("signal", at_least=0.0, at_most=1e12)] = key(
        "Electrons detected in each pixel in each exposure, in place of the brightness.", None
    )

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """One of the two ways to say how bright."""
        if "surface_brightness" in given and "electrons" in given:
            yield Fault(
                ("electrons",),
                "contradicts sky.surface_brightness: each fixes the other",
                "leave out surface_brightness or electrons",
            )
        elif "surface_brightness" not in given and "electrons" not in given:
            yield Fault(
                ("surface_brightness",),
                "is required in [sky] and missing",
                "add surface_brightness = 21.4, or leave out [sky] for a dark sky",
            )


class Exposure(Table):
    """How long, how often, and with which noise."""

    heading: ClassVar[str] = "[exposure]"

    time: Annotated[float | None, Quantity("time", above="0 s", at_most="10000000 s")] = key(
        "Exposure time of one frame; needed unless every signal is in electrons.", None
    )
    frame_time: Annotated[
        float | None, Quantity("time", above="0 s", at_most="10 s", sample="10 ms")
    ] = key(
        "Exposure time of each frame of a cube that shows the air instant by instant, in place of "
        "time; count is then the number of its frames, and electrons and rates are those of one.",
        None,
    )
    substeps: Annotated[int, Whole(1, 1000, 4)] = key(
        "Instants that are averaged in each frame of a cube, even in time.",
        1,
        absent="1",
        meaning="the air stands still during a frame",
        when=("frame_time",),
    )
    count: Annotated[int, Whole(1, 100_000, 3)] = key(
        "Number of exposures, or of the frames of a cube.", 1, absent="1", meaning="one exposure"
    )
    seed: Annotated[int, Whole(0, 2**63 - 1, 20260412)] = key(
        "Seed of all noise; the same seed gives the same frame.",
        0,
        absent="0",
        meaning="the noise of seed 0",
    )
    start: Annotated[str | None, Instant()] = key(
        "Begin of the first exposure in UTC; exposure i begins i (time + overhead) later.",
        None,
        absent="none",
        meaning="no DATE-OBS in the header",
    )
    overhead: Annotated[
        float, Quantity("time", at_least="0 s", at_most="10000000 s", sample="5 s")
    ] = key(
        "Time from the end of one exposure to the begin of the next.",
        0.0,
        absent="0 s",
        meaning="exposures follow one another at once",
    )
    dither: Dither | None = key(
        "Offsets of the aim from exposure to exposure.",
        None,
        absent="none",
        meaning="every exposure points at the field centre",
    )

    @classmethod
    def complete(cls, given: Mapping[str, Any]) -> Mapping[str, Any]:
        """The exposure time of a frame is that of an exposure."""
        if "frame_time" in given and "time" not in given:
            return {**given, "time": given["frame_time"]}
        return given

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """One of the two times, and sub-steps only of frames."""
        if "time" in given and "frame_time" in given:
            yield Fault(
                ("frame_time",),
                "contradicts exposure.time: one is of each frame of a cube, the other of a frame "
                "by itself",
                "leave out time or frame_time",
            )
        if "substeps" in given and "frame_time" not in given:
            yield Fault(
                ("substeps",),
                "is of the frames of a cube, and there is no frame_time",
                'add frame_time = "10 ms", or leave out substeps',
            )
