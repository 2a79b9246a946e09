"""The light along a line across an image: the mean over a strip, at any places along it.

A place between pixels is interpolated by cubic convolution (Keys 1981, IEEE Trans. Acoust. Speech
Signal Process. 29, 1153), and the strip's width is averaged over. Both are linear in the pixels,
so that one set of weights serves the data, their errors and every model: a curve through the model
is what the same strip shows of an image without noise. Lengths in pixels.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, cos, sin
from typing import Any

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen

_ACROSS = 0.25  # pixels between the lines that a strip is averaged over, at most


@dataclass(frozen=True, eq=False)
class Strip:
    """Weights of the pixels of an image in the mean over a strip.

    Attributes
    ----------
    offsets : (n,) array
        Places along the strip from its origin; only those whose pixels all lie on the image.
    weights : scipy.sparse.csr_array, (n, rows * columns)
    """

    offsets: FloatArray
    weights: Any

    def mean(self, image: AnyArray) -> FloatArray:
        """The strip's mean at each offset; NaN where a pixel in it is NaN."""
        flat = np.asarray(image, dtype=np.float64).ravel()
        missing = ~np.isfinite(flat)
        result = np.asarray(self.weights @ np.where(missing, 0.0, flat))
        if missing.any():
            result[np.asarray(abs(self.weights) @ missing.astype(np.float64)) > 0.0] = np.nan
        return result

    def error(self, variance: AnyArray) -> FloatArray:
        """Standard error of the mean at each offset, from the variance of each pixel."""
        flat = np.asarray(variance, dtype=np.float64).ravel()
        return np.asarray(np.sqrt(self.weights.multiply(self.weights) @ flat))


def strip_along(
    shape: tuple[int, int],
    *,
    x: float,
    y: float,
    angle: float,
    width: float,
    offsets: AnyArray,
) -> Strip:
    """A strip across an image.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns of the image.
    x, y : float
        Origin of the strip.
    angle : float
        Its direction from the image's +x towards +y (rad).
    width : float
        0 for a line.
    offsets : (n,) array
        Places along it; those within two pixels of the image's edge are left out.
    """
    from scipy.sparse import csr_array

    rows, columns = shape
    lines = max(1, ceil(width / _ACROSS))
    across = (np.arange(lines) + 0.5) / lines * width - 0.5 * width
    t = np.asarray(offsets, dtype=np.float64)
    px = x + t[:, None] * cos(angle) - across * sin(angle)
    py = y + t[:, None] * sin(angle) + across * cos(angle)
    inside = (px >= 1.0) & (px < columns - 2.0) & (py >= 1.0) & (py < rows - 2.0)
    kept = inside.all(axis=1)
    px, py, t = px[kept], py[kept], t[kept]
    left, bottom = np.floor(px).astype(np.int64), np.floor(py).astype(np.int64)
    step = np.arange(-1, 3)
    by_column = _cubic(px[..., None] - (left[..., None] + step))
    by_row = _cubic(py[..., None] - (bottom[..., None] + step))
    weight = by_row[..., :, None] * by_column[..., None, :] / lines
    pixel = (bottom[..., None] + step)[..., :, None] * columns + (left[..., None] + step)[
        ..., None, :
    ]
    place = np.broadcast_to(np.arange(t.size)[:, None, None, None], pixel.shape)
    weights = csr_array(
        (weight.ravel(), (place.ravel(), pixel.ravel())), shape=(t.size, rows * columns)
    )
    return Strip(frozen(t), weights)


def _cubic(distance: FloatArray) -> FloatArray:
    """Keys' cubic convolution kernel, exact for parabolas; 0 from a distance of 2."""
    d = np.abs(distance)
    near = (1.5 * d - 2.5) * d * d + 1.0
    far = ((-0.5 * d + 2.5) * d - 4.0) * d + 2.0
    return np.asarray(np.where(d < 1.0, near, np.where(d < 2.0, far, 0.0)))
