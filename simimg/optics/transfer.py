"""Optical transfer functions of an aperture, as functions of the shift in the pupil.

The transfer function of a perfect aperture is the overlap of the pupil with a copy of itself,
shifted by ``wavelength * frequency`` (frequency in cycles per radian on the sky, so that the shift
is a length in metres), over the collecting area. As a function of the shift it knows no wavelength:
one pupil serves every band. A clear or annular aperture has the closed form of O'Neill (1956), here
from the area common to two circles. Any other pupil is autocorrelated by FFT (Goodman,
Introduction to Fourier Optics, ch. 6) and interpolated by a cubic spline; of an annulus with vanes
only what the vanes change, so that the kinks at zero and at the cut-off stay exact.

Everything is even in the shift and real, for the pupils here carry no phase.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import fft, ndimage, sparse

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.optics.pupil import Pupil, annular_pupil

_CHUNK = 16384
"""Values worked on at a time: intermediate arrays that stay in the processor's cache."""


def annular_transfer(shift: ArrayLike, *, diameter: float, obstruction: float = 0.0) -> FloatArray:
    """Transfer function of a clear or annular aperture.

    Parameters
    ----------
    shift : array_like, any shape
        Distance between the two pupils, ``wavelength * frequency`` (m); the sign does not matter.
    diameter : float
        Clear diameter (m), above 0.
    obstruction : float
        Diameter of the central obstruction over that of the aperture, 0 <= obstruction < 1.

    Returns
    -------
    ndarray of float64, the shape of ``shift``
        From 1 at zero shift to 0 at and beyond ``diameter``; rounding errors only.

    Raises
    ------
    ValueError
        If the diameter or the obstruction is out of range.

    References
    ----------
    O'Neill, E. L. 1956, J. Opt. Soc. Am. 46, 285 (erratum 46, 1096).
    """
    if not (np.isfinite(diameter) and diameter > 0.0):
        raise ValueError(f"diameter must be finite and above 0 m, got {diameter}")
    if not 0.0 <= obstruction < 1.0:
        raise ValueError(f"obstruction must be at least 0 and below 1, got {obstruction}")
    shifts = np.asarray(shift, dtype=np.float64)
    flat, result = shifts.ravel(), np.empty(shifts.size)
    for start in range(0, flat.size, _CHUNK):
        part = slice(start, start + _CHUNK)
        result[part] = _annular(np.abs(flat[part]) / diameter, obstruction)
    return result.reshape(shifts.shape)


def _annular(x: FloatArray, obstruction: float) -> FloatArray:
    """The annulus of diameter 1, for shifts from 0 up."""
    outer = _equal_overlap(x)
    if obstruction == 0.0:
        return outer
    square = obstruction * obstruction
    inner = _equal_overlap(x / obstruction)
    # The same order of operations above and below the line makes the value at zero exactly 1.
    total = (outer + square * inner) - 2.0 * _unequal_overlap(x, obstruction)
    return np.asarray(np.maximum(total / ((1.0 + square) - 2.0 * square), 0.0))


def _equal_overlap(x: FloatArray) -> FloatArray:
    """Area common to two discs of diameter 1 at distance ``x``, over the area of one."""
    x = np.minimum(x, 1.0)
    return np.asarray((np.arccos(x) - x * np.sqrt((1.0 - x) * (1.0 + x))) / (0.5 * np.pi))


def _unequal_overlap(x: FloatArray, ratio: float) -> FloatArray:
    """Area common to discs of diameter 1 and ``ratio`` at distance ``x``, over that of the first.

    The half-angles come from products of the sides, which keep their digits where the circles
    touch; the cosine rule would not.
    """
    result = np.where(x <= 0.5 * (1.0 - ratio), ratio * ratio, 0.0)
    crossing = (x > 0.5 * (1.0 - ratio)) & (x < 0.5 * (1.0 + ratio))
    d, a, b = x[crossing], 0.5, 0.5 * ratio
    small_far, small_near = (a - d + b) * (a + d - b), (d + b - a) * (d + b + a)
    large_far, large_near = (b - d + a) * (b + d - a), (d + a - b) * (d + a + b)
    alpha = 2.0 * np.arctan2(np.sqrt(small_far), np.sqrt(np.maximum(small_near, 0.0)))
    beta = 2.0 * np.arctan2(np.sqrt(np.maximum(large_far, 0.0)), np.sqrt(large_near))
    segments = b * b * (alpha - 0.5 * np.sin(2.0 * alpha)) + a * a * (
        beta - 0.5 * np.sin(2.0 * beta)
    )
    result[crossing] = segments / (0.25 * np.pi)
    return np.asarray(result)


