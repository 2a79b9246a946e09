"""The effective PSF as a smooth function: its value and exact derivatives at any sub-pixel place.

An effective PSF is what one detector pixel collects of a star of one electron, as a function of
the pixel's place relative to the star: optics, air, jitter and the pixel's own response together.
It comes sampled ``oversampling`` times per detector pixel and is interpolated here by quintic
B-splines (Unser, Aldroubi & Eden 1993, IEEE Trans. Signal Process. 41, 821), whose derivatives are
exact derivatives of the interpolated function, so that a fit never sees a gradient that is not its
model's. All pixels of a cutout share one sub-pixel phase, hence the spline is a product
``rows x coefficients x columns``; the coefficient matrix of a PSF has few significant singular
values, and keeping only those makes one evaluation cost microseconds.

Lengths are detector pixels, places are counted from 0 at the centre of the first pixel.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.lib.stride_tricks import as_strided
from scipy import linalg, ndimage

from simimg.arrays import AnyArray, FloatArray, frozen

_TAPS = 6
# Weights of the six quintic B-splines that overlap a place t in [0, 1) behind a knot: the weight
# of coefficient -2 + a is the polynomial in t with the coefficients of row a, over 120.
_QUINTIC = (
    np.array(
        [
            [1, -5, 10, -10, 5, -1],
            [26, -50, 20, 20, -20, 5],
            [66, 0, -60, 0, 30, -10],
            [26, 50, 20, -20, -20, 10],
            [1, 5, 10, 10, 5, -5],
            [0, 0, 0, 0, 0, 1],
        ],
        dtype=np.float64,
    )
    / 120.0
)
_EDGE = 8  # samples made up beyond the edge: six coefficients for every place, no kink at the edge
_RANK_TOLERANCE = 3e-8  # of the peak: what the dropped singular values may change at most


def _differentiate(polynomials: FloatArray) -> FloatArray:
    """Return the derivatives of polynomials given by rows of coefficients, lowest power first."""
    return np.pad(polynomials[:, 1:] * np.arange(1.0, _TAPS), ((0, 0), (0, 1)))


# Axes: derivative, coefficient, power.
_POLYNOMIALS = np.array(
    [_QUINTIC, _differentiate(_QUINTIC), _differentiate(_differentiate(_QUINTIC))]
)
_POWERS = np.arange(_TAPS)
# Order of differentiation along x and y of each plane that `evaluate` returns.
_PLANES = ((0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2))


def _windows(factor: FloatArray) -> FloatArray:
    """View a factor (coefficients, rank) as every run of six coefficients, read-only."""
    held = frozen(np.ascontiguousarray(factor))
    return as_strided(
        held,
        (held.shape[0] - _TAPS + 1, _TAPS, held.shape[1]),
        (held.strides[0], held.strides[0], held.strides[1]),
        writeable=False,
    )


def _gaussian_nodes(sigma: float, fwhm: float) -> tuple[FloatArray, FloatArray]:
    """Shifts and weights that stand for a Gaussian convolution of a PSF of some width."""
    if sigma < 0.3 * fwhm:
        nodes, weights = np.polynomial.hermite_e.hermegauss(9)
        return sigma * nodes, weights / weights.sum()
    step = min(0.9 * sigma, 0.4 * fwhm)
    count = math.ceil(4.5 * sigma / step)
    shifts = step * np.arange(-count, count + 1.0)
    weights = np.exp(-0.5 * (shifts / sigma) ** 2)
    return shifts, weights / weights.sum()


@dataclass(frozen=True, eq=False)
class PsfModel:
    """An effective PSF that can be evaluated, with derivatives, at exact sub-pixel places.

    Attributes
    ----------
    image : ndarray, shape (n, n), n odd
        Fraction of a star's light on a detector pixel centred at each sample; the star is at the
        middle sample.
    oversampling : int
        Samples to the detector pixel, 1 or more.
    half_width : float
        Half the side of the sampled square in detector pixels; the PSF is zero beyond it.
    rank : int
        Number of products kept of the spline's coefficient matrix.
    fwhm : float
        Full width at half maximum (pixels): geometric mean of those along rows and columns.
    """

    image: FloatArray
    oversampling: int
    half_width: float
    rank: int
    fwhm: float
    _left: FloatArray
    _right: FloatArray
    _signs: FloatArray

    @classmethod
    def from_image(cls, image: AnyArray, *, oversampling: int) -> PsfModel:
        """Make the model of a sampled effective PSF.

        Parameters
        ----------
        image : array_like, shape (n, n), n odd and at least 9
            Fraction of the light on a detector pixel centred at each sample, the star in the
            middle. Finite, with a positive peak. A PSF of band limit ``f`` (cycles per detector
            pixel) is interpolated to about 1e-6 of its peak when ``oversampling >= 8 f``.
        oversampling : int
            Samples to the detector pixel, 1 or more.

        Raises
        ------
        ValueError
            For an image that is not square, odd, finite or positive, or an oversampling below 1.
        """
        samples = np.array(image, dtype=np.float64)
        if samples.ndim != 2 or samples.shape[0] != samples.shape[1]:
            raise ValueError(f"a PSF image must be square, got shape {samples.shape}")
        if samples.shape[0] % 2 == 0 or samples.shape[0] < 9:
            raise ValueError(f"a PSF image must have an odd side of 9 or more, got {samples.shape}")
        if oversampling != int(oversampling) or oversampling < 1:
            raise ValueError(f"oversampling must be a whole number above 0, got {oversampling}")
        if not np.isfinite(samples).all() or samples.max() <= 0:
            raise ValueError("a PSF image must be finite and have a positive peak")
        coefficients = np.pad(samples, _EDGE, mode="reflect", reflect_type="odd")
        for axis in (0, 1):
            coefficients = ndimage.spline_filter1d(coefficients, order=5, axis=axis, mode="mirror")
        left, values, right = linalg.svd(coefficients, full_matrices=False)
        # In the sup norm of the image a product u v^T of unit vectors is below 1.
        lost = np.sqrt(np.cumsum(values[::-1] ** 2)[::-1])
        rank = max(1, int(np.count_nonzero(lost > _RANK_TOLERANCE * samples.max())))
        root = np.sqrt(values[:rank])
        model = cls(
            image=frozen(samples),
            oversampling=int(oversampling),
            half_width=(samples.shape[0] - 1) / 2 / oversampling,
            rank=rank,
            fwhm=np.nan,
            _left=_windows(left[:, :rank] * root),
            _right=_windows((right[:rank] * root[:, None]).T),
            _signs=frozen((-float(oversampling)) ** np.arange(3.0)[:, None]),
        )
        width = math.sqrt(model._width(0) * model._width(1))
        return replace(model, fwhm=width)

    def _along(self, windows: FloatArray, place: float, count: int, order: int) -> FloatArray:
        """Evaluate the factors along one axis; derivatives are with respect to the star's place.

        Returns an array of shape (count, order + 1, rank).
        """
        reach = self.image.shape[0] - 1
        step = self.oversampling
        start = reach / 2 - place * step
        knot = math.floor(start)
        phase = start - knot
        # The pixels inside are those with 0 <= knot + step i and knot + step i + phase <= reach.
        first = max(0, -(knot // step))
        last = min(count - 1, (reach - knot - (phase > 0)) // step)
        if last < first:
            return np.zeros((count, order + 1, self.rank))
        weights = (_POLYNOMIALS[: order + 1] @ phase**_POWERS) * self._signs[: order + 1]
        begin = knot + step * first + _EDGE - 2
        taken = windows[begin : begin + step * (last - first) + 1 : step]
        if first == 0 and last == count - 1:
            whole: FloatArray = np.matmul(weights, taken)
            return whole
        result = np.zeros((count, order + 1, self.rank))
        np.matmul(weights, taken, out=result[first : last + 1])
        return result

    def evaluate(
        self, x: float, y: float, *, columns: int, rows: int, order: int = 1
    ) -> FloatArray:
        """Return the PSF of a star at (x, y) on every pixel of a cutout.

        Parameters
        ----------
        x, y : float
            Place of the star, pixels from the centre of the cutout's first pixel; may lie outside.
        columns, rows : int
            Size of the cutout.
        order : {0, 1, 2}
            Derivatives wanted, with respect to the star's place.

        Returns
        -------
        ndarray, shape (1, rows, columns), (3, ...) or (6, ...)
            The value; with ``order`` 1 also d/dx, d/dy; with 2 also d2/dx2, d2/dxdy, d2/dy2.
        """
        across = self._along(self._right, x, columns, order)
        along = self._along(self._left, y, rows, order)
        pairs = _PLANES[: (1, 3, 6)[order]]
        result = np.empty((len(pairs), rows, columns))
        for plane, (in_x, in_y) in zip(result, pairs):
            np.matmul(along[:, in_y], across[:, in_x].T, out=plane)
        return result

    def blurred(
        self, x: float, y: float, *, columns: int, rows: int, variance: float
    ) -> FloatArray:
        """Return the PSF convolved with a round Gaussian, and its derivatives, as `evaluate` does.

        The convolution is a sum over shifted PSFs, by Gauss-Hermite nodes where the Gaussian is
        narrow and by the trapezoidal rule (whose error falls exponentially) where it is not. By the
        heat equation the derivative by the variance is half the Laplacian, to which the second
        derivatives add; below a variance of 0 the PSF goes on along it.

        Parameters
        ----------
        x, y, columns, rows
            As for `evaluate`.
        variance : float
            Of the Gaussian along each axis, pixels squared.

        Returns
        -------
        ndarray, shape (6, rows, columns)
        """
        if variance <= 0.0:
            planes = self.evaluate(x, y, columns=columns, rows=rows, order=2)
            if variance < 0.0:
                planes[0] += 0.5 * variance * (planes[3] + planes[5])
            return planes
        shifts, weights = _gaussian_nodes(math.sqrt(variance), self.fwhm)
        across = along = np.zeros(())
        for shift, weight in zip(shifts, weights):
            across = across + weight * self._along(self._right, x + shift, columns, 2)
            along = along + weight * self._along(self._left, y + shift, rows, 2)
        result = np.empty((6, rows, columns))
        for plane, (in_x, in_y) in zip(result, _PLANES):
            np.matmul(along[:, in_y], across[:, in_x].T, out=plane)
        return result

    def value(self, dx: AnyArray | float, dy: AnyArray | float) -> FloatArray:
        """Return the PSF at any offsets (pixels) from the star; slower than `evaluate`.

        Parameters
        ----------
        dx, dy : array_like
            Offsets of pixel centres from the star, broadcast against each other.
        """
        x, y = np.broadcast_arrays(np.asarray(dx, dtype=np.float64), np.asarray(dy, np.float64))
        flat = [
            float(self.evaluate(-float(u), -float(v), columns=1, rows=1, order=0)[0, 0, 0])
            for u, v in zip(x.ravel(), y.ravel())
        ]
        return np.array(flat).reshape(x.shape)

    def _width(self, axis: int) -> float:
        ends: list[float] = []
        peak = float(self.value(0.0, 0.0))

        def height(t: float) -> float:
            return float(self.value(t, 0.0) if axis == 0 else self.value(0.0, t))

        step = 0.5 / self.oversampling
        for sign in (-1.0, 1.0):
            outer = step
            while outer < self.half_width and height(sign * outer) > 0.5 * peak:
                outer += step
            inner = outer - step
            for _ in range(40):
                middle = 0.5 * (inner + outer)
                if height(sign * middle) > 0.5 * peak:
                    inner = middle
                else:
                    outer = middle
            ends.append(0.5 * (inner + outer))
        return sum(ends)

    def __eq__(self, other: Any) -> bool:
        if not isinstance(other, PsfModel):
            return NotImplemented
        return self.oversampling == other.oversampling and np.array_equal(self.image, other.image)

    __hash__ = None  # type: ignore[assignment]
