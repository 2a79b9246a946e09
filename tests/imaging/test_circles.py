"""Light in circles against Rayleigh's closed form and computed values."""

from math import pi

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import special

from simimg.imaging.circles import encircled, encircled_diameter, encircled_diameters
from tests.imaging.test_profile import annulus, kolmogorov, two_lobes
from tests.reference import diffraction, turbulence


def test_clear_aperture():
    r = np.array([[0.0, 0.3, 1.0], [2.5, 9.0, 30.0]])
    exact = 1.0 - special.j0(pi * r) ** 2 - special.j1(pi * r) ** 2  # Rayleigh 1881
    assert_allclose(encircled(annulus(), r), exact, atol=1e-6)


@pytest.mark.parametrize("obstruction", diffraction.OBSTRUCTED)
def test_light_inside_the_first_dark_ring(obstruction):
    ring, light, *_ = diffraction.OBSTRUCTED[obstruction]
    assert_allclose(encircled(annulus(obstruction), ring), light, atol=diffraction.OBSTRUCTED_ATOL)


def test_diameters_through_turbulence():
    width = turbulence.LONG_EXPOSURE_FWHM
    found = np.array(encircled_diameters(kolmogorov(), (0.5, 0.8))) / width
    known = (turbulence.KOLMOGOROV_EE50_FWHM, turbulence.KOLMOGOROV_EE80_FWHM)
    assert_allclose(found, known, atol=turbulence.KOLMOGOROV_ATOL)


def test_a_wide_pixel_is_a_square():
    """Nearly all light lies in the pixel's square: the circle of half its area holds half."""
    found = encircled_diameter(annulus().with_pixel(20.0), 0.5)
    # 20 sqrt(0.5 4/pi); the rings carry some light out.
    assert_allclose(found, 20.0 * np.sqrt(2.0 / pi), rtol=0.02)


def test_circles_run_about_the_centre_of_light():
    """Two equal images 1 apart: centred between them, so that neither side is favoured."""
    moved = encircled(two_lobes((0.0, 1.0), 1.0), 0.9)
    x, w = np.polynomial.legendre.leggauss(80)
    r, a = 0.45 * (x + 1.0), pi * (x + 1.0)
    px, py = r[:, None] * np.cos(a), r[:, None] * np.sin(a) + 0.5
    t = np.hypot(px, py) * pi
    psf = 0.25 * pi * (2.0 * special.j1(t) / t) ** 2
    exact = 0.45 * pi * (w * r) @ psf @ w
    assert_allclose(moved, exact, atol=1e-6)


def test_most_of_the_light_lies_far_out():
    # 1 - E = 2 / (pi^2 r) far out, for a clear aperture: 99 % within 2 r = 40.5.
    assert_allclose(encircled_diameter(annulus(), 0.99), 4.0 / (pi**2 * 0.01), rtol=0.02)


@pytest.mark.parametrize("fraction", [0.0, 1.0, -0.5, float("nan")])
def test_fractions_out_of_range(fraction):
    with pytest.raises(ValueError, match="fraction"):
        encircled_diameter(annulus(), fraction)
