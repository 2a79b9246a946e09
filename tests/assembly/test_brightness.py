"""Photons counted by hand."""

import numpy as np
import pytest

from simimg.assembly.brightness import dark_electrons, sky_electrons, zero_point
from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from tests.assembly.scenes import scene

# Bessell, Castelli & Plez 1998: 3636 Jy in V; h in J s; the box of the band's centre and width.
JANSKY, PLANCK = 1e-26, 6.62607015e-34


def by_hand(band_low, band_high, jansky, area):
    return jansky * JANSKY / PLANCK * np.log(band_high / band_low) * area


def test_zero_point_of_a_box_band_by_hand(tmp_path):
    """500 to 600 nm, AB: 3631 Jy (Oke & Gunn 1983), area, throughput, efficiency, extinction."""
    s = scene(tmp_path, band={"centre": "550 nm", "width": "100 nm"})
    area = np.pi / 4 * 4 * (1 - 0.09)
    expected = by_hand(500, 600, 3631, area) * 0.8 * 0.9 * 10 ** (-0.4 * 0.14 * 1.2)
    assert zero_point(s, area=area, airmass=1.2) == pytest.approx(expected, rel=1e-9)


def test_electrons_of_a_star_follow_its_magnitude(tmp_path):
    s = scene(tmp_path)
    train = assemble_train(s)
    zero = zero_point(s, area=train.pupil.area, airmass=train.airmass)
    (star,) = inventory(s).entries
    assert star.electrons == pytest.approx(zero * 30 * 10 ** (-0.4 * 17), rel=1e-12)


def test_ten_metres_gather_a_hundred_times_what_one_does(tmp_path):
    """Common practice: light goes as the area."""

    def light(aperture):
        s = scene(tmp_path, telescope={"aperture": aperture})
        return next(inventory(s).entries).electrons

    assert light("10 m") / light("1 m") == pytest.approx(100, rel=1e-6)


def test_sky_takes_no_extinction_and_counts_square_arcseconds(tmp_path):
    s = scene(tmp_path, band={"centre": "550 nm", "width": "100 nm"})
    expected = by_hand(500, 600, 3631, 2.0) * 0.8 * 0.9 * 10 ** (-0.4 * 21) * 0.25**2 * 30
    assert sky_electrons(s, area=2.0) == pytest.approx(expected, rel=1e-9)
    assert sky_electrons(scene(tmp_path, air__extinction=0.9), area=2.0) == pytest.approx(
        sky_electrons(scene(tmp_path), area=2.0), rel=1e-12
    )


def test_dark_signal_is_rate_times_time(tmp_path):
    assert dark_electrons(scene(tmp_path, camera__dark_current="0.02 electron/s")) == pytest.approx(
        0.6
    )


def test_above_the_air_nothing_is_extinguished(tmp_path):
    s = scene(tmp_path, air=None)
    train = assemble_train(s)
    assert train.airmass is None
    assert train.fried is None
    with_air = zero_point(scene(tmp_path), area=2.0, airmass=1.2)
    without = zero_point(s, area=2.0, airmass=None)
    assert without / with_air == pytest.approx(10 ** (0.4 * 0.14 * 1.2), rel=1e-12)
