"""Cuts, peaks and samples of a PSF against closed forms and direct quadrature."""

from math import atan2, cos, pi, sin

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import special

from simimg.imaging.basis import Transfer
from simimg.imaging.profile import (
    centroid,
    effective_band,
    peak_place,
    psf_cut,
    psf_peak,
    sampled_psf,
    strehl,
)
from simimg.optics.pupil import annular_pupil
from simimg.optics.transfer import annular_transfer, pupil_transfer
from tests.reference import turbulence

# What the module promises, of the peak.
PROMISED = 1e-7


def airy(t, obstruction=0.0):
    """PSF of an annulus of diameter 1 at wavelength 1, per steradian (Airy 1835)."""
    x = pi * np.where(np.asarray(t) == 0.0, 1e-9, np.abs(t))
    e = obstruction
    amplitude = 2.0 * special.j1(x) / x
    if e:
        amplitude = amplitude - e * e * 2.0 * special.j1(e * x) / (e * x)
    return 0.25 * pi * amplitude**2 / (1.0 - e * e)


def annulus(obstruction=0.0):
    return Transfer(1.0, (lambda f: annular_transfer(f, diameter=1.0, obstruction=obstruction),))


def kolmogorov(diameter=None):
    """Long exposure with r0 = 1; the optics left out, or a clear aperture."""
    factor = 0.5 * turbulence.KOLMOGOROV_FACTOR
    factors = [lambda f: np.exp(-factor * f ** (5.0 / 3.0))]
    if diameter is not None:
        factors.append(lambda f: annular_transfer(f, diameter=diameter))
    return Transfer(diameter or 50.0, tuple(factors))


def two_lobes(offset, share):
    """A clear aperture's PSF plus the same, fainter and shifted: asymmetric, yet known exactly."""

    def ghost(u, v):
        turn = np.exp(-2j * pi * (u * offset[0] + v * offset[1]))
        return (1.0 + share * turn) / (1.0 + share)

    base = annulus()
    return Transfer(base.band_limit, base.radial, (ghost,), even=False)


@pytest.mark.parametrize("obstruction", [0.0, 0.3, 0.7])
@pytest.mark.parametrize("angle", [0.0, 0.6])
def test_cut_of_an_annulus(obstruction, angle):
    t = np.linspace(-100.0, 100.0, 2001)
    exact = airy(t, obstruction)
    assert_allclose(psf_cut(annulus(obstruction), angle)(t), exact, atol=PROMISED * exact.max())


def test_cut_far_beyond_its_first_reach():
    cut = psf_cut(annulus(), 0.0)
    t = np.array([cut.reach * 0.999, cut.reach * 1.001, 700.0])
    # The wings are a millionth of the peak and less: relative, to tell them from nothing.
    assert_allclose(cut(t), airy(t), atol=1e-2 * PROMISED)


def test_cut_through_turbulence():
    # A Hankel transform by the trapezium rule, 4e5 steps: right to 1e-9.
    f = np.linspace(0.0, 4.5, 400001)
    transfer = np.exp(-0.5 * turbulence.KOLMOGOROV_FACTOR * f ** (5.0 / 3.0))
    t = np.array([0.0, 0.2, 0.5, 1.3, 3.0, 10.0])
    exact = [2.0 * pi * np.trapezoid(transfer * special.j0(2.0 * pi * f * x) * f, f) for x in t]
    assert_allclose(psf_cut(kolmogorov(), 0.3)(t), exact, atol=PROMISED * exact[0])


@pytest.mark.parametrize("order", [1, 2, 3])
def test_derivatives(order):
    cut = psf_cut(annulus(0.2), 0.0)
    t, h = np.linspace(-3.0, 3.0, 31), 1e-4
    below = cut.derivative(t - h, order - 1)
    slope = (cut.derivative(t + h, order - 1) - below) / (2.0 * h)
    # The difference quotient errs by h^2 / 6 times a third derivative of at most about 250.
    assert_allclose(cut.derivative(t, order), slope, atol=2e-6)


@pytest.mark.parametrize("side", [0.4, 3.0])
@pytest.mark.parametrize("angle", [0.0, 0.25 * pi, 1.1])
def test_cut_through_a_pixel(side, angle):
    """Against the closed form, averaged over the square by Gauss-Legendre panels."""
    nodes, weights = np.polynomial.legendre.leggauss(60)
    x, w = 0.5 * side * nodes, 0.5 * weights
    cut = psf_cut(annulus(0.3).with_pixel(side), angle)
    for t in (0.0, 0.7, 1.6, 4.0):
        distance = np.hypot(t * cos(angle) + x[:, None], t * sin(angle) + x)
        exact = w @ airy(distance, 0.3) @ w
        assert_allclose(cut(t), exact, atol=PROMISED * cut(0.0))


@pytest.mark.parametrize("angle", [0.0, 0.3, 0.5 * pi])
def test_cut_of_a_pupil_with_vanes(angle):
    """Against the squared transform of the pupil, summed directly."""
    pupil = annular_pupil(1.0, 0.3, vanes=(3, 0.03, 0.2), samples=512)
    shifted = pupil_transfer(pupil)
    cut = psf_cut(Transfer(1.0, planar=(shifted,)), angle)
    x = (np.arange(512) - 255.5) * pupil.pitch
    for t in (0.0, 0.4, 1.5, 6.0):
        kx, ky = t * cos(angle), t * sin(angle)
        wave = np.exp(2j * pi * ky * x) @ pupil.amplitude @ np.exp(2j * pi * kx * x)
        wave *= np.sinc(kx * pupil.pitch) * np.sinc(ky * pupil.pitch) * pupil.pitch**2
        # 512 squares to the diameter: the interpolation of the overlap costs a few 1e-6.
        assert_allclose(cut(t), np.abs(wave) ** 2 / pupil.area, atol=1e-5 * pupil.area)


