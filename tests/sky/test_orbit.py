import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from simimg.sky.orbit import Orbit, apparent_place, eccentric_anomaly, julian_year
from tests.reference import orbits as reference

ARCSEC = np.radians(1.0) / 3600


def orbit(**changes):
    elements = reference.MEEUS_57
    values = {
        "period": elements["period"],
        "periastron": elements["periastron"],
        "eccentricity": elements["eccentricity"],
        "semi_major_axis": elements["semi_major_axis_arcsec"] * ARCSEC,
        "inclination": np.radians(elements["inclination_deg"]),
        "node": np.radians(elements["node_deg"]),
        "argument": np.radians(elements["argument_deg"]),
    }
    return Orbit(**{**values, **changes})


def test_meeus_example():
    separation, angle = apparent_place(orbit(), reference.MEEUS_57_YEAR)
    got = (np.degrees(angle), separation / ARCSEC)
    for value, printed, full, coarse, fine in zip(
        got,
        reference.MEEUS_57_PRINTED,
        reference.MEEUS_57_FULL,
        reference.MEEUS_57_PRINTED_ATOL,
        reference.MEEUS_57_FULL_ATOL,
    ):
        assert_allclose(value, printed, rtol=0, atol=coarse)
        assert_allclose(value, full, rtol=0, atol=fine)


def test_kepler_example():
    e, mean, expected = reference.MEEUS_30
    got = np.degrees(eccentric_anomaly(np.radians(mean), e))
    assert_allclose(got, expected, rtol=0, atol=reference.MEEUS_30_ATOL)


@pytest.mark.parametrize("e", [0.0, 0.3, 0.9, 0.99])
def test_keplers_equation(e):
    # From the answer to the question: no other solver comes in.
    expected = np.concatenate([np.linspace(-np.pi, np.pi, 2001), np.geomspace(1e-9, 3.0, 300)])
    got = eccentric_anomaly(expected - e * np.sin(expected), e)
    assert_allclose(got, expected, rtol=0, atol=1e-12)
    assert_allclose(got - e * np.sin(got), expected - e * np.sin(expected), rtol=0, atol=1e-14)


def test_keplers_equation_by_another_root_finder():
    mean = np.random.default_rng(2).uniform(-np.pi, np.pi, 50)
    for e in (0.5, 0.97, 0.999):
        got = eccentric_anomaly(mean, e)
        for m, value in zip(mean, got):
            root = brentq(lambda x: x - e * np.sin(x) - m, m - 1, m + 1, xtol=1e-14)  # noqa: B023
            assert_allclose(value, root, rtol=0, atol=1e-12)


def test_the_edge_of_eccentricity():
    expected = np.concatenate([np.geomspace(1e-6, 3.0, 40), [0.0]])
    e = np.nextafter(1.0, 0.0)
    # The cube of E is all that is left of it near periastron.
    got = eccentric_anomaly(expected - e * np.sin(expected), e)
    assert_allclose(got - e * np.sin(got), expected - e * np.sin(expected), rtol=0, atol=1e-15)
    assert_allclose(got[expected > 0.1], expected[expected > 0.1], rtol=1e-12)


def test_anomalies_broadcast_and_keep_their_turn():
    got = eccentric_anomaly(np.array([[0.5], [0.5 + 20 * np.pi]]), np.array([0.0, 0.3, 0.9]))
    assert got.shape == (2, 3)
    assert_allclose(got[1] - got[0], 20 * np.pi, rtol=1e-14)
    assert_allclose(got[:, 0], [0.5, 0.5 + 20 * np.pi])
    assert_allclose(eccentric_anomaly(-0.5, 0.6), -eccentric_anomaly(0.5, 0.6))


def test_a_round_face_on_orbit():
    circle = orbit(eccentricity=0.0, inclination=0.0, node=0.3, argument=0.2, periastron=2000.0)
    years = 2000.0 + circle.period * np.array([0.0, 0.25, 0.5, 0.9])
    separation, angle = apparent_place(circle, years)
    assert_allclose(separation, circle.semi_major_axis, rtol=1e-12)
    # North through east, as time goes.
    assert_allclose(angle, 0.5 + 2 * np.pi * np.array([0.0, 0.25, 0.5, 0.9]), rtol=1e-11)
    back = orbit(eccentricity=0.0, inclination=np.pi, node=0.3, argument=0.2, periastron=2000.0)
    _, angle = apparent_place(back, years[1])
    assert_allclose(angle, 0.3 - 0.2 - 0.5 * np.pi + 2 * np.pi, rtol=1e-11)


def test_periastron_and_apastron():
    face_on = orbit(inclination=0.0, eccentricity=0.6)
    half = face_on.periastron + 0.5 * face_on.period
    separation, angle = apparent_place(face_on, [face_on.periastron, half])
    assert_allclose(separation / face_on.semi_major_axis, [0.4, 1.6], rtol=1e-12)
    assert_allclose(angle[0], np.mod(face_on.node + face_on.argument, 2 * np.pi), rtol=1e-9)


def test_edge_on_stays_on_the_line_of_nodes():
    edge = orbit(inclination=0.5 * np.pi)
    _, angle = apparent_place(edge, np.linspace(1950, 1990, 37))
    away = np.mod(angle - edge.node + 0.5, np.pi) - 0.5
    assert_allclose(away, 0.0, rtol=0, atol=1e-12)


def test_areas_are_swept_evenly():
    """Kepler's second law holds in projection, too."""
    years = np.linspace(1960.0, 1970.0, 20001)
    separation, angle = apparent_place(orbit(), years)
    swept = 0.5 * separation[:-1] ** 2 * np.diff(np.unwrap(angle))
    whole = np.pi * orbit().semi_major_axis ** 2 * np.sqrt(1 - 0.2763**2)
    expected = whole * np.cos(np.radians(59.025)) / 41.623 * (years[1] - years[0])
    # Triangles with straight sides over half a thousandth of a year.
    assert_allclose(swept, expected, rtol=2e-3)


def test_a_period_later_all_is_the_same():
    one = apparent_place(orbit(), 1975.3)
    two = apparent_place(orbit(), 1975.3 + 7 * 41.623)
    assert_allclose(two, one, rtol=1e-11)


def test_julian_years():
    assert_allclose(julian_year([2451545.0, 2451545.0 - 20 * 365.25]), [2000.0, 1980.0])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: orbit(period=0.0), "period"),
        (lambda: orbit(semi_major_axis=np.inf), "semi_major_axis"),
        (lambda: orbit(eccentricity=1.0), "eccentricity"),
        (lambda: orbit(eccentricity=-0.1), "eccentricity"),
        (lambda: orbit(inclination=4.0), "inclination"),
        (lambda: orbit(node=np.nan), "node"),
        (lambda: apparent_place(orbit(), np.nan), "years"),
        (lambda: eccentric_anomaly(np.inf, 0.1), "anomalies"),
        (lambda: eccentric_anomaly(0.1, 1.0), "eccentricities"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
