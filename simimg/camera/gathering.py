"""What gathers in the pixels during an exposure: light through shutter and response, dark signal.

Block by block of rows; electrons. Each block draws from streams of its own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.dark import dark_signal
from simimg.camera.fixed import FixedPatterns, fixed_patterns
from simimg.camera.masks import MaskArray
from simimg.camera.poisson import arrivals
from simimg.camera.settings import CameraSettings
from simimg.camera.shutter import shutter_pattern
from simimg.camera.streams import Stage, stream


@dataclass(frozen=True, eq=False)
class Exposure:
    """One exposure while its charge gathers.

    Attributes
    ----------
    light : ndarray, shape (rows, columns)
        Expected electrons of objects and sky.
    settings : CameraSettings
    seed, frame : int
    fixed : FixedPatterns
    shutter : ndarray or None
        Exposure of every pixel over the stated one.
    """

    light: AnyArray
    settings: CameraSettings
    seed: int
    frame: int
    fixed: FixedPatterns
    shutter: FloatArray | None

    @classmethod
    def of(cls, light: AnyArray, settings: CameraSettings, seed: int, frame: int) -> Exposure:
        """With the camera's own patterns."""
        rows, columns = light.shape
        shape = (int(rows), int(columns))
        window = settings.window
        whole = shape if window is None else window.shape
        fixed = fixed_patterns(whole, settings.patterns, settings.serial, settings.dark_current)
        shutter = None
        if settings.shutter is not None:
            shutter = shutter_pattern(whole, settings.shutter, time=settings.time)
        if window is not None:
            fixed = fixed.part(window.rows, window.columns)
            shutter = None if shutter is None else shutter[window.rows, window.columns]
        return cls(light, settings, seed, frame, fixed, shutter)

    @property
    def alone(self) -> bool:
        """Whether no pixel hangs on another."""
        settings, readout = self.settings, self.settings.readout
        return not (
            (settings.bleeding and settings.full_well is not None)
            or settings.cosmic_rays is not None
            or readout.inefficiency
            or readout.binning > 1
            or readout.em_gain > 1.0
            or readout.coupling
            or (readout.crosstalk and readout.amplifiers > 1)
            or readout.prescan
            or readout.overscan
        )

    @property
    def precision(self) -> type[np.float32] | type[np.float64]:
        """Single precision resolves 1/256 of a count at the top of 16 bits."""
        return np.float32 if self.settings.bit_depth <= 16 else np.float64

    def stream(self, stage: Stage, block: int = 0) -> np.random.Generator:
        """The generator of one stage for one block."""
        return stream(self.seed, frame=self.frame, stage=stage, block=block)

    def mark(self, rows: slice, mask: MaskArray) -> None:
        """Begin a block's mask with what is fixed in the camera."""
        mask[...] = 0 if self.fixed.mask is None else self.fixed.mask[rows]

    def collect(self, block: int, rows: slice) -> AnyArray:
        """Electrons that gather in the pixels of a block."""
        light: AnyArray = self.light[rows]
        for factor in (self.shutter, self.fixed.response):
            if factor is not None:
                light = np.multiply(light, factor[rows], dtype=np.float64)
        mean = np.add(light, self._dark(block, rows), dtype=np.float64)
        signal = np.empty(mean.shape, dtype=self.precision)
        arrivals(mean, self.stream(Stage.PHOTONS, block), out=signal)
        return signal

    def _dark(self, block: int, rows: slice) -> AnyArray | float:
        """Mean dark signal of a block's pixels."""
        time = self.settings.time
        if self.fixed.currents is None:
            return dark_signal(self.settings.dark_current, time)
        currents: AnyArray = self.fixed.currents[rows]
        if self.fixed.flicker is not None:
            extra = self.fixed.flicker[rows]
            on = self.stream(Stage.FLICKER, block).random(extra.shape, dtype=np.float32) < 0.5
            currents = currents + np.where(on, extra, np.float32(0.0))
        return np.multiply(currents, time, dtype=np.float64)
