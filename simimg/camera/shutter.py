"""A shutter that takes time: the exposure differs over the field.

An iris opens from the middle outwards and closes from the edge inwards, so that the middle is
exposed for the whole time and the corners for twice the travel less. A blade opens from the first
column to the last and closes the other way. The mean of the light, and its variance, are multiplied
by the exposure of a pixel over the stated one; the dark signal is not (common practice: the
shutter's pattern of short flat fields).
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import FloatArray
from simimg.camera.settings import Shutter


def shutter_pattern(shape: tuple[int, int], shutter: Shutter, *, time: float) -> FloatArray:
    """Exposure of every pixel over the stated one.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    shutter : Shutter
    time : float
        The stated exposure, from the begin of opening to the end of closing, seconds.

    Returns
    -------
    ndarray of float32, shape (rows, columns)
        From 1 down to no less than 0; 1 everywhere without an exposure.
    """
    rows, columns = shape
    if time <= 0.0:
        return np.ones(shape, dtype=np.float32)
    if shutter.kind == "iris":
        x = np.arange(columns) - 0.5 * (columns - 1)
        y = np.arange(rows) - 0.5 * (rows - 1)
        far = np.hypot(x[np.newaxis, :], y[:, np.newaxis])
        share = far / max(float(far.max()), 1e-30)
    else:
        share = np.broadcast_to(np.arange(columns) / max(columns - 1, 1), shape)
    exposed = np.maximum(time - 2.0 * shutter.travel * share, 0.0) / time
    return np.asarray(exposed, dtype=np.float32)
