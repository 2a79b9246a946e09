"""Random streams that depend on what is drawn, never on who draws it.

Every stage of the chain draws each block of rows from a stream of its own, spawned from the seed by
frame, stage and block. The same scene then gives the same counts on one thread or many, and a new
stage changes no draw of the others.
"""

from __future__ import annotations

from enum import IntEnum
from typing import Final

import numpy as np

BLOCK_ROWS: Final = 64
"""Rows of a block; part of what a seed means, so it never changes."""


_CAMERAS = 0x5EA1


class Stage(IntEnum):
    """What is drawn. A number, once given, is never given to another stage."""

    PHOTONS = 1
    READ_NOISE = 2
    COSMIC_RAYS = 3
    FLICKER = 4
    MULTIPLICATION = 5
    BIAS_DRIFT = 6
    TRAILING = 7
    DRAW = 50
    INJECTED = 40
    INJECTED_ROUNDING = 41
    DITHER = 42


class Fixed(IntEnum):
    """What is drawn once for a camera, from its serial number; numbers are never given again."""

    FLAT = 1
    DUST = 2
    DARK = 3
    HOT = 4
    FLICKER = 5
    DEAD = 6
    COLUMNS = 7
    READ_NOISE = 8
    BIAS = 9


def fixed_stream(serial: int, what: Fixed | int) -> np.random.Generator:
    """The generator of one fixed pattern of a camera.

    Parameters
    ----------
    serial : int
        Which camera, 0 or above.
    what : Fixed
    """
    # The camera's patterns and a run's noise are apart even where serial and seed are one number.
    key = (_CAMERAS, int(what))
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(serial, spawn_key=key)))


def stream(seed: int, *, frame: int, stage: Stage | int, block: int) -> np.random.Generator:
    """The generator of one stage for one block of rows of one frame.

    Parameters
    ----------
    seed : int
        Seed of the run, 0 or above.
    frame : int
        Number of the exposure, from 0.
    stage : Stage
        What is drawn.
    block : int
        Number of the block of `BLOCK_ROWS` rows, from 0.

    Returns
    -------
    numpy.random.Generator
        PCG64 (O'Neill 2014), from ``SeedSequence(seed, spawn_key=(frame, stage, block))``.

    Raises
    ------
    ValueError
        A number below 0.
    """
    key = (int(frame), int(stage), int(block))
    if seed < 0 or min(key) < 0:
        raise ValueError(f"seed, frame, stage and block must not be negative: {seed}, {key}")
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=key)))
