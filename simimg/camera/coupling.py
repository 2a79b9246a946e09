"""Coupling between pixels: each shows a share of its neighbours' signal.

Capacitance between the pixels of a hybrid detector (Moore, Ninkov & Forrest 2004, Proc. SPIE 5167,
204). The four neighbours each take a share and give one back, so that no signal is lost, at the
edges neither. It acts on electrons that have been counted: an even field keeps its mean, and its
variance falls by ``(1 - 4 a)^2 + 4 a^2``, the noise of neighbours being correlated.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def couple(electrons: AnyArray, share: float) -> None:
    """Share signal among neighbours, in place.

    Parameters
    ----------
    electrons : ndarray of float, shape (rows, columns)
        Electrons; changed.
    share : float
        Of a pixel's signal that each of its four neighbours takes, 0 to 0.2.
    """
    change = np.zeros_like(electrons)
    for axis in (0, 1):
        step = np.diff(electrons, axis=axis) * electrons.dtype.type(share)
        low = tuple(slice(None, -1) if one == axis else slice(None) for one in (0, 1))
        high = tuple(slice(1, None) if one == axis else slice(None) for one in (0, 1))
        change[low] += step
        change[high] -= step
    electrons += change
