"""Rayleigh's and Sparrow's criteria against published and computed values."""

from math import inf, isnan, log, pi, sqrt

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import optimize, special

from simimg.imaging.profile import psf_cut
from simimg.resolving.criteria import (
    SADDLE,
    first_dark_ring,
    first_minimum,
    fwhm,
    rayleigh_saddle,
    saddle_ratio,
    sample_profile,
    sparrow,
    sparrow_curve,
    sparrow_equal,
)
from tests.imaging.test_profile import airy, annulus, kolmogorov, two_lobes
from tests.reference import diffraction, resolving, turbulence


def gaussian(t):
    """FWHM 1."""
    return np.exp(-4.0 * log(2.0) * np.asarray(t) ** 2)


def lorentzian(t):
    """FWHM 1; wings that hide faint companions far out."""
    return 1.0 / (1.0 + 4.0 * np.asarray(t) ** 2)


def obstructed(obstruction):
    return lambda t: airy(t, obstruction)


def brute(profile, width, separation, ratio):
    """Whether the companion shows, by looking at the sum at 4001 places about it."""
    tau = np.linspace(-0.5 * width, 0.5 * width, 4001)
    own, other = ratio * profile(tau), profile(separation + tau)
    total = own + other
    top = np.flatnonzero((total[1:-1] > total[:-2]) & (total[1:-1] >= total[2:])) + 1
    return bool(np.any(own[top] > other[top]))


# Rayleigh


def test_dark_ring_of_the_clear_aperture():
    assert_allclose(first_dark_ring(), diffraction.DARK_RINGS[0], atol=diffraction.DARK_RINGS_ATOL)


@pytest.mark.parametrize("obstruction", diffraction.OBSTRUCTED)
def test_obstructed_apertures(obstruction):
    ring, _, width, closest = diffraction.OBSTRUCTED[obstruction]
    tolerance = diffraction.OBSTRUCTED_ATOL
    profile = obstructed(obstruction)
    assert_allclose(first_dark_ring(obstruction), ring, atol=tolerance)
    assert_allclose(first_minimum(profile), ring, atol=tolerance)
    assert_allclose(fwhm(profile), width, atol=tolerance)
    assert_allclose(sparrow_equal(profile), closest, atol=tolerance)


def test_a_thin_ring_has_the_zero_of_j0():
    # J0(x) = 0 at 2.404826.
    assert_allclose(first_dark_ring(1.0 - 1e-6), 2.404826 / pi, rtol=1e-5)


@pytest.mark.parametrize("obstruction", [-0.1, 1.0, float("nan")])
def test_obstructions_out_of_range(obstruction):
    with pytest.raises(ValueError, match="obstruction"):
        first_dark_ring(obstruction)


def test_rayleighs_saddle():
    assert_allclose(SADDLE, diffraction.RAYLEIGH_SADDLE, atol=diffraction.RAYLEIGH_SADDLE_ATOL)
    # As found from the profile itself.
    assert_allclose(saddle_ratio(airy, first_dark_ring()), SADDLE, rtol=1e-7)
    assert_allclose(rayleigh_saddle(airy), diffraction.DARK_RINGS[0], atol=1e-5)


@pytest.mark.parametrize("obstruction", diffraction.SADDLE_SEPARATION_OBSTRUCTED)
def test_saddle_lies_beyond_the_dark_ring_of_an_obstructed_aperture(obstruction):
    known = diffraction.SADDLE_SEPARATION_OBSTRUCTED[obstruction]
    found = rayleigh_saddle(obstructed(obstruction))
    assert_allclose(found, known, atol=diffraction.SADDLE_SEPARATION_OBSTRUCTED_ATOL)
    assert found > first_dark_ring(obstruction) + 0.04


def test_gaussian_saddle():
    """The table's 1.1900 takes the heights at the stars' places for the pair's peaks."""

    def at_places(s):
        return 2.0 * gaussian(0.5 * s) / (1.0 + gaussian(s)) - SADDLE

    places = optimize.brentq(at_places, 1.0, 1.5)
    assert_allclose(places, resolving.GAUSSIAN_SADDLE_AT_PLACES, atol=1e-5)
    assert_allclose(places, diffraction.GAUSSIAN_SADDLE_FWHM, atol=diffraction.GAUSSIAN_ATOL)

    def at_maxima(s):
        sum_of_two = optimize.minimize_scalar(
            lambda t: -gaussian(t) - gaussian(t - s), bounds=(-0.1, 0.3), method="bounded"
        )
        return 2.0 * gaussian(0.5 * s) / -sum_of_two.fun - SADDLE

    assert_allclose(rayleigh_saddle(gaussian), optimize.brentq(at_maxima, 1.0, 1.5), rtol=1e-6)
    assert_allclose(
        rayleigh_saddle(gaussian),
        resolving.GAUSSIAN_SADDLE_AT_MAXIMA,
        atol=resolving.GAUSSIAN_SADDLE_ATOL,
    )


