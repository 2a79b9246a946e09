"""The noise of a pixel, as a fit or an observer reckons it: variances in electrons squared."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray


def pixel_variance(electrons: ArrayLike, read_noise: float, *, gain: float = 0.0) -> FloatArray:
    """Variance of what is read from a pixel that expects so many electrons.

    Parameters
    ----------
    electrons : array_like
        Expected electrons of light and dark signal, 0 or above.
    read_noise : float
        Standard deviation, electrons.
    gain : float, optional
        Electrons per count; adds the rounding of the converter, ``gain**2 / 12``. 0 leaves it out.

    Returns
    -------
    ndarray
        ``electrons + read_noise**2 + gain**2 / 12``, electrons squared: in counts divided by
        ``gain**2`` the photon transfer (Janesick 2001). It holds below the full well and within
        the converter's range.
    """
    return np.asarray(
        np.asarray(electrons, dtype=np.float64) + (read_noise**2 + gain**2 / 12.0),
    )


def snr_aperture(
    source: float, *, sky: float, dark: float, read_noise: float, pixels: float, time: float
) -> float:
    """Signal to noise of a source in an aperture (Howell, Handbook of CCD Astronomy, ch. 4).

    Parameters
    ----------
    source : float
        Electrons per second of the source in the aperture, 0 or above.
    sky, dark : float
        Electrons per second and pixel.
    read_noise : float
        Electrons a pixel.
    pixels : float
        Pixels in the aperture.
    time : float
        Seconds.

    Returns
    -------
    float
        ``S / sqrt(S + n (sky + dark + read_noise^2))``, with S the source's electrons; 0 without
        a source. The sky is taken as known.
    """
    signal = source * time
    variance = signal + pixels * ((sky + dark) * time + read_noise**2)
    return signal / math.sqrt(variance) if signal > 0.0 else 0.0
