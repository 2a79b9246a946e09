"""What happens to charge between the pixels and the counts; off unless asked for. SI inside."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from simimg.quantities import shown
from simimg.scene.keys import Quantity, Reader, Whole, fault
from simimg.scene.table import Fault, Table, key


@dataclass(frozen=True)
class OfAmplifiers(Reader):
    """An array of two or four values, one for each amplifier."""

    item: Reader

    def read(self, value: Any) -> tuple[Any, ...]:
        """The values, as a tuple."""
        if not isinstance(value, list | tuple) or len(value) not in (2, 4):
            raise fault(
                f"must be an array of 2 or 4 values, got {shown(value)}", f"write {self.example}"
            )
        return tuple(self.item.read(one) for one in value)

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return f"[{self.item.example}, {self.item.example}]"

    @property
    def range(self) -> str:
        """The number of values, and what each may be."""
        return f"2 values (left, right) or 4 (and the upper two), each {self.item.range}"


_GAIN = Quantity("gain", at_least="0.0001 electron/adu", at_most="1000000 electron/adu")
_BIAS = Quantity("counts", at_least="0 adu", at_most="1000000000 adu")
_COUNTS = Quantity("counts", at_least="0 adu", at_most="1000000 adu", sample="2 adu")


class Electronics(Table):
    """Trailing, binning, multiplication, coupling, amplifiers, the structure of the bias."""

    heading: ClassVar[str] = ""

    charge_diffusion: Annotated[
        float, Quantity("pixels", at_least=0.0, at_most=5.0, sample="0.3")
    ] = key(
        "Standard deviation of the charge's spread before it gathers, in pixels.",
        0.0,
        absent="0",
        meaning="charge gathers where it was freed",
    )
    transfer_inefficiency: Annotated[
        float, Quantity("ratio", at_least=0.0, at_most=0.01, sample="0.00001")
    ] = key(
        "Share of the charge that each shift of the rows leaves behind.",
        0.0,
        absent="0",
        meaning="charge is moved whole",
    )
    trail_length: Annotated[float, Quantity("pixels", above=0.0, at_most=1000.0, sample="2")] = key(
        "Rows over which such a trail falls to 1/e.",
        2.0,
        absent="2",
        meaning="trails of a common length",
        when=("transfer_inefficiency",),
    )
    binning: Annotated[int, Whole(1, 32, 2)] = key(
        "Pixels to the side of the squares that are read as one; the frame has pixels / binning.",
        1,
        absent="1",
        meaning="every pixel is read by itself",
    )
    em_gain: Annotated[float, Quantity("number", at_least=1.0, at_most=10000.0, sample="300")] = (
        key(
            "Gain of an electron-multiplying register.",
            1.0,
            absent="1",
            meaning="no electron multiplication",
        )
    )
    em_full_well: Annotated[
        float | None,
        Quantity("electrons", above="0 electron", at_most="1e9 electron", sample="800000 e-"),
    ] = key(
        "Electrons that the register holds.",
        None,
        absent="none",
        meaning="the register holds any number of electrons",
        when=("em_gain",),
    )
    pixel_coupling: Annotated[
        float, Quantity("ratio", at_least=0.0, at_most=0.2, sample="0.01")
    ] = key(
        "Share of a pixel's signal that each of its four neighbours shows.",
        0.0,
        absent="0",
        meaning="pixels do not couple",
    )
    read_noise_spread: Annotated[
        float, Quantity("number", at_least=0.0, at_most=2.0, sample="0.4")
    ] = key(
        "Scatter of the logarithm of the pixels' read noise, where each has its own amplifier.",
        0.0,
        absent="0",
        meaning="all pixels have the same read noise",
    )
    nonlinearity: Annotated[float, Quantity("ratio", at_least=0.0, at_most=0.4, sample="0.02")] = (
        key(
            "Share by which a full signal falls short.",
            0.0,
            absent="0",
            meaning="linear throughout",
        )
    )
    amplifier_gains: Annotated[tuple[float, ...], OfAmplifiers(_GAIN)] = key(
        "Gain of each amplifier, in place of gain.", ()
    )
    amplifier_biases: Annotated[tuple[float, ...], OfAmplifiers(_BIAS)] = key(
        "Bias of each amplifier, in place of bias.", ()
    )
    crosstalk: Annotated[float, Quantity("ratio", at_least=0.0, at_most=0.1, sample="0.0001")] = (
        key(
            "Share of each other amplifier's signal that leaks into one.",
            0.0,
            absent="0",
            meaning="amplifiers do not hear one another",
            when=("amplifier_gains", "amplifier_biases"),
        )
    )
    bias_rms: Annotated[float, _COUNTS] = key(
        "Scatter of the bias from column to column, rms.",
        0.0,
        absent="0 adu",
        meaning="an even bias",
    )
    bias_drift: Annotated[float, _COUNTS] = key(
        "Drift of the bias from row to row, rms; another in every frame.",
        0.0,
        absent="0 adu",
        meaning="a steady bias",
    )
    prescan: Annotated[int, Whole(0, 4096, 16)] = key(
        "Columns without charge that are read before the first.",
        0,
        absent="0",
        meaning="no columns before the first",
    )
    overscan: Annotated[int, Whole(0, 4096, 32)] = key(
        "Columns without charge that are read after the last.",
        0,
        absent="0",
        meaning="no columns after the last",
    )

    def agree(self) -> Iterator[Fault]:
        """As many gains as biases."""
        gains, biases = self.amplifier_gains, self.amplifier_biases
        if gains and biases and len(gains) != len(biases):
            yield Fault(
                ("amplifier_biases",),
                f"are {len(biases)}, but amplifier_gains {len(gains)}",
                "write one of each for every amplifier",
            )
