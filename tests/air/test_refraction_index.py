import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.air.refraction import (
    airmass_from_altitude,
    altitude_from_airmass,
    band_dispersion,
    differential_refraction,
)
from simimg.air.refractivity import (
    MMHG,
    refractivity_ciddor,
    refractivity_edlen,
    saturation_vapour_pressure,
)
from tests.reference import refraction as reference

ARCSEC = np.degrees(1.0) * 3600
MOUNTAIN = {"pressure": 74000.0, "temperature": 280.0, "relative_humidity": 0.3}


def test_ciddors_standard_air():
    got = refractivity_ciddor(500e-9, pressure=101325.0, temperature=288.15)
    assert_allclose(got, reference.CIDDOR_500NM, rtol=0, atol=reference.CIDDOR_500NM_ATOL)


@pytest.mark.parametrize(("celsius", "pressure"), reference.CIDDOR_DRY_633NM)
def test_ciddors_table(celsius, pressure):
    got = refractivity_ciddor(633e-9, pressure=pressure, temperature=celsius + 273.15)
    assert_allclose(
        got * 1e8,
        reference.CIDDOR_DRY_633NM[celsius, pressure],
        rtol=0,
        atol=reference.CIDDOR_DRY_633NM_ATOL,
    )


@pytest.mark.parametrize("nanometres", [320.0, 500.0, 800.0, 1600.0])
@pytest.mark.parametrize(
    ("celsius", "pressure", "humidity"),
    [(15.0, 101325.0, 0.0), (7.0, 80000.0, 0.5), (30.0, 9e4, 0.9)],
)
def test_the_index_of_another_package(nanometres, celsius, pressure, humidity):
    ref_index = pytest.importorskip("ref_index")
    theirs = ref_index.ciddor(wave=nanometres, t=celsius, p=pressure, rh=100 * humidity, co2=450.0)
    got = refractivity_ciddor(
        nanometres * 1e-9,
        pressure=pressure,
        temperature=celsius + 273.15,
        relative_humidity=humidity,
    )
    # Another formula for the vapour's saturation: 1e-9 at most.
    assert_allclose(got, theirs - 1.0, rtol=0, atol=2e-9)


def test_carbon_dioxide():
    """150 parts in a million change the index by 2e-8 (Ciddor 1996)."""
    air = {"pressure": 101325.0, "temperature": 288.15}
    more = refractivity_ciddor(500e-9, carbon_dioxide=600e-6, **air)
    assert_allclose(more - refractivity_ciddor(500e-9, **air), 2.2e-8, rtol=0.05)


def test_saturation():
    # Boiling water, and the triple point's 611.66 Pa.
    assert_allclose(saturation_vapour_pressure(373.15), 101325.0, rtol=2e-3)
    assert_allclose(saturation_vapour_pressure(273.16), 611.66, rtol=2e-3)


@pytest.mark.parametrize(("secant", "nanometres"), reference.FILIPPENKO)
def test_filippenkos_table(secant, nanometres):
    total, vapour = (part * MMHG for part in reference.FILIPPENKO_MMHG)
    temperature = reference.FILIPPENKO_CELSIUS + 273.15
    first, second = (
        refractivity_edlen(x, pressure=total, temperature=temperature, vapour_pressure=vapour)
        for x in (nanometres * 1e-9, 500e-9)
    )
    expected = reference.FILIPPENKO[secant, nanometres]
    tangent = np.sqrt(secant**2 - 1)
    assert_allclose(
        (first - second) * tangent * ARCSEC, expected, rtol=0, atol=1.2 * reference.FILIPPENKO_ATOL
    )
    # And by Ciddor's index, which is a per cent from Edlen's in the ultraviolet.
    saturation = saturation_vapour_pressure(temperature)
    got = differential_refraction(
        nanometres * 1e-9,
        500e-9,
        zenith_distance=np.arccos(1 / secant),
        pressure=total,
        temperature=temperature,
        relative_humidity=min(vapour / saturation, 1.0),
    )
    assert_allclose(got * ARCSEC, expected, rtol=0.01, atol=reference.FILIPPENKO_ATOL)


