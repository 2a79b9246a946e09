import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.light.bands import (
    AB_BANDS,
    AB_ZERO_FLUX,
    STANDARD_BANDS,
    custom_band,
    photon_zero_point,
    standard_band,
    tabulated_band,
)
from simimg.light.curves import Curve, efficiency_curve
from simimg.light.photons import band_colour, effective_wavelength, mean_flux, photon_rate
from simimg.light.spectra import FLAT, Blackbody, PowerLaw, TabulatedSpectrum
from tests.reference import light as reference


def filters():
    return pytest.importorskip("speclite.filters")


def tabulated(name):
    passband = filters().load_filter(name)
    return tabulated_band(passband.wavelength * 1e-10, passband.response / passband.response.max())


@pytest.mark.parametrize("name", AB_BANDS)
def test_ab_bands_are_the_boxes_of_their_tables(name):
    box = tabulated(f"sdss2010noatm-{name}")
    band = standard_band(name)
    # Tenths of a nanometre are kept.
    assert_allclose(band.centre, box.centre, rtol=0, atol=0.06e-9)
    assert_allclose(band.width, box.width, rtol=0, atol=0.06e-9)
    assert dict(band.zero_flux_jy) == {"AB": AB_ZERO_FLUX}
    assert_allclose(
        band.centre,
        reference.FUKUGITA_EFFECTIVE_NM[name] * 1e-9,
        rtol=reference.FUKUGITA_RTOL,
    )


@pytest.mark.parametrize("name", AB_BANDS)
def test_photon_rate_through_the_ab_bands(name):
    passband = filters().load_filter(f"sdss2010noatm-{name}")
    rate = passband.ab_zeropoint.to_value("1 / (m2 s)") / passband.response.max()
    # The curve itself: their integral is a trapezium rule over the same points.
    assert_allclose(photon_rate(tabulated(f"sdss2010noatm-{name}"), "AB"), rate, rtol=1e-3)
    assert_allclose(photon_rate(standard_band(name), "AB"), rate, rtol=2.5e-3)


def test_photons_by_hand():
    """A band of a tenth of its wavelength: 3631 Jy, 1.51e7 photons a jansky."""
    band = custom_band(500e-9, 50e-9)
    by_hand = 3631 * reference.PHOTONS_PER_JANSKY * 0.1
    assert_allclose(photon_rate(band, "AB"), by_hand, rtol=reference.PHOTONS_PER_JANSKY_RTOL + 1e-3)


@pytest.mark.parametrize("name", STANDARD_BANDS)
def test_a_box_and_a_number_are_the_plain_zero_point(name):
    band = standard_band(name)
    for spectrum in (FLAT, Blackbody(3000.0), PowerLaw(-3.0)):
        # The magnitude is one of photons: through a grey detector the spectrum does not matter.
        got = photon_rate(band, "Vega", spectrum=spectrum, response=0.8)
        assert_allclose(got, 0.8 * photon_zero_point(band, "Vega"), rtol=1e-12)


def test_a_falling_efficiency_counts_a_red_star_less():
    band = standard_band("I")
    detector = efficiency_curve([600e-9, 800e-9, 1000e-9], [0.9, 0.7, 0.1])
    rates = [
        photon_rate(band, "Vega", spectrum=Blackbody(t), response=detector)
        for t in (2500.0, 6000.0, 20000.0)
    ]
    assert rates[0] < rates[1] < rates[2]
    # By hand: a plain sum over 20000 wavelengths.
    x = np.linspace(band.lower, band.upper, 20001)
    x = 0.5 * (x[1:] + x[:-1])
    photons = Blackbody(2500.0).f_nu(x) / x
    mean = np.sum(photons * np.interp(x, [600e-9, 800e-9, 1000e-9], [0.9, 0.7, 0.1]))
    expected = photon_zero_point(band, "Vega") * mean / photons.sum()
    assert_allclose(rates[0], expected, rtol=1e-7)


