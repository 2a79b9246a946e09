"""Flat response: what share of the light each pixel turns into electrons, relative to the mean.

The mean of a pixel's light is multiplied by its response, and with it the variance that the light
brings. Three parts, all fixed by the camera's serial number: a scatter from pixel to pixel; the
shade of the optics' own edges, falling as the square of the distance from the middle; and the
shadows of dust out of focus, rings with the shade of the pupil in their middle (common practice: a
few percent deep, some tens of pixels wide).
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import FloatArray
from simimg.camera.settings import Patterns
from simimg.camera.streams import Fixed, fixed_stream

_DEEP = 0.01, 0.04  # shade of a ring, as a share of the light
_WIDE = 12.0, 40.0  # its outer radius, pixels
_HOLE = 0.35  # inner radius over outer radius


def flat_response(shape: tuple[int, int], patterns: Patterns, serial: int) -> FloatArray:
    """The response of every pixel.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    patterns : Patterns
    serial : int

    Returns
    -------
    ndarray of float32, shape (rows, columns)
        About 1; never negative.
    """
    rows, columns = shape
    response = np.ones(shape, dtype=np.float32)
    if patterns.flat_rms:
        rng = fixed_stream(serial, Fixed.FLAT)
        noise = rng.standard_normal(shape, dtype=np.float32)
        response += np.float32(patterns.flat_rms) * noise
    y = np.arange(rows, dtype=np.float32)[:, np.newaxis]
    x = np.arange(columns, dtype=np.float32)[np.newaxis, :]
    if patterns.vignetting:
        half_x, half_y = 0.5 * (columns - 1), 0.5 * (rows - 1)
        corner = max(half_x**2 + half_y**2, 1.0)
        fall = ((x - half_x) ** 2 + (y - half_y) ** 2) / corner
        response *= 1.0 - np.float32(patterns.vignetting) * fall
    if patterns.dust_rings:
        _shade(response, patterns.dust_rings, fixed_stream(serial, Fixed.DUST))
    np.maximum(response, 0.0, out=response)
    return response


def _shade(response: FloatArray, count: int, rng: np.random.Generator) -> None:
    """Lay the shadows of so many grains of dust on a response, in place."""
    rows, columns = response.shape
    for _ in range(count):
        x, y = rng.uniform(-0.5, columns - 0.5), rng.uniform(-0.5, rows - 0.5)
        radius, depth = rng.uniform(*_WIDE), rng.uniform(*_DEEP)
        left, right = max(int(x - radius), 0), min(int(x + radius) + 2, columns)
        bottom, top = max(int(y - radius), 0), min(int(y + radius) + 2, rows)
        if right <= left or top <= bottom:
            continue
        u = np.arange(left, right)[np.newaxis, :] - x
        v = np.arange(bottom, top)[:, np.newaxis] - y
        distance = np.hypot(u, v)
        # Edges a pixel wide: neither the grain nor the pupil's image is sharp.
        ring = np.clip(radius - distance, 0.0, 1.0) * np.clip(distance - _HOLE * radius, 0.0, 1.0)
        response[bottom:top, left:right] *= (1.0 - depth * ring).astype(np.float32)
