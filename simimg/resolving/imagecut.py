"""The limits of a PSF that is known only as an image: cuts through it along any direction.

`ImageDirections` does for a sampled PSF what `simimg.resolving.resolution.Directions` does for a
transfer function. Between the samples stands the same quintic B-spline that fits use (Unser,
Aldroubi & Eden 1993, IEEE Trans. Signal Process. 41, 821). Towards the edge of the image the PSF is
led smoothly to zero: a step there would look like a ring. Lengths are radians.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import cos, pi, sin

import numpy as np
from scipy import ndimage

from simimg.arrays import FloatArray, frozen
from simimg.resolving.criteria import SampledProfile, sample_far_enough
from simimg.resolving.psfmodel import PsfModel

_TAPERED = 0.8  # of the way to the image's edge, from where the PSF is led to zero
_EVEN = 1e-6  # of the peak by which the two sides of a PSF may differ and still count as the same


@dataclass(frozen=True, eq=False)
class ImageCut:
    """A sampled PSF along a line through its peak.

    Attributes
    ----------
    angle : float
        Of the line (rad), from the detector's +x towards its +y.
    """

    angle: float
    _coefficients: FloatArray
    _peak: tuple[float, float]
    _samples: float
    _height: float

    def __call__(self, t: FloatArray | float) -> FloatArray:
        """PSF (per steradian) at `t` (rad) from its peak; 0 beyond the image."""
        steps = np.asarray(t, dtype=np.float64) * self._samples
        column = self._peak[0] + steps * cos(self.angle)
        row = self._peak[1] + steps * sin(self.angle)
        return self._height * np.asarray(
            ndimage.map_coordinates(
                self._coefficients,
                np.stack([row, column]),
                order=5,
                mode="constant",
                prefilter=False,
            )
        )


class ImageDirections:
    """The cuts of a sampled PSF along any direction.

    Parameters
    ----------
    psf : PsfModel
    pixel_scale : float
        Side of a pixel (rad).

    Attributes
    ----------
    even : bool
        Whether opposite directions show the same cut.
    """

    def __init__(self, psf: PsfModel, *, pixel_scale: float) -> None:
        side = psf.image.shape[0]
        middle = (side - 1) / 2
        axis = (np.arange(side) - middle) / middle
        radius = np.hypot(axis, axis[:, None])
        fall = np.clip((radius - _TAPERED) / (1.0 - _TAPERED), 0.0, 1.0)
        image = psf.image * np.cos(0.5 * pi * fall) ** 2
        turned = image[::-1, ::-1]
        self.even = bool(np.abs(image - turned).max() < _EVEN * image.max())
        self._coefficients = frozen(ndimage.spline_filter(image, order=5, mode="mirror"))
        self._samples = psf.oversampling / pixel_scale
        self._height = 1.0 / pixel_scale**2
        self._peak = (middle, middle) if self.even else _peak(image, self._coefficients)
        self._profiles: dict[float, SampledProfile] = {}

    def profile(self, angle: float, magnitude_difference: float = 0.0) -> SampledProfile:
        """The PSF along `angle`, sampled as far out as a companion that much fainter asks."""
        key = angle % (pi if self.even else 2.0 * pi)
        ratio = 10.0 ** (-0.4 * abs(magnitude_difference))
        start = self._profiles.get(key) or ImageCut(
            key, self._coefficients, self._peak, self._samples, self._height
        )
        self._profiles[key] = sample_far_enough(start, ratio)
        return self._profiles[key]


def _peak(image: FloatArray, coefficients: FloatArray) -> tuple[float, float]:
    """Place of the spline's maximum (column, row), from the brightest sample."""
    row, column = (float(i) for i in np.unravel_index(int(np.argmax(image)), image.shape))
    for reach in (0.5, 0.1, 0.02, 0.004, 0.0008):
        offsets = reach * np.arange(-5, 6) / 2.5
        rows, columns = np.broadcast_arrays(row + offsets[:, None], column + offsets)
        height = ndimage.map_coordinates(
            coefficients, np.stack([rows, columns]), order=5, mode="constant", prefilter=False
        )
        i, j = np.unravel_index(int(np.argmax(height)), height.shape)
        row, column = float(rows[i, j]), float(columns[i, j])
    return column, row
