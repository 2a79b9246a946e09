"""Directions and scale, against the convention of the detector's rotation and parity."""

from math import cos, radians, sin

import numpy as np
import pytest
from astropy.io import fits
from astropy.wcs import WCS
from numpy.testing import assert_allclose

from simimg.frame import Frame
from simimg.show.compass import frame_compass, round_length, shown_length
from tests.show import frames


def plain(wcs=None, header=None):
    return Frame(counts=np.ones((20, 30), "f4"), wcs=wcs, header=header or {})


@pytest.mark.parametrize("mirrored", [False, True])
@pytest.mark.parametrize("rotation", [0.0, 28.0, 130.0, 250.0, -3.5])
def test_rotated_and_mirrored(rotation, mirrored):
    made = frames.frame(rotation=rotation, mirrored=mirrored, ra=359.9999, dec=62.0)
    compass = frame_compass(made, 31.5, 27.5)
    rho, p = radians(rotation), -1.0 if mirrored else 1.0
    # x grows by p (-E cos rho + N sin rho), y by E sin rho + N cos rho. Finite differences over a
    # pixel are good to its square, 1e-12; the header keeps 1e-15.
    assert_allclose(compass.north, (p * sin(rho), cos(rho)), atol=1e-9)
    assert_allclose(compass.east, (-p * cos(rho), sin(rho)), atol=1e-9)
    assert_allclose(compass.scale, 0.2, rtol=1e-9)
    assert compass.known
    for angle in (0.0, 40.0, 200.0):
        pa = radians(angle)
        dx = cos(pa) * compass.north[0] + sin(pa) * compass.east[0]
        dy = cos(pa) * compass.north[1] + sin(pa) * compass.east[1]
        turned = compass.direction(pa)
        assert_allclose((cos(turned), sin(turned)), (dx, dy), atol=1e-12)


@pytest.mark.parametrize("dec", [89.9999, -90.0])
def test_at_the_pole_the_scale_holds(dec):
    made = frames.frame(dec=dec)
    compass = frame_compass(made, 40.0, 20.0)
    # A tangent plane's scale varies by the square of the distance, 1e-9 here.
    assert_allclose(compass.scale, 0.2, rtol=1e-6)


def test_a_pair_lies_where_the_compass_says():
    made = frames.frame(rotation=77.0, mirrored=True)
    first, second = made.truth[0], made.truth[1]
    compass = frame_compass(made, float(first["x"]), float(first["y"]))
    angle = compass.direction(radians(40.0))
    step = np.array([second["x"] - first["x"], second["y"] - first["y"]])
    assert_allclose(step, 3.0 * np.array([cos(angle), sin(angle)]), atol=1e-6)


def test_latitude_first_and_rotated():
    wcs = WCS(naxis=2)
    wcs.wcs.ctype = ["DEC--TAN", "RA---TAN"]
    wcs.wcs.crpix, wcs.wcs.crval = [15.0, 10.0], [-30.0, 10.0]
    wcs.wcs.cdelt = [1e-4, 1e-4]
    wcs.wcs.set()
    compass = frame_compass(plain(wcs), 14.0, 9.0)
    assert_allclose(compass.north, (1.0, 0.0), atol=1e-9)
    assert_allclose(compass.east, (0.0, 1.0), atol=1e-9)
    assert_allclose(compass.scale, 0.36, rtol=1e-9)


def test_without_coordinates_north_is_up_and_east_left():
    compass = frame_compass(plain(), 3.0, 3.0)
    assert compass.north == (0.0, 1.0)
    assert compass.east == (-1.0, 0.0)
    assert compass.scale is None
    assert not compass.known
    assert frame_compass(plain(header={"PIXSCALE": 0.3}), 3.0, 3.0).scale == 0.3


def test_coordinates_that_fail_are_none():
    header = fits.Header({"CTYPE1": "RA---TAN", "CTYPE2": "DEC--TAN", "CRVAL1": 10.0})
    header.update({"CD1_1": 1e-4, "CD1_2": 1e-4, "CD2_1": 1e-4, "CD2_2": 1.00000001e-4})
    assert not frame_compass(plain(WCS(header)), 3.0, 3.0).known


@pytest.mark.parametrize(
    ("longest", "length", "words"),
    [
        (0.33, 0.2, "0.2″"),
        (0.5, 0.5, "0.5″"),
        (9.99, 5.0, "5″"),
        (59.0, 50.0, "50″"),
        (61.0, 60.0, "1\N{PRIME}"),
        (500.0, 300.0, "5\N{PRIME}"),
        (9000.0, 7200.0, "2°"),
        (0.000034, 0.00002, "2e-05″"),
    ],
)
def test_round_lengths(longest, length, words):
    assert_allclose(round_length(longest), length, rtol=1e-12)
    assert shown_length(length) == words
