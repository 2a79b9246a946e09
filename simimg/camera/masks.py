"""Bits of the mask that goes with a frame: what befell a pixel that its count does not tell."""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

SATURATED: Final = 1
BLEEDING: Final = 2
COSMIC_RAY: Final = 4
HOT: Final = 8
DEAD: Final = 16
BAD_COLUMN: Final = 32
FLICKERING: Final = 64

MASK_BITS: Final = {
    SATURATED: "saturated: reached the full well or the top of the converter",
    BLEEDING: "bleeding: took charge that a full pixel spilt",
    COSMIC_RAY: "cosmic ray",
    HOT: "hot: dark signal far above that of its neighbours",
    DEAD: "dead: does not respond to light",
    BAD_COLUMN: "bad column",
    FLICKERING: "flickering: its dark signal jumps between frames",
}

MaskArray = NDArray[np.uint8]
