"""From expected electrons to counts: the one place that knows the order of the effects.

In the order of a real device: light times shutter and flat response, plus dark signal -> arrival
(Poisson) -> cosmic rays -> full well, with or without bleeding -> read noise -> gain and bias ->
converter. Electrons until the gain, counts (ADU) after it. The charge that a bright pixel pushes
into its neighbours by its own field (brighter-fatter effect) is not modelled.

What hangs on a pixel alone is done block by block of rows, on one thread a block, so that its
values stay in the processor's cache; what hangs on others is done on the whole frame in between,
and only where it is asked for. Each block draws from its own streams, so that threads change
nothing.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.amplifier import amplify
from simimg.camera.bleeding import bleed
from simimg.camera.converter import counts_type, digitise
from simimg.camera.cosmicrays import cosmic_hits
from simimg.camera.dark import dark_signal
from simimg.camera.fixed import FixedPatterns, fixed_patterns
from simimg.camera.masks import BLEEDING, COSMIC_RAY, SATURATED, MaskArray
from simimg.camera.poisson import arrivals
from simimg.camera.readout import add_read_noise
from simimg.camera.settings import CameraSettings
from simimg.camera.shutter import shutter_pattern
from simimg.camera.streams import BLOCK_ROWS, Stage, stream
from simimg.camera.well import fill_well

__all__ = ["CameraSettings", "Recorded", "record"]


@dataclass(frozen=True)
class Recorded:
    """What the camera gives: read-only arrays of one shape.

    Attributes
    ----------
    counts : ndarray of uint16 (to 16 bits) or int32, shape (rows, columns)
        Counts, ADU.
    mask : ndarray of uint8, shape (rows, columns)
        Bits of `simimg.camera.masks`.
    """

    counts: AnyArray
    mask: MaskArray


def record(
    expected: AnyArray, *, settings: CameraSettings, seed: int, frame: int = 0, threads: int = 1
) -> Recorded:
    """Record one exposure.

    Parameters
    ----------
    expected : ndarray of float32 or float64, shape (rows, columns)
        Expected electrons of objects and sky in each pixel, finite and not negative; the dark
        signal is added here.
    settings : CameraSettings
        The camera and the exposure.
    seed : int
        Seed of the run, 0 or above.
    frame : int, optional
        Number of the exposure, from 0.
    threads : int, optional
        Threads to work on; of no effect on the result.

    Returns
    -------
    Recorded
        Counts and mask.

    Raises
    ------
    ValueError
        An expected value that is negative, infinite or NaN; no 2-D array; no thread.
    """
    light = np.asarray(expected)
    if light.ndim != 2 or light.size == 0:
        raise ValueError(f"expected must be a 2-D array that is not empty, got {light.shape}")
    if threads < 1:
        raise ValueError(f"threads must be at least 1, got {threads!r}")
    exposure = _Exposure.of(light, settings, seed, frame)
    counts = np.empty(light.shape, dtype=counts_type(settings.bit_depth))
    mask = np.empty(light.shape, dtype=np.uint8)
    if exposure.alone:

        def through(block: int, rows: slice) -> None:
            exposure.mark(rows, mask[rows])
            exposure.read(block, exposure.collect(block, rows), counts[rows], mask[rows])

        _each_block(through, light.shape[0], threads)
    else:
        signal = np.empty(light.shape, dtype=exposure.precision)

        def first(block: int, rows: slice) -> None:
            exposure.mark(rows, mask[rows])
            signal[rows] = exposure.collect(block, rows)

        def second(block: int, rows: slice) -> None:
            exposure.read(block, signal[rows], counts[rows], mask[rows])

        _each_block(first, light.shape[0], threads)
        exposure.between(signal, mask)
        _each_block(second, light.shape[0], threads)
    counts.setflags(write=False)
    mask.setflags(write=False)
    return Recorded(counts, mask)


def _each_block(work: Callable[[int, slice], None], rows: int, threads: int) -> None:
    """Do work on every block of rows."""

    def blocks() -> Iterator[tuple[int, slice]]:
        for block in range(-(-rows // BLOCK_ROWS)):
            yield block, slice(block * BLOCK_ROWS, min((block + 1) * BLOCK_ROWS, rows))

    if threads == 1 or rows <= BLOCK_ROWS:
        for block, some in blocks():
            work(block, some)
        return
    with ThreadPoolExecutor(max_workers=min(threads, -(-rows // BLOCK_ROWS))) as pool:
        for _ in pool.map(lambda both: work(*both), list(blocks())):
            pass


@dataclass(frozen=True, eq=False)
class _Exposure:
    """One exposure on its way through the chain."""

    light: AnyArray
    settings: CameraSettings
    seed: int
    frame: int
    fixed: FixedPatterns
    shutter: FloatArray | None

    @classmethod
    def of(cls, light: AnyArray, settings: CameraSettings, seed: int, frame: int) -> _Exposure:
        """With the camera's own patterns."""
        rows, columns = light.shape
        shape = (int(rows), int(columns))
        fixed = fixed_patterns(shape, settings.patterns, settings.serial, settings.dark_current)
        shutter = None
        if settings.shutter is not None:
            shutter = shutter_pattern(shape, settings.shutter, time=settings.time)
        return cls(light, settings, seed, frame, fixed, shutter)

    @property
    def alone(self) -> bool:
        """Whether no pixel hangs on another."""
        bleeds = self.settings.bleeding and self.settings.full_well is not None
        return not (bleeds or self.settings.cosmic_rays is not None)

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

    def between(self, signal: AnyArray, mask: MaskArray) -> None:
        """What hangs on other pixels, on the whole frame and in place."""
        settings = self.settings
        if settings.cosmic_rays is not None:
            charge, hit = cosmic_hits(
                signal.shape,
                settings.cosmic_rays,
                time=settings.time,
                rng=self.stream(Stage.COSMIC_RAYS),
            )
            signal += charge
            mask[hit] |= COSMIC_RAY
        if settings.bleeding and settings.full_well is not None:
            full, taken = bleed(signal, settings.full_well)
            mask[full] |= SATURATED
            mask[taken] |= BLEEDING

    def read(self, block: int, signal: AnyArray, counts: AnyArray, mask: MaskArray) -> None:
        """Read the pixels of a block: fills its counts, and marks what is full."""
        settings = self.settings
        saturated = np.zeros(signal.shape, dtype=np.bool_)
        if settings.full_well is not None:
            saturated |= fill_well(signal, settings.full_well)
        add_read_noise(signal, settings.read_noise, self.stream(Stage.READ_NOISE, block))
        amplify(signal, gain=settings.gain, bias=settings.bias)
        saturated |= digitise(signal, settings.bit_depth, out=counts)
        mask |= np.where(saturated, np.uint8(SATURATED), np.uint8(0))
