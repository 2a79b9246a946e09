"""Dark current of every pixel: a scatter about the mean, hot pixels, and pixels that flicker.

Mean and variance of a pixel's dark signal are both its own current times the exposure. The scatter
is log-normal with the camera's mean, so that no current is negative. A hot pixel has an extra
current, exponentially distributed among them; a flickering one has such an extra current in about
half of the frames (random telegraph signal between two levels: Hopkins & Hopkinson 1993, IEEE
Trans. Nucl. Sci. 40, 1567; slow against an exposure). All but the flicker's state is fixed by the
camera's serial number. Electrons per second.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.settings import Patterns
from simimg.camera.streams import Fixed, fixed_stream


def dark_currents(
    shape: tuple[int, int], patterns: Patterns, serial: int, *, mean: float
) -> tuple[FloatArray, AnyArray, AnyArray]:
    """The dark current of every pixel while no flicker is on.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    patterns : Patterns
    serial : int
    mean : float
        The camera's dark current.

    Returns
    -------
    currents : ndarray of float32, shape (rows, columns)
    hot : ndarray of bool, same shape
    flicker : ndarray of float32, same shape
        Extra current while a pixel's flicker is on; 0 where it never flickers.
    """
    currents = np.full(shape, mean, dtype=np.float32)
    if patterns.dark_rms and mean:
        spread = np.sqrt(np.log1p(patterns.dark_rms**2))
        noise = fixed_stream(serial, Fixed.DARK).standard_normal(shape, dtype=np.float32)
        # A log-normal factor of mean 1.
        currents *= np.exp(spread * noise - 0.5 * spread**2, dtype=np.float32)
    hot = np.zeros(shape, dtype=np.bool_)
    if patterns.hot_fraction:
        rng = fixed_stream(serial, Fixed.HOT)
        hot = rng.random(shape, dtype=np.float32) < patterns.hot_fraction
        extra = rng.exponential(patterns.hot_current, int(hot.sum()))
        currents[hot] += extra.astype(np.float32)
    flicker = np.zeros(shape, dtype=np.float32)
    if patterns.flickering_fraction:
        rng = fixed_stream(serial, Fixed.FLICKER)
        which = rng.random(shape, dtype=np.float32) < patterns.flickering_fraction
        extra = rng.exponential(patterns.flicker_current, int(which.sum()))
        flicker[which] = extra.astype(np.float32)
    return currents, hot, flicker