def test_the_two_formulae_agree():
    wavelength = np.linspace(350e-9, 1600e-9, 20)
    air = {"pressure": 80000.0, "temperature": 283.15}
    ciddor = refractivity_ciddor(wavelength, **air)
    edlen = refractivity_edlen(wavelength, **air)
    # 43 years of better measurements of density and dispersion.
    assert_allclose(ciddor, edlen, rtol=3e-4)


def test_a_vacuum_bends_nothing():
    air = {"pressure": 0.0, "temperature": 280.0}
    assert not refractivity_ciddor([4e-7, 8e-7], **air).any()
    assert not refractivity_edlen([4e-7, 8e-7], **air).any()


def test_blue_is_lifted_and_nothing_happens_at_the_zenith():
    wavelength = np.linspace(350e-9, 1000e-9, 14)
    got = differential_refraction(wavelength, 600e-9, zenith_distance=1.0, **MOUNTAIN)
    assert np.all(np.diff(got) < 0.0)
    assert_allclose(np.interp(600e-9, wavelength, got), 0.0, atol=1e-9)
    flat = differential_refraction(wavelength, 600e-9, zenith_distance=0.0, **MOUNTAIN)
    assert not flat.any()


def test_dispersion_across_a_band():
    got = band_dispersion(480e-9, 620e-9, zenith_distance=np.radians(45), **MOUNTAIN)
    parts = differential_refraction(
        [480e-9, 620e-9], 550e-9, zenith_distance=np.radians(45), **MOUNTAIN
    )
    assert_allclose(got, parts[0] - parts[1], rtol=1e-12)
    # Some half second of arc in a broad visual band at airmass 1.4.
    assert 0.3 < got * ARCSEC < 0.8
    assert got == band_dispersion(620e-9, 480e-9, zenith_distance=np.radians(45), **MOUNTAIN)


@pytest.mark.parametrize("degrees", [89.0, 60.0, 30.0, 5.0])
def test_altitude_from_airmass(degrees):
    airmass = float(airmass_from_altitude(np.radians(degrees)))
    # Near the zenith the airmass hardly changes with altitude.
    assert_allclose(np.degrees(altitude_from_airmass(airmass)), degrees, rtol=0, atol=1e-9)
    assert_allclose(np.degrees(altitude_from_airmass(1.0)), 90.0, rtol=0, atol=0.05)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: refractivity_ciddor(100e-9, pressure=1e5, temperature=280.0), "wavelengths"),
        (lambda: refractivity_ciddor(np.nan, pressure=1e5, temperature=280.0), "wavelengths"),
        (lambda: refractivity_ciddor(5e-7, pressure=-1.0, temperature=280.0), "pressure"),
        (lambda: refractivity_ciddor(5e-7, pressure=np.nan, temperature=280.0), "pressure"),
        (lambda: refractivity_ciddor(5e-7, pressure=1e5, temperature=100.0), "temperature"),
        (
            lambda: refractivity_ciddor(
                5e-7, pressure=1e5, temperature=280.0, relative_humidity=1.1
            ),
            "humidity",
        ),
        (
            lambda: refractivity_ciddor(5e-7, pressure=1e5, temperature=280.0, carbon_dioxide=1.0),
            "carbon",
        ),
        (
            lambda: refractivity_edlen(5e-7, pressure=1e5, temperature=280.0, vapour_pressure=2e5),
            "vapour",
        ),
        (
            lambda: differential_refraction(5e-7, 6e-7, zenith_distance=1.6, **MOUNTAIN),
            "zenith distance",
        ),
        (lambda: altitude_from_airmass(0.9), "airmass"),
        (lambda: altitude_from_airmass(40.0), "airmass"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
