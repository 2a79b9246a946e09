import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from simimg.optics.pupil import annular_pupil, map_pupil
from tests.reference import diffraction


def chord_area(diameter, obstruction, width, count):
    """Area of an annulus less vanes that meet only behind the obstruction, cut along the vane."""
    outer, inner = 0.5 * diameter, 0.5 * diameter * obstruction

    def length(t):
        return np.sqrt(outer**2 - t**2) - np.sqrt(inner**2 - t**2)

    vane = quad(length, -0.5 * width, 0.5 * width)[0]
    return np.pi * (outer**2 - inner**2) - count * vane


def brute_coverage(is_open, diameter, samples, fine=40):
    """Open part of each square by counting points."""
    side = diameter / samples
    offsets = ((np.arange(fine) + 0.5) / fine - 0.5) * side
    centres = (np.arange(samples) - 0.5 * (samples - 1)) * side
    axis = (centres[:, None] + offsets).ravel()
    opened = is_open(axis[np.newaxis, :], axis[:, np.newaxis])
    return opened.reshape(samples, fine, samples, fine).mean(axis=(1, 3))


def test_a_10_m_aperture_gathers_100_times_a_1_m_aperture():
    ratio = annular_pupil(10.0).area / annular_pupil(1.0).area
    assert_allclose(ratio, diffraction.LIGHT_10_M_OVER_1_M, rtol=1e-14)


@pytest.mark.parametrize("samples", [16, 101, 512])
@pytest.mark.parametrize("obstruction", [0.0, 0.3, 0.95])
def test_grey_squares_add_up_to_the_area(samples, obstruction):
    pupil = annular_pupil(2.0, obstruction, samples=samples)
    total = pupil.amplitude.sum() * pupil.pitch**2
    # Both are closed forms; the sum of a quarter of a million squares rounds off.
    assert_allclose(total, np.pi * (1 - obstruction**2), rtol=1e-10)
    assert_allclose(pupil.area, np.pi * (1 - obstruction**2), rtol=1e-14)
    assert pupil.round
    assert pupil.reach == 2.0


def test_each_grey_square_against_counting():
    pupil = annular_pupil(3.0, 0.4, samples=24)

    def is_open(x, y):
        radius = np.hypot(x, y)
        return (radius < 1.5) & (radius > 0.6)

    # 1600 points a square leave a few of them undecided along an edge of some 40.
    assert_allclose(pupil.amplitude, brute_coverage(is_open, 3.0, 24), rtol=0, atol=0.01)


@pytest.mark.parametrize("angle", [0.0, 0.3, np.pi / 4, 2.0])
def test_each_square_with_vanes_against_counting(angle):
    count, width = 3, 0.2
    pupil = annular_pupil(2.0, 0.5, vanes=(count, width, angle), samples=40)

    def is_open(x, y):
        radius = np.hypot(x, y)
        opened = (radius < 1.0) & (radius > 0.5)
        for k in range(count):
            direction = angle + 2 * np.pi * k / count
            along = x * np.cos(direction) + y * np.sin(direction)
            across = y * np.cos(direction) - x * np.sin(direction)
            opened &= ~((np.abs(across) < width / 2) & (along > 0))
        return opened

    difference = pupil.amplitude - brute_coverage(is_open, 2.0, 40)
    # Where a vane crosses the rim within a square, the product of the parts is not exact.
    assert_allclose(difference, 0.0, rtol=0, atol=0.13)
    assert np.count_nonzero(np.abs(difference) > 0.02) <= 8 * count


@pytest.mark.parametrize("angle", [0.0, 0.7])
def test_area_with_vanes(angle):
    pupil = annular_pupil(2.0, 0.3, vanes=(4, 0.02, angle))
    assert_allclose(pupil.area, chord_area(2.0, 0.3, 0.02, 4), rtol=1e-5)
    assert not pupil.round
    assert pupil.enveloped


def test_vanes_thinner_than_a_square_still_cast_their_shadow():
    pupil = annular_pupil(8.0, 0.2, vanes=(4, 0.002, 0.1), samples=256)
    blocked = np.pi * 16 * (1 - 0.04) - pupil.area
    assert_allclose(blocked, 4 * 0.002 * (4 - 0.8), rtol=1e-3)


