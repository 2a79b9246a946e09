"""Wavefronts: how far the optical path to each place of the pupil is from the ideal one.

A wavefront here is an array of optical path on a pupil's lattice, in metres and ``[y, x]`` with
row 0 at the lowest y. Positive means a longer path: the wave arrives late there, by the phase
``2 pi W / wavelength``, as behind a thicker piece of glass. Light leans towards the side of the
longer path: a wavefront ``W = a x`` moves the image by the angle a towards the detector's +x.
Wavefronts add; the mean (piston) changes nothing. The root mean square is over the pupil, each
square weighted by the light that it passes.

References
----------
Born, M. & Wolf, E., Principles of Optics, ch. 9.
Mahajan, V. N. 1983, J. Opt. Soc. Am. 73, 860.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike
from scipy import fft, ndimage

from simimg.arrays import FloatArray
from simimg.optics.pupil import LARGEST_MAP, Pupil
from simimg.optics.zernike import zernike

MARECHAL_WAVES = 0.14
"""Root mean square, in wavelengths, up to which the extended Marechal formula is within 10 %."""


def pupil_places(pupil: Pupil) -> tuple[FloatArray, FloatArray]:
    """Centres of a pupil's squares: x of shape (1, n) and y of shape (n, 1), in metres."""
    count = pupil.amplitude.shape[0]
    places = (np.arange(count) - 0.5 * (count - 1)) * pupil.pitch
    return places[np.newaxis, :], places[:, np.newaxis]


def zernike_wavefront(pupil: Pupil, terms: Mapping[int, float]) -> FloatArray:
    """Sum of Zernike terms.

    Parameters
    ----------
    pupil : Pupil
        Its diameter and central obstruction give the annulus on which the terms are orthonormal;
        for a pupil with other edges (vanes, segments, a map) that annulus is its outline, and the
        terms' root mean squares over the pupil itself differ a little from those given.
    terms : mapping of int to float
        Noll's index, from 1, and the root mean square in metres of path, with its sign.

    Returns
    -------
    (n, n) ndarray of float64
        Optical path (m).

    Raises
    ------
    ValueError
        For an index out of range or a value that is not finite.

    References
    ----------
    Noll 1976; Mahajan 1981 (`simimg.optics.zernike`).
    """
    x, y = pupil_places(pupil)
    radius = 0.5 * pupil.diameter
    path = np.zeros(pupil.amplitude.shape)
    for index, rms in terms.items():
        if not np.isfinite(rms):
            raise ValueError(f"the rms of Zernike term {index} must be finite, got {rms}")
        path += rms * zernike(index, x / radius, y / radius, obstruction=pupil.obstruction)
    return path


def defocus_wavefront(pupil: Pupil, shift: float, *, focal_length: float) -> FloatArray:
    """The wavefront of a detector out of focus.

    Parameters
    ----------
    pupil : Pupil
    shift : float
        How far the focus lies behind the detector (m); negative when it lies before it. Positive
        has the sign of a positive term 4 of Noll's.
    focal_length : float
        Effective focal length (m), above 0.

    Returns
    -------
    (n, n) ndarray of float64
        ``shift r^2 / (2 f^2)``, which is ``shift / (8 F^2)`` at the rim for a focal ratio F: the
        paraxial form, good to the square of the beam's half-angle.

    Raises
    ------
    ValueError
        If the shift is not finite or the focal length is not finite and above 0.
    """
    if not np.isfinite(shift):
        raise ValueError(f"defocus must be finite, got {shift}")
    if not (np.isfinite(focal_length) and focal_length > 0.0):
        raise ValueError(f"focal length must be finite and above 0 m, got {focal_length}")
    x, y = pupil_places(pupil)
    return np.asarray(0.5 * shift * (x * x + y * y) / focal_length**2)


def depth_of_focus(wavelength: float, focal_ratio: float) -> float:
    """Defocus (m), either way, that bends the wavefront by a quarter wave at the rim.

    Parameters
    ----------
    wavelength : float
        Wavelength (m).
    focal_ratio : float
        Focal length over diameter.

    Returns
    -------
    float
        ``2 wavelength F^2``: Rayleigh's quarter wave, at which a clear aperture keeps 0.81 of its
        peak.

    Raises
    ------
    ValueError
        If an argument is not finite and above 0.
    """
    for name, value in (("wavelength", wavelength), ("focal ratio", focal_ratio)):
        if not (np.isfinite(value) and value > 0.0):
            raise ValueError(f"{name} must be finite and above 0, got {value}")
    return 2.0 * wavelength * focal_ratio**2


