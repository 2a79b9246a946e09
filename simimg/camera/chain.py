"""From expected electrons to counts: the one place that knows the order of the effects.

In the order of a real device: light and dark signal -> arrival (Poisson) -> full well -> read noise
-> gain and bias -> converter. Electrons until the gain, counts (ADU) after it. The charge that a
bright pixel pushes into its neighbours by its own field (brighter-fatter effect) is not modelled.

A block of rows goes through the whole chain on one thread, so that its values stay in the
processor's cache; each block draws from its own streams, so that threads change nothing.
"""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from simimg.arrays import AnyArray
from simimg.camera.amplifier import amplify
from simimg.camera.converter import counts_type, digitise
from simimg.camera.dark import dark_signal
from simimg.camera.masks import SATURATED, MaskArray
from simimg.camera.poisson import arrivals
from simimg.camera.readout import add_read_noise
from simimg.camera.streams import BLOCK_ROWS, Stage, stream
from simimg.camera.well import fill_well


@dataclass(frozen=True, kw_only=True)
class CameraSettings:
    """What the chain must know of a camera and an exposure.

    Parameters
    ----------
    time : float
        Exposure, seconds, 0 or above (a bias frame has 0).
    gain : float
        Electrons per count, above 0.
    read_noise : float
        Electrons, 0 or above.
    dark_current : float
        Electrons per second and pixel, 0 or above.
    bias : float
        Counts.
    full_well : float or None
        Electrons that a pixel holds, above 0; None without end.
    bit_depth : int
        Bits of the converter, 1 to 31.
    serial : int
        Which camera of its kind: fixes what is constant from frame to frame, 0 or above.

    Raises
    ------
    ValueError
        A value outside its range.
    """

    time: float = 0.0
    gain: float = 1.0
    read_noise: float = 0.0
    dark_current: float = 0.0
    bias: float = 0.0
    full_well: float | None = None
    bit_depth: int = 16
    serial: int = 0

    def __post_init__(self) -> None:
        for name in ("time", "read_noise", "dark_current"):
            value = getattr(self, name)
            if not (math.isfinite(value) and value >= 0.0):
                raise ValueError(f"{name} must be finite and not negative, got {value!r}")
        if not (math.isfinite(self.gain) and self.gain > 0.0):
            raise ValueError(f"gain must be above 0, got {self.gain!r}")
        if not math.isfinite(self.bias):
            raise ValueError(f"bias must be finite, got {self.bias!r}")
        if self.full_well is not None and not (
            math.isfinite(self.full_well) and self.full_well > 0.0
        ):
            raise ValueError(f"full_well must be above 0, got {self.full_well!r}")
        if not 1 <= self.bit_depth <= 31:
            raise ValueError(f"bit_depth must be 1 to 31, got {self.bit_depth!r}")
        if self.serial < 0:
            raise ValueError(f"serial must not be negative, got {self.serial!r}")


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
    counts = np.empty(light.shape, dtype=counts_type(settings.bit_depth))
    mask = np.empty(light.shape, dtype=np.uint8)
    blocks = range(-(-light.shape[0] // BLOCK_ROWS))

    def one(block: int) -> None:
        rows = slice(block * BLOCK_ROWS, (block + 1) * BLOCK_ROWS)
        _record_block(light[rows], settings, seed, frame, block, counts[rows], mask[rows])

    if threads == 1 or len(blocks) == 1:
        for block in blocks:
            one(block)
    else:
        with ThreadPoolExecutor(max_workers=min(threads, len(blocks))) as pool:
            for _ in pool.map(one, blocks):
                pass
    counts.setflags(write=False)
    mask.setflags(write=False)
    return Recorded(counts, mask)


def _record_block(
    light: AnyArray,
    settings: CameraSettings,
    seed: int,
    frame: int,
    block: int,
    counts: AnyArray,
    mask: MaskArray,
) -> None:
    """The chain for one block of rows; fills `counts` and `mask`."""
    mean = np.add(light, dark_signal(settings.dark_current, settings.time), dtype=np.float64)
    # Single precision resolves 1/256 of a count at the top of 16 bits.
    signal = np.empty(light.shape, dtype=np.float32 if settings.bit_depth <= 16 else np.float64)
    arrivals(mean, stream(seed, frame=frame, stage=Stage.PHOTONS, block=block), out=signal)
    saturated = np.zeros(light.shape, dtype=np.bool_)
    if settings.full_well is not None:
        saturated |= fill_well(signal, settings.full_well)
    read_stream = stream(seed, frame=frame, stage=Stage.READ_NOISE, block=block)
    add_read_noise(signal, settings.read_noise, read_stream)
    amplify(signal, gain=settings.gain, bias=settings.bias)
    saturated |= digitise(signal, settings.bit_depth, out=counts)
    np.multiply(saturated, np.uint8(SATURATED), out=mask)
