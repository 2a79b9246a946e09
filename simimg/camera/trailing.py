"""Charge that lags behind while a frame is shifted out: trails away from the amplifier.

Each of the shifts that bring a row to the first one leaves a share of its charge behind, which
follows in the rows after it, less and less (common practice: one exponential; traps that fill up
are not modelled). Charge is conserved but for what has not come out when the last row is read. A
pixel's mean falls by ``1 - (1 - inefficiency)^(row + 1)`` of itself and grows by what lags from the
rows before; its variance follows the charge it holds, and neighbours along the column are
correlated.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray


def trail(electrons: AnyArray, *, inefficiency: float, length: float) -> None:
    """Let charge lag along the columns, in place.

    Parameters
    ----------
    electrons : ndarray of float, shape (rows, columns)
        Electrons; changed. Row 0 is shifted once.
    inefficiency : float
        Share left behind at each shift, 0 to 1.
    length : float
        Rows over which a trail falls to 1/e, above 0.
    """
    from scipy.signal import lfilter

    rows = np.arange(1, electrons.shape[0] + 1)
    lost = -np.expm1(rows * np.log1p(-inefficiency))
    deferred = electrons * lost[:, np.newaxis]
    kept = np.exp(-1.0 / length)
    # A row releases into the next one what it holds back, and so on: a filter of one pole.
    released = lfilter([0.0, 1.0 - kept], [1.0, -kept], deferred, axis=0)
    electrons -= deferred.astype(electrons.dtype)
    electrons += released.astype(electrons.dtype)
