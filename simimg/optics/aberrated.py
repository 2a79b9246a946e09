"""Transfer functions of a pupil with a wavefront error, at one wavelength.

The transfer function is the autocorrelation of ``A exp(2 pi i W / wavelength)`` over the collecting
area (Goodman, Introduction to Fourier Optics, ch. 6), by zero-padded FFT. What the wavefront adds
to the perfect pupil's transfer function is interpolated by cubic splines, real and imaginary part;
the perfect one, with its kinks at zero and at the cut-off, comes from `simimg.optics.transfer`.
Grey edges are means over squares, while the path is taken at their middles: the difference is taken
out to the fourth order of the squares' side.

It is the Fourier transform of the image I(x, y), with positions in radians along the detector's +x
and +y and frequencies u, v in cycles per radian:

    F(u, v) = integral of I exp(-2 pi i (u x + v y)),

so that a longer path on the side of +x, W = a x, moves the image by a towards +x and multiplies F
by exp(-2 pi i a u). A positive term 8 of Noll's (coma along x) throws its tail towards +x, term 7
towards +y. An even pupil with an even wavefront has a real transfer function.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import fft, ndimage

from simimg.arrays import ComplexArray, FloatArray, frozen
from simimg.optics.pupil import Pupil
from simimg.optics.transfer import PupilTransfer, evaluate_spline, pupil_transfer

_RIM = 4


@dataclass(frozen=True, eq=False)
class AberratedTransfer:
    """The transfer function of a pupil with a wavefront; made by `aberrated_transfer`.

    Attributes
    ----------
    perfect : PupilTransfer
        The same pupil's without the wavefront.
    wavelength : float
        For which it holds (m).
    coefficients : (n, n) ndarray of complex64 or None
        Cubic B-spline coefficients of the difference, on shifts of whole pixels, zero shift in the
        middle; None for a wavefront that is flat.
    even : bool
        True where it is real: the image is its own mirror image.
    """

    perfect: PupilTransfer
    wavelength: float
    coefficients: ComplexArray | None
    even: bool

    @property
    def reach(self) -> float:
        """Shift (m) at and beyond which the function is zero in every direction."""
        return self.perfect.reach

    def __call__(self, sx: ArrayLike, sy: ArrayLike) -> ComplexArray:
        """Value at the shift ``(sx, sy)``.

        Parameters
        ----------
        sx, sy : array_like
            Shifts (m), ``wavelength * frequency``, along the detector's +x and +y; they broadcast.
            The shapes ``(1, n)`` and ``(m, 1)`` take a separable path, several times faster.

        Returns
        -------
        ndarray of complex128
            1 at zero shift, 0 where the shifted pupils have nothing in common; its modulus is
            nowhere above the perfect pupil's but for the spline's 1e-4 where edges meet.
        """
        x, y = np.asarray(sx, dtype=np.float64), np.asarray(sy, dtype=np.float64)
        value: ComplexArray = self.perfect(x, y).astype(np.complex128)
        if self.coefficients is not None:
            pupil = self.perfect.pupil
            side = pupil.pitch * pupil.amplitude.shape[0]
            rest = evaluate_spline(self.coefficients, x / pupil.pitch, y / pupil.pitch)
            rest *= (np.hypot(x, y) < self.reach) & (np.abs(x) < side) & (np.abs(y) < side)
            value += rest
        return value


def aberrated_transfer(
    pupil: Pupil,
    path: FloatArray,
    wavelength: float,
    *,
    perfect: PupilTransfer | None = None,
) -> AberratedTransfer:
    """Transfer function of a pupil with a wavefront, normalised to 1 at zero shift.

    Parameters
    ----------
    pupil : Pupil
    path : (n, n) array_like
        Wavefront on the pupil's lattice (m of optical path); it must be finite where the pupil is
        open.
    wavelength : float
        Wavelength (m), above 0.
    perfect : PupilTransfer, optional
        The pupil's own transfer function, where it is at hand: it serves every wavelength.

    Returns
    -------
    AberratedTransfer
        Callable ``(sx, sy)`` in metres, broadcasting, complex.

    Raises
    ------
    ValueError
        If the wavefront is not on the lattice or not finite, or the wavelength is out of range.

    Notes
    -----
    With 512 squares across the aperture the point spread function is within 1e-6 of the perfect
    peak for errors up to some waves. The path must not change by half a wavelength from one square
    to the next (`simimg.optics.wavefront.steepest_step`); a tilt of t wavelengths/diameter turns
    the phase of the transfer function by 2 pi t over the diameter, which the spline follows to
    1e-4 up to about t = 50.
    """
    values = np.asarray(path, dtype=np.float64)
    if values.shape != pupil.amplitude.shape:
        raise ValueError(
            f"a wavefront needs the pupil's lattice, {pupil.amplitude.shape}, got {values.shape}"
        )
    lit = pupil.amplitude > 0.0
    if not np.all(np.isfinite(values[lit])):
        raise ValueError("the wavefront must be finite wherever the pupil is open")
    if not (np.isfinite(wavelength) and wavelength > 0.0):
        raise ValueError(f"wavelength must be finite and above 0 m, got {wavelength}")
    exact = pupil_transfer(pupil) if perfect is None else perfect
    if not np.ptp(values[lit]) > 0.0:
        return AberratedTransfer(exact, wavelength, None, even=True)
    phase = _everywhere(values) * (2.0 * np.pi / wavelength)
    amplitude = pupil.amplitude
    if pupil.grey:
        # The mean over a square is the sample plus the Laplacian times side^2 / 24.
        amplitude = np.pad(amplitude, 1)
        amplitude = amplitude - ndimage.laplace(amplitude, mode="constant") / 24.0
        phase = np.pad(phase, 1, mode="reflect", reflect_type="odd")
    rest = _difference(amplitude, phase) * (pupil.pitch**2 / pupil.area)
    middle = rest.shape[0] // 2
    rest[middle, middle] = 0.0
    imaginary = float(np.abs(rest.imag).max())
    even = imaginary < 1e-10
    coefficients = np.empty(rest.shape, dtype=np.complex64)
    coefficients.real = ndimage.spline_filter(rest.real, order=3, mode="mirror")
    coefficients.imag = 0.0 if even else ndimage.spline_filter(rest.imag, order=3, mode="mirror")
    return AberratedTransfer(exact, wavelength, frozen(coefficients), even)


def _everywhere(values: FloatArray) -> FloatArray:
    """The same with the nearest finite value where there is none."""
    lacking = ~np.isfinite(values)
    if not lacking.any():
        return values
    nearest = ndimage.distance_transform_edt(lacking, return_distances=False, return_indices=True)
    return np.asarray(values[tuple(nearest)])


def _difference(amplitude: FloatArray, phase: FloatArray) -> ComplexArray:
    """Autocorrelation with the phase less that without it, zero shift in the middle, in a rim.

    The value at shift s is the sum of P(r) P*(r + s): the transform of the image under the sign
    convention above. Both power spectra are real, so that one real transform of their difference
    gives half of a Hermitian result.
    """
    count = amplitude.shape[0]
    size = fft.next_fast_len(2 * count, real=True)
    spectrum = fft.fft2(amplitude * np.exp(1j * phase), (size, size), overwrite_x=True)
    power = np.square(spectrum.real)
    power += np.square(spectrum.imag)
    del spectrum
    plain = fft.rfft2(amplitude, (size, size))
    half = np.square(plain.real) + np.square(plain.imag)
    del plain
    columns = half.shape[1]
    power[:, :columns] -= half
    # The real transform leaves out the columns of negative frequency: mirror images, rows turned.
    mirrored = half[:, 1 : size - columns + 1][:, ::-1]
    power[:, columns:] -= mirrored[(-np.arange(size)) % size]
    correlation = fft.rfft2(power, overwrite_x=True)
    correlation /= size * size
    result = np.zeros((2 * (count + _RIM) + 1,) * 2, dtype=np.complex128)
    shifts = np.arange(-count + 1, count)
    right = correlation[np.ix_(shifts, shifts[count - 1 :])]
    # exp(-2 pi i k s / size) summed over the power gives the conjugate order of shifts.
    inner = result[_RIM + 1 : -_RIM - 1, _RIM + 1 : -_RIM - 1]
    inner[:, count - 1 :] = right
    inner[:, : count - 1] = np.conj(right[::-1, :0:-1])
    return result