def polishing_wavefront(
    pupil: Pupil, *, rms: float, slope: float, rng: np.random.Generator
) -> FloatArray:
    """Random figure error with a power-law spectrum.

    Gaussian noise, filtered on a lattice twice as wide as the pupil so that opposite rims have
    nothing in common; piston and tilt are taken out and the rest is scaled to the stated value.

    Parameters
    ----------
    pupil : Pupil
    rms : float
        Root mean square over the pupil (m of optical path: on a mirror twice the surface error),
        0 or more; met exactly.
    slope : float
        The power in a unit area of spatial frequency falls as frequency to the minus ``slope``,
        0 to 6. Polished optics have about 2 to 3 (common practice).
    rng : numpy.random.Generator
        What draws the noise.

    Returns
    -------
    (n, n) ndarray of float64
        Optical path (m), without piston and tilt over the pupil. The same generator draws another
        map on another lattice.

    Raises
    ------
    ValueError
        If the rms or the slope is out of range.
    """
    if not (np.isfinite(rms) and rms >= 0.0):
        raise ValueError(f"polishing rms must be finite and at least 0 m, got {rms}")
    if not 0.0 <= slope <= 6.0:
        raise ValueError(f"polishing slope must be from 0 to 6, got {slope}")
    count = pupil.amplitude.shape[0]
    spectrum = fft.rfft2(rng.standard_normal((2 * count, 2 * count)))
    frequency = np.hypot(fft.fftfreq(2 * count)[:, np.newaxis], fft.rfftfreq(2 * count))
    frequency[0, 0] = np.inf
    spectrum *= frequency ** (-0.5 * slope)
    path = fft.irfft2(spectrum, (2 * count, 2 * count))[:count, :count]
    path = without_tilt(path, pupil)
    return np.asarray(path * (rms / rms_over_pupil(path, pupil)))


def without_tilt(path: FloatArray, pupil: Pupil) -> FloatArray:
    """A wavefront less its piston and tilt.

    Parameters
    ----------
    path : (n, n) ndarray
        Wavefront (m).
    pupil : Pupil

    Returns
    -------
    (n, n) ndarray of float64
        Less the plane that fits it best over the pupil, weighted by transmission.
    """
    weight = pupil.transmission
    x, y = (np.broadcast_to(place / pupil.diameter, path.shape) for place in pupil_places(pupil))
    planes = np.stack([np.ones_like(path), x, y])
    lit = weight > 0.0
    basis = planes[:, lit]
    normal = (basis * weight[lit]) @ basis.T
    terms = np.linalg.solve(normal, (basis * weight[lit]) @ path[lit])
    return np.asarray(path - np.tensordot(terms, planes, axes=1))


def map_wavefront(values: ArrayLike, pupil: Pupil) -> FloatArray:
    """A wavefront from a user's map.

    Parameters
    ----------
    values : (k, k) array_like
        Optical path (m); the side of the map is the aperture's diameter, row 0 at the lowest y and
        column 0 at the lowest x. Places that pass no light may be NaN. A map of another size than
        the pupil's lattice is carried over by straight lines between the centres of its pixels.
    pupil : Pupil

    Returns
    -------
    (n, n) ndarray of float64
        Optical path (m); where the map says nothing, its nearest value.

    Raises
    ------
    ValueError
        If the map is not square, has fewer than 16 or more than 2048 pixels a side, or is not
        finite somewhere that the pupil lets light through.
    """
    given = np.asarray(values, dtype=np.float64)
    if given.ndim != 2 or given.shape[0] != given.shape[1]:
        raise ValueError(f"a wavefront map must be square, got shape {given.shape}")
    if not 16 <= given.shape[0] <= LARGEST_MAP:
        raise ValueError(
            f"a wavefront map needs 16 to {LARGEST_MAP} pixels a side, got {given.shape[0]}"
        )
    known = np.isfinite(given)
    if not known.any():
        raise ValueError("the wavefront map has no finite value")
    if not known.all():
        # The nearest known value: a square at the rim may ask a pixel beyond it.
        nearest = ndimage.distance_transform_edt(
            ~known, return_distances=False, return_indices=True
        )
        given = given[tuple(nearest)]
    count = pupil.amplitude.shape[0]
    if given.shape[0] != count:
        places = (np.arange(count) + 0.5) * given.shape[0] / count - 0.5
        grid = np.meshgrid(places, places, indexing="ij")
        given = ndimage.map_coordinates(given, grid, order=1, mode="nearest")
        nearest_pixel = np.clip(np.rint(places), 0, known.shape[0] - 1).astype(int)
        known = known[np.ix_(nearest_pixel, nearest_pixel)]
    # A hard edge covers part of a pixel: only squares that pass most of their light must be known.
    lacking = ~known & (pupil.transmission > 0.5)
    if lacking.any():
        row, column = (int(place[0]) for place in np.nonzero(lacking))
        raise ValueError(
            f"the wavefront map is not finite at {int(lacking.sum())} places that let light "
            f"through, the first at row {row}, column {column} of {count}"
        )
    return np.asarray(given)


