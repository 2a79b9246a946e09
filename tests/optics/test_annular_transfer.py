"""The analytic transfer function, seen through its Hankel transform: the figures of diffraction.

The point spread function here is a quadrature of `annular_transfer`, so that each ring and width is
a figure of that function. Shifts are in diameters, angles in wavelength/diameter.
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq, minimize_scalar
from scipy.special import j0, j1, jv

from simimg.optics.transfer import annular_transfer
from tests.reference import diffraction


class Psf:
    """Hankel transform of the transfer function by Gauss-Legendre over its smooth pieces."""

    def __init__(self, obstruction):
        ends = sorted({0.0, obstruction, 0.5 * (1 - obstruction), 0.5 * (1 + obstruction), 1.0})
        node, weight = np.polynomial.legendre.leggauss(200)
        # Squared ends take the square roots out of the integrand where circles touch.
        t, w = 0.5 * (node + 1.0), 0.5 * weight
        smooth = t * t * (3.0 - 2.0 * t)
        slope = 6.0 * t * (1.0 - t)
        self.s = np.concatenate([a + (b - a) * smooth for a, b in zip(ends, ends[1:])])
        self.w = np.concatenate([(b - a) * slope * w for a, b in zip(ends, ends[1:])])
        self.transfer = annular_transfer(self.s, diameter=1.0, obstruction=obstruction)
        self.peak = self._sum(self.s)

    def _sum(self, values):
        return float(np.sum(self.w * self.transfer * values))

    def __call__(self, k):
        return self._sum(self.s * j0(2 * np.pi * k * self.s)) / self.peak

    def slope(self, k):
        return -self._sum(self.s**2 * j1(2 * np.pi * k * self.s)) / self.peak

    def curvature(self, k):
        x = 2 * np.pi * k * self.s
        return -self._sum(self.s**3 * 0.5 * (j0(x) - jv(2, x))) / self.peak

    def encircled(self, k):
        return 2 * np.pi * k * self._sum(j1(2 * np.pi * k * self.s))

    def fwhm(self):
        return 2.0 * brentq(lambda k: self(k) - 0.5, 0.1, 1.0, xtol=1e-10)

    def dark_ring(self, guess):
        found = minimize_scalar(
            self, bounds=(guess - 0.15, guess + 0.15), method="bounded", options={"xatol": 1e-7}
        )
        return found.x


@pytest.fixture(scope="module")
def airy():
    return Psf(0.0)


def closed_form(k, obstruction):
    x = np.pi * k
    amplitude = 2 * j1(x) / x
    if obstruction:
        amplitude -= obstruction**2 * 2 * j1(obstruction * x) / (obstruction * x)
    return (amplitude / (1 - obstruction**2)) ** 2


@pytest.mark.parametrize("obstruction", [0.0, 0.1, 0.3, 1 / 3, 0.5, 0.9])
def test_hankel_transform_is_the_squared_bessel_form(obstruction):
    psf = Psf(obstruction)
    k = np.linspace(0.05, 12.0, 60)
    # Quadrature with 200 points a piece reaches rounding errors at these angles.
    assert_allclose([psf(x) for x in k], closed_form(k, obstruction), rtol=0, atol=1e-12)


@pytest.mark.parametrize("obstruction", [0.0, 0.2, 0.35, 0.7])
def test_overlap_by_chords(obstruction):
    """Area common to two shifted annuli, cut into chords: no circle geometry shared."""
    t = (np.arange(200_000) + 0.5) / 200_000 * np.pi / 2
    y, dy = 0.5 * np.sin(t), 0.5 * np.cos(t) * (np.pi / 2 / 200_000)
    outer = 0.5 * np.cos(t)
    hole = np.sqrt(np.maximum((0.5 * obstruction) ** 2 - y**2, 0.0))

    def common(a0, a1, b0, b1):
        return np.maximum(np.minimum(a1, b1) - np.maximum(a0, b0), 0.0)

    for shift in (0.1, 0.33, 0.5, 0.66, 0.9):
        length = 0.0
        for first in ((-outer, -hole), (hole, outer)):
            for second in ((-outer, -hole), (hole, outer)):
                length = length + common(first[0], first[1], second[0] + shift, second[1] + shift)
        expected = 2 * np.sum(length * dy) / (np.pi / 4 * (1 - obstruction**2))
        got = annular_transfer(shift, diameter=1.0, obstruction=obstruction)
        # The midpoint rule stumbles at the hole's edge; 2e-5 spacing leaves about 1e-7.
        assert_allclose(got, expected, rtol=0, atol=1e-6)


@pytest.mark.parametrize("obstruction", [0.0, 0.3, 0.999])
def test_ends_are_exact(obstruction):
    ends = annular_transfer([0.0, 4.0, 4.1, 1e9], diameter=4.0, obstruction=obstruction)
    assert ends.tolist() == [1.0, 0.0, 0.0, 0.0]


def test_every_kink_is_smooth_to_rounding():
    for kink in (0.3, 0.35, 0.65, 1.0):
        at = annular_transfer(
            [kink * (1 - 1e-12), kink, kink * (1 + 1e-12)], diameter=1.0, obstruction=0.3
        )
        assert_allclose(at, at[1], rtol=0, atol=1e-11)


def test_shape_sign_and_scale():
    shift = np.linspace(-2.5, 2.5, 24).reshape(2, 3, 4)
    got = annular_transfer(shift, diameter=2.0, obstruction=0.4)
    assert got.shape == shift.shape
    assert_allclose(got, annular_transfer(-shift / 2, diameter=1.0, obstruction=0.4), atol=1e-15)


def test_large_arrays_equal_single_values():
    shift = np.linspace(0.0, 1.1, 50_001)
    got = annular_transfer(shift, diameter=1.0, obstruction=0.3)
    few = [annular_transfer(s, diameter=1.0, obstruction=0.3) for s in shift[::5000]]
    assert_allclose(got[::5000], few, rtol=0, atol=1e-15)


@pytest.mark.parametrize(
    ("diameter", "obstruction"),
    [(0.0, 0.1), (-1.0, 0.1), (np.nan, 0.1), (np.inf, 0.1), (1.0, 1.0), (1.0, -0.1), (1.0, np.nan)],
)
def test_nonsense_is_refused(diameter, obstruction):
    with pytest.raises(ValueError, match="must be"):
        annular_transfer(0.1, diameter=diameter, obstruction=obstruction)


def test_half_cut_off():
    assert_allclose(
        annular_transfer(0.5, diameter=1.0),
        diffraction.TRANSFER_AT_HALF_CUTOFF,
        rtol=0,
        atol=diffraction.TRANSFER_AT_HALF_CUTOFF_ATOL,
    )


def test_dark_rings_and_the_light_inside(airy):
    rings = [airy.dark_ring(guess) for guess in (1.2, 2.2, 3.2)]
    assert_allclose(rings, diffraction.DARK_RINGS, rtol=0, atol=diffraction.DARK_RINGS_ATOL)
    assert_allclose(
        [airy.encircled(k) for k in diffraction.DARK_RINGS],
        diffraction.LIGHT_INSIDE_DARK_RINGS,
        rtol=0,
        atol=diffraction.LIGHT_INSIDE_DARK_RINGS_ATOL,
    )


def test_bright_rings(airy):
    rings = [brentq(airy.slope, k - 0.2, k + 0.2, xtol=1e-10) for k in (1.6, 2.7, 3.7)]
    assert_allclose(rings, diffraction.BRIGHT_RINGS, rtol=0, atol=diffraction.BRIGHT_RINGS_ATOL)
    assert_allclose(
        [airy(k) for k in rings],
        diffraction.BRIGHT_RING_INTENSITIES,
        rtol=0,
        atol=diffraction.BRIGHT_RING_INTENSITIES_ATOL,
    )


def test_fwhm_saddle_and_sparrow(airy):
    assert_allclose(airy.fwhm(), diffraction.FWHM, rtol=0, atol=diffraction.FWHM_ATOL)
    ring = diffraction.DARK_RINGS[0]
    saddle = 2 * airy(ring / 2) / (1 + airy(ring))
    assert_allclose(
        saddle, diffraction.RAYLEIGH_SADDLE, rtol=0, atol=diffraction.RAYLEIGH_SADDLE_ATOL
    )
    sparrow = 2 * brentq(airy.curvature, 0.2, 0.7, xtol=1e-10)
    assert_allclose(sparrow, diffraction.SPARROW_EQUAL, rtol=0, atol=diffraction.SPARROW_EQUAL_ATOL)


@pytest.mark.parametrize("obstruction", diffraction.OBSTRUCTED)
def test_obstructed(obstruction):
    psf = Psf(obstruction)
    ring = psf.dark_ring(1.22 - 0.45 * obstruction)
    got = (ring, psf.encircled(ring), psf.fwhm(), 2 * brentq(psf.curvature, 0.2, 0.7))
    assert_allclose(
        got, diffraction.OBSTRUCTED[obstruction], rtol=0, atol=diffraction.OBSTRUCTED_ATOL
    )
