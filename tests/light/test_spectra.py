import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import minimize_scalar

from simimg.light.curves import Curve, efficiency_curve, panels
from simimg.light.spectra import FLAT, Blackbody, PowerLaw, TabulatedSpectrum, planck
from tests.reference import light as reference

WAVELENGTH = np.geomspace(1e-7, 1e-2, 40)


@pytest.mark.parametrize("temperature", [50.0, 3000.0, 5772.0, 40000.0])
def test_blackbody_is_that_of_astropy(temperature):
    models = pytest.importorskip("astropy.modeling.models")
    units = pytest.importorskip("astropy.units")
    x = WAVELENGTH[WAVELENGTH * temperature > 4e-5]
    theirs = models.BlackBody(temperature=temperature * units.K)(x * units.m)
    expected = theirs.to_value("W / (m2 Hz sr)")
    # Both are closed forms; their constants agree to 1e-8 and stand in an exponent of up to 360.
    assert_allclose(Blackbody(temperature).f_nu(x), expected, rtol=1e-5)


def test_blackbody_peaks_where_wien_says():
    found = minimize_scalar(
        lambda x: -planck(x * 1e-6, 5800.0) / x**2,
        bounds=(0.2, 2.0),
        method="bounded",
        options={"xatol": 1e-9},
    )
    assert_allclose(found.x * 1e-6 * 5800.0, reference.WIEN, rtol=reference.WIEN_RTOL)


def test_a_cold_blackbody_sends_nothing_and_complains_of_nothing():
    assert planck(1e-7, 10.0) == 0.0
    # Rayleigh and Jeans far down: 2 k T / lambda^2.
    assert_allclose(planck(1.0, 300.0), 2 * 1.380649e-23 * 300.0, rtol=1e-4)


def test_planck_broadcasts():
    assert planck(WAVELENGTH, np.array([[3000.0], [6000.0]])).shape == (2, 40)


def test_power_law_goes_with_frequency():
    assert_allclose(PowerLaw(1.5).f_nu([1e-6, 5e-7]), [1.0, 2.0**1.5])
    assert_allclose(FLAT.f_nu(WAVELENGTH), 1.0)


@pytest.mark.parametrize(("kind", "power"), [("f_nu", 0), ("photons", 1), ("f_lambda", 2)])
def test_one_spectrum_in_three_units(kind, power):
    """f_lambda goes as f_nu / lambda^2 and the photons as f_nu / lambda."""
    x = np.linspace(4e-7, 8e-7, 4001)
    star = Blackbody(4000.0)
    table = TabulatedSpectrum(Curve(x, star.f_nu(x) / x**power), kind)
    got = table.f_nu(np.linspace(4.1e-7, 7.9e-7, 33))
    expected = star.f_nu(np.linspace(4.1e-7, 7.9e-7, 33))
    # Straight lines over 0.1 nm.
    assert_allclose(got / got[0], expected / expected[0], rtol=1e-6)
    assert table.bounds == (4e-7, 8e-7)
    assert table.f_nu(3.9e-7) == 0.0


def test_a_curve_keeps_its_table_and_its_ends():
    x = np.array([4e-7, 5e-7, 6e-7, 7e-7])
    curve = Curve(x, np.array([0.0, 0.0, 0.5, 0.0]))
    x[0] = 1.0
    assert curve.bounds == (4e-7, 7e-7)
    assert curve.support == (5e-7, 7e-7)
    assert_allclose(curve([3e-7, 5.5e-7, 6.5e-7, 8e-7]), [0.0, 0.25, 0.25, 0.0], atol=1e-15)
    assert not curve.value.flags.writeable


def test_panels_stop_at_bends():
    bends = np.array([0.2, 0.5, 7.0])
    x, w = panels(0.0, 1.0, [bends])
    assert_allclose(w.sum(), 1.0)
    # A kink and a jump within are no matter.
    assert_allclose((w * np.abs(x - 0.2)).sum(), 0.5 * (0.04 + 0.64), rtol=1e-14)
    assert_allclose(w[x > 0.5].sum(), 0.5, rtol=1e-14)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: Blackbody(0.0), "temperature"),
        (lambda: Blackbody(np.inf), "temperature"),
        (lambda: PowerLaw(np.nan), "index"),
        (lambda: PowerLaw(30.0), "index"),
        (lambda: TabulatedSpectrum(Curve([1e-7, 2e-7], [1, 1]), "flux"), "kind"),
        (lambda: Curve([1e-7], [1.0]), "columns"),
        (lambda: Curve([1e-7, 2e-7], [1.0]), "columns"),
        (lambda: Curve([2e-7, 1e-7], [1.0, 1.0]), "increasing"),
        (lambda: Curve([0.0, 1e-7], [1.0, 1.0]), "above 0"),
        (lambda: Curve([1e-7, 2e-7], [-1.0, 1.0]), "at least 0"),
        (lambda: Curve([1e-7, 2e-7], [0.0, 0.0]), "not all 0"),
        (lambda: Curve([1e-7, 2e-7], [np.nan, 1.0]), "finite"),
        (lambda: efficiency_curve([1e-7, 2e-7], [0.5, 1.2]), "between 0 and 1"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
