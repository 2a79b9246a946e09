"""Several amplifiers: each reads its part of the detector, with a gain and a bias of its own.

Two amplifiers read the left and the right half, four the quadrants, each from its own outer edge
inwards, all at once. What one reads leaks into the others at the same moment: crosstalk adds a
share of the signal of the pixels that lie as far from their own edges. Counts (ADU); the mean of a
part is ``electrons / gain + bias``.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray, FloatArray


def amplifier_numbers(shape: tuple[int, int], count: int) -> AnyArray:
    """Which amplifier reads each pixel.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    count : int
        1, 2 or 4.

    Returns
    -------
    ndarray of uint8, shape (rows, columns)
        From 0: left before right, lower before upper.
    """
    rows, columns = shape
    right = (np.arange(columns) >= columns // 2).astype(np.uint8)
    upper = (np.arange(rows) >= rows // 2).astype(np.uint8)
    if count == 1:
        return np.zeros(shape, dtype=np.uint8)
    if count == 2:
        return np.broadcast_to(right, shape).copy()
    return np.asarray(right[np.newaxis, :] + np.uint8(2) * upper[:, np.newaxis])


def per_amplifier(numbers: AnyArray, values: tuple[float, ...]) -> FloatArray:
    """A value of each amplifier at all of its pixels, float32."""
    return np.asarray(np.array(values, dtype=np.float32)[numbers])


def leak(signal: AnyArray, count: int, share: float) -> None:
    """Add what the other amplifiers read at the same moment, in place.

    Parameters
    ----------
    signal : ndarray of float, shape (rows, columns)
        Counts above the bias; changed. With an odd side the middle pixel is read alone.
    count : int
        Amplifiers: 2 or 4.
    share : float
        Of each other amplifier's signal.
    """
    mirrored = [signal[:, ::-1]]
    if count == 4:
        mirrored += [signal[::-1], signal[::-1, ::-1]]
    added = np.zeros_like(signal)
    for other in mirrored:
        added += other
    signal += added * signal.dtype.type(share)