def rms_over_pupil(path: FloatArray, pupil: Pupil) -> float:
    """Root mean square of a wavefront about its mean (m), weighted by the light that passes."""
    total = float(pupil.transmission.sum())
    mean = float((pupil.transmission * path).sum()) / total
    return float(np.sqrt((pupil.transmission * (path - mean) ** 2).sum() / total))


def steepest_step(path: FloatArray, pupil: Pupil) -> float:
    """Largest difference of path (m) between two open neighbouring squares.

    The lattice follows a wavefront up to half a wavelength a step; beyond it, light that should
    fall far out is folded back. Steps between segments are real and count, too.
    """
    largest = 0.0
    lit = pupil.amplitude > 0.0
    for axis in (0, 1):
        step = np.abs(np.diff(path, axis=axis))
        both = lit.take(range(1, lit.shape[axis]), axis) & lit.take(
            range(lit.shape[axis] - 1), axis
        )
        largest = max(largest, float(step[both].max(initial=0.0)))
    return largest


def axial_strehl(path: FloatArray, pupil: Pupil, wavelength: float) -> float:
    """Intensity at the image's nominal centre over that without the wavefront error.

    Parameters
    ----------
    path : (n, n) ndarray
        Wavefront (m). Its tilt counts: take it out first (`without_tilt`) to follow the image.
    pupil : Pupil
    wavelength : float
        Wavelength (m).

    Returns
    -------
    float
        The Strehl ratio by diffraction, 0 to 1.

    References
    ----------
    Born & Wolf, ch. 9.1: the squared modulus of the mean of exp(2 pi i W / wavelength).
    """
    phase = 2.0 * np.pi / wavelength * path
    real = float((pupil.amplitude * np.cos(phase)).sum())
    imaginary = float((pupil.amplitude * np.sin(phase)).sum())
    return (real**2 + imaginary**2) / float(pupil.amplitude.sum()) ** 2


def marechal_strehl(rms: float, wavelength: float) -> float:
    """Strehl ratio from the root mean square alone, exp(-(2 pi rms / wavelength)^2).

    Parameters
    ----------
    rms : float
        Of the wavefront (m), 0 or more.
    wavelength : float
        Wavelength (m), above 0.

    Returns
    -------
    float
        0 to 1. For defocus, astigmatism, coma and spherical aberration of a clear or annular
        aperture it is within 2 % of diffraction up to an rms of 0.1 wavelengths and within 10 % up
        to `MARECHAL_WAVES` (a ratio of 0.46), defocus being the worst; beyond, it may be far off.

    Raises
    ------
    ValueError
        If an argument is not finite or out of range.

    References
    ----------
    Mahajan 1983, who extends Marechal's (1947) formula for small errors; the range is computed by
    `axial_strehl`.
    """
    if not (np.isfinite(rms) and rms >= 0.0):
        raise ValueError(f"rms must be finite and at least 0 m, got {rms}")
    if not (np.isfinite(wavelength) and wavelength > 0.0):
        raise ValueError(f"wavelength must be finite and above 0 m, got {wavelength}")
    return float(np.exp(-((2.0 * np.pi * rms / wavelength) ** 2)))


def marechal_holds(rms: float, wavelength: float) -> bool:
    """Whether the extended Marechal formula is within its range: at most `MARECHAL_WAVES`."""
    return rms <= MARECHAL_WAVES * wavelength
