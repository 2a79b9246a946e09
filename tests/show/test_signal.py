"""Counts as light."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.frame import Frame
from simimg.show.signal import clipped_background, frame_light
from tests.show import frames


def test_a_frame_of_simimg_is_taken_at_its_word():
    made = frames.frame("", overrides=["camera.dark_current='1 electron/s'"])
    light = frame_light(made)
    assert light.unit == "electron"
    assert light.background == 40.0  # sky 30, dark signal 10
    # Read noise 4, gain 2: the converter adds 2^2 / 12.
    assert_allclose(light.noise, np.sqrt(40.0 + 16.0 + 4.0 / 12.0), rtol=1e-12)
    # 3584 pixels: their mean within 5 standard errors, their scatter within 5 of 1.2 %.
    assert abs(light.values.mean()) < 5.0 * light.noise / 60.0
    assert_allclose(light.values.std(), light.noise, rtol=0.06)
    assert_allclose(light.variance.mean(), light.noise**2, rtol=0.01)


def test_any_other_frame_is_judged_by_its_pixels():
    rng = np.random.default_rng(4)
    counts = rng.normal(500.0, 12.0, (300, 300)).astype("f4")
    counts[100:110, 100:110] += 5000.0
    counts[0, 0] = np.nan
    light = frame_light(Frame(counts=counts, header={"GAIN": 3.0}, simulated=False))
    assert light.unit == "adu"
    # 90,000 pixels give the median to 0.05 and the scatter to 0.3 %; the clip biases by 1 %.
    assert_allclose(light.background, 500.0, atol=0.3)
    assert_allclose(light.noise, 12.0, rtol=0.03)
    assert np.isnan(light.values[0, 0])


@pytest.mark.parametrize("value", [0.0, 7.0])
def test_an_even_image_has_some_noise(value):
    background, noise = clipped_background(np.full((4, 4), value))
    assert background == value
    assert noise > 0.0


def test_nothing_at_all():
    assert clipped_background(np.full((3, 3), np.nan)) == (0.0, 1.0)
