"""A transfer function from a table: what takes long to compute, computed once.

A polychromatic transfer function is a sum over wavelengths, each with its own pupil, air and
dispersion; an image asks it at millions of frequencies. On a lattice fine enough it is a cubic
spline through far fewer values. Frequencies in cycles per radian along the detector's +x and +y;
any other unit serves as well.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import ceil

import numpy as np
from numpy.typing import ArrayLike
from scipy import ndimage

from simimg.arrays import AnyArray, ComplexArray, FloatArray, frozen
from simimg.optics.transfer import evaluate_spline

MOST_STEPS = 2048
"""Most steps from the middle of a table to its edge."""

_RIM = 4


@dataclass(frozen=True, eq=False)
class TabulatedTransfer:
    """A transfer function on a lattice; made by `tabulated_transfer`.

    Attributes
    ----------
    step : float
        Spacing of the lattice (cycles/rad).
    limit : float
        Modulus at and beyond which the function is zero.
    coefficients : (n, n) ndarray of complex64
        Cubic B-spline coefficients, frequency zero in the middle.
    """

    step: float
    limit: float
    coefficients: ComplexArray

    def __call__(self, u: ArrayLike, v: ArrayLike) -> ComplexArray:
        """Value at frequencies that broadcast; shapes ``(1, n)`` and ``(m, 1)`` are fast."""
        x, y = np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64)
        value: AnyArray = evaluate_spline(self.coefficients, x / self.step, y / self.step)
        value *= np.hypot(x, y) < self.limit
        return value


def tabulated_transfer(
    function: Callable[[FloatArray, FloatArray], AnyArray], *, limit: float, step: float
) -> TabulatedTransfer:
    """Tabulate a transfer function.

    Parameters
    ----------
    function : callable
        ``function(u, v)`` for a row ``(1, n)`` and a column ``(m, 1)`` of frequencies, real or
        complex; Hermitian, as the transform of a real image is.
    limit : float
        Modulus at and beyond which it is zero, or so small that it may be taken as zero.
    step : float
        Spacing of the lattice. A perfect pupil's polychromatic image is within 1e-6 of its peak
        with the 128th part of the cut-off; one in turbulent air with the fortieth part of Fried's
        parameter over the wavelength. An image with structure b radians wide needs a step well
        below 1/(2 b): a tenth of it leaves 1e-4 at its edge. Halving the step takes a factor 10
        off the error.

    Returns
    -------
    TabulatedTransfer

    Raises
    ------
    ValueError
        If a value is not finite and above 0, or the table would have more than `MOST_STEPS` from
        its middle to its edge.
    """
    for name, value in (("limit", limit), ("step", step)):
        if not (np.isfinite(value) and value > 0.0):
            raise ValueError(f"{name} must be finite and above 0, got {value}")
    count = ceil(limit / step)
    if count > MOST_STEPS:
        raise ValueError(f"a table needs at most {MOST_STEPS} steps to its edge, got {count}")
    size = 2 * (count + _RIM) + 1
    middle = size // 2
    across = (np.arange(size) - middle) * step
    upper = function(across[np.newaxis, :], across[middle:, np.newaxis])
    values = np.empty((size, size), dtype=np.complex128)
    values[middle:] = np.where(np.hypot(across, across[middle:, np.newaxis]) < limit, upper, 0.0)
    values[:middle] = values[:middle:-1, ::-1].conj()
    coefficients = np.empty(values.shape, dtype=np.complex64)
    coefficients.real = ndimage.spline_filter(values.real, order=3, mode="mirror")
    coefficients.imag = ndimage.spline_filter(values.imag, order=3, mode="mirror")
    return TabulatedTransfer(step, limit, frozen(coefficients))
