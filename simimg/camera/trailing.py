"""Charge that lags behind while a frame is shifted out: trails away from the amplifier.

At each of the shifts that bring a row to its amplifier every electron may stay behind, with one
small chance for all; those that do follow in the rows after it, less and less (common practice: one
exponential; traps that fill up are not modelled). Charge is conserved but for what has not come out
when the last row is read. A pixel's mean falls by ``1 - (1 - inefficiency)^(row + 1)`` of itself
and grows by what lags from the rows before. Electrons stay behind one by one, at random, so that
light keeps the variance of its new mean and neighbours stay uncorrelated (the noise of transfer,
Janesick 2001, ch. 5, from memory).
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def trail(
    electrons: AnyArray,
    *,
    inefficiency: float,
    length: float,
    rng: np.random.Generator,
    before: int = 0,
) -> None:
    """Let charge lag along the columns, in place.

    Parameters
    ----------
    electrons : ndarray of float, shape (rows, columns)
        Electrons; changed. Row 0 is shifted once. What is no whole number is rounded first.
    inefficiency : float
        Chance of an electron to stay behind at each shift, 0 to 1.
    length : float
        Rows over which a trail falls to 1/e, above 0.
    rng : numpy.random.Generator
    before : int, optional
        Rows between these and the register, 0 or more; each is another shift.
    """
    rows, columns = electrons.shape
    lost = -np.expm1((before + np.arange(1, rows + 1)) * np.log1p(-inefficiency))
    released = -np.expm1(-1.0 / length)
    held = np.zeros(columns, dtype=np.int64)
    for row, share in enumerate(lost):
        here = np.maximum(np.rint(electrons[row]), 0.0).astype(np.int64)
        freed = rng.binomial(held, released)
        left = rng.binomial(here, share)
        electrons[row] = here - left + freed
        held += left - freed
