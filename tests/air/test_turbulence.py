"""Structure functions against their spectrum, transfer functions against published figures.

Lengths are in metres where an r0 is given and in units of r0 or of the aperture elsewhere.
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.optimize import brentq, minimize_scalar
from scipy.special import gamma, j0, j1, jv

from simimg.air import turbulence
from simimg.air.turbulence import (
    fried_parameter,
    fwhm_kolmogorov,
    fwhm_von_karman_tokovinin,
    kolmogorov_structure,
    long_exposure_transfer,
    seeing_from_fried,
    tilt_removed_transfer,
    von_karman_structure,
)
from simimg.optics.transfer import annular_transfer
from tests.reference import turbulence as reference

ARCSEC = np.pi / 180 / 3600

# Gauss-Legendre nodes for transfers of r0 = 1, which are below 1e-20 beyond a shift of 6.
NODE, WEIGHT = np.polynomial.legendre.leggauss(400)
SHIFT = 3.0 * (NODE + 1.0)
# The square removes the fractional power at zero shift.
SHIFT, STEP = 6.0 * (SHIFT / 6.0) ** 2, 3.0 * WEIGHT * 2.0 * (SHIFT / 6.0)


def hankel(transfer, kernel, k, power):
    return float(np.sum(STEP * transfer * SHIFT**power * kernel(2 * np.pi * k * SHIFT)))


def width(transfer):
    """Full width at half maximum in wavelength/r0."""
    peak = hankel(transfer, j0, 0.0, 1)
    return 2 * brentq(lambda k: hankel(transfer, j0, k, 1) - peak / 2, 0.05, 1.5, xtol=1e-10)


def test_kolmogorov_constant():
    exact = 2 * (24 / 5 * gamma(6 / 5)) ** (5 / 6)
    assert_allclose(
        [turbulence.KOLMOGOROV, exact],
        reference.KOLMOGOROV_FACTOR,
        rtol=0,
        atol=reference.KOLMOGOROV_FACTOR_ATOL,
    )
    assert_allclose(
        kolmogorov_structure([0.0, 0.2, 1.6], 0.2),
        reference.KOLMOGOROV_FACTOR * np.array([0.0, 1.0, 32.0]),
        rtol=1e-12,
    )


def test_von_karman_table():
    got = von_karman_structure(
        list(reference.VON_KARMAN_STRUCTURE), reference.VON_KARMAN_R0, reference.VON_KARMAN_L0
    )
    # The table's own rounding.
    assert_allclose(
        got,
        list(reference.VON_KARMAN_STRUCTURE.values()),
        rtol=reference.VON_KARMAN_STRUCTURE_RTOL,
    )


@pytest.mark.parametrize("r", [0.01, 0.3, 3.0, 4.5, 60.0])
def test_von_karman_is_the_transform_of_its_spectrum(r):
    r0, outer_scale = 0.12, 25.0

    def integrand(f):
        spectrum = (
            reference.PHASE_SPECTRUM_FACTOR
            * r0 ** (-5 / 3)
            * (f * f + 1 / outer_scale**2) ** (-11 / 6)
        )
        return 4 * np.pi * f * spectrum * (1 - j0(2 * np.pi * f * r))

    edges = np.concatenate([[0.0], np.geomspace(1e-3, 40.0, 12) / r])
    total = sum(quad(integrand, a, b, limit=400)[0] for a, b in zip(edges, edges[1:]))
    # Beyond, the Bessel function has averaged out: 4 pi f times the power law, integrated.
    tail = 4 * np.pi * reference.PHASE_SPECTRUM_FACTOR * r0 ** (-5 / 3) * 3 / 5
    total += tail * (edges[-1] ** 2 + 1 / outer_scale**2) ** (-5 / 6)
    # The oscillation left in the tail is below 1e-5 of the whole; the constant has six digits.
    assert_allclose(von_karman_structure(r, r0, outer_scale), total, rtol=1e-5)


def test_von_karman_keeps_its_digits_at_small_distances():
    """Against the published expansion, whose terms are all distinct powers."""
    r0, outer_scale = 0.15, 25.0
    r = np.array([1e-12, 1e-9, 1e-6, 1e-4, 1e-2])
    x = r / outer_scale
    a, b, c = reference.VON_KARMAN_SMALL_R
    expected = 1 - a * x ** (1 / 3) + b * x**2 - c * x ** (7 / 3)
    ratio = von_karman_structure(r, r0, outer_scale) / kolmogorov_structure(r, r0)
    # The expansion's factors have four digits: 5e-4 of a x^(1/3), itself below 0.11 here.
    assert_allclose(ratio, expected, rtol=0, atol=5e-5)
    assert von_karman_structure(0.0, r0, outer_scale) == 0.0


def test_series_and_bessel_function_join():
    joint = 25.0 / (2 * np.pi)
    sides = von_karman_structure([joint * (1 - 1e-14), joint * (1 + 1e-14)], 0.15, 25.0)
    assert_allclose(sides[0], sides[1], rtol=1e-13)


def test_von_karman_limits():
    r = np.geomspace(1e-3, 30.0, 50)
    assert_allclose(von_karman_structure(r, 0.1, np.inf), kolmogorov_structure(r, 0.1), rtol=0)
    # (r/L0)^(1/3) sets how slowly Kolmogorov is reached.
    assert_allclose(von_karman_structure(r, 0.1, 1e16), kolmogorov_structure(r, 0.1), rtol=3e-5)
    far = von_karman_structure([1e3, 1e6], 0.1, 20.0)
    variance = far / 2
    # Twice the phase variance: 0.0859 (L0/r0)^(5/3), the integral of the spectrum.
    expected = 6 / 5 * np.pi * reference.PHASE_SPECTRUM_FACTOR * 200.0 ** (5 / 3)
    assert_allclose(variance, expected, rtol=1e-5)
    assert np.all(np.diff(von_karman_structure(r, 0.1, 20.0)) > 0)


def test_shapes():
    r = np.linspace(0, 20, 24).reshape(2, 3, 4)
    for structure in (
        kolmogorov_structure(r, 0.1),
        von_karman_structure(r, 0.1, 20.0),
        long_exposure_transfer(r, 0.1, outer_scale=20.0),
        tilt_removed_transfer(r, 0.1, diameter=1.0),
    ):
        assert structure.shape == r.shape
    assert von_karman_structure(1.0, 0.1, 20.0).shape == ()


def test_long_exposure_width():
    got = width(long_exposure_transfer(SHIFT, 1.0))
    for value in (got, turbulence.LONG_EXPOSURE_FWHM, fwhm_kolmogorov(0.1, wavelength=0.1)):
        assert_allclose(
            value,
            reference.LONG_EXPOSURE_FWHM,
            rtol=0,
            atol=reference.LONG_EXPOSURE_FWHM_ATOL,
        )


def test_kolmogorov_profile():
    transfer = long_exposure_transfer(SHIFT, 1.0)
    fwhm = width(transfer)

    def curvature(k):
        return hankel(transfer, lambda x: j0(x) - jv(2, x), k, 3)

    def encircled(k):
        return 2 * np.pi * k * hankel(transfer, j1, k, 0)

    sparrow = 2 * brentq(curvature, 0.1, 0.9)
    half, most = (2 * brentq(lambda k, x=x: encircled(k) - x, 0.1, 3.0) for x in (0.5, 0.8))
    assert_allclose(
        np.array([sparrow, half, most]) / fwhm,
        [
            reference.KOLMOGOROV_SPARROW_FWHM,
            reference.KOLMOGOROV_EE50_FWHM,
            reference.KOLMOGOROV_EE80_FWHM,
        ],
        rtol=0,
        atol=reference.KOLMOGOROV_ATOL,
    )


def test_strehl_of_a_long_exposure_at_d_equal_r0():
    def light(r, air):
        return r * annular_transfer(r, diameter=1.0) * air

    with_air = quad(lambda r: light(r, long_exposure_transfer(r, 1.0)), 0, 1)[0]
    without = quad(lambda r: light(r, 1.0), 0, 1)[0]
    assert_allclose(
        with_air / without,
        reference.STREHL_AT_D_EQUAL_R0,
        rtol=0,
        atol=reference.STREHL_AT_D_EQUAL_R0_ATOL,
    )


@pytest.mark.parametrize("ratio", reference.VON_KARMAN_FWHM_RATIO)
def test_von_karman_width(ratio):
    got = width(long_exposure_transfer(SHIFT, 1.0, outer_scale=ratio))
    expected = reference.VON_KARMAN_FWHM_RATIO[ratio]
    assert_allclose(
        got / reference.LONG_EXPOSURE_FWHM,
        expected,
        rtol=0,
        atol=reference.VON_KARMAN_FWHM_RATIO_ATOL,
    )
    formula = fwhm_von_karman_tokovinin(0.2, wavelength=1e-6, outer_scale=0.2 * ratio)
    assert_allclose(
        formula / fwhm_kolmogorov(0.2, wavelength=1e-6), expected, rtol=reference.TOKOVININ_RTOL
    )


def test_tokovinin_only_where_it_holds():
    assert fwhm_von_karman_tokovinin(0.2, wavelength=1e-6, outer_scale=np.inf) == fwhm_kolmogorov(
        0.2, wavelength=1e-6
    )
    assert np.isnan(fwhm_von_karman_tokovinin(1.0, wavelength=1e-6, outer_scale=19.0))


def test_seeing_gives_r0_and_back():
    # 1 arcsec at 500 nm by hand: 0.9758634 * 5e-7 / 4.84814e-6.
    assert_allclose(fried_parameter(ARCSEC, wavelength=500e-9), 0.1006431, rtol=1e-6)
    r0 = fried_parameter(0.7 * ARCSEC, wavelength=2.2e-6, airmass=1.7)
    assert_allclose(seeing_from_fried(r0, wavelength=2.2e-6, airmass=1.7), 0.7 * ARCSEC, rtol=1e-14)


def test_seeing_with_wavelength_and_airmass():
    def delivered(wavelength, airmass):
        r0 = fried_parameter(ARCSEC, wavelength=wavelength, airmass=airmass)
        return fwhm_kolmogorov(r0, wavelength=wavelength)

    assert_allclose(delivered(500e-9, 1.0), ARCSEC, rtol=1e-12)
    assert_allclose(delivered(1e-6, 1.0), ARCSEC * 2**reference.SEEING_WAVELENGTH_POWER, rtol=1e-12)
    assert_allclose(delivered(500e-9, 2.0), ARCSEC * 2**reference.SEEING_AIRMASS_POWER, rtol=1e-12)


def resolution(size, field):
    """Fried's resolution of an aperture of ``size`` r0, over that of an infinite one."""

    def integrand(r):
        air = (
            long_exposure_transfer(r, 1.0)
            if field is None
            else tilt_removed_transfer(r, 1.0, diameter=size, field=field)
        )
        return r * annular_transfer(r, diameter=size) * air

    infinite = quad(lambda r: r * long_exposure_transfer(r, 1.0), 0, 6)[0]
    return quad(integrand, 0, size)[0] / infinite


