"""The asinh stretch and its ticks."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.show.stretch import Stretch, choose_stretch


@pytest.mark.parametrize("high", [12.0, 400.0, 65000.0, 3e7])
@pytest.mark.parametrize("softness", [0.002, 0.03, 0.5])
def test_ticks_are_round_apart_and_within(high, softness):
    stretch = Stretch(-5.0, high, max(softness * high, 1.0))
    ticks = stretch.ticks()
    assert 0.0 in ticks
    assert len(ticks) >= 3
    shades = stretch.shades(np.array(ticks))
    assert np.diff(shades).min() > 0.08
    assert all(f"{tick:.0e}"[0] in "0125" for tick in ticks)
    assert min(ticks) >= -5.0
    assert max(ticks) <= high


def test_shades_run_from_dark_to_bright():
    stretch = Stretch(-2.0, 100.0, 3.0)
    shades = stretch.shades(np.array([-50.0, -2.0, 0.0, 50.0, 100.0, 1e9, np.nan]))
    assert_allclose(shades[[0, 1, 4, 5, 6]], [0.0, 0.0, 1.0, 1.0, 0.0], atol=1e-12)
    assert 0.0 < shades[2] < shades[3] < 1.0


def test_a_field_shows_its_faint_sources():
    rng = np.random.default_rng(3)
    image = rng.normal(0.0, 5.0, (200, 200))
    image[::10, ::10] += 60.0
    image[5, 5] = 40000.0
    stretch = choose_stretch(image, noise=5.0)
    assert 0.25 < stretch.shades(np.array(60.0)) < 0.6
    assert stretch.shades(np.array(5.0)) < 0.25


def test_a_bright_source_is_not_drowned():
    y, x = np.indices((60, 60)) - 30.0
    image = np.where(np.hypot(x, y) < 15.0, 10000.0, 0.0) * (1.0 - 0.02 * np.hypot(x, y))
    stretch = choose_stretch(image, noise=5.0, field=False)
    limb, middle = stretch.shades(np.array([7000.0, 10000.0]))
    assert middle - limb > 0.08


def test_an_empty_image():
    stretch = choose_stretch(np.full((5, 5), np.nan), noise=2.0)
    assert stretch.low < 0.0 < stretch.high
