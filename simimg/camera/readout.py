"""Read noise of the amplifier: Gaussian, the same for every pixel or each with its own.

Mean unchanged, variance grows by ``read_noise**2`` electrons squared. Where every pixel has an
amplifier of its own their noises differ, with a long tail (common practice: log-normal); the rms
over the pixels stays the stated one.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.camera.streams import Fixed, fixed_stream


def add_read_noise(
    electrons: AnyArray,
    read_noise: float,
    rng: np.random.Generator,
    *,
    relative: AnyArray | None = None,
) -> None:
    """Add read noise, in place.

    Parameters
    ----------
    electrons : ndarray of float32 or float64
        Electrons; changed.
    read_noise : float
        Standard deviation, electrons, 0 or above; with 0 nothing is drawn.
    rng : numpy.random.Generator
        Stream to draw from. The draw is in single precision: its steps of 1e-7 do not show.
    relative : ndarray, same shape, optional
        Each pixel's own over `read_noise`.
    """
    if read_noise == 0.0:
        return
    noise = rng.standard_normal(electrons.shape, dtype=np.float32)
    noise *= np.float32(read_noise)
    if relative is not None:
        noise *= relative
    electrons += noise


@lru_cache(maxsize=4)
def relative_noise(shape: tuple[int, int], spread: float, serial: int) -> FloatArray:
    """Each pixel's read noise over the rms of all, fixed by the camera's serial number.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    spread : float
        Standard deviation of its logarithm.
    serial : int

    Returns
    -------
    ndarray of float32, shape (rows, columns)
    """
    deviates = fixed_stream(serial, Fixed.READ_NOISE).standard_normal(shape, dtype=np.float32)
    return frozen(np.exp(np.float32(spread) * deviates - np.float32(spread**2)))
