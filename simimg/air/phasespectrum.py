"""The power spectrum of the phase that turbulence gives a wavefront, after von Karman.

``0.0228956 r0^(-5/3) (f^2 + 1/L0^2)^(-11/6)``: Kolmogorov's where the outer scale is infinite.
Screens are drawn from it, and what a correction leaves is a share of it. Frequencies in cycles per
unit of length, phases in radians.

References
----------
Noll, R. J. 1976, J. Opt. Soc. Am. 66, 207.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray, FloatArray

SPECTRUM = 0.0228956
"""Factor of the spectrum (Noll 1976 rounds it to 0.023)."""


def phase_spectrum(f2: AnyArray, outer_scale: float) -> FloatArray:
    """Power spectrum of the phase for r0 = 1 at squared frequency `f2`.

    Parameters
    ----------
    f2 : ndarray
        Squared modulus of the frequency, cycles per unit length squared; above 0 for an infinite
        outer scale.
    outer_scale : float
        L0 in the same length, or infinity.

    Returns
    -------
    ndarray, of the shape of `f2`
        rad2 times the square of the length.
    """
    return np.asarray(SPECTRUM * (f2 + outer_scale**-2.0) ** (-11.0 / 6.0))
