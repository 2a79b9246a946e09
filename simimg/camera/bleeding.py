"""Bleeding: the charge that a full pixel spills along its column.

Half of the excess goes up and half down, from pixel to pixel, each of which takes what it has room
for; what reaches an edge of the detector is lost. Charge is conserved otherwise: the mean of a
column stays, its pixels at the full well have no variance. Columns do not mix (Janesick 2001,
ch. 4: blooming along the transfer direction).
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def bleed(electrons: AnyArray, full_well: float) -> tuple[AnyArray, AnyArray]:
    """Spill what is above the full well, in place.

    Parameters
    ----------
    electrons : ndarray of float, shape (rows, columns)
        Electrons; changed.
    full_well : float
        Electrons that a pixel holds, above 0.

    Returns
    -------
    full, taken : ndarray of bool, shape (rows, columns)
        Pixels at the full well, and pixels that took charge that another spilt.
    """
    over = (electrons > full_well).any(axis=0)
    taken = np.zeros(electrons.shape, dtype=np.bool_)
    if over.any():
        columns = np.flatnonzero(over)
        part = electrons[:, columns].astype(np.float64)
        excess = np.maximum(part - full_well, 0.0)
        np.minimum(part, full_well, out=part)
        # Whole electrons go either way.
        up = np.floor(0.5 * excess)
        took = _pass(part, up, full_well)
        took |= _pass(part[::-1], (excess - up)[::-1], full_well)[::-1]
        electrons[:, columns] = part
        taken[:, columns] = took
    return np.asarray(electrons >= full_well), taken


def _pass(part: AnyArray, spilt: AnyArray, full_well: float) -> AnyArray:
    """Carry spilt charge from the first row to the last, in place; who took some of it."""
    took = np.zeros(part.shape, dtype=np.bool_)
    carried = np.zeros(part.shape[1])
    for row in range(part.shape[0]):
        here = np.minimum(carried, full_well - part[row])
        part[row] += here
        took[row] = here > 0.0
        carried += spilt[row] - here
    return took