def test_saddle_ratio_falls_from_one():
    apart = np.linspace(0.5, 3.0, 40)
    ratios = np.array([saddle_ratio(gaussian, s) for s in apart])
    assert np.all(np.diff(ratios) <= 0.0)
    assert ratios[0] == 1.0
    assert ratios[-1] < 0.01
    assert saddle_ratio(gaussian, 0.84) == 1.0
    assert saddle_ratio(gaussian, 0.87) < 1.0


def test_saddle_of_an_unequal_pair_is_measured_on_the_fainter():
    s = 1.6
    t = np.linspace(0.0, s, 20001)
    total = gaussian(t) + 0.4 * gaussian(t - s)
    known = total[2000:18000].min() / total[t > 1.2].max()
    for sign in (1.0, -1.0):
        found = saddle_ratio(gaussian, s, magnitude_difference=sign * -2.5 * np.log10(0.4))
        assert_allclose(found, known, rtol=1e-6)
    with pytest.raises(ValueError, match="separation"):
        saddle_ratio(gaussian, 0.0)


# Sparrow


def test_sparrow_of_the_clear_aperture():
    assert_allclose(
        sparrow_equal(airy), diffraction.SPARROW_EQUAL, atol=diffraction.SPARROW_EQUAL_ATOL
    )
    for difference, known in diffraction.SPARROW_UNEQUAL.items():
        assert_allclose(sparrow(airy, difference), known, atol=diffraction.SPARROW_UNEQUAL_ATOL)


def test_sparrow_of_a_gaussian_is_two_sigma():
    sigma = 1.0 / sqrt(8.0 * log(2.0))
    assert_allclose(sparrow_equal(gaussian), 2.0 * sigma, rtol=1e-6)
    assert_allclose(
        sparrow_equal(gaussian), diffraction.GAUSSIAN_SPARROW_FWHM, atol=diffraction.GAUSSIAN_ATOL
    )


def test_sparrow_through_turbulence():
    profile = sample_profile(psf_cut(kolmogorov(), 0.0))
    width = fwhm(profile)
    assert_allclose(
        width, turbulence.LONG_EXPOSURE_FWHM, atol=2 * turbulence.LONG_EXPOSURE_FWHM_ATOL
    )
    assert_allclose(
        sparrow_equal(profile) / width,
        turbulence.KOLMOGOROV_SPARROW_FWHM,
        atol=turbulence.KOLMOGOROV_ATOL,
    )
    for difference, known in resolving.KOLMOGOROV_SPARROW_UNEQUAL.items():
        found = sparrow(profile, difference) / width
        assert_allclose(found, known, rtol=resolving.KOLMOGOROV_SPARROW_UNEQUAL_RTOL)
        printed = turbulence.KOLMOGOROV_SPARROW_UNEQUAL_FWHM[difference]
        assert_allclose(found, printed, atol=resolving.COARSE_SCAN_ATOL)


@pytest.mark.parametrize("unit", [1e-11, 1e-6, 3e4])
def test_limits_scale_with_the_profile(unit):
    def scaled(t):
        return 7.3 * airy(np.asarray(t) / unit, 0.25)

    plain = obstructed(0.25)
    for criterion in (fwhm, rayleigh_saddle, sparrow_equal, first_minimum):
        assert_allclose(criterion(scaled), unit * criterion(plain), rtol=1e-6)
    assert_allclose(sparrow(scaled, 1.3), unit * sparrow(plain, 1.3), rtol=1e-6)


@pytest.mark.parametrize("profile", [airy, obstructed(0.3), obstructed(0.5), gaussian, lorentzian])
@pytest.mark.parametrize("difference", [0.3, 1.7, 2.5, 4.0, 6.5])
def test_the_scan_keeps_its_rule(profile, difference):
    """Lost just below the limit, shown everywhere beyond it."""
    ratio = 10.0 ** (-0.4 * difference)
    width, limit = fwhm(profile), sparrow(profile, difference)
    assert not brute(profile, width, limit - 2e-3 * width, ratio)
    for separation in limit + width * np.linspace(2e-3, 3.0, 150):
        assert brute(profile, width, separation, ratio)


def test_a_ring_is_no_companion():
    """A companion far fainter than the first ring, standing on it, is not counted as seen."""
    ring = diffraction.BRIGHT_RINGS[0]
    assert not brute(airy, fwhm(airy), ring, 10.0 ** (-0.4 * 6.0))
    assert sparrow(airy, 6.0) > ring


def test_rings_make_the_limit_jump_both_ways():
    profile = obstructed(0.3)
    limits = [sparrow(profile, difference) for difference in (1.5, 2.5, 3.0)]
    assert limits[0] > limits[1]
    assert limits[2] > 2.0 * limits[1]


