"""What moves during an exposure: the telescope's aim, and objects in the sky. Radians, seconds."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, ClassVar

from simimg.scene.keys import Quantity, Text
from simimg.scene.readers import EachAxis
from simimg.scene.table import Fault, Table, key
from simimg.scene.telescope import Angle

_Rate = Quantity("angular rate", at_least="0 arcsec/s", at_most="10 deg/s")


class Drift(Table):
    """A steady drift of the telescope's aim."""

    heading: ClassVar[str] = "[pointing.drift]"
    written: ClassVar[str] = 'drift = { rate = "0.02 arcsec/s", position_angle = "90 deg" }'

    rate: Annotated[float, _Rate] = key("How fast the aim drifts.")
    position_angle: Annotated[float, Angle] = key(
        "Position angle in which the aim drifts, north through east.",
        0.0,
        absent="0 deg",
        meaning="the aim drifts towards north",
    )


class Motion(Table):
    """The steady motion of an object among the stars."""

    heading: ClassVar[str] = "[motion]"
    written: ClassVar[str] = 'motion = { rate = "30 arcsec/h", position_angle = "45 deg" }'

    rate: Annotated[float, _Rate] = key("How fast the object moves.")
    position_angle: Annotated[float, Angle] = key(
        "Position angle in which the object moves, north through east.",
        0.0,
        absent="0 deg",
        meaning="the object moves towards north",
    )


class Pointing(Table):
    """Where the centre of the field lies, and how steadily the telescope is held there."""

    heading: ClassVar[str] = "[pointing]"

    ra: Annotated[float, Quantity("right ascension", at_least="0 deg", at_most="360 deg")] = key(
        "Right ascension of the field centre, together with dec; colons are read as hours.",
        0.0,
        absent="0 deg",
        meaning="right ascension of the field centre",
    )
    dec: Annotated[float, Quantity("declination", at_least="-90 deg", at_most="90 deg")] = key(
        "Declination of the field centre, together with ra.",
        0.0,
        absent="0 deg",
        meaning="declination of the field centre",
    )
    jitter: Annotated[
        tuple[float, float],
        EachAxis(Quantity("angle", at_least="0 arcsec", at_most="60 arcsec", sample="0.05 arcsec")),
    ] = key(
        "Rms of the image's random motion along the detector's x and y; one value for both.",
        (0.0, 0.0),
        absent="0 arcsec",
        meaning="the telescope does not shake",
    )
    drift: Drift | None = key(
        "A steady drift of the telescope's aim during each exposure.",
        None,
        absent="none",
        meaning="the aim stays where it is",
    )
    rotation_rate: Annotated[
        float,
        Quantity("angular rate", at_least="-1 deg/s", at_most="1 deg/s", sample="15 arcsec/s"),
    ] = key(
        "How fast the sky turns on the detector about the field centre, positive from north "
        "through east, as behind a mount in altitude and azimuth that does not turn with it.",
        0.0,
        absent="0 arcsec/s",
        meaning="the field does not turn",
    )
    track: Annotated[str | None, Text(64, sample="comet")] = key(
        "Label of the moving object that the telescope follows: it stays and the stars trail.",
        None,
        absent="none",
        meaning="the telescope follows the stars",
    )

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """Both coordinates or neither."""
        for one, other in (("ra", "dec"), ("dec", "ra")):
            if one in given and other not in given:
                yield Fault(
                    (other,), f"is required beside {one} and missing", f"add {cls.sample(other)}"
                )