@pytest.mark.parametrize("temperature", [3500.0, 10000.0])
def test_colours_are_those_of_another_package(temperature):
    x = np.arange(2900.0, 12500.0, 2.0)
    star = Blackbody(temperature)
    flux = star.f_nu(x * 1e-10) / x**2
    names = [f"sdss2010noatm-{name}" for name in "ugriz"]
    theirs = filters().load_filters(*names).get_ab_magnitudes(flux * 1e20, x)[0]
    for first, second in zip(range(4), range(1, 5)):
        got = band_colour(
            star,
            tabulated(names[first]),
            tabulated(names[second]),
            from_system="AB",
            to_system="AB",
        )
        # A trapezium rule over 0.2 nm.
        assert_allclose(got, theirs[second] - theirs[first], rtol=0, atol=1e-3)


@pytest.mark.parametrize(
    ("temperature", "atol"), [(3500.0, 0.03), (5800.0, 0.015), (20000.0, 0.015)]
)
def test_boxes_stand_for_the_tables_in_colours(temperature, atol):
    star = Blackbody(temperature)
    for pair in ("BV", "VR", "RI", "UV"):
        box = band_colour(star, *(standard_band(n) for n in pair), from_system="AB", to_system="AB")
        curve = band_colour(
            star, *(tabulated(f"bessell-{n}") for n in pair), from_system="AB", to_system="AB"
        )
        assert_allclose(box, curve, rtol=0, atol=atol)


def test_systems_of_a_colour():
    """A source flat in f_nu has one AB magnitude; its Vega ones differ by the zero fluxes."""
    b, v = standard_band("B"), standard_band("V")
    assert_allclose(band_colour(FLAT, b, v, from_system="AB", to_system="AB"), 0.0, atol=1e-14)
    got = band_colour(FLAT, b, v, from_system="Vega", to_system="Vega")
    assert_allclose(got, 2.5 * np.log10(3636 / 4063), rtol=1e-12)
    got = band_colour(FLAT, v, v, from_system="Vega", to_system="AB")
    assert_allclose(got, 2.5 * np.log10(3631 / 3636), rtol=1e-12)
    there = band_colour(Blackbody(4000.0), b, v, from_system="Vega", to_system="AB")
    back = band_colour(Blackbody(4000.0), v, b, from_system="AB", to_system="Vega")
    assert_allclose(there, -back, rtol=1e-12)


def test_a_table_of_any_shape():
    """Two humps: the mean is the integral over both."""
    x = np.array([500.0, 510.0, 520.0, 600.0, 610.0, 620.0]) * 1e-9
    band = tabulated_band(x, [0.0, 1.0, 0.0, 0.0, 0.5, 0.0])
    assert_allclose(band.support, (500e-9, 620e-9), rtol=1e-15)
    fine = np.linspace(500e-9, 620e-9, 240001)
    weight = np.interp(fine, x, [0.0, 1.0, 0.0, 0.0, 0.5, 0.0]) / fine
    expected = np.trapezoid(weight * fine**3, fine) / np.trapezoid(weight, fine)
    assert_allclose(mean_flux(PowerLaw(-3.0), band), expected * 1e18, rtol=1e-8)
    assert_allclose(band.transmission([505e-9, 560e-9, 700e-9]), [0.5, 0.0, 0.0], atol=1e-12)


def test_effective_wavelength():
    band = standard_band("V")
    assert_allclose(effective_wavelength(band), band.width / np.log(band.upper / band.lower))
    assert effective_wavelength(band, spectrum=Blackbody(3000.0)) > 552e-9
    assert effective_wavelength(band, spectrum=Blackbody(30000.0)) < 548e-9


def test_box_ends():
    band = custom_band(500e-9, 100e-9)
    assert band.curve is None
    assert band.support == (band.lower, band.upper)
    assert_allclose(band.transmission([440e-9, 451e-9, 549e-9, 551e-9]), [0, 1, 1, 0])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda v: photon_rate(v, "ST"), "Vega, AB"),
        (lambda v: photon_rate(standard_band("g"), "Vega"), "band g"),  # noqa: ARG005
        (lambda v: photon_rate(v, "AB", spectrum=Blackbody(10.0)), "no light"),
        (
            lambda v: photon_rate(v, "AB", response=Curve([5e-7, 5.5e-7], [1.0, 1.0])),
            "response is known from 500.0 to 550.0 nm, but band V",
        ),
        (
            lambda v: mean_flux(TabulatedSpectrum(Curve([5.2e-7, 9e-7], [1.0, 1.0])), v),
            "spectrum is known from",
        ),
        (lambda v: effective_wavelength(v, response=0.0), "no light"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call(standard_band("V"))
