"""What motion during the exposure does to the image: jitter, drift, trails, field rotation.

Each is a factor of the transfer function, the Fourier transform of where the image has been while
the shutter was open, as a probability. Frequencies u, v are in cycles per radian along the
detector's +x and +y, lengths on the sky in radians; the sign is that of

    F(u, v) = integral of I exp(-2 pi i (u x + v y)).

Jitter and drift are the same for every star; field rotation carries a star along an arc that grows
with its distance from the centre.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import ComplexArray, FloatArray

SIDEREAL_RATE = 7.2921159e-5
"""Turn of the earth (rad/s)."""

_FINEST_PHASE = 1.2
_LEAST_NODES = 12
_MOST_NODES = 4096


def jitter_transfer(
    u: ArrayLike, v: ArrayLike, *, rms: float, rms_across: float | None = None, angle: float = 0.0
) -> FloatArray:
    """Transfer function of pointing that trembles.

    Parameters
    ----------
    u, v : array_like
        Frequencies (cycles/rad); they broadcast.
    rms : float
        Root mean square of the pointing (rad) along the axis at ``angle``, 0 or more.
    rms_across : float, optional
        The same along the axis across it; as ``rms`` unless given.
    angle : float
        Direction of the first axis, from +x towards +y (rad).

    Returns
    -------
    ndarray of float64
        exp(-2 pi^2 (rms^2 f^2 + ...)): a Gaussian, for a tremble fast against the exposure.

    Raises
    ------
    ValueError
        If a value is not finite or below 0.
    """
    across = rms if rms_across is None else rms_across
    for name, value in (("rms", rms), ("rms_across", across)):
        if not (np.isfinite(value) and value >= 0.0):
            raise ValueError(f"jitter {name} must be finite and at least 0 rad, got {value}")
    if not np.isfinite(angle):
        raise ValueError(f"jitter angle must be finite, got {angle}")
    x, y = np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64)
    first = x * np.cos(angle) + y * np.sin(angle)
    second = y * np.cos(angle) - x * np.sin(angle)
    return np.asarray(np.exp(-2.0 * np.pi**2 * ((rms * first) ** 2 + (across * second) ** 2)))


def drift_transfer(u: ArrayLike, v: ArrayLike, *, dx: float, dy: float) -> FloatArray:
    """Transfer function of a straight, even trail.

    Parameters
    ----------
    u, v : array_like
        Frequencies (cycles/rad); they broadcast.
    dx, dy : float
        From the trail's first to its last point (rad), along +x and +y; of an object that moves
        on the sky, or of stars while the telescope follows one.

    Returns
    -------
    ndarray of float64
        sinc(u dx + v dy): real, for the star's place is that at the middle of the exposure.

    Raises
    ------
    ValueError
        If the trail is not finite.
    """
    if not (np.isfinite(dx) and np.isfinite(dy)):
        raise ValueError(f"a trail must be finite, got {dx}, {dy} rad")
    x, y = np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64)
    return np.asarray(np.sinc(x * dx + y * dy))


def arc_points(
    x: float, y: float, *, angle: float, count: int
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Points and weights that stand for a star's arc about the field's centre.

    Parameters
    ----------
    x, y : float
        The star from the centre of rotation at the middle of the exposure, in any unit of length.
    angle : float
        Turn of the field during the exposure (rad), from +x towards +y; even.
    count : int
        Number of points, at least 1.

    Returns
    -------
    dx, dy : (count,) ndarray of float64
        From the star's place at mid-exposure, in the same unit.
    weight : (count,) ndarray of float64
        Of sum 1: Gauss and Legendre's.

    Raises
    ------
    ValueError
        If a value is not finite or the count below 1.
    """
    if not (np.isfinite(x) and np.isfinite(y) and np.isfinite(angle)):
        raise ValueError(f"an arc needs a finite place and angle, got {x}, {y}, {angle}")
    if not 1 <= count <= _MOST_NODES:
        raise ValueError(f"an arc needs 1 to {_MOST_NODES} points, got {count}")
    nodes, weights = np.polynomial.legendre.leggauss(count)
    turn = 0.5 * angle * nodes
    # 1 - cos without its cancellation at small turns.
    less, sine = 2.0 * np.sin(0.5 * turn) ** 2, np.sin(turn)
    return -x * less - y * sine, x * sine - y * less, 0.5 * weights


