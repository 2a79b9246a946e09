"""Quadratures over a band, against a brute sum of two hundred monochromatic images."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import j1

from simimg.light.bands import custom_band, standard_band, tabulated_band
from simimg.light.colours import MOST_MEMBERS, blackbody_weights, colour_members
from simimg.light.curves import efficiency_curve
from simimg.light.nodes import lagrange, node_count, node_weights, photon_nodes
from simimg.light.spectra import FLAT, Blackbody, PowerLaw

RED_BLIND = efficiency_curve([300e-9, 500e-9, 700e-9, 1100e-9], [0.2, 0.9, 0.6, 0.0])
JAGGED = tabulated_band(
    np.array([500, 520, 530, 535, 560, 600, 605]) * 1e-9, [0, 1, 0.2, 1, 0.9, 0.3, 0]
)


def airy(angle, wavelength, obstruction=0.0):
    """Monochromatic PSF at an angle in units of 550 nm over the diameter, unit total light."""
    x = np.pi * angle * 550e-9 / wavelength
    amplitude = 2 * j1(x) / x
    if obstruction:
        amplitude -= obstruction**2 * 2 * j1(obstruction * x) / (obstruction * x)
    return amplitude**2 * (550e-9 / wavelength) ** 2


def brute(band, spectrum, response, angle, obstruction=0.0):
    """Sum over 200 equal steps of wavelength, weighted by the photons in their middle."""
    lower, upper = band.support
    x = lower + (upper - lower) * (np.arange(200) + 0.5) / 200
    photons = spectrum.f_nu(x) / x * band.transmission(x)
    if response is not None:
        photons = photons * response(x)
    images = np.array([airy(angle, one, obstruction) for one in x])
    return photons @ images / photons.sum()


ANGLE = np.linspace(1e-6, 40.0, 1600)


@pytest.mark.parametrize("obstruction", [0.0, 0.3])
@pytest.mark.parametrize("name", ["V", "R", "K"])
@pytest.mark.parametrize("temperature", [2800.0, 20000.0])
def test_image_against_a_brute_sum(name, temperature, obstruction):
    band, star = standard_band(name), Blackbody(temperature)
    scale = band.centre / 550e-9
    expected = brute(band, star, None, ANGLE * scale, obstruction)
    for tolerance in (1e-4, 1e-5):
        count = node_count(band, tolerance, obstruction=obstruction)
        wavelength, weight = photon_nodes(band, count, spectrum=star)
        images = np.array([airy(ANGLE * scale, one, obstruction) for one in wavelength])
        # The brute sum's own steps leave about 1e-6.
        error = np.abs(weight @ images - expected).max() / expected[0]
        assert error <= tolerance + 2e-6


def test_two_few_nodes_show():
    band = standard_band("R")
    expected = brute(band, FLAT, None, ANGLE)
    wavelength, weight = photon_nodes(band, 1)
    images = np.array([airy(ANGLE, one) for one in wavelength])
    assert np.abs(weight @ images - expected).max() / expected[0] > 5e-3


def test_hot_and_cool_stars_differ_as_they_should():
    """The difference of two stars' images, against the brute sums'."""
    band = standard_band("R")
    count = node_count(band, 1e-5)
    wavelength, _ = photon_nodes(band, count, response=RED_BLIND)
    images = np.array([airy(ANGLE, one) for one in wavelength])
    difference, expected = np.zeros(ANGLE.size), np.zeros(ANGLE.size)
    for sign, temperature in ((1, 25000.0), (-1, 3000.0)):
        star = Blackbody(temperature)
        weight = node_weights(wavelength, band, spectrum=star, response=RED_BLIND)
        difference += sign * (weight @ images)
        expected += sign * brute(band, star, RED_BLIND, ANGLE)
    assert np.abs(expected).max() > 0.01
    assert_allclose(difference, expected, rtol=0, atol=2e-5)


def test_gauss_is_exact_to_twice_the_degree():
    band, star = JAGGED, Blackbody(5000.0)
    wavelength, weight = photon_nodes(band, 4, spectrum=star, response=RED_BLIND)
    x = np.linspace(*band.support, 400001)
    photons = star.f_nu(x) / x * band.transmission(x) * RED_BLIND(x)
    for power in range(8):
        t, s = (x - 550e-9) / 50e-9, (wavelength - 550e-9) / 50e-9
        expected = np.trapezoid(photons * t**power, x) / np.trapezoid(photons, x)
        assert_allclose(weight @ s**power, expected, rtol=0, atol=1e-8)
    assert np.all(weight > 0.0)
    assert_allclose(weight.sum(), 1.0, rtol=1e-14)
    assert np.all((wavelength > band.support[0]) & (wavelength < band.support[1]))


def test_a_narrow_flat_box_gives_gauss_and_legendre():
    band = custom_band(600e-9, 1e-12)
    wavelength, weight = photon_nodes(band, 5)
    node, expected = np.polynomial.legendre.leggauss(5)
    # The photons go as 1/lambda over a millionth of the wavelength.
    assert_allclose((wavelength - 600e-9) / 0.5e-12, node, rtol=0, atol=2e-6)
    assert_allclose(weight, expected / 2, rtol=0, atol=1e-6)


def test_shared_nodes_for_other_spectra():
    band = standard_band("B")
    wavelength, own = photon_nodes(band, 6)
    assert_allclose(node_weights(wavelength, band), own, rtol=0, atol=1e-13)
    star = PowerLaw(-4.0)
    weight = node_weights(wavelength, band, spectrum=star)
    x = np.linspace(band.lower, band.upper, 200001)
    photons = star.f_nu(x) / x
    # Degree 5 by construction.
    t, s = x * 1e6, wavelength * 1e6
    expected = np.trapezoid(photons * t**5, x) / np.trapezoid(photons, x)
    assert_allclose(weight @ s**5, expected, rtol=1e-9)


def test_lagrange_is_one_at_its_node():
    nodes = np.array([0.1, 0.4, 0.8])
    assert_allclose(lagrange(nodes, nodes), np.eye(3), atol=0)
    x = np.linspace(0, 1, 11)
    assert_allclose(lagrange(x, nodes) @ nodes**2, x**2, atol=1e-14)
    assert_allclose(lagrange(x, nodes[:1]), 1.0)


def test_more_nodes_where_more_is_asked():
    r = standard_band("R")
    counts = [node_count(r, tolerance) for tolerance in (1e-3, 1e-4, 1e-5, 1e-6)]
    assert counts == sorted(counts)
    assert node_count(custom_band(656e-9, 1e-9), 1e-5) == 3
    assert node_count(r, 1e-5, obstruction=0.4) >= counts[2]
    # Air that leaves no rings, and dispersion that needs its own.
    assert node_count(r, 1e-5, contrast=0.0) == 3
    assert node_count(r, 1e-5, contrast=0.0, phase=30.0) > 10


def test_many_temperatures_at_once():
    band = standard_band("V")
    wavelength, _ = photon_nodes(band, 6)
    stars = np.array([2800.0, 5800.0, 30000.0])
    got = blackbody_weights(wavelength, band, stars, response=RED_BLIND)
    for row, temperature in zip(got, stars):
        expected = node_weights(
            wavelength, band, spectrum=Blackbody(temperature), response=RED_BLIND
        )
        assert_allclose(row, expected, rtol=0, atol=1e-13)


@pytest.mark.parametrize(("name", "members"), [("U", 4), ("V", 4), ("R", 4), ("K", 3)])
def test_few_members_hold_every_temperature(name, members):
    band = standard_band(name)
    wavelength, _ = photon_nodes(band, 8)
    made = colour_members(wavelength, band, coolest=2500.0, hottest=40000.0, tolerance=1e-4)
    assert len(made.temperatures) <= members
    assert made.error <= 1e-4
    stars = np.random.default_rng(4).uniform(2500.0, 40000.0, 300)
    stars[:2] = 2500.0, 40000.0
    exact = blackbody_weights(wavelength, band, stars)
    mixed = made.mixture(stars) @ made.weights
    assert_allclose(made.mixture(stars).sum(axis=1), 1.0, rtol=1e-12)
    miss = 0.5 * np.abs(mixed - exact).sum(axis=1)
    assert miss.max() <= 1.05 * made.error
    assert_allclose(miss, made.missed(exact), rtol=0, atol=1e-7)
    # And the images themselves, in which much of the miss cancels.
    images = np.array([airy(ANGLE * band.centre / 550e-9, one) for one in wavelength])
    difference = np.abs((mixed - exact) @ images).max()
    assert difference <= made.error * images.max()


def test_members_for_other_spectra():
    band = standard_band("V")
    wavelength, flat = photon_nodes(band, 8)
    made = colour_members(wavelength, band, coolest=2500.0, hottest=40000.0, tolerance=1e-3)
    assert_allclose(made.mixture_of(flat).sum(), 1.0)
    assert made.missed(flat)[0] < made.error
    line = np.zeros(8)
    line[3] = 1.0
    # An emission line is no mixture of stars, and the record says so.
    assert made.missed(line)[0] > 0.3


def test_a_single_member():
    band = standard_band("V")
    wavelength, _ = photon_nodes(band, 5)
    made = colour_members(wavelength, band, coolest=5800.0, hottest=5800.0, tolerance=1e-6)
    assert made.weights.shape == (1, 5)
    assert_allclose(made.mixture([5800.0]), [[1.0]])
    one, _ = photon_nodes(band, 1)
    made = colour_members(one, band, coolest=3000.0, hottest=9000.0, tolerance=1e-6)
    assert_allclose(made.mixture([3000.0, 5000.0, 9000.0]), 1.0)
    wide = colour_members(wavelength, band, coolest=100.0, hottest=1e6, tolerance=1e-15)
    assert len(wide.temperatures) <= MOST_MEMBERS
    assert wide.error > 1e-15


V = standard_band("V")


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: photon_nodes(V, 0), "1 to 64"),
        (lambda: photon_nodes(V, 65), "1 to 64"),
        (lambda: photon_nodes(V, 3, response=0.0), "no light"),
        (lambda: node_count(V, 0.0), "tolerance"),
        (lambda: node_count(V, 1e-4, obstruction=1.0), "obstruction"),
        (lambda: node_count(V, 1e-4, contrast=1.5), "contrast"),
        (lambda: node_count(V, 1e-4, phase=np.inf), "phase"),
        (lambda: blackbody_weights(np.array([5e-7]), V, [0.0]), "temperatures"),
        (lambda: blackbody_weights(np.array([5e-7]), V, [1.0]), "no light"),
        (
            lambda: colour_members(np.array([5e-7]), V, coolest=9e3, hottest=3e3, tolerance=1e-3),
            "rise",
        ),
        (
            lambda: colour_members(np.array([5e-7]), V, coolest=3e3, hottest=9e3, tolerance=0.0),
            "tolerance",
        ),
        (
            lambda: colour_members(
                np.array([5.4e-7, 5.6e-7]), V, coolest=3e3, hottest=9e3, tolerance=1e-2
            ).mixture([2000.0]),
            "3000 to 9000 K",
        ),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
