"""Electron multiplication: each electron becomes many in a register before it is read.

``n`` electrons leave as a number that is gamma distributed with shape ``n`` and the gain as its
scale (Basden, Haniff & Mackay 2003, MNRAS 345, 985). The mean is multiplied by the gain; the
variance by its square and, for light, once more by the excess noise factor squared, which is 2 at
high gain (Robbins & Hadwen 2003, IEEE Trans. Electron Devices 50, 1227). The register holds so
much and no more. Charge that the clocks themselves make is not modelled.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from simimg.arrays import AnyArray


def multiply(
    electrons: AnyArray, gain: float, rng: np.random.Generator, *, well: float | None
) -> NDArray[np.bool_]:
    """Multiply electrons, in place.

    Parameters
    ----------
    electrons : ndarray of float
        Whole electrons; changed. What is no whole number is rounded first.
    gain : float
        Mean electrons that leave for each that enters, above 1.
    rng : numpy.random.Generator
    well : float or None
        Electrons that the register holds; None without end.

    Returns
    -------
    ndarray of bool
        True where the register was full.
    """
    entered = np.rint(electrons)
    electrons[...] = np.where(entered > 0.0, rng.gamma(np.maximum(entered, 1.0), gain), 0.0)
    if well is None:
        return np.zeros(electrons.shape, dtype=np.bool_)
    full = electrons >= well
    np.minimum(electrons, well, out=electrons)
    return np.asarray(full)


def excess_noise(gain: float) -> float:
    """Square of the excess noise factor: by how much light's variance grows beyond gain squared.

    Parameters
    ----------
    gain : float
        1 and above.

    Returns
    -------
    float
        ``1 + 1`` for any register whose output is gamma distributed; 1 without multiplication.
    """
    return 2.0 if gain > 1.0 else 1.0