@pytest.mark.parametrize(
    ("field", "expected"),
    [("near", reference.TILT_REMOVED_NEAR), ("far", reference.TILT_REMOVED_FAR)],
)
def test_greatest_resolution_without_tilt(field, expected):
    best = minimize_scalar(lambda d: -resolution(d, field), bounds=(1, 12), method="bounded")
    for got, value, tolerance in zip((-best.fun, best.x), expected, reference.TILT_REMOVED_ATOL):
        assert_allclose(got, value, rtol=0, atol=tolerance)


def test_greatest_gain_over_the_same_aperture():
    def gain(d):
        return -resolution(d, "near") / resolution(d, None)

    best = minimize_scalar(gain, bounds=(1, 12), method="bounded")
    tolerances = reference.TILT_REMOVED_NEAR_SAME_APERTURE_ATOL
    expected = reference.TILT_REMOVED_NEAR_SAME_APERTURE
    for got, value, tolerance in zip((-best.fun, best.x), expected, tolerances):
        assert_allclose(got, value, rtol=0, atol=tolerance)


def test_tilt_removed_is_frieds_formula_without_an_outer_scale():
    r = np.linspace(0.0, 2.0, 41)
    for field, share in (("near", 1.0), ("far", 0.5)):
        exponent = 0.5 * reference.KOLMOGOROV_FACTOR * (r / 0.3) ** (5 / 3)
        exponent *= 1 - share * (r / 2.0) ** (1 / 3)
        # The factor is quoted with seven digits, the exponent reaches 80.
        assert_allclose(
            tilt_removed_transfer(r, 0.3, diameter=2.0, field=field),
            np.exp(-exponent),
            rtol=1e-5,
        )


