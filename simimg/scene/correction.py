"""The adaptive optics of a scene: what corrects the air, and by which guide star. SI inside."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from simimg.scene.keys import Choice, Flag, Quantity, Whole
from simimg.scene.table import Table, key
from simimg.scene.telescope import Angle

SENSOR_BANDS = ("B", "V", "R", "I", "J", "H", "K")
"""Bands in which the wavefront sensor may see the guide star."""

_Distance = Quantity("angle", at_least="0 arcsec", at_most="1 deg", sample="12 arcsec")


class Correction(Table):
    """Adaptive optics: a deformable mirror that follows the wavefront of a guide star."""

    heading: ClassVar[str] = "[correction]"

    actuators: Annotated[int, Whole(2, 200, 20)] = key(
        "Actuators across the aperture: the mirror follows the wavefront on squares of aperture / "
        "actuators."
    )
    rate: Annotated[
        float, Quantity("frequency", at_least="0.1 Hz", at_most="100 kHz", sample="1000 Hz")
    ] = key(
        "How often the wavefront is measured; the light of one period is one measurement's.",
        1000.0,
        absent="1000 Hz",
        meaning="a measurement every millisecond",
    )
    delay: Annotated[
        float | None, Quantity("time", at_least="0 s", at_most="10 s", sample="1.5 ms")
    ] = key(
        "Whole lag from the measurement of the wavefront to its correction.",
        None,
        absent="two periods of the rate",
        meaning="one to measure, one to compute and to hold (common practice)",
    )
    guide: Annotated[Literal["star", "laser"], Choice(("star", "laser"))] = key(
        "What the wavefront is measured on: a natural star, or the spot of a laser, which shows "
        "neither tilt nor the whole of what lies high up.",
        "star",
        absent='"star"',
        meaning="the wavefront is measured on a natural star",
    )
    guide_magnitude: Annotated[
        float | None, Quantity("magnitude", at_least=-30.0, at_most=40.0, sample="9.5")
    ] = key(
        "Vega magnitude of the guide star, or of the laser's spot, in the sensor's band.",
        None,
        absent="none",
        meaning="a guide star so bright that the sensor has no noise",
    )
    guide_offset: Annotated[float, _Distance] = key(
        "Distance of the guide star, or of the laser's spot, from the field centre.",
        0.0,
        absent="0 arcsec",
        meaning="the guide star stands at the field centre",
    )
    guide_position_angle: Annotated[float, Angle] = key(
        "Position angle of the guide star about the field centre, north through east.",
        0.0,
        absent="0 deg",
        meaning="the guide star stands north of the field centre",
        when=("guide_offset",),
    )
    laser_height: Annotated[
        float, Quantity("length", at_least="1 km", at_most="1000 km", sample="90 km")
    ] = key(
        "Height of the laser's spot above the telescope; layers beyond it are not seen.",
        90e3,
        absent="90 km",
        meaning="a laser's spot in the sodium layer",
        when=("guide",),
    )
    tilt_star_offset: Annotated[float, _Distance] = key(
        "Distance from the field centre of the natural star that shows the tilt beside a laser.",
        0.0,
        absent="0 arcsec",
        meaning="the tilt star of a laser stands at the field centre",
        when=("guide",),
    )
    tilt_star_position_angle: Annotated[float, Angle] = key(
        "Position angle of the tilt star about the field centre, north through east.",
        0.0,
        absent="0 deg",
        meaning="the tilt star stands north of the field centre",
        when=("tilt_star_offset",),
    )
    sensor_band: Annotated[str, Choice(SENSOR_BANDS)] = key(
        "Standard band in which the sensor sees the guide star.",
        "R",
        absent='"R"',
        meaning="the band in which the sensor sees the guide star",
        when=("guide_magnitude",),
    )
    sensor_efficiency: Annotated[float, Quantity("ratio", above=0.0, at_most=1.0, sample="0.3")] = (
        key(
            "Photons that the sensor detects over those that reach the air above the aperture.",
            0.3,
            absent="0.3",
            meaning="what air, optics and sensor let through of the guide star",
            when=("guide_magnitude",),
        )
    )
    noise: Annotated[bool, Flag()] = key(
        "False: the sensor has no noise, however faint the guide star.",
        True,
        absent="true",
        meaning="the guide star's photons are noisy",
        when=("guide_magnitude",),
    )
    aliasing: Annotated[bool, Flag()] = key(
        "False: the sensor does not take errors too fine for it for coarser ones.",
        True,
        absent="true",
        meaning="the sensor takes errors too fine for it for coarser ones",
    )

    @property
    def lag(self) -> float:
        """Whole lag (s), given or by default."""
        return 2.0 / self.rate if self.delay is None else self.delay
