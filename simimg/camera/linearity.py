"""Non-linearity: a pixel near its full range reads less than its charge.

The signal falls short by a share that grows in proportion to it, ``s (1 - a s / full)`` (Janesick
2001, common practice for small deviations). The mean bends so; the variance is multiplied by the
square of the slope, ``(1 - 2 a s / full)^2``.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def bend(electrons: AnyArray, *, share: float, full: float) -> None:
    """Let signals fall short, in place.

    Parameters
    ----------
    electrons : ndarray of float
        Electrons; changed.
    share : float
        By which a signal of `full` falls short, 0 to 0.4.
    full : float
        Electrons at which it does, above 0; above it the deficit stays that share.
    """
    level = np.minimum(electrons, full)
    electrons -= electrons * level * electrons.dtype.type(share / full)
