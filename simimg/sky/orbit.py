"""The apparent orbit of a visual binary: Kepler's equation and its projection on the sky.

An orbit is given by the seven elements of Campbell: period, time of periastron, eccentricity,
semi-major axis, inclination, position angle of the node and argument of periastron, of the second
star about the first. Times are Julian years (of 365.25 days, 2000.0 being JD 2451545.0), angles
radians; position angles run north through east.

References
----------
Meeus, J., Astronomical Algorithms, 2nd ed., ch. 30 and 57.
Danby, J. M. A. 1988, Fundamentals of Celestial Mechanics, ch. 6 (starting value).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray

_STEPS = 60


@dataclass(frozen=True)
class Orbit:
    """Elements of a relative orbit.

    Attributes
    ----------
    period : float
        Julian years, above 0.
    periastron : float
        Julian year of a passage of periastron.
    eccentricity : float
        0 to below 1.
    semi_major_axis : float
        Apparent length (rad), above 0.
    inclination : float
        0 to pi (rad); beyond pi/2 the position angle falls.
    node : float
        Position angle of the node (rad).
    argument : float
        Argument of periastron, from the node in the direction of motion (rad).
    """

    period: float
    periastron: float
    eccentricity: float
    semi_major_axis: float
    inclination: float
    node: float
    argument: float

    def __post_init__(self) -> None:
        for name in ("period", "semi_major_axis"):
            value = getattr(self, name)
            if not (np.isfinite(value) and value > 0.0):
                raise ValueError(f"{name} must be finite and above 0, got {value}")
        for name in ("periastron", "node", "argument"):
            if not np.isfinite(getattr(self, name)):
                raise ValueError(f"{name} must be finite, got {getattr(self, name)}")
        if not 0.0 <= self.eccentricity < 1.0:
            raise ValueError(f"eccentricity must be from 0 to below 1, got {self.eccentricity}")
        # A straight angle converted from degrees may miss pi by its last digit.
        if not 0.0 <= self.inclination <= np.pi * (1.0 + 1e-12):
            raise ValueError(f"inclination must be from 0 to pi rad, got {self.inclination}")


def eccentric_anomaly(mean_anomaly: ArrayLike, eccentricity: ArrayLike) -> FloatArray:
    """Solution of Kepler's equation, E - e sin E = M.

    Parameters
    ----------
    mean_anomaly : array_like
        M (rad), any finite value.
    eccentricity : array_like
        e, 0 to below 1; broadcasts with M.

    Returns
    -------
    ndarray of float64
        E (rad), within 1e-12 up to e = 0.99, in the same turn as M.

    Raises
    ------
    ValueError
        If an anomaly is not finite or an eccentricity out of range.

    References
    ----------
    Newton's method from Danby's (1988) start, within bounds that halve where it would leave them.
    """
    mean, e = np.broadcast_arrays(
        np.asarray(mean_anomaly, dtype=np.float64), np.asarray(eccentricity, dtype=np.float64)
    )
    if not np.all(np.isfinite(mean)):
        raise ValueError("mean anomalies must be finite")
    if not np.all((e >= 0.0) & (e < 1.0)):
        raise ValueError("eccentricities must be from 0 to below 1")
    turns = 2.0 * np.pi * np.round(mean / (2.0 * np.pi))
    # The equation is odd: half a turn is enough.
    reduced = mean - turns
    m = np.abs(reduced)
    low, high = m, np.minimum(m + e, np.pi)
    anomaly = np.minimum(m + 0.85 * e, high)
    for _ in range(_STEPS):
        error = anomaly - e * np.sin(anomaly) - m
        low = np.where(error < 0.0, anomaly, low)
        high = np.where(error > 0.0, anomaly, high)
        following = anomaly - error / (1.0 - e * np.cos(anomaly))
        following = np.where(
            (following >= low) & (following <= high), following, 0.5 * (low + high)
        )
        settled = np.all(np.abs(following - anomaly) <= 2e-16 * np.pi)
        anomaly = following
        if settled:
            break
    return np.asarray(turns + np.copysign(anomaly, reduced))


def apparent_place(orbit: Orbit, year: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Separation and position angle of the second star about the first.

    Parameters
    ----------
    orbit : Orbit
    year : array_like
        Julian years.

    Returns
    -------
    separation : ndarray of float64
        In radians.
    position_angle : ndarray of float64
        In radians, from 0 to below 2 pi.

    Raises
    ------
    ValueError
        If a year is not finite.

    References
    ----------
    Meeus, ch. 57.
    """
    years = np.asarray(year, dtype=np.float64)
    if not np.all(np.isfinite(years)):
        raise ValueError("years must be finite")
    phase = (years - orbit.periastron) / orbit.period
    e = orbit.eccentricity
    anomaly = eccentric_anomaly(2.0 * np.pi * (phase - np.round(phase)), e)
    # In the plane of the orbit, periastron along the first axis.
    along = orbit.semi_major_axis * (np.cos(anomaly) - e)
    across = orbit.semi_major_axis * np.sqrt((1.0 - e) * (1.0 + e)) * np.sin(anomaly)
    cosine, sine = np.cos(orbit.argument), np.sin(orbit.argument)
    # Turned to the node, and tipped about it.
    to_node = along * cosine - across * sine
    from_node = (along * sine + across * cosine) * np.cos(orbit.inclination)
    angle = np.mod(np.arctan2(from_node, to_node) + orbit.node, 2.0 * np.pi)
    # What rounding lifts to a whole turn is none.
    angle = np.where(angle >= 2.0 * np.pi, 0.0, angle)
    return np.hypot(to_node, from_node), np.asarray(angle)


def julian_year(julian_date: ArrayLike) -> FloatArray:
    """Julian year of a Julian date (days)."""
    days = np.asarray(julian_date, dtype=np.float64)
    return np.asarray(2000.0 + (days - 2451545.0) / 365.25)
