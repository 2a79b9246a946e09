"""The detectors of a mosaic: several behind one telescope, with gaps and turns. SI inside.

What a detector does not say of itself is that of [camera]. Offsets count from the field centre
along the +x and +y of [camera], as lengths in the focal plane, as angles, or in pixels.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar, NamedTuple

from simimg.quantities import KINDS, QuantityError, parse_quantity, shown
from simimg.scene.camera import Camera
from simimg.scene.keys import Quantity, Reader, Several, Whole, fault
from simimg.scene.table import Fault, Table, key
from simimg.scene.telescope import Angle

MOST_DETECTORS = 256

RESERVED = ("PRIMARY", "TRUTH", "SCENE", "EXPECTED", "PSF", "MASK")
"""Names of extensions that hold something else."""

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_-]{0,19}\Z")
_FARTHEST = {"length": 100.0, "angle": 1.0, "pixels": 1e7}


class FocalLength(NamedTuple):
    """A way in the focal plane: a number, and whether of metres, radians or pixels."""

    value: float
    kind: str


@dataclass(frozen=True)
class FocalOffset(Reader):
    """A way in the focal plane, as a length, an angle, or in pixels."""

    def read(self, value: Any) -> FocalLength:
        """The way and its kind."""
        if isinstance(value, FocalLength):
            return value
        for kind, most in _FARTHEST.items():
            try:
                number = parse_quantity(value, kind)
            except QuantityError:
                continue
            if abs(number) > most:
                raise fault(
                    f"lies too far out, {shown(value)}", f"write an offset such as {self.example}"
                )
            return FocalLength(number, kind)
        raise fault(
            f"must be a length, an angle or a number of pixels, got {shown(value)}",
            f'write {self.example}, "60 arcsec" or "1100 px"',
        )

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return '"16.2 mm"'

    @property
    def range(self) -> str:
        """The three ways of giving it."""
        return (
            ", ".join(KINDS[kind].noun for kind in ("length", "angle")) + " or a number of pixels"
        )


@dataclass(frozen=True)
class DetectorName(Reader):
    """What an image extension may be called."""

    def read(self, value: Any) -> str:
        """The name in capitals, as FITS compares it."""
        if not isinstance(value, str) or not _NAME.match(value.strip()):
            raise fault(
                f"is not the name of a detector: {shown(value)}",
                f"write {self.example}: a letter, then letters, digits, - and _, 20 at most",
            )
        name = value.strip().upper()
        if name in RESERVED:
            raise fault(f"{shown(value)} names another part of a frame", f"write {self.example}")
        return name

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return '"CHIP1"'

    @property
    def range(self) -> str:
        """The letters."""
        return "a letter, then letters, digits, - and _, 20 at most"


class MosaicDetector(Table):
    """One detector of a mosaic."""

    heading: ClassVar[str] = "[[detector]]"

    name: Annotated[str, DetectorName()] = key("Name of its image extension, EXTNAME.")
    offset: Annotated[tuple[FocalLength, FocalLength], Several(FocalOffset(), 2)] = key(
        "Where its middle lies from the field centre, along +x and +y of [camera]."
    )
    rotation: Annotated[float, Angle] = key(
        "Position angle of its +y less that of [camera], north through east.",
        0.0,
        absent="0 deg",
        meaning="the detector stands as [camera] does",
    )
    pixels: Annotated[tuple[int, int] | None, Several(Whole(1, 32768, 256), 2)] = key(
        "Columns and rows.",
        None,
        absent="those of [camera]",
        meaning="all detectors are of one size",
    )
    serial: Annotated[int | None, Whole(0, 2**63 - 1, 7)] = key(
        "Serial number, from which its fixed patterns are drawn.",
        None,
        absent="that of [camera] and its own number",
        meaning="each detector has patterns of its own",
    )
    gain: Annotated[
        float | None,
        Quantity("gain", at_least="0.0001 electron/adu", at_most="1000000 electron/adu"),
    ] = key("Electrons for one count.", None)
    read_noise: Annotated[
        float | None, Quantity("electrons", at_least="0 electron", at_most="1000000 electron")
    ] = key("Standard deviation of the read noise in each pixel.", None)
    dark_current: Annotated[
        float | None,
        Quantity("electron rate", at_least="0 electron/s", at_most="1000000000 electron/s"),
    ] = key("Dark current of each pixel.", None)
    bias: Annotated[
        float | None, Quantity("counts", at_least="0 adu", at_most="1000000000 adu")
    ] = key("Level added to every pixel before it is digitised.", None)
    full_well: Annotated[
        float | None,
        Quantity(
            "electrons", above="0 electron", at_most="1000000000000 electron", sample="90000 e-"
        ),
    ] = key("Electrons that a pixel can hold.", None)


OWN = ("pixels", "gain", "read_noise", "dark_current", "bias", "full_well")
"""Keys of [camera] that a detector may have for itself, besides its serial number."""


def detector_faults(detectors: Sequence[MosaicDetector], camera: Camera | None) -> Iterator[Fault]:
    """Mistakes in the detectors of a mosaic together."""
    if not detectors:
        return
    if camera is None:
        yield Fault(
            ("camera",),
            "is required beside [[detector]] and missing",
            "add a [camera] table with what the detectors share",
        )
        return
    if camera.sub_frame is not None:
        what = "goes with one detector, and there are [[detector]] tables"
        yield Fault(("camera", "sub_frame"), what, "leave it out, or give the detectors pixels")
    if len(detectors) > MOST_DETECTORS:
        what = f"there are too many detectors, {len(detectors)}"
        yield Fault(("detector",), what, f"write at most {MOST_DETECTORS}")
    seen: set[str] = set()
    for number, one in enumerate(detectors):
        if one.name in seen:
            yield Fault(
                ("detector", number, "name"),
                f"{shown(one.name)} names another detector, too",
                "give each a name of its own",
            )
        seen.add(one.name)
        if camera.pixel_size is None and any(way.kind == "length" for way in one.offset):
            yield Fault(
                ("detector", number, "offset"),
                "is a length, and the size of a pixel is not known",
                "add pixel_size to [camera], or write the offset as an angle or in pixels",
            )
