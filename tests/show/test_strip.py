"""The mean over a strip: what it must reproduce exactly, and its error."""

from math import cos, sin

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.show.strip import strip_along

SHAPE = (40, 50)
OFFSETS = np.linspace(-12.0, 12.0, 49)
Y, X = np.indices(SHAPE, dtype=float)


def strip(angle=0.6, width=0.0, offsets=OFFSETS, x=24.3, y=19.7):
    return strip_along(SHAPE, x=x, y=y, angle=angle, width=width, offsets=offsets)


@pytest.mark.parametrize("angle", [0.0, 0.6, 2.5, -1.2])
def test_a_parabola_is_reproduced(angle):
    image = 3.0 + 0.2 * X - 0.1 * Y + 0.01 * (X - 20.0) ** 2 + 0.005 * (X - 20.0) * (Y - 20.0)
    line = strip(angle)
    x, y = 24.3 + line.offsets * cos(angle), 19.7 + line.offsets * sin(angle)
    exact = 3.0 + 0.2 * x - 0.1 * y + 0.01 * (x - 20.0) ** 2 + 0.005 * (x - 20.0) * (y - 20.0)
    # Cubic convolution is exact for parabolas; rounding alone is left.
    assert_allclose(line.mean(image), exact, rtol=1e-12)


def test_the_width_averages_across():
    angle, width = 0.6, 4.0
    across = -(X - 24.3) * sin(angle) + (Y - 19.7) * cos(angle)
    mean = strip(angle, width).mean(across**2)
    # The mean of a parabola over the width, w^2 / 12; 16 lines stand for it to 1/256 of it.
    assert_allclose(mean, width**2 / 12.0, rtol=5e-3)


def test_errors_are_the_scatter_of_noise():
    line = strip(width=2.0)
    variance = 1.0 + X / 10.0
    rng = np.random.default_rng(1)
    draws = np.array(
        [line.mean(rng.standard_normal(SHAPE) * np.sqrt(variance)) for _ in range(1500)]
    )
    # Scatter of 1500 draws: 1.8 % each, 5 sigma.
    assert_allclose(draws.std(axis=0), line.error(variance), rtol=0.09)


def test_on_a_pixel_a_line_is_the_pixel():
    image = np.random.default_rng(2).random(SHAPE)
    line = strip(angle=0.0, x=20.0, y=10.0, offsets=np.arange(-5.0, 6.0))
    assert_allclose(line.mean(image), image[10, 15:26], rtol=1e-12)
    assert_allclose(line.error(np.full(SHAPE, 9.0)), 3.0, rtol=1e-12)


def test_missing_pixels_leave_gaps_and_nothing_else():
    image = np.ones(SHAPE)
    image[10, 20] = np.nan
    mean = strip(angle=0.0, x=20.0, y=10.0, offsets=np.arange(-5.0, 6.0)).mean(image)
    assert np.flatnonzero(np.isnan(mean)).tolist() == [5]
    assert_allclose(np.delete(mean, 5), 1.0)


def test_places_off_the_image_are_left_out():
    line = strip(angle=0.0, x=45.0, y=20.0, offsets=np.arange(-10.0, 11.0))
    assert line.offsets.max() == 2.0
    assert strip(x=-30.0).offsets.size == 0
