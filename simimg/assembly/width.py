"""Full width at half maximum of a PSF's azimuthal mean, straight from its transfer function."""

from __future__ import annotations

from functools import cache
from math import pi

import numpy as np
from scipy.optimize import brentq
from scipy.special import j0

from simimg.arrays import FloatArray, frozen
from simimg.imaging.basis import Transfer


@cache
def _panels() -> tuple[FloatArray, FloatArray]:
    """Nodes and weights of 20 Gauss-Legendre panels on the unit interval."""
    nodes, weights = np.polynomial.legendre.leggauss(32)
    t = (np.arange(20)[:, None] + 0.5 * (nodes + 1.0)) / 20.0
    return frozen(t.ravel()), frozen(np.tile(weights / 40.0, 20))


def half_light_width(transfer: Transfer) -> float:
    """Full width at half maximum (rad) of a PSF's azimuthal mean about the star's place.

    The Hankel transform of the mean transfer function, by Gauss-Legendre quadrature.
    """
    t, weights = _panels()
    # The square crowds the nodes where the air leaves something.
    f = transfer.band_limit * t * t
    weight = weights * transfer.band_limit * t * f
    if transfer.round:
        mean = transfer.modulus(f)
    else:
        angles = (np.arange(24) + 0.5) * pi / 24.0
        mean = np.real(transfer(f * np.cos(angles)[:, None], f * np.sin(angles)[:, None])).mean(0)
    peak = float(weight @ mean)

    def above(r: float) -> float:
        return float(weight @ (mean * j0(2.0 * pi * f * r))) / peak - 0.5

    outer = 0.2 / transfer.band_limit
    while above(outer) > 0.0:
        outer *= 1.5
    return 2.0 * float(brentq(above, outer / 1.5, outer, rtol=1e-12))
