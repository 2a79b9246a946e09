"""Gain and bias: electrons become a level in counts (ADU).

Mean ``electrons / gain + bias``; variance divided by ``gain**2``. The gain is in electrons per
count. The bias is a constant.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def amplify(electrons: AnyArray, *, gain: float, bias: float) -> None:
    """Turn electrons into a level in counts, in place.

    Parameters
    ----------
    electrons : ndarray of float
        Electrons; becomes the level in counts.
    gain : float
        Electrons per count, above 0.
    bias : float
        Counts at no electrons.
    """
    # A tiny gain may carry a bright pixel beyond single precision: infinity is then cut at the top.
    with np.errstate(over="ignore"):
        electrons /= gain
        electrons += bias
