"""Structure of the bias: columns that differ, and rows that drift.

Each column has an offset of its own, fixed by the camera's serial number. The level drifts from row
to row while a frame is read, a random process that forgets itself over some tens of rows (first
order autoregression); it is another in every frame. Both add to the mean of a pixel; averaged over
frames the drift adds its rms squared to the variance, rows being correlated. Counts (ADU).
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import FloatArray

_MEMORY = 40.0  # rows over which the drift forgets itself (common practice)


def column_offsets(columns: int, rms: float, rng: np.random.Generator) -> FloatArray:
    """Offsets of the columns, of so large an rms: ndarray of float32, shape (columns,)."""
    return np.asarray(rms * rng.standard_normal(columns), dtype=np.float32)


def row_drift(rows: int, rms: float, rng: np.random.Generator) -> FloatArray:
    """Drift of the rows, of so large an rms: ndarray of float32, shape (rows,)."""
    from scipy.signal import lfilter

    kept = np.exp(-1.0 / _MEMORY)
    steps = rng.standard_normal(rows) * np.sqrt(1.0 - kept**2)
    # Begins as if it had gone on for ever.
    steps[0] /= np.sqrt(1.0 - kept**2)
    return np.asarray(rms * lfilter([1.0], [1.0, -kept], steps), dtype=np.float32)
