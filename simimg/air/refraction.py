"""Airmass from the altitude at which a star is seen.

The airmass is the mass of air along the line of sight over that towards the zenith, for a standard
atmosphere seen from the ground. Altitudes are apparent (with refraction) and in radians. Between
the two formulae here there is 0.1 % at 15 degrees and 0.3 % at 5 degrees; the horizon, where the
real air varies by more, is out of reach of both.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray


def airmass_from_altitude(altitude: ArrayLike) -> FloatArray:
    """Airmass by Pickering's interpolation, X = 1 / sin(h + 244 / (165 + 47 h^1.1)).

    Parameters
    ----------
    altitude : array_like
        Apparent altitude h (rad; the formula's own h is in degrees), 0 to pi/2.

    Returns
    -------
    ndarray of float64
        From 1 (to 2e-7) at the zenith to 38.7 at the horizon.

    Raises
    ------
    ValueError
        If an altitude is below the horizon, beyond the zenith or not a number.

    References
    ----------
    Pickering, K. A. 2002, DIO 12, 1, note 39. Made for the whole range from zenith to horizon.
    """
    degrees = _altitude_degrees(altitude)
    return np.asarray(1.0 / np.sin(np.radians(degrees + 244.0 / (165.0 + 47.0 * degrees**1.1))))


def airmass_kasten_young(altitude: ArrayLike) -> FloatArray:
    """Airmass by Kasten and Young, X = 1 / (sin h + 0.50572 (h + 6.07995)^-1.6364).

    Parameters
    ----------
    altitude : array_like
        Apparent altitude h (rad; within the power it is in degrees), 0 to pi/2.

    Returns
    -------
    ndarray of float64
        From 0.99971 at the zenith (the fit's own error) to 37.9 at the horizon.

    Raises
    ------
    ValueError
        If an altitude is below the horizon, beyond the zenith or not a number.

    References
    ----------
    Kasten, F. & Young, A. T. 1989, Applied Optics 28, 4735. Fitted from zenith to horizon, within
    0.5 % of the tables at the horizon.
    """
    degrees = _altitude_degrees(altitude)
    sine = np.sin(np.radians(degrees))
    return np.asarray(1.0 / (sine + 0.50572 * (degrees + 6.07995) ** -1.6364))


def _altitude_degrees(altitude: ArrayLike) -> FloatArray:
    degrees = np.asarray(np.degrees(np.asarray(altitude, dtype=np.float64)))
    # A right angle that was converted from degrees may miss pi/2 by its last digit.
    if not np.all((degrees >= 0.0) & (degrees <= 90.0 + 1e-9)):
        raise ValueError(f"altitude must lie between 0 and 90 degrees, got {altitude!r} rad")
    return degrees