def test_sense_of_an_asymmetric_profile():
    transfer = two_lobes((0.9, 0.0), 0.35)
    ahead = sample_profile(psf_cut(transfer, 0.0))
    behind = sample_profile(psf_cut(transfer, pi))
    assert not ahead.symmetric
    # A second star on the side of the ghost is harder to see than one on the other side.
    assert sparrow(ahead, 1.5) > 1.1 * sparrow(behind, 1.5)
    # Turning the line about is the same as swapping the stars.
    assert_allclose(sparrow(ahead, -1.5), sparrow(behind, 1.5), rtol=1e-5)
    assert_allclose(sparrow_equal(ahead), sparrow_equal(behind), rtol=1e-5)
    assert_allclose(ahead.mirrored().value(0.4), ahead.value(-0.4), rtol=1e-12)
    assert_allclose(ahead.mirrored().slope(0.4), -ahead.slope(-0.4), rtol=1e-12)


def test_peak_aside_of_the_origin_changes_nothing():
    def moved(t):
        return gaussian(np.asarray(t) - 0.2)

    assert_allclose(sparrow(moved, 2.0), sparrow(gaussian, 2.0), rtol=1e-5)
    assert_allclose(rayleigh_saddle(moved), rayleigh_saddle(gaussian), rtol=1e-6)


@pytest.mark.parametrize("angle", [0.0, 0.6, 0.25 * pi])
def test_a_pixel_far_wider_than_the_optics(angle):
    """Two squares come apart where they no longer overlap, whatever ripples their tops have."""
    side = 6.0
    profile = sample_profile(psf_cut(annulus(0.3).with_pixel(side), angle))
    width = side / max(abs(np.cos(angle)), abs(np.sin(angle)))
    # The optics round the square's corners off.
    assert_allclose(fwhm(profile), width, rtol=0.03 if angle < 0.7 else 0.1)
    assert_allclose(sparrow_equal(profile), fwhm(profile), rtol=0.02)
    assert profile.symmetric
    assert saddle_ratio(profile, 0.9 * fwhm(profile)) == 1.0
    assert saddle_ratio(profile, 1.2 * width) < SADDLE


def test_curve_agrees_with_single_limits():
    profile = sample_profile(psf_cut(two_lobes((0.9, 0.0), 0.2), 0.0))
    curve = sparrow_curve(profile, largest=4.0, step=0.25)
    assert curve.magnitude_differences.size == 33
    for difference in (-3.0, -0.5, 0.0, 1.0, 4.0):
        assert_allclose(curve(difference), sparrow(profile, difference), rtol=1e-4)
    assert curve(9.0) == curve(4.0)
    with pytest.raises(ValueError, match="read-only"):
        curve.separations[0] = 1.0


@pytest.mark.parametrize("profile", [gaussian, airy], ids=["gaussian", "airy"])
def test_curve_holds_between_its_steps_where_the_limit_is_steep(profile):
    """Nearly equal pairs: the limit rises with the power of 2/3 of the difference."""
    curve = sparrow_curve(profile, largest=2.0, step=0.1)
    for difference in (0.003, 0.02, 0.05, 0.15, 0.95):
        exact = sparrow(profile, difference)
        # The next power is left out; a straight line between the steps is off by ten times as much.
        assert_allclose(curve(difference), exact, rtol=1e-3)
        if difference in (0.02, 0.05):
            straight = np.interp(difference, curve.magnitude_differences, curve.separations)
            assert straight < 0.995 * exact


def test_wings_that_hide_a_faint_companion_far_out():
    # p(s) = r at s = 0.5 sqrt(1/r - 1): the companion must at least outshine the wing there.
    ratio = 10.0 ** (-0.4 * 8.0)
    found = sparrow(lorentzian, 8.0)
    assert found > 0.5 * sqrt(1.0 / ratio - 1.0) * 0.95
    assert found < 0.6 * sqrt(1.0 / ratio)


def test_a_companion_that_never_shows():
    def halo(t):
        return gaussian(t) + 0.05 * lorentzian(np.asarray(t) / 400.0)

    assert sparrow(halo, 8.0) == inf


def test_first_minimum_of_a_profile_without_rings():
    assert isnan(first_minimum(gaussian))
    assert_allclose(first_minimum(airy), diffraction.DARK_RINGS[0], atol=1e-5)


@pytest.mark.parametrize("difference", [12.5, -13.0, float("nan")])
def test_magnitude_differences_out_of_range(difference):
    with pytest.raises(ValueError, match="magnitude difference"):
        sparrow(gaussian, difference)


def test_tables_that_cannot_be_made():
    with pytest.raises(ValueError, match="cannot be made"):
        sparrow_curve(gaussian, largest=13.0)
    with pytest.raises(ValueError, match="cannot be made"):
        sparrow_curve(gaussian, step=0.0)


@pytest.mark.parametrize(
    ("profile", "word"),
    [
        (lambda t: 0.0 * t, "positive"),
        (lambda t: np.nan * t, "positive"),
        (lambda t: 1.0 + 0.0 * t, "below half"),
        (lambda t: np.where(t < 0, 1.0, gaussian(t)), "both sides"),
    ],
)
def test_profiles_that_are_none(profile, word):
    with pytest.raises(ValueError, match=word):
        fwhm(profile)


def test_airy_here_is_airy():
    """The profile that the other tests lean on, against the closed form's own zeros."""
    assert_allclose(airy(special.jn_zeros(1, 3) / pi), 0.0, atol=1e-15)
