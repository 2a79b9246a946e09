"""A PSF on a grid: what pixels of any size at any places collect of one star.

The transfer function is summed over the lattice of `simimg.imaging.lattice` by FFTs along one axis
after the other, of which only the window asked for is kept.

Angles in radians, frequencies in cycles per radian.
"""

from __future__ import annotations

from math import isfinite, pi

import numpy as np
from scipy import fft

from simimg.arrays import AnyArray, FloatArray
from simimg.imaging.basis import Transfer
from simimg.imaging.lattice import CHUNK, effective_band, half_lattice


def sampled_psf(
    transfer: Transfer,
    *,
    pixel_scale: float,
    oversampling: int,
    half_width_pixels: float,
    centre: tuple[float, float] = (0.0, 0.0),
) -> FloatArray:
    """PSF on a grid of ``oversampling`` samples to the pixel, the star at the middle sample.

    Parameters
    ----------
    transfer : Transfer
        Transfer function of the effective PSF, pixel included.
    pixel_scale : float
        Side of a pixel (rad).
    oversampling : int
        Samples to the pixel, 1 or more.
    half_width_pixels : float
        Half the side of the sampled square (pixels); rounded up to whole samples.
    centre : (float, float), optional
        Place of the middle sample (x, y; rad from the star's place).

    Returns
    -------
    ndarray, shape (n, n), ``n = 2 ceil(half_width_pixels * oversampling) + 1``
        Fraction of the star's light on a pixel centred at each sample (``[y, x]``), to 1e-7 of the
        peak. The same bits for any number of threads.

    Raises
    ------
    ValueError
        For a scale or width that is not positive, or an oversampling below 1.
    """
    if not (isfinite(pixel_scale) and pixel_scale > 0.0):
        raise ValueError(f"pixel_scale must be above 0, got {pixel_scale}")
    if oversampling != int(oversampling) or oversampling < 1:
        raise ValueError(f"oversampling must be a whole number above 0, got {oversampling}")
    if not (isfinite(half_width_pixels) and half_width_pixels > 0.0):
        raise ValueError(f"half_width_pixels must be above 0, got {half_width_pixels}")
    sampler = PsfSampler(
        transfer,
        pixel_scale=pixel_scale,
        step=pixel_scale / oversampling,
        half=int(np.ceil(half_width_pixels * oversampling - 1e-9)),
        reach=max(abs(centre[0]), abs(centre[1])),
    )
    return sampler(centre)


class PsfSampler:
    """A transfer function on its lattice of frequencies, to sample its PSF about many centres.

    Parameters
    ----------
    transfer : Transfer
        Transfer function of the effective PSF.
    pixel_scale, step : float
        Side of a pixel and distance between samples (rad).
    half : int
        Samples from the middle one to the edge.
    reach : float
        Greatest distance (rad) of a centre from the star, along x or y.
    """

    def __init__(
        self, transfer: Transfer, *, pixel_scale: float, step: float, half: int, reach: float
    ) -> None:
        band = effective_band(transfer)
        # The copies, one period apart, must stay far from the window and each other.
        far = reach + half * step
        period = max(half_lattice(transfer, band) / band + far, 2.0 * far)
        self._size = int(fft.next_fast_len(int(np.ceil(period / step)), real=False))
        self._spacing = 1.0 / (self._size * step)
        self._scale = (self._spacing * pixel_scale) ** 2
        self._window = np.arange(-half, half + 1) % self._size
        top = int(np.floor(band / self._spacing))
        # Half the plane is enough: the other half is its conjugate.
        self._rows = np.arange(-top, top + 1, dtype=np.int64)
        self._columns = np.arange(0, top + 1, dtype=np.int64)
        v = np.asarray(self._spacing * self._rows[:, None], dtype=np.float64)
        u = np.asarray(self._spacing * self._columns[None, :], dtype=np.float64)
        step_columns = max(1, CHUNK // self._rows.size)
        parts = [
            transfer(u[:, first : first + step_columns], v)
            for first in range(0, self._columns.size, step_columns)
        ]
        self._value: AnyArray = np.concatenate(parts, axis=1)
        self._value[:, 0] *= 0.5

    def __call__(self, centre: tuple[float, float] = (0.0, 0.0)) -> FloatArray:
        """Samples about `centre` (x, y; rad from the star): share of the light in a pixel there."""
        size, window = self._size, self._window
        across = np.exp(2j * pi * self._spacing * centre[0] * self._columns)
        up = np.exp(2j * pi * self._spacing * centre[1] * self._rows)
        half_done = np.empty((window.size, self._columns.size), dtype=np.complex128)
        step = max(1, CHUNK // max(self._rows.size, size))
        for first in range(0, self._columns.size, step):
            part = slice(first, first + step)
            turned = self._value[:, part] * up[:, None] * across[part]
            half_done[:, part] = _folded_sum(turned, self._rows, size)[window]
        image = np.empty((window.size, window.size))
        step = max(1, CHUNK // size)
        for first in range(0, window.size, step):
            part = slice(first, first + step)
            line = _folded_sum(half_done[part].T, self._columns, size)[window]
            image[part] = 2.0 * line.real.T
        return image * self._scale


def _folded_sum(value: AnyArray, order: AnyArray, size: int) -> AnyArray:
    """Sum over axis 0 of ``value exp(2 pi i order j / size)`` for j = 0 ... size - 1."""
    folded = np.zeros((size, value.shape[1]), dtype=np.complex128)
    for first in range(0, order.size, size):
        part = slice(first, min(first + size, order.size))
        # Frequencies a whole sampling rate apart fall on the same sample values.
        folded[order[part] % size] += value[part]
    return np.asarray(fft.ifft(folded, axis=0, norm="forward"))