def test_asymmetric_cut_and_its_places():
    offset, share = (0.8, -0.5), 0.4
    transfer = two_lobes(offset, share)
    # Its centre of light.
    assert_allclose(centroid(transfer), np.array(offset) * share / (1 + share), atol=1e-5)
    x, y = peak_place(transfer)

    def exact(px, py):
        ghost = airy(np.hypot(px - offset[0], py - offset[1]))
        return (airy(np.hypot(px, py)) + share * ghost) / (1 + share)

    peak = exact(x, y)
    # No place nearby is higher, and the cut through it is right on both sides.
    around = [exact(x + 1e-3 * cos(a), y + 1e-3 * sin(a)) for a in np.arange(0.0, 6.3, 0.3)]
    assert peak > max(around)
    angle, t = atan2(offset[1], offset[0]), np.linspace(-4.0, 4.0, 161)
    cut = psf_cut(transfer, angle, through=(x, y))
    known = exact(x + t * cos(angle), y + t * sin(angle))
    assert_allclose(cut(t), known, atol=PROMISED * peak)
    assert abs(cut(1.0) - cut(-1.0)) > 0.05 * peak
    assert_allclose(psf_peak(transfer), peak, rtol=PROMISED)


def test_effective_band():
    assert effective_band(annulus()) == pytest.approx(1.0)
    # exp(-3.44 f^(5/3)) falls to 1e-12 at f = 3.49.
    assert 3.4 < effective_band(kolmogorov()) < 3.6
    with pytest.raises(ValueError, match="vanishes"):
        effective_band(Transfer(1.0, (lambda f: 0.0 * f,)))


def test_strehl_ratio_at_an_aperture_of_one_r0():
    found = strehl(kolmogorov(1.0), annulus())
    assert_allclose(
        found, turbulence.STREHL_AT_D_EQUAL_R0, atol=turbulence.STREHL_AT_D_EQUAL_R0_ATOL
    )
    assert strehl(annulus(), annulus()) == pytest.approx(1.0)


def test_samples_of_an_annulus():
    image = sampled_psf(annulus(0.3), pixel_scale=0.9, oversampling=3, half_width_pixels=10)
    assert image.shape == (61, 61)
    place = (np.arange(61) - 30) * 0.3
    exact = airy(np.hypot(place[:, None], place), 0.3) * 0.9**2
    assert_allclose(image, exact, atol=PROMISED * exact.max())


def test_samples_are_rows_along_y():
    """A PSF wide along x only: an aperture with a pixel-like slit factor along u."""
    base = annulus()
    transfer = Transfer(1.0, base.radial, (lambda u, v: np.sinc(3.0 * u) + 0.0 * v,))
    image = sampled_psf(transfer, pixel_scale=0.5, oversampling=1, half_width_pixels=4)
    assert image[4, 7] > 3.0 * image[7, 4]
    moved = sampled_psf(
        transfer, pixel_scale=0.5, oversampling=1, half_width_pixels=4, centre=(0.5, 1.0)
    )
    assert_allclose(moved[:-2, :-1], image[2:, 1:], atol=PROMISED * image.max())


@pytest.mark.parametrize("side", [0.3, 2.0, 5.0])
def test_samples_of_whole_pixels_hold_the_light(side):
    image = sampled_psf(
        kolmogorov().with_pixel(side), pixel_scale=side, oversampling=1, half_width_pixels=60 / side
    )
    # Beyond 60 lambda/r0 the wing, c theta^(-11/3), holds 1e-4 of the light; a square holds some
    # of that.
    held = image.sum()
    c = 0.5 * turbulence.KOLMOGOROV_FACTOR * pi ** (-8 / 3)
    c *= special.gamma(11 / 6) / abs(special.gamma(-5 / 6))
    wing = 2.0 * pi * 0.6 * c * 60.0 ** (-5.0 / 3.0)
    assert_allclose(held, 1.0 - wing, atol=0.3 * wing)


def test_samples_agree_with_the_cut_where_far_undersampled():
    transfer = annulus().with_pixel(6.0)
    image = sampled_psf(transfer, pixel_scale=6.0, oversampling=2, half_width_pixels=5)
    cut = psf_cut(transfer, 0.0)
    expected = cut((np.arange(21) - 10) * 3.0) * 36.0
    assert_allclose(image[10], expected, atol=2 * PROMISED * image.max())


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("pixel_scale", 0.0),
        ("pixel_scale", float("nan")),
        ("oversampling", 0),
        ("oversampling", 1.5),
        ("half_width_pixels", 0.0),
        ("half_width_pixels", float("inf")),
    ],
)
def test_samples_refuse_nonsense(key, value):
    good = {"pixel_scale": 1.0, "oversampling": 1, "half_width_pixels": 2}
    with pytest.raises(ValueError, match=key):
        sampled_psf(annulus(), **(good | {key: value}))


def test_cut_refuses_places_that_are_not_finite():
    with pytest.raises(ValueError, match="not finite"):
        psf_cut(annulus(), 0.0)(np.array([0.0, np.nan]))
