"""On-chip binning: squares of pixels are read as one.

The charges of ``n`` by ``n`` pixels are added before they are read, so that a bin has the sum of
their means and variances and is read with the noise of one. Pixels beyond the last whole bin are
not read.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def binned(values: AnyArray, side: int) -> AnyArray:
    """Sums over squares of pixels.

    Parameters
    ----------
    values : ndarray, shape (rows, columns)
    side : int
        Pixels to the side of a bin, 1 or more.

    Returns
    -------
    ndarray, shape (rows // side, columns // side)
    """
    return np.asarray(_squares(values, side).sum(axis=(1, 3), dtype=values.dtype))


def binned_mask(mask: AnyArray, side: int) -> AnyArray:
    """Every bit that is set in any pixel of a bin; as for `binned`."""
    squares = _squares(mask, side)
    return np.asarray(np.bitwise_or.reduce(np.bitwise_or.reduce(squares, axis=3), axis=1))


def _squares(values: AnyArray, side: int) -> AnyArray:
    rows, columns = values.shape[0] // side, values.shape[1] // side
    whole = values[: rows * side, : columns * side]
    return whole.reshape(rows, side, columns, side)
