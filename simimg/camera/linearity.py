"""Non-linearity: a pixel near its full range reads less than its charge.

The signal falls short by a share that grows in proportion to it, ``s (1 - a s / full)`` (Janesick
2001, common practice for small deviations). The mean bends so; the variance is multiplied by the
square of the slope, ``(1 - 2 a s / full)^2``.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray
from simimg.camera.converter import converter_top
from simimg.camera.settings import CameraSettings


def bend(electrons: AnyArray, *, share: float, full: float) -> None:
    """Let signals fall short, in place.

    Parameters
    ----------
    electrons : ndarray of float
        Electrons; changed.
    share : float
        By which a signal of `full` falls short, 0 to 0.4.
    full : float
        Electrons at which it does, above 0; above it the deficit stays that share.
    """
    level = np.minimum(electrons, full)
    electrons -= electrons * level * electrons.dtype.type(share / full)


def full_signal(settings: CameraSettings) -> float:
    """Electrons at the full range of what is read: the well's, or the converter's."""
    top = (converter_top(settings.bit_depth) - settings.bias) * settings.gain
    if settings.full_well is None or settings.readout.em_gain > 1.0:
        return max(top, 1.0)
    return min(settings.full_well * settings.readout.binning**2, max(top, 1.0))
