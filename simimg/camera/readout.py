"""Read noise of the amplifier: Gaussian, the same for every pixel.

Mean unchanged, variance grows by ``read_noise**2`` electrons squared.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def add_read_noise(electrons: AnyArray, read_noise: float, rng: np.random.Generator) -> None:
    """Add read noise, in place.

    Parameters
    ----------
    electrons : ndarray of float32 or float64
        Electrons; changed.
    read_noise : float
        Standard deviation, electrons, 0 or above; with 0 nothing is drawn.
    rng : numpy.random.Generator
        Stream to draw from. The draw is in single precision: its steps of 1e-7 do not show.
    """
    if read_noise == 0.0:
        return
    noise = rng.standard_normal(electrons.shape, dtype=np.float32)
    noise *= np.float32(read_noise)
    electrons += noise
