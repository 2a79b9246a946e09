"""The fixed patterns of one camera, drawn once from its serial number and kept.

Calibration frames and science frames of a camera share them. Relative response, electrons per
second, and bits of the mask.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.camera.darkpattern import dark_currents
from simimg.camera.defects import bad_columns, dead_pixels
from simimg.camera.flat import flat_response
from simimg.camera.masks import BAD_COLUMN, DEAD, FLICKERING, HOT, MaskArray
from simimg.camera.settings import Patterns


@dataclass(frozen=True, eq=False)
class FixedPatterns:
    """What every pixel of a camera does in every frame: read-only arrays of one shape.

    Attributes
    ----------
    response : ndarray of float32, or None
        Relative response to light; None where it is even.
    currents : ndarray of float32, or None
        Dark current while no flicker is on; None where it is even.
    flicker : ndarray of float32, or None
        Extra current while it is on; None where no pixel flickers.
    mask : ndarray of uint8, or None
        Bits of `simimg.camera.masks`; None where no pixel is marked.
    """

    response: FloatArray | None
    currents: FloatArray | None
    flicker: FloatArray | None
    mask: MaskArray | None

    def part(self, rows: slice, columns: slice) -> FixedPatterns:
        """What some of the pixels do."""

        def cut(pattern: AnyArray | None) -> AnyArray | None:
            return None if pattern is None else pattern[rows, columns]

        return FixedPatterns(
            cut(self.response), cut(self.currents), cut(self.flicker), cut(self.mask)
        )


@lru_cache(maxsize=4)
def fixed_patterns(
    shape: tuple[int, int], patterns: Patterns, serial: int, dark_current: float
) -> FixedPatterns:
    """Draw the patterns of a camera.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    patterns : Patterns
    serial : int
    dark_current : float
        Mean, electrons per second.
    """
    mask = np.zeros(shape, dtype=np.uint8)
    response: FloatArray | None = None
    if patterns.respond:
        response = flat_response(shape, patterns, serial)
        if patterns.bad_columns:
            where, weak = bad_columns(shape, patterns, serial)
            response = np.where(where, response * weak, response)
            mask[where] |= BAD_COLUMN
        if patterns.dead_fraction:
            dead = dead_pixels(shape, patterns, serial)
            response[dead] = 0.0
            mask[dead] |= DEAD
    currents = flicker = None
    if patterns.darken:
        currents, hot, extra = dark_currents(shape, patterns, serial, mean=dark_current)
        mask[hot] |= HOT
        if patterns.flickering_fraction:
            flicker = extra
            mask[extra > 0.0] |= FLICKERING
    return FixedPatterns(
        None if response is None else frozen(response),
        None if currents is None else frozen(currents),
        None if flicker is None else frozen(flicker),
        _kept(mask),
    )


def _kept(mask: AnyArray) -> MaskArray | None:
    if not mask.any():
        return None
    mask.setflags(write=False)
    return mask
