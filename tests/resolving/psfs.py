"""Effective PSFs from closed forms, without any of simimg's optics; frames of stars made of them.

A PSF is the inverse FFT of a transfer function times the pixel's, sampled finer than the detector.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cache

import numpy as np

from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.starfit import Cutout

SIGMA = np.sqrt(8.0 * np.log(2.0))  # FWHM of a Gaussian over its standard deviation

Radial = Callable[[np.ndarray], np.ndarray]


def gaussian(fwhm: float) -> Radial:
    """Transfer function of a Gaussian of this FWHM (pixels)."""
    return lambda f: np.exp(-2.0 * (np.pi * fwhm / SIGMA * f) ** 2)


def airy(cutoff: float) -> Radial:
    """Transfer function of a clear aperture with this cut-off (cycles per pixel)."""

    def transfer(f: np.ndarray) -> np.ndarray:
        nu = np.clip(f / cutoff, 0.0, 1.0)
        return 2.0 / np.pi * (np.arccos(nu) - nu * np.sqrt(1.0 - nu * nu))

    return transfer


def kolmogorov(fwhm: float) -> Radial:
    """Transfer function of Kolmogorov's long exposure of this FWHM (pixels)."""
    r0 = 0.9758634 / fwhm
    return lambda f: np.exp(-3.4419385 * (f / r0) ** (5.0 / 3.0))


def sampled(transfer: Radial, *, oversampling: int, half_width: int) -> np.ndarray:
    """Fraction of a star's light on a pixel at each sample, the star in the middle."""
    half = half_width * oversampling
    size = 2 ** int(np.ceil(np.log2(4 * half + 2)))
    f = np.fft.fftfreq(size, 1.0 / oversampling)
    product = transfer(np.hypot(f, f[:, None])) * np.sinc(f) * np.sinc(f[:, None])
    image = np.fft.fftshift(np.fft.ifft2(product).real) * oversampling**2
    middle = size // 2
    window = slice(middle - half, middle + half + 1)
    return image[window, window]


@cache
def model(kind: str) -> PsfModel:
    """PSF models by name: in air, above it, and barely two pixels to the FWHM.

    On the finer pixels next to nothing is left beyond the Nyquist frequency: 1e-3 of the PSF in
    air, nothing above it. Those named coarse have two pixels to the delivered FWHM.
    """
    transfer, oversampling, half_width = {
        "air": (kolmogorov(3.0), 3, 28),
        "space": (airy(0.5), 4, 24),
        "coarse": (gaussian(1.75), 4, 20),
        "coarse air": (kolmogorov(1.843), 4, 20),
        "coarse space": (airy(0.538), 4, 24),
    }[kind]
    image = sampled(transfer, oversampling=oversampling, half_width=half_width)
    return PsfModel.from_image(image, oversampling=oversampling)


def expected(
    psf: PsfModel, stars: Sequence[tuple[float, float, float]], *, size: int, background: float
) -> np.ndarray:
    """Expected electrons of stars (x, y, electrons) on a constant background."""
    image = np.full((size, size), float(background))
    for x, y, electrons in stars:
        image += electrons * psf.evaluate(x, y, columns=size, rows=size, order=0)[0]
    return np.maximum(image, 0.0)


def exposed(
    image: np.ndarray, *, read_noise: float, rng: np.random.Generator, psf: PsfModel
) -> Cutout:
    """A noise draw of an expected image, as a cutout."""
    data = rng.poisson(image) + read_noise * rng.standard_normal(image.shape)
    return Cutout.of(data, variance=read_noise**2, psf=psf)
