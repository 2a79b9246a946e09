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
from simimg.camera.converter import digitise
from simimg.camera.gathering import Exposure
from simimg.camera.linearity import bend, full_signal
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
        window = None if settings.window is None else settings.window.binned(readout.binning)
        noise = None
        if readout.noise_spread:
            data = (shape[0], shape[1] - readout.prescan - readout.overscan)
            rows, columns = slice(0, data[0]), slice(0, data[1])
            if window is not None:
                data, rows, columns = window.shape, window.rows, window.columns
            own = relative_noise(data, readout.noise_spread, settings.serial)[rows, columns]
            noise = _around(own, settings, 1.0)
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
            width = shape[1] - readout.prescan - readout.overscan
            offsets = column_offsets(
                width if window is None else window.shape[1], readout.bias_rms, fixed
            )
            if window is not None:
                offsets = offsets[window.columns]
            bias += _around(offsets[np.newaxis, :], settings, 0.0)
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


def _of(value: FloatArray | float, rows: slice) -> FloatArray | float:
    return value if isinstance(value, float) else value[rows]


def _numbers(shape: tuple[int, int], settings: CameraSettings) -> AnyArray:
    """Which amplifier reads each pixel, those of columns without charge included."""
    readout = settings.readout
    columns = shape[1] - readout.prescan - readout.overscan
    numbers = amplifier_numbers((shape[0], columns), readout.amplifiers)
    return np.pad(numbers, ((0, 0), (readout.prescan, readout.overscan)), mode="edge")


def _around(pattern: FloatArray, settings: CameraSettings, beyond: float) -> FloatArray:
    """A pattern of the data, with what columns without charge have."""
    readout = settings.readout
    if not readout.prescan and not readout.overscan:
        return pattern
    sides = ((0, 0), (readout.prescan, readout.overscan))
    return np.pad(pattern, sides, constant_values=beyond)
