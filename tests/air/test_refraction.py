import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.air.refraction import airmass_from_altitude, airmass_kasten_young
from tests.reference import turbulence as reference


@pytest.mark.parametrize(
    ("formula", "table"),
    [
        (airmass_from_altitude, reference.AIRMASS_PICKERING),
        (airmass_kasten_young, reference.AIRMASS_KASTEN_YOUNG),
    ],
)
def test_published_values(formula, table):
    altitude = np.radians(90.0 - np.array(list(table)))
    # The table's own rounding.
    assert_allclose(formula(altitude), list(table.values()), rtol=0, atol=reference.AIRMASS_ATOL)


@pytest.mark.parametrize("formula", [airmass_from_altitude, airmass_kasten_young])
def test_plane_parallel_air_near_the_zenith(formula):
    altitude = np.radians([40.0, 60.0, 80.0, 90.0])
    # The earth's curvature takes 0.2 % off the secant at 50 degrees from the zenith.
    assert_allclose(formula(altitude), 1 / np.sin(altitude), rtol=2.5e-3)
    assert formula(np.radians(30.0)).shape == ()


@pytest.mark.parametrize("formula", [airmass_from_altitude, airmass_kasten_young])
def test_grows_towards_the_horizon_and_ends_there(formula):
    airmass = formula(np.radians(np.linspace(90.0, 0.0, 91)))
    # Pickering's argument passes the zenith by two minutes of arc, a rounding of 2e-7.
    assert np.all(np.diff(airmass[1:]) > 0)
    assert 37.0 < airmass[-1] < 39.0


@pytest.mark.parametrize("formula", [airmass_from_altitude, airmass_kasten_young])
@pytest.mark.parametrize("altitude", [-0.01, 1.6, np.nan, np.inf, [0.5, -0.5]])
def test_nonsense_is_refused(formula, altitude):
    with pytest.raises(ValueError, match="altitude"):
        formula(altitude)
