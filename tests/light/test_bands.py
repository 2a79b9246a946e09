import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.light import bands
from simimg.light.bands import (
    STANDARD_BANDS,
    Band,
    custom_band,
    photon_zero_point,
    standard_band,
    tabulated_band,
)
from tests.reference import light as reference

PLANCK = 6.62607015e-34  # J s, exact in the SI


def test_zero_fluxes():
    got = {name: band.zero_flux_jy["Vega"] for name, band in STANDARD_BANDS.items()}
    assert got == reference.ZERO_FLUXES_JY
    assert {band.zero_flux_jy["AB"] for band in STANDARD_BANDS.values()} == {
        reference.AB_ZERO_FLUX_JY
    }


@pytest.mark.parametrize("name", reference.EFFECTIVE_WAVELENGTHS_NM)
def test_wavelengths_are_those_of_the_trade(name):
    assert_allclose(
        standard_band(name).centre,
        reference.EFFECTIVE_WAVELENGTHS_NM[name] * 1e-9,
        rtol=reference.EFFECTIVE_WAVELENGTHS_RTOL,
    )


def test_bessells_example():
    centre = 550e-9
    band = Band(
        "",
        centre,
        reference.BESSELL_V_WIDTH_RATIO * centre,
        {"Vega": reference.BESSELL_V_FLUX_JY},
    )
    rate = photon_zero_point(band, "Vega") * 10 ** (-0.4 * reference.BESSELL_V_MAGNITUDE)
    assert_allclose(rate, reference.BESSELL_V_PHOTONS, rtol=reference.BESSELL_V_PHOTONS_RTOL)


def test_photons_of_a_box_by_quadrature():
    band = custom_band(600e-9, 200e-9)
    node, weight = np.polynomial.legendre.leggauss(40)
    wavelength = 600e-9 + 100e-9 * node
    energy = 3631e-26 * 299792458.0 / wavelength**2  # f_lambda, W / m2 / m
    photons = np.sum(100e-9 * weight * energy * wavelength / (PLANCK * 299792458.0))
    assert_allclose(photon_zero_point(band, "AB"), photons, rtol=1e-12)


@pytest.mark.parametrize("name", reference.SPECLITE_RTOL)
def test_photon_rate_through_the_tabulated_pass_band(name):
    """The pass-bands as another package tabulates and integrates them."""
    filters = pytest.importorskip("speclite.filters")
    passband = filters.load_filter(f"bessell-{name}")
    # Photons / s / cm2 of AB magnitude 0, carried to the Vega zero flux.
    rate = passband.ab_zeropoint.to_value("1 / (m2 s)")
    rate *= reference.ZERO_FLUXES_JY[name] / reference.AB_ZERO_FLUX_JY
    got = photon_zero_point(standard_band(name), "Vega")
    assert_allclose(got, rate, rtol=reference.SPECLITE_RTOL[name])
    # The box itself is far better than the agreement of published flux scales asks for.
    assert_allclose(got, rate, rtol=2.5e-3)


@pytest.mark.parametrize("name", reference.SPECLITE_RTOL)
def test_standard_bands_are_the_boxes_of_their_tables(name):
    filters = pytest.importorskip("speclite.filters")
    passband = filters.load_filter(f"bessell-{name}")
    box = tabulated_band(passband.wavelength * 1e-10, passband.response)
    # Tenths of a nanometre are kept.
    assert_allclose(standard_band(name).centre, box.centre, rtol=0, atol=0.1e-9)
    assert_allclose(standard_band(name).width, box.width, rtol=0, atol=0.06e-9)


def test_standard_band_by_name():
    band = standard_band("V")
    assert band.name == "V"
    assert_allclose([band.lower, band.upper], [band.centre - band.width / 2, 594.65e-9], rtol=1e-12)
    with pytest.raises(KeyError, match="U, B, V"):
        standard_band("v")


def test_custom_band_has_ab_everywhere_and_vega_between_u_and_k():
    assert set(custom_band(656.3e-9, 1e-9).zero_flux_jy) == {"AB", "Vega"}
    assert set(custom_band(10e-6, 1e-6).zero_flux_jy) == {"AB"}
    for band in STANDARD_BANDS.values():
        same = custom_band(band.centre, band.width)
        assert_allclose(same.zero_flux_jy["Vega"], band.zero_flux_jy["Vega"], rtol=1e-12)
    # Between V (3636) and R (3064).
    assert 3064 < custom_band(600e-9, 50e-9).zero_flux_jy["Vega"] < 3636


def test_a_lossy_filter_keeps_its_loss():
    wavelength = np.linspace(500e-9, 600e-9, 101)
    full = tabulated_band(wavelength, np.ones(101))
    dim = tabulated_band(wavelength, np.full(101, 0.8))
    assert_allclose(full.width, 100e-9, rtol=1e-12)
    assert_allclose(
        photon_zero_point(dim, "AB") / photon_zero_point(full, "AB"),
        0.8,
        rtol=2e-3,  # the narrower box stands for the same mean of 1/wavelength within 0.2 %
    )


def test_a_band_is_not_to_be_changed():
    with pytest.raises(TypeError):
        standard_band("V").zero_flux_jy["Vega"] = 1.0
    with pytest.raises(TypeError):
        bands.STANDARD_BANDS["W"] = standard_band("V")


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: custom_band(0.0, 1e-9), "centre"),
        (lambda: custom_band(np.nan, 1e-9), "centre"),
        (lambda: custom_band(5e-7, np.inf), "width"),
        (lambda: custom_band(5e-7, -1e-9), "width"),
        (lambda: custom_band(5e-7, 1e-6), "wavelength 0"),
        (lambda: tabulated_band([5e-7], [1.0]), "columns"),
        (lambda: tabulated_band([5e-7, 6e-7], [1.0]), "columns"),
        (lambda: tabulated_band([6e-7, 5e-7], [1.0, 1.0]), "increasing"),
        (lambda: tabulated_band([5e-7, np.nan], [1.0, 1.0]), "finite"),
        (lambda: tabulated_band([5e-7, 6e-7], [1.0, 1.5]), "between 0 and 1"),
        (lambda: tabulated_band([5e-7, 6e-7], [0.0, 0.0]), "no light"),
        (lambda: photon_zero_point(custom_band(10e-6, 1e-6), "Vega"), "AB"),
        (lambda: photon_zero_point(standard_band("V"), "ST"), "Vega, AB"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