@pytest.mark.parametrize(
    ("degrees", "row", "column"), [(0, 50, 80), (90, 80, 50), (180, 50, 20), (270, 20, 50)]
)
def test_a_vane_stands_where_its_angle_says(degrees, row, column):
    pupil = annular_pupil(1.0, 0.2, vanes=(1, 0.05, np.radians(degrees)), samples=101)
    assert pupil.amplitude[row, column] == pytest.approx(0.0, abs=1e-12)
    assert pupil.amplitude[100 - row, 100 - column] == 1.0


def test_vanes_follow_each_other_from_x_towards_y():
    pupil = annular_pupil(1.0, vanes=(3, 0.05, 0.0), samples=201)
    for degrees, blocked in ((0, True), (120, True), (240, True), (60, False), (180, False)):
        row = 100 + round(60 * np.sin(np.radians(degrees)))
        column = 100 + round(60 * np.cos(np.radians(degrees)))
        assert bool(pupil.amplitude[row, column] < 0.01) is blocked


def test_map_area_amplitude_and_reach():
    transmission = np.zeros((64, 64))
    transmission[16:48, 8:56] = 0.25
    pupil = map_pupil(transmission, 6.4)
    assert_allclose(pupil.amplitude[30, 30], 0.5)
    assert_allclose(pupil.area, 0.25 * 3.2 * 4.8)
    assert_allclose(pupil.reach, np.hypot(3.2, 4.8))
    assert not pupil.round
    assert not pupil.enveloped


def test_a_pupil_keeps_its_array_to_itself():
    transmission = np.ones((16, 16))
    pupil = map_pupil(transmission, 1.0)
    transmission[:] = 0.0
    assert pupil.amplitude.min() == 1.0
    assert not pupil.amplitude.flags.writeable
    with pytest.raises(dataclasses.FrozenInstanceError):
        pupil.area = 2.0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"diameter": 0.0}, "diameter"),
        ({"diameter": np.inf}, "diameter"),
        ({"diameter": np.nan}, "diameter"),
        ({"diameter": 1.0, "obstruction": 1.0}, "obstruction"),
        ({"diameter": 1.0, "obstruction": np.nan}, "obstruction"),
        ({"diameter": 1.0, "samples": 4}, "samples"),
        ({"diameter": 1.0, "vanes": (0, 0.1, 0.0)}, "count"),
        ({"diameter": 1.0, "vanes": (4, 0.0, 0.0)}, "width"),
        ({"diameter": 1.0, "vanes": (4, np.nan, 0.0)}, "width"),
        ({"diameter": 1.0, "vanes": (4, 0.1, np.inf)}, "angle"),
        ({"diameter": 1.0, "vanes": (4, 3.0, 0.0)}, "no opening"),
    ],
)
def test_nonsense_apertures_are_refused(arguments, message):
    with pytest.raises(ValueError, match=message):
        annular_pupil(**arguments)


@pytest.mark.parametrize(
    ("transmission", "diameter", "message"),
    [
        (np.ones((16, 17)), 1.0, "square"),
        (np.ones(256), 1.0, "square"),
        (np.ones((8, 8)), 1.0, "16 to 2048"),
        (np.broadcast_to(1.0, (2049, 2049)), 1.0, "16 to 2048"),
        (np.full((16, 16), 1.1), 1.0, "between 0 and 1"),
        (np.full((16, 16), -0.1), 1.0, "between 0 and 1"),
        (np.full((16, 16), np.nan), 1.0, "between 0 and 1"),
        (np.zeros((16, 16)), 1.0, "no light"),
        (np.ones((16, 16)), 0.0, "diameter"),
    ],
)
def test_nonsense_maps_are_refused(transmission, diameter, message):
    with pytest.raises(ValueError, match=message):
        map_pupil(transmission, diameter)


def test_a_map_of_open_parts_is_the_built_pupil():
    built = annular_pupil(2.0, 0.3, vanes=(4, 0.02, 0.3), samples=128)
    read = map_pupil(built.amplitude, 2.0, hard_edges=True)
    assert_allclose(read.amplitude, built.amplitude, rtol=0, atol=0)
    assert_allclose(read.transmission, built.transmission, rtol=0, atol=0)
    assert_allclose(read.area, built.area, rtol=1e-14)
    # A reader who takes the grey squares for half-silvered ones gets wider amplitudes.
    assert map_pupil(built.amplitude, 2.0).amplitude.sum() > 1.001 * built.amplitude.sum()