@dataclass(frozen=True, eq=False)
class PupilTransfer:
    """The transfer function of one pupil, to be called with shifts; made by `pupil_transfer`.

    Attributes
    ----------
    pupil : Pupil
        What it is the transfer function of.
    envelope_weight : float
        What the analytic annulus of the pupil's diameter and obstruction is multiplied by; 0 for a
        pupil from a map.
    coefficients : (n, n) ndarray of float64 or None
        Cubic B-spline coefficients of the rest, on shifts of whole pixels, zero shift in the
        middle; None for a round pupil, which needs none.
    """

    pupil: Pupil
    envelope_weight: float
    coefficients: FloatArray | None

    @property
    def reach(self) -> float:
        """Shift (m) at and beyond which the function is zero in every direction."""
        return self.pupil.reach

    def __call__(self, sx: ArrayLike, sy: ArrayLike) -> FloatArray:
        """Value at the shift ``(sx, sy)``.

        Parameters
        ----------
        sx, sy : array_like
            Shifts (m) along the detector's +x and +y; they broadcast. The shapes ``(1, n)`` and
            ``(m, 1)`` take a separable path, several times faster than as many single points.

        Returns
        -------
        ndarray of float64
            1 at zero shift, 0 where the shifted pupils have nothing in common.
        """
        x, y = np.asarray(sx, dtype=np.float64), np.asarray(sy, dtype=np.float64)
        radius = np.hypot(x, y)
        rest: FloatArray = np.zeros(())
        if self.coefficients is not None:
            rest = evaluate_spline(self.coefficients, x / self.pupil.pitch, y / self.pupil.pitch)
            side = self.pupil.pitch * self.pupil.amplitude.shape[0]
            rest *= (radius < self.reach) & (np.abs(x) < side) & (np.abs(y) < side)
        if self.envelope_weight == 0.0:
            return np.asarray(np.maximum(rest, 0.0))
        envelope = annular_transfer(
            radius, diameter=self.pupil.diameter, obstruction=self.pupil.obstruction
        )
        # No opening has a negative overlap; the spline may pass zero by 1e-5 near the cut-off.
        return np.asarray(np.maximum(self.envelope_weight * envelope + rest, 0.0))


def evaluate_spline(coefficients: AnyArray, x: FloatArray, y: FloatArray) -> AnyArray:
    """Value of a cubic B-spline at ``(x, y)`` pixels from its middle; zero out of the lattice.

    Parameters
    ----------
    coefficients : (n, n) ndarray, real or complex
        Cubic B-spline coefficients, those of the middle in the middle.
    x, y : ndarray
        Places; they broadcast. The shapes ``(1, k)`` and ``(m, 1)`` take a separable path.

    Returns
    -------
    ndarray, real or complex
    """
    middle = coefficients.shape[0] // 2
    column, row = x + middle, y + middle
    if x.ndim == 2 and y.ndim == 2 and x.shape[0] == 1 and y.shape[1] == 1:
        count = coefficients.shape[0]
        by_row, by_column = _spline_rows(row[:, 0], count), _spline_rows(column[0], count)
        if np.iscomplexobj(coefficients):
            # As pairs of real numbers, which the real weights need not be made complex for.
            part = coefficients.real.dtype
            rows = by_row.astype(part) @ coefficients.view(part)
            turned = np.ascontiguousarray(rows.view(coefficients.dtype).T)
            columns = by_column.astype(part) @ turned.view(part)
            return np.ascontiguousarray(columns.view(coefficients.dtype).T)
        along_y = by_row @ coefficients
        return np.asarray((by_column @ along_y.T).T)
    row, column = np.broadcast_arrays(row, column)
    points = np.stack([row.ravel(), column.ravel()])
    values = ndimage.map_coordinates(
        coefficients, points, order=3, mode="constant", prefilter=False
    )
    return np.asarray(values.reshape(row.shape))


