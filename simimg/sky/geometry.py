"""What all shapes share: turning and squeezing frequencies, and sums over points.

A shape lives in detector axes: its angle is measured from the detector's +x towards its +y. Angles
on the sky are in radians, frequencies in cycles per radian. The transform of a shape of surface
brightness ``I`` and unit light is ``F(u, v) = integral I(x, y) exp(-2 pi i (u x + v y)) dx dy``.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import ComplexArray, FloatArray

_CHUNK = 1 << 20


def require(condition: bool, message: str) -> None:
    """Raise ValueError with `message` unless the condition holds."""
    if not condition:
        raise ValueError(message)


def require_positive(name: str, value: float) -> None:
    """Raise ValueError unless the value is finite and above zero."""
    require(math.isfinite(value) and value > 0.0, f"{name} must be above 0, got {value!r}")


def require_ellipse(axis_ratio: float, angle: float) -> None:
    """Raise ValueError unless 0 < axis_ratio <= 1 and the angle is finite."""
    require(
        0.0 < axis_ratio <= 1.0, f"axis_ratio must be above 0 and at most 1, got {axis_ratio!r}"
    )
    require(math.isfinite(angle), f"angle must be finite, got {angle!r}")


def squeezed_frequency_squared(
    u: ArrayLike, v: ArrayLike, *, axis_ratio: float, angle: float
) -> FloatArray:
    """Square of the frequency that a round shape sees when it is squeezed and turned.

    Parameters
    ----------
    u, v : array_like
        Frequencies along the detector's +x and +y, cycles per radian; they broadcast.
    axis_ratio : float
        Minor over major axis, 0 to 1.
    angle : float
        Major axis from the detector's +x towards +y, radians.

    Returns
    -------
    ndarray
        ``(u cos + v sin)^2 + q^2 (v cos - u sin)^2``, cycles^2 per radian^2. A round profile of
        transform ``F(f^2)`` has the transform ``F`` of this when it is squeezed by ``q`` along its
        minor axis (similarity theorem).
    """
    fx = np.asarray(u, dtype=np.float64)
    fy = np.asarray(v, dtype=np.float64)
    if axis_ratio == 1.0:
        return np.asarray(fx * fx + fy * fy)
    cosine, sine = math.cos(angle), math.sin(angle)
    along = cosine * fx + sine * fy
    across = axis_ratio * (cosine * fy - sine * fx)
    along *= along
    across *= across
    along += across
    return np.asarray(along)


def points_transform(
    dx: FloatArray, dy: FloatArray, weight: FloatArray, u: ArrayLike, v: ArrayLike
) -> ComplexArray:
    """Transform of weighted points by the plain sum; exact, and slow for many points.

    Parameters
    ----------
    dx, dy : ndarray, shape (n,)
        Places from the shape's centre along the detector's axes, radians.
    weight : ndarray, shape (n,)
        Light of each point.
    u, v : array_like
        Frequencies, cycles per radian; they broadcast.

    Returns
    -------
    ndarray of complex
        Shape of the broadcast of `u` and `v`.
    """
    fx, fy = np.broadcast_arrays(np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64))
    shape, fx, fy = fx.shape, fx.ravel(), fy.ravel()
    result = np.zeros(fx.size, dtype=np.complex128)
    step = max(1, _CHUNK // max(1, weight.size))
    for start in range(0, fx.size, step):
        part = slice(start, start + step)
        phase = np.multiply.outer(fx[part], dx) + np.multiply.outer(fy[part], dy)
        result[part] = (np.exp(-2j * np.pi * phase) * weight).sum(axis=1)
    return result.reshape(shape)
