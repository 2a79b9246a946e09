"""Analogue-to-digital converter: whole counts from 0 to its top.

Rounding leaves the mean where the noise exceeds about half a count and adds 1/12 count squared to
the variance (Widrow 1956); below zero and above the top the counts are cut. The top of a converter
of ``bits`` bits is ``2**bits - 1``; counts of more than 16 bits are kept in signed 32-bit integers,
which hold 31.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from simimg.arrays import AnyArray


def converter_top(bit_depth: int) -> int:
    """Highest count of a converter of 1 to 31 bits."""
    return int(2**bit_depth - 1)


def counts_type(bit_depth: int) -> type[np.uint16] | type[np.int32]:
    """Integer type that holds the counts: uint16 to 16 bits, int32 above."""
    return np.uint16 if bit_depth <= 16 else np.int32


def digitise(level: AnyArray, bit_depth: int, *, out: AnyArray) -> NDArray[np.bool_]:
    """Round to whole counts (halves to even) and cut at 0 and at the top.

    Parameters
    ----------
    level : ndarray of float
        Level in counts; changed. Above 16 bits it must be float64 to keep every count apart.
    bit_depth : int
        Bits of the converter, 1 to 31.
    out : ndarray of int, same shape
        Where the counts go, of `counts_type`.

    Returns
    -------
    ndarray of bool
        True for the pixels at the top.
    """
    top = converter_top(bit_depth)
    np.rint(level, out=level)
    np.clip(level, 0, top, out=level)
    out[...] = level
    return np.asarray(level >= top)