def arc_count(length: float, finest: float) -> int:
    """How many points an arc needs.

    Parameters
    ----------
    length : float
        Of the arc (rad on the sky).
    finest : float
        Highest frequency that is left in the image (cycles/rad).

    Returns
    -------
    int
        Enough for the arc's transfer function to 1e-6 up to that frequency, at least 12.

    Raises
    ------
    ValueError
        If a value is not finite or below 0, or it takes more than 4096 points.
    """
    if not (np.isfinite(length) and length >= 0.0 and np.isfinite(finest) and finest >= 0.0):
        raise ValueError(f"an arc needs a finite length and frequency, got {length}, {finest}")
    # Gauss's rule follows exp(i z t) once it has half a point a radian of z; more for a long arc.
    count = int(np.ceil(np.pi * length * finest / _FINEST_PHASE)) + _LEAST_NODES
    if count > _MOST_NODES:
        raise ValueError(
            f"an arc of {length} rad seen to {finest} cycles/rad needs {count} points, more than "
            f"{_MOST_NODES}"
        )
    return count


def arc_transfer(u: ArrayLike, v: ArrayLike, *, x: float, y: float, angle: float) -> ComplexArray:
    """Transfer function of a star carried about the field's centre.

    Parameters
    ----------
    u, v : array_like
        Frequencies (cycles/rad); they broadcast.
    x, y : float
        The star from the centre of rotation at mid-exposure (rad on the sky).
    angle : float
        Turn of the field during the exposure (rad), from +x towards +y.

    Returns
    -------
    ndarray of complex128
        1 at zero frequency; complex, for an arc's middle does not halve it evenly: the image's
        centroid lies within the arc, towards the centre of rotation.

    Raises
    ------
    ValueError
        If a value is not finite, or the arc is too long for the frequencies.
    """
    across, along = np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64)
    if not (np.isfinite(x) and np.isfinite(y) and np.isfinite(angle)):
        raise ValueError(f"an arc needs a finite place and angle, got {x}, {y}, {angle}")
    largest = float(np.hypot(np.abs(across).max(initial=0.0), np.abs(along).max(initial=0.0)))
    count = arc_count(abs(angle) * float(np.hypot(x, y)), largest)
    dx, dy, weight = arc_points(x, y, angle=angle, count=count)
    total = np.zeros(np.broadcast_shapes(across.shape, along.shape), dtype=np.complex128)
    for one_x, one_y, share in zip(dx, dy, weight):
        phase_x = np.exp(-2j * np.pi * one_x * across)
        total += share * phase_x * np.exp(-2j * np.pi * one_y * along)
    return total


def field_rotation_rate(latitude: float, azimuth: float, altitude: float) -> float:
    """Rate at which the field turns behind an altazimuth mount.

    Parameters
    ----------
    latitude : float
        Of the telescope (rad).
    azimuth : float
        From north through east (rad).
    altitude : float
        Of the star (rad), below pi/2: at the zenith the rate has no bound.

    Returns
    -------
    float
        How fast the position angle of the zenith, seen from the star, grows (rad/s): minus the
        sidereal rate times cos(latitude) cos(azimuth) / cos(altitude). On a detector that keeps
        the zenith up the position angles of stars fall back by as much.

    Raises
    ------
    ValueError
        If an angle is out of range.

    References
    ----------
    Smart, W. M., Textbook on Spherical Astronomy: the time derivative of the parallactic angle.
    """
    if not abs(latitude) <= 0.5 * np.pi:
        raise ValueError(f"latitude must be from -pi/2 to pi/2, got {latitude}")
    if not abs(altitude) < 0.5 * np.pi:
        raise ValueError(f"altitude must be within a right angle, got {altitude}")
    if not np.isfinite(azimuth):
        raise ValueError(f"azimuth must be finite, got {azimuth}")
    return float(-SIDEREAL_RATE * np.cos(latitude) * np.cos(azimuth) / np.cos(altitude))