def _spline_rows(position: FloatArray, count: int) -> sparse.csr_array:
    """Matrix that takes ``count`` cubic B-spline coefficients to values at ``position`` (pixels).

    Positions out of the lattice give zero.
    """
    inside = (position >= 1.0) & (position < count - 2.0)
    first = np.floor(np.where(inside, position, 1.0)).astype(np.intp)
    t = np.where(inside, position, 1.0) - first
    weights = np.stack(
        [
            (1.0 - t) ** 3,
            3.0 * t**3 - 6.0 * t**2 + 4.0,
            3.0 * (1.0 - t) ** 3 - 6.0 * (1.0 - t) ** 2 + 4.0,
            t**3,
        ],
        axis=-1,
    )
    weights *= (inside / 6.0)[:, np.newaxis]
    columns = first[:, np.newaxis] + np.arange(-1, 3)
    pointers = np.arange(0, 4 * position.size + 1, 4)
    return sparse.csr_array(
        (weights.ravel(), columns.ravel(), pointers), shape=(position.size, count)
    )


def pupil_transfer(pupil: Pupil) -> PupilTransfer:
    """Transfer function of any pupil without phase, normalised to 1 at zero shift.

    A round pupil (no vanes) gets the exact form. Of an annulus with vanes, the difference to the
    exact annulus is autocorrelated and interpolated; its value at zero shift is exact (the areas),
    between there and a shift of one pixel the spline carries it on. A map is autocorrelated as it
    is: its pixels are taken as samples of the amplitude.

    Parameters
    ----------
    pupil : Pupil
        From `annular_pupil` or `map_pupil`.

    Returns
    -------
    PupilTransfer
        Callable ``(sx, sy)`` in metres, broadcasting, real.

    Notes
    -----
    Grey pixels smooth the pupil over one pixel, which takes the factor
    ``1 - (pi k / samples)^2 / 3`` off the point spread function at ``k`` wavelengths per diameter
    from its centre: nothing at the core, and where it grows the light is faint. With 512 samples
    an annulus with vanes has its point spread function within 2e-6 of the peak.
    """
    if pupil.round:
        return PupilTransfer(pupil, 1.0, None)
    correlation = _autocorrelation(pupil.amplitude)
    middle = correlation.shape[0] // 2
    pixel_area = pupil.pitch * pupil.pitch
    weight = 0.0
    if pupil.enveloped:
        envelope = annular_pupil(
            pupil.diameter, pupil.obstruction, samples=pupil.amplitude.shape[0]
        )
        weight = envelope.area / pupil.area
        correlation -= _autocorrelation(envelope.amplitude)
    correlation *= pixel_area / pupil.area
    correlation[middle, middle] = 1.0 - weight
    coefficients = ndimage.spline_filter(correlation, order=3, mode="mirror")
    return PupilTransfer(pupil, weight, frozen(coefficients))


def _autocorrelation(amplitude: FloatArray) -> FloatArray:
    """Sums of products at all whole-pixel shifts, zero shift in the middle, with a rim of zeros."""
    count = amplitude.shape[0]
    size = fft.next_fast_len(2 * count, real=True)
    spectrum = fft.rfft2(amplitude, (size, size))
    spectrum *= spectrum.conj()
    full = fft.irfft2(spectrum, (size, size), overwrite_x=True)
    rim = 4
    result = np.zeros((2 * (count + rim) + 1,) * 2)
    shifts = np.arange(-count + 1, count)
    result[rim + 1 : -rim - 1, rim + 1 : -rim - 1] = full[np.ix_(shifts, shifts)]
    return result