@pytest.mark.parametrize("outer_scale", [3.0, 25.0, np.inf])
@pytest.mark.parametrize("field", ["near", "far"])
def test_tilt_removed_lies_between_the_long_exposure_and_no_air(field, outer_scale):
    r = np.linspace(0.0, 6.0, 301)
    got = tilt_removed_transfer(r, 0.3, diameter=2.0, field=field, outer_scale=outer_scale)
    assert got[0] == 1.0
    assert np.all(got <= 1.0)
    assert np.all(got >= long_exposure_transfer(r, 0.3, outer_scale=outer_scale))


def test_tilt_removed_gains_less_with_an_outer_scale():
    def gain(outer_scale):
        removed = tilt_removed_transfer(0.3, 0.3, diameter=2.0, outer_scale=outer_scale)
        return removed / long_exposure_transfer(0.3, 0.3, outer_scale=outer_scale)

    assert gain(5.0) < gain(50.0) < gain(np.inf)
    assert_allclose(gain(1e15), gain(np.inf), rtol=1e-4)


@pytest.mark.parametrize(
    ("call", "name"),
    [
        (lambda: fried_parameter(0.0, wavelength=5e-7), "seeing"),
        (lambda: fried_parameter(np.nan, wavelength=5e-7), "seeing"),
        (lambda: fried_parameter(1e-6, wavelength=-1.0), "wavelength"),
        (lambda: fried_parameter(1e-6, wavelength=5e-7, airmass=np.inf), "airmass"),
        (lambda: seeing_from_fried(0.0, wavelength=5e-7), "r0"),
        (lambda: kolmogorov_structure(0.1, 0.0), "r0"),
        (lambda: von_karman_structure(0.1, 0.1, 0.0), "outer_scale"),
        (lambda: von_karman_structure(0.1, 0.1, np.nan), "outer_scale"),
        (lambda: von_karman_structure(0.1, -0.1, np.inf), "r0"),
        (lambda: long_exposure_transfer(0.1, np.nan), "r0"),
        (lambda: tilt_removed_transfer(0.1, 0.1, diameter=0.0), "diameter"),
        (lambda: tilt_removed_transfer(0.1, 0.1, diameter=1.0, field="middle"), "field"),
        (lambda: fwhm_kolmogorov(0.0, wavelength=5e-7), "r0"),
        (
            lambda: fwhm_von_karman_tokovinin(0.1, wavelength=5e-7, outer_scale=-1.0),
            "outer_scale",
        ),
    ],
)
def test_nonsense_is_refused(call, name):
    with pytest.raises(ValueError, match=name):
        call()
