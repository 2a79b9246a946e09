"""Full well: a pixel holds no more than so many electrons.

Leaves mean and variance alone far below the well; at the well the mean stops there and the variance
falls to zero. The excess is lost (no bleeding).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from simimg.arrays import AnyArray


def fill_well(electrons: AnyArray, full_well: float) -> NDArray[np.bool_]:
    """Cut the electrons at the full well, in place.

    Parameters
    ----------
    electrons : ndarray of float
        Electrons; changed.
    full_well : float
        Electrons that a pixel holds, above 0.

    Returns
    -------
    ndarray of bool
        True for the pixels that reached the full well.
    """
    full = electrons >= full_well
    np.minimum(electrons, full_well, out=electrons)
    return np.asarray(full)
