"""Frames assembled with astropy and photutils alone: no line of simimg draws or exposes them."""

from __future__ import annotations

import numpy as np
from astropy.io import fits
from astropy.modeling.models import Moffat2D
from astropy.table import Table
from photutils.datasets import make_model_image

SCALE = 0.4  # arcseconds to the pixel
GAIN, READ_NOISE, BIAS, SKY = 1.6, 6.0, 500.0, 250.0
FWHM, POWER = 3.2, 3.0
# Single stars, well apart: x, y, electrons.
STARS = (
    (22.3, 24.1, 3e5),
    (98.6, 21.4, 1.6e5),
    (20.8, 96.2, 2.2e5),
    (101.1, 99.7, 4e5),
    (61.3, 108.4, 1.2e5),
    (107.2, 60.9, 2e5),
)


def moffat(fwhm: float = FWHM, power: float = POWER) -> Moffat2D:
    """A round Moffat profile of unit light."""
    gamma = 0.5 * fwhm / np.sqrt(2.0 ** (1.0 / power) - 1.0)
    return Moffat2D(amplitude=(power - 1.0) / (np.pi * gamma**2), gamma=gamma, alpha=power)


def expected(stars, *, shape=(124, 130), sky=SKY, slope=(0.0, 0.0), model=None) -> np.ndarray:
    """Expected electrons of stars (x, y, electrons) on a sky with a slope along x and y."""
    model = moffat() if model is None else model
    table = Table(
        rows=[(x, y, e * model.amplitude.value) for x, y, e in stars],
        names=("x_0", "y_0", "amplitude"),
    )
    image = make_model_image(shape, model, table, model_shape=shape, x_name="x_0", y_name="y_0")
    y, x = np.indices(shape)
    return image + sky + slope[0] * x + slope[1] * y


def exposed(image: np.ndarray, seed: int, *, gain=GAIN, read_noise=READ_NOISE, bias=BIAS):
    """Counts of a frame, whole numbers."""
    rng = np.random.default_rng(seed)
    electrons = rng.poisson(image) + read_noise * rng.standard_normal(image.shape)
    return np.rint(electrons / gain + bias)


def pair(x: float, y: float, separation: float, angle: float, electrons: tuple[float, float]):
    """Two stars, the second at so many pixels in a direction (degrees from +x towards +y)."""
    c, s = np.cos(np.radians(angle)), np.sin(np.radians(angle))
    return [(x, y, electrons[0]), (x + separation * c, y + separation * s, electrons[1])]


def written(path, counts, **cards):
    """A FITS file of 16-bit counts with these keywords."""
    header = fits.Header(list(cards.items()))
    fits.PrimaryHDU(counts.astype(np.uint16), header).writeto(path)
    return path
