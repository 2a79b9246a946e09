"""Arrival of electrons: Poisson noise of light and dark signal.

Mean unchanged, variance equal to the mean. Electrons are counted exactly up to 2**24 in float32 and
2**53 in float64; beyond that they are rounded far below their own noise.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray, FloatArray

LARGEST_MEAN = 4e18
"""Means above this are drawn at this: the draw is a 64-bit integer, and no converter counts it."""


def arrivals(mean: FloatArray, rng: np.random.Generator, *, out: AnyArray) -> None:
    """Draw electrons for each pixel.

    Parameters
    ----------
    mean : ndarray
        Expected electrons, finite and not negative. Changed where it exceeds `LARGEST_MEAN`.
    rng : numpy.random.Generator
        Stream to draw from.
    out : ndarray of float, same shape
        Where the electrons go.

    Raises
    ------
    ValueError
        A mean that is negative, infinite or NaN.
    """
    lowest, highest = mean.min(), mean.max()
    if not (lowest >= 0.0 and highest < np.inf):
        bad = mean[~((mean >= 0.0) & (mean < np.inf))]
        raise ValueError(
            f"expected electrons must be finite and not negative: {bad.size} pixels are not, "
            f"the first is {float(bad[0])!r}"
        )
    if highest > LARGEST_MEAN:
        np.minimum(mean, LARGEST_MEAN, out=mean)
    out[...] = rng.poisson(mean)
