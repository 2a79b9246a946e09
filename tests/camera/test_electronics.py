"""What happens to charge on its way out: means and variances against theory."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from simimg.camera.amplifiers import amplifier_numbers, leak, per_amplifier
from simimg.camera.biaspattern import column_offsets, row_drift
from simimg.camera.binning import binned, binned_mask
from simimg.camera.coupling import couple
from simimg.camera.linearity import bend
from simimg.camera.multiplication import excess_noise, multiply
from simimg.camera.trailing import trail


def test_a_trail_conserves_charge_and_falls_exponentially():
    electrons = np.zeros((2000, 3))
    electrons[999, 1] = 1e12
    trail(electrons, inefficiency=1e-4, length=5.0, rng=np.random.default_rng(3))
    left = 1e12 * (1.0 - 1e-4) ** 1000
    assert electrons[999, 1] == pytest.approx(left, rel=5e-6)
    assert electrons.sum() == 1e12
    tail = electrons[1000:1020, 1]
    assert_allclose(tail[1:] / tail[:-1], math.exp(-0.2), rtol=1e-3)
    assert (electrons[:999] == 0).all()
    assert (electrons[:, [0, 2]] == 0).all()


def test_light_that_lags_keeps_the_variance_of_its_mean():
    # A trail of means alone would leave row 199 with about two thirds of its variance.
    rng = np.random.default_rng(1)
    electrons = rng.poisson(400.0, (200, 20_000)).astype(np.float32)
    trail(electrons, inefficiency=1e-3, length=2.0, rng=rng)
    for row in (1, 50, 199):
        near = 4 * math.sqrt(2 / electrons.shape[1])
        assert electrons[row].var() == pytest.approx(electrons[row].mean(), rel=near)
    assert abs(np.corrcoef(electrons[150], electrons[151])[0, 1]) < 4 / math.sqrt(20_000)


def test_coupling_conserves_and_correlates():
    rng = np.random.default_rng(1)
    share = 0.02
    image = rng.poisson(1000.0, (400, 500)).astype(float)
    before = image.sum()
    couple(image, share)
    assert image.sum() == pytest.approx(before, rel=1e-12)
    expected = 1000.0 * ((1 - 4 * share) ** 2 + 4 * share**2)
    assert image[1:-1, 1:-1].var() == pytest.approx(expected, rel=4 * math.sqrt(2 / image.size))
    correlation = np.corrcoef(image[:, 1:-2].ravel(), image[:, 2:-1].ravel())[0, 1]
    wanted = 2 * share * (1 - 4 * share) * 1000.0 / expected
    assert correlation == pytest.approx(wanted, abs=4 / math.sqrt(image.size))
    point = np.zeros((5, 5))
    point[2, 2] = 100.0
    couple(point, share)
    assert point[2, 2] == pytest.approx(92.0)
    assert_allclose([point[1, 2], point[3, 2], point[2, 1], point[2, 3]], 2.0)


@pytest.mark.parametrize("gain", [1.2, 2.0, 20.0, 500.0])
def test_multiplication_has_its_gain_and_its_excess_noise(gain):
    rng = np.random.default_rng(4)
    out = rng.poisson(30.0, 400_000).astype(float)
    multiply(out, gain, rng, well=None)
    assert out.mean() == pytest.approx(30.0 * gain, rel=4 * math.sqrt(2 / 30.0 / out.size))
    factor = out.var() / (gain**2 * 30.0)
    # A register of 600 stages (Robbins & Hadwen 2003), where this one has endlessly many; towards
    # the published factor of 2 at high gain.
    stages = 600
    published = 2 * (gain - 1) * gain ** (-(stages + 1) / stages) + 1 / gain
    assert factor == pytest.approx(excess_noise(gain), abs=0.02)
    assert factor == pytest.approx(published, abs=0.04)
    assert excess_noise(1.0) == 1.0
    assert excess_noise(1e6) == pytest.approx(2.0, abs=1e-5)
    assert (multiply(np.zeros(10), gain, rng, well=None) == 0).all()


def test_the_register_holds_so_much():
    out = np.full(1000, 100.0)
    full = multiply(out, 100.0, np.random.default_rng(0), well=9000.0)
    assert out.max() == 9000.0
    assert full.any()
    assert_array_equal(full, out == 9000.0)


def test_bins_are_sums_and_the_rest_is_not_read():
    values = np.arange(35.0).reshape(5, 7)
    small = binned(values, 2)
    assert small.shape == (2, 3)
    assert small[0, 0] == 0 + 1 + 7 + 8
    mask = np.zeros((4, 4), dtype=np.uint8)
    mask[1, 1], mask[1, 0], mask[3, 2] = 4, 1, 8
    assert_array_equal(binned_mask(mask, 2), [[5, 0], [0, 8]])


def test_signals_fall_short_by_their_share():
    rng = np.random.default_rng(2)
    signal = np.array([0.0, 5e4, 1e5])
    bend(signal, share=0.04, full=1e5)
    assert_allclose(signal, [0.0, 5e4 * 0.98, 1e5 * 0.96])
    noisy = rng.poisson(5e4, 100_000).astype(float)
    bend(noisy, share=0.04, full=1e5)
    assert noisy.var() == pytest.approx(5e4 * (1 - 2 * 0.04 * 0.5) ** 2, rel=0.03)


def test_amplifiers_read_their_parts():
    numbers = amplifier_numbers((4, 6), 4)
    assert_array_equal(numbers[[0, 0, 3, 3], [0, 5, 0, 5]], [0, 1, 2, 3])
    assert_array_equal(amplifier_numbers((2, 4), 2), [[0, 0, 1, 1]] * 2)
    assert amplifier_numbers((3, 3), 1).max() == 0
    values = per_amplifier(numbers, (1.0, 2.0, 3.0, 4.0))
    assert values[3, 5] == 4.0


def test_crosstalk_is_a_ghost_at_the_mirrored_place():
    signal = np.zeros((8, 10))
    signal[1, 2] = 1000.0
    leak(signal, 4, 1e-3)
    assert signal[1, 2] == 1000.0
    for row, column in ((1, 7), (6, 2), (6, 7)):
        assert signal[row, column] == pytest.approx(1.0)
    assert signal.sum() == pytest.approx(1003.0)
    two = np.zeros((8, 10))
    two[1, 2] = 1000.0
    leak(two, 2, 1e-3)
    assert two[1, 7] == pytest.approx(1.0)
    assert two.sum() == pytest.approx(1001.0)


def test_bias_structure_has_its_rms_and_its_memory():
    offsets = column_offsets(100_000, 3.0, np.random.default_rng(1))
    assert offsets.std() == pytest.approx(3.0, rel=0.02)
    drift = row_drift(400_000, 2.0, np.random.default_rng(2)).astype(float)
    assert drift.std() == pytest.approx(2.0, rel=0.1)
    lag = np.corrcoef(drift[:-40], drift[40:])[0, 1]
    assert lag == pytest.approx(math.exp(-1.0), abs=0.05)
    firsts = [row_drift(1, 2.0, np.random.default_rng(i))[0] for i in range(4000)]
    assert np.std(firsts) == pytest.approx(2.0, rel=0.05)
