"""Pixels that do not respond: dead ones, and columns that are bad from some row on.

A dead pixel turns no light into electrons: mean and variance of its light vanish, its dark signal
stays. A bad column responds with a fixed share below a half from a row to the end that is farther
from the amplifier (a trap in its way out). Fixed by the camera's serial number.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.settings import Patterns
from simimg.camera.streams import Fixed, fixed_stream

_WEAK = 0.5  # response of a bad column, at most


def dead_pixels(shape: tuple[int, int], patterns: Patterns, serial: int) -> AnyArray:
    """Which pixels are dead: ndarray of bool, shape (rows, columns)."""
    rng = fixed_stream(serial, Fixed.DEAD)
    return np.asarray(rng.random(shape, dtype=np.float32) < patterns.dead_fraction)


def bad_columns(
    shape: tuple[int, int], patterns: Patterns, serial: int
) -> tuple[AnyArray, FloatArray]:
    """Where columns are bad, and what they respond.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    patterns : Patterns
    serial : int

    Returns
    -------
    where : ndarray of bool, shape (rows, columns)
    response : ndarray of float32, shape (columns,)
        Of the bad part of each column; 1 where there is none.
    """
    rows, columns = shape
    rng = fixed_stream(serial, Fixed.COLUMNS)
    where = np.zeros(shape, dtype=np.bool_)
    response = np.ones(columns, dtype=np.float32)
    chosen = rng.choice(columns, size=min(patterns.bad_columns, columns), replace=False)
    for column in chosen:
        where[int(rng.integers(0, rows)) :, column] = True
        response[column] = rng.uniform(0.0, _WEAK)
    return where, response
