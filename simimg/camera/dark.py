"""Dark signal: electrons that arrive without light.

Mean ``dark_current * time`` electrons a pixel, added before the Poisson draw, so that its variance
equals its mean. Even over the detector.
"""

from __future__ import annotations


def dark_signal(dark_current: float, time: float) -> float:
    """Mean dark electrons a pixel in an exposure.

    Parameters
    ----------
    dark_current : float
        Electrons per second and pixel.
    time : float
        Seconds.
    """
    return dark_current * time
