"""Electron multiplication: each electron becomes many in a register before it is read.

Each of the register's many stages adds to every electron, with a small chance, one more: in the
limit of many stages one electron leaves as a geometrically distributed number, and ``n`` as their
sum, ``n`` and a negative binomial. At high gain that is the gamma distribution of shape ``n`` whose
scale is the gain (Basden, Haniff & Mackay 2003, MNRAS 345, 985). The mean is multiplied by the
gain; the variance of light by its square and by the excess noise factor squared, ``2 - 1 / gain``
(Robbins & Hadwen 2003, IEEE Trans. Electron Devices 50, 1227, for many stages). The register holds
so much and no more. Charge that the clocks themselves make is not modelled.
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
        Electrons; changed. What is no whole number is rounded first.
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
    entered = np.maximum(np.rint(electrons), 0.0)
    some = entered > 0.0
    left = np.zeros(entered.shape)
    left[some] = entered[some] + rng.negative_binomial(entered[some], 1.0 / gain)
    electrons[...] = left
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
        ``2 - 1 / gain``: 1 without multiplication, 2 at high gain.
    """
    return 2.0 - 1.0 / gain
