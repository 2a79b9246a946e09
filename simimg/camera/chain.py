"""From expected electrons to counts: the one place that knows the order of the effects.

In the order of a real device: light times shutter and flat response, plus dark signal -> arrival
(Poisson) -> cosmic rays -> full well, with or without bleeding -> trailing -> on-chip binning ->
electron multiplication -> coupling between pixels -> read noise -> non-linearity -> gain, crosstalk
-> bias and its structure, columns without charge -> converter. Electrons until the gain, counts
(ADU) after it. The charge that a bright pixel pushes
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

from simimg.arrays import AnyArray
from simimg.camera.converter import counts_type
from simimg.camera.gathering import Exposure
from simimg.camera.masks import SATURATED, MaskArray
from simimg.camera.reading import Reading
from simimg.camera.settings import CameraSettings
from simimg.camera.shifting import shift_out
from simimg.camera.streams import BLOCK_ROWS
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
    if settings.readout.binning > min(light.shape):
        raise ValueError(f"no bin of {settings.readout.binning} pixels fits {light.shape}")
    exposure = Exposure.of(light, settings, seed, frame)
    if exposure.alone:
        return _in_blocks(exposure, threads)
    mask = np.empty(light.shape, dtype=np.uint8)
    signal = np.empty(light.shape, dtype=exposure.precision)

    def gather(block: int, rows: slice) -> None:
        exposure.mark(rows, mask[rows])
        signal[rows] = exposure.collect(block, rows)

    _each_block(gather, light.shape[0], threads)
    charge, marks = shift_out(exposure, signal, mask)
    rows, columns = charge.shape
    reading = Reading.of(exposure, (rows, columns))
    counts = np.empty((rows, columns), dtype=counts_type(settings.bit_depth))

    def amplify(block: int, some: slice) -> None:
        reading.amplify(block, some, charge[some])

    def convert(_: int, some: slice) -> None:
        reading.convert(some, charge[some], counts[some], marks[some])

    _each_block(amplify, rows, threads)
    reading.between(charge)
    _each_block(convert, rows, threads)
    return _kept(counts, marks)


def _in_blocks(exposure: Exposure, threads: int) -> Recorded:
    """Where no pixel hangs on another: each block goes through the whole chain at once."""
    shape = exposure.light.shape
    counts = np.empty(shape, dtype=counts_type(exposure.settings.bit_depth))
    mask = np.empty(shape, dtype=np.uint8)
    reading = Reading.of(exposure, (int(shape[0]), int(shape[1])))
    full_well = exposure.settings.full_well

    def through(block: int, rows: slice) -> None:
        exposure.mark(rows, mask[rows])
        signal = exposure.collect(block, rows)
        if full_well is not None:
            mask[rows] |= np.where(fill_well(signal, full_well), np.uint8(SATURATED), np.uint8(0))
        reading.amplify(block, rows, signal)
        reading.convert(rows, signal, counts[rows], mask[rows])

    _each_block(through, int(shape[0]), threads)
    return _kept(counts, mask)


def _kept(counts: AnyArray, mask: MaskArray) -> Recorded:
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
