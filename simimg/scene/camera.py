"""The camera of a scene: pixels, and what turns electrons into counts. SI inside."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Annotated, ClassVar

from simimg.scene.detector import Detector
from simimg.scene.keys import Flag, Quantity, Several, Text, Whole
from simimg.scene.readers import RatioOrFile
from simimg.scene.table import Fault, key
from simimg.scene.telescope import Angle


class Camera(Detector):
    """The detector; electrons until the gain, counts (ADU) after it."""

    heading: ClassVar[str] = "[camera]"

    name: Annotated[str | None, Text(sample="Camera A")] = key(
        "Name of the camera; INSTRUME in the header.",
        None,
    )
    pixels: Annotated[tuple[int, int] | None, Several(Whole(1, 32768, 256), 2)] = key(
        "Columns and rows of the detector.", None
    )
    sub_frame: Annotated[tuple[int, int, int, int] | None, Several(Whole(0, 32768, 64), 4)] = key(
        "Part of the detector that is read: its first column and row, from 0, and how many columns "
        "and rows. Places in pixels count from its first pixel.",
        None,
        absent="none",
        meaning="all of the detector is read",
    )
    pixel_size: Annotated[
        float | None, Quantity("length", at_least="0.01 um", at_most="1 m", sample="9 um")
    ] = key("Side of a pixel; with telescope.focal_length it gives the pixel scale.", None)
    pixel_scale: Annotated[
        float | None,
        Quantity("angle", at_least="0.000001 arcsec", at_most="1 deg", sample="0.12 arcsec"),
    ] = key("Angle that a pixel's side spans on the sky.", None)
    quantum_efficiency: Annotated[float | str, RatioOrFile()] = key(
        "Electrons per photon: one value in the band, or a table of wavelengths and values.",
        1.0,
        absent="1",
        meaning="every photon is detected",
    )
    gain: Annotated[
        float, Quantity("gain", at_least="0.0001 electron/adu", at_most="1000000 electron/adu")
    ] = key(
        "Electrons for one count.",
        1.0,
        absent="1 electron/adu",
        meaning="one count is one electron",
    )
    read_noise: Annotated[
        float, Quantity("electrons", at_least="0 electron", at_most="1000000 electron")
    ] = key(
        "Standard deviation of the read noise in each pixel.",
        0.0,
        absent="0 electron",
        meaning="no read noise",
    )
    dark_current: Annotated[
        float,
        Quantity("electron rate", at_least="0 electron/s", at_most="1000000000 electron/s"),
    ] = key(
        "Dark current of each pixel.",
        0.0,
        absent="0 electron/s",
        meaning="no dark current",
    )
    bias: Annotated[float, Quantity("counts", at_least="0 adu", at_most="1000000000 adu")] = key(
        "Level added to every pixel before it is digitised.",
        0.0,
        absent="0 adu",
        meaning="no bias: noise below zero is clipped",
    )
    full_well: Annotated[
        float | None,
        Quantity(
            "electrons", above="0 electron", at_most="1000000000000 electron", sample="90000 e-"
        ),
    ] = key(
        "Electrons that a pixel can hold.",
        None,
        absent="none",
        meaning="pixels hold any number of electrons",
    )
    bit_depth: Annotated[int, Whole(1, 31, 16)] = key(
        "Bits of the digitiser; the largest count is 2 to this power less 1.",
        16,
        absent="16",
        meaning="the largest count is 65535",
    )
    serial: Annotated[int, Whole(0, 2**63 - 1, 7)] = key(
        "Serial number, from which the fixed patterns of the detector are drawn.",
        0,
        absent="0",
        meaning="the detector with serial number 0",
    )
    field_centre: Annotated[
        tuple[float, float] | None,
        Several(Quantity("pixels", at_least=-1e7, at_most=1e7, sample="1023.5"), 2),
    ] = key(
        "Pixel (x, y) on which the field centre falls, from 0 at the centre of the first.",
        None,
        absent="none",
        meaning="the field centre falls on the middle of the detector",
    )
    rotation: Annotated[float, Angle] = key(
        "Position angle of the detector's +y, north through east.",
        0.0,
        absent="0 deg",
        meaning="north is up",
    )
    mirrored: Annotated[bool, Flag()] = key(
        "True for an odd number of reflections.",
        False,
        absent="false",
        meaning="east is left where north is up",
    )

    @property
    def read_pixels(self) -> tuple[int, int] | None:
        """Columns and rows of the detector's pixels that are read; None where none are given."""
        return self.pixels if self.sub_frame is None else self.sub_frame[2:]

    def agree(self) -> Iterator[Fault]:
        """The bias must leave room for counts; tracks need the size of a pixel."""
        yield from super().agree()
        yield from self._part()
        read = self.read_pixels
        if read is not None and min(read) > 0 and self.binning > min(read):
            yield Fault(
                ("binning",),
                f"is more than the pixels that are read, {read[0]} x {read[1]}",
                "write a smaller binning, or more pixels",
            )
        if self.cosmic_ray_rate and self.pixel_size is None:
            yield Fault(
                ("cosmic_ray_rate",),
                "needs camera.pixel_size, which is missing",
                'add pixel_size = "9 um"',
            )
        largest = 2**self.bit_depth - 1
        if self.bias >= largest:
            yield Fault(
                ("bias",),
                f"must be below the largest count of {self.bit_depth} bits, {largest}",
                "write a smaller bias or a larger bit_depth",
            )

    def _part(self) -> Iterator[Fault]:
        """A part of the detector lies on it, on whole bins, behind one amplifier."""
        if self.sub_frame is None:
            return
        x, y, columns, rows = self.sub_frame
        if self.pixels is None:
            yield Fault(
                ("sub_frame",), "needs camera.pixels, which is missing", "add pixels = [1024, 1024]"
            )
            return
        if min(columns, rows) < 1 or x + columns > self.pixels[0] or y + rows > self.pixels[1]:
            yield Fault(
                ("sub_frame",),
                f"does not lie on the detector's {self.pixels[0]} x {self.pixels[1]} pixels",
                "write first column, first row, columns and rows within them",
            )
        if any(one % self.binning for one in self.sub_frame):
            yield Fault(
                ("sub_frame",),
                f"does not begin and end with whole bins of {self.binning} pixels",
                f"write multiples of {self.binning}",
            )
        if self.amplifier_gains or self.amplifier_biases:
            yield Fault(
                ("sub_frame",),
                "is read by one amplifier",
                "leave out amplifier_gains and amplifier_biases, or the sub-frame",
            )
