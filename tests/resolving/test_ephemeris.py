"""When a pair on an orbit can be resolved, against Meeus' example and the limits themselves."""

import pytest

import simimg
from simimg.resolving.ephemeris import ephemeris, julian_years
from tests.assembly.scenes import TEXT, scene

PAIR = """
[[pair]]
label = "turning"
magnitudes = [14, 14.5]
orbit = { period = "41.623 yr", periastron = 1934.008, eccentricity = 0.2763, \
semi_major_axis = "0.907 arcsec", inclination = "59.025 deg", node = "23.717 deg", \
argument = "219.907 deg" }
"""


@pytest.fixture
def pair(tmp_path):
    return scene(tmp_path, TEXT[: TEXT.index("[[star]]")] + PAIR, air__seeing="0.55 arcsec")


def test_separation_and_angle_are_those_of_the_orbit(pair):
    """Meeus, Astronomical Algorithms, example 57.a: 318.4 degrees, 0.411 arcsec at 1980.0."""
    (row,) = ephemeris(pair, [1980.0])
    assert row.label == "turning"
    assert row.separation_arcsec == pytest.approx(0.41102, abs=1e-4)
    assert row.position_angle_deg == pytest.approx(318.424, abs=1e-2)


def test_what_is_beyond_the_limit_is_said_to_be(pair, tmp_path):
    """Each date against the limits of a pair at rest with the same separation and angle."""
    rows = ephemeris(pair, julian_years(1980, 2020, 8))
    assert {row.rayleigh for row in rows} == {True, False}
    for row in rows:
        text = TEXT[: TEXT.index("[[star]]")] + (
            f'[[pair]]\nmagnitudes = [14, 14.5]\nseparation = "{row.separation_arcsec} arcsec"\n'
            f'position_angle = "{row.position_angle_deg} deg"\n'
        )
        (one,) = simimg.limits(scene(tmp_path, text, air__seeing="0.55 arcsec")).objects
        assert row.rayleigh == (row.separation_arcsec > one.delivered.rayleigh_arcsec)
        assert row.sparrow == (row.separation_arcsec > one.delivered.sparrow_arcsec)


def test_dates_include_both_ends():
    assert julian_years(1980, 2020, 10) == [1980, 1990, 2000, 2010, 2020]
    assert julian_years(2000, 2000.5, 0.25) == [2000, 2000.25, 2000.5]


@pytest.mark.parametrize(
    "dates", [(2000, 1990, 1), (2000, 2010, 0), (0, 1e9, 1), (0, 1, float("nan"))]
)
def test_impossible_dates_are_refused(dates):
    with pytest.raises(ValueError, match=r"STEP|STOP|dates"):
        julian_years(*dates)
