"""How charge becomes counts: read noise, non-linearity, gain, crosstalk, bias, converter.

Block by block of rows, but for crosstalk. Electrons until the gain, counts (ADU) after it. Columns
without charge are read by the amplifier of their own side.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.amplifiers import amplifier_numbers, leak, per_amplifier
from simimg.camera.biaspattern import column_offsets, row_drift
from simimg.camera.converter import converter_top, digitise
from simimg.camera.gathering import Exposure
from simimg.camera.linearity import bend
from simimg.camera.masks import SATURATED, MaskArray
from simimg.camera.readout import add_read_noise, relative_noise
from simimg.camera.settings import CameraSettings
from simimg.camera.streams import Fixed, Stage, fixed_stream


@dataclass(frozen=True, eq=False)
class Reading:
    """How one exposure is read.

    Attributes
    ----------
    exposure : Exposure
    noise : ndarray or None
        Each pixel's read noise over the rms; None where they are alike.
    gain : ndarray or float
        Electrons per count, of each pixel or of all.
    bias : ndarray or float
        Counts, of each pixel or of all, its structure included.
    """

    exposure: Exposure
    noise: FloatArray | None
    gain: FloatArray | float
    bias: FloatArray | float

    @classmethod
    def of(cls, exposure: Exposure, shape: tuple[int, int]) -> Reading:
        """How a frame of so many rows and columns is read."""
        settings, readout = exposure.settings, exposure.settings.readout
        noise = None
        if readout.noise_spread:
            noise = relative_noise(shape, readout.noise_spread, settings.serial)
        gain: FloatArray | float = settings.gain
        bias: FloatArray | float = settings.bias
        if readout.amplifiers > 1:
            numbers = _numbers(shape, settings)
            count = readout.amplifiers
            gain = per_amplifier(numbers, readout.gains or (settings.gain,) * count)
            bias = per_amplifier(numbers, readout.biases or (settings.bias,) * count)
        if readout.bias_rms:
            fixed = fixed_stream(settings.serial, Fixed.BIAS)
            bias = np.zeros(shape, dtype=np.float32) + np.float32(bias)
            bias += column_offsets(shape[1], readout.bias_rms, fixed)
        if readout.bias_drift:
            rng = exposure.stream(Stage.BIAS_DRIFT)
            drift = row_drift(shape[0], readout.bias_drift, rng)
            bias = np.zeros(shape, dtype=np.float32) + np.float32(bias) + drift[:, np.newaxis]
        return cls(exposure, noise, gain, bias)

    def amplify(self, block: int, rows: slice, signal: AnyArray) -> None:
        """Electrons of a block to counts above the bias, in place."""
        settings = self.exposure.settings
        add_read_noise(
            signal,
            settings.read_noise,
            self.exposure.stream(Stage.READ_NOISE, block),
            relative=None if self.noise is None else self.noise[rows],
        )
        if settings.readout.nonlinearity:
            bend(signal, share=settings.readout.nonlinearity, full=full_signal(settings))
        # A tiny gain may carry a bright pixel beyond single precision: the top cuts infinity.
        with np.errstate(over="ignore"):
            signal /= _of(self.gain, rows)

    def between(self, signal: AnyArray) -> None:
        """What hangs on other amplifiers, on the whole frame and in place."""
        readout = self.exposure.settings.readout
        if readout.crosstalk and readout.amplifiers > 1:
            data = signal[:, readout.prescan : signal.shape[1] - readout.overscan]
            leak(data, readout.amplifiers, readout.crosstalk)

    def convert(self, rows: slice, signal: AnyArray, counts: AnyArray, mask: MaskArray) -> None:
        """Add a block's bias and round: fills its counts, and marks what is at the top."""
        with np.errstate(over="ignore"):
            signal += _of(self.bias, rows)
        top = digitise(signal, self.exposure.settings.bit_depth, out=counts)
        mask |= np.where(top, np.uint8(SATURATED), np.uint8(0))


def full_signal(settings: CameraSettings) -> float:
    """Electrons at the full range of what is read: the well's, or the converter's."""
    top = (converter_top(settings.bit_depth) - settings.bias) * settings.gain
    if settings.full_well is None or settings.readout.em_gain > 1.0:
        return max(top, 1.0)
    return min(settings.full_well * settings.readout.binning**2, max(top, 1.0))


def _of(value: FloatArray | float, rows: slice) -> FloatArray | float:
    return value if isinstance(value, float) else value[rows]


def _numbers(shape: tuple[int, int], settings: CameraSettings) -> AnyArray:
    """Which amplifier reads each pixel, those of columns without charge included."""
    readout = settings.readout
    columns = shape[1] - readout.prescan - readout.overscan
    numbers = amplifier_numbers((shape[0], columns), readout.amplifiers)
    return np.pad(numbers, ((0, 0), (readout.prescan, readout.overscan)), mode="edge")
