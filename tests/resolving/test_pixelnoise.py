"""The pixel's likelihood against the convolution of Poisson and Gaussian, done by scipy.stats."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from simimg.resolving.pixelnoise import PixelNoise, information


def exact_density(data: np.ndarray, mean: float, variance: float) -> np.ndarray:
    counts = np.arange(int(mean + 12.0 * np.sqrt(mean) + 30.0))
    chance = stats.poisson.pmf(counts, mean)
    return stats.norm.pdf(data[:, None], counts, np.sqrt(variance)) @ chance


@pytest.mark.parametrize(
    ("mean", "variance", "tolerance"),
    [
        (0.02, 9.0, 1e-9),  # the full sum
        (0.5, 1.0, 1e-9),
        (5.0, 0.3, 1e-9),
        (11.0, 25.0, 1e-9),
        (15.0, 9.0, 2e-2),  # the saddle point: its constant is off by 1/(12 mean) or so
        (100.0, 25.0, 2e-3),
        (5000.0, 25.0, 1e-4),
    ],
)
def test_density_is_that_of_poisson_plus_gaussian(mean, variance, tolerance):
    width = np.sqrt(mean + variance)
    data = np.linspace(mean - 3.0 * width, mean + 4.0 * width, 41)
    ones = np.ones(data.size)
    own = np.empty(data.size)
    for i, value in enumerate(data):
        noise = PixelNoise(np.array([value]), ones[:1], variance, np.array([mean]))
        own[i] = noise.judge(np.array([mean]))[0]
    wanted = -2.0 * np.log(exact_density(data, mean, variance))
    assert_allclose(own, wanted, atol=2.0 * tolerance, rtol=1e-9)


@pytest.mark.parametrize("variance", [0.0, 0.08, 1.0, 9.0, 25.0])
@pytest.mark.parametrize("mean", [0.05, 1.0, 8.0, 20.0, 1000.0])
def test_slope_is_the_derivative_and_has_no_bias(mean, variance):
    rng = np.random.default_rng(20260412)
    size = 60_000
    data = rng.poisson(mean, size) + np.sqrt(variance) * rng.standard_normal(size)
    noise = PixelNoise(data, np.ones(size), variance, np.full(size, mean))
    step = 1e-4 * mean
    slope = noise.judge(np.full(size, mean))[1]
    ahead, behind = (noise.judge(np.full(size, mean + s))[0] for s in (step, -step))
    # The difference of deviances of order 1e5 carries rounding of 1e-11 over the step.
    assert_allclose((ahead - behind) / (4 * step), slope.sum(), rtol=1e-4, atol=1e-3 * size**0.5)
    # Zero mean within four standard errors of this many draws.
    assert abs(slope.mean()) < 4.0 * slope.std() / np.sqrt(size)


@pytest.mark.parametrize(("mean", "variance"), [(0.02, 9.0), (0.5, 1.0), (3.0, 0.3), (30.0, 4.0)])
def test_information_is_the_variance_of_the_slope(mean, variance):
    data = np.linspace(-9.0 * np.sqrt(variance), mean + 60.0, 200_001)
    density = exact_density(data, mean, variance)
    slope = exact_density(data - 1.0, mean, variance) / density - 1.0
    wanted = np.trapezoid(density * slope**2, data)
    # The table is interpolated to a part in a thousand; beyond it 1/(mean + variance) is taken,
    # right to a tenth of that at 30 electrons.
    assert_allclose(information(np.array([mean]), variance), wanted, rtol=2e-3)


def test_information_without_read_noise_is_poisson():
    mean = np.array([0.1, 3.0, 500.0])
    assert_allclose(information(mean, 0.0), 1.0 / mean, rtol=1e-12)


def test_a_plain_shift_would_be_biased_in_the_tail():
    """What the full density is for: a dark pixel with read noise is not skewed."""
    density = exact_density(np.array([-9.0, 9.0]), 0.01, 9.0)
    noise = PixelNoise(np.array([-9.0, 9.0]), np.ones(2), 9.0, np.zeros(2))
    apart = [
        PixelNoise(np.array([d]), np.ones(1), 9.0, np.zeros(1)).judge(np.array([0.01]))[0]
        for d in (-9.0, 9.0)
    ]
    assert_allclose(apart[1] - apart[0], -2.0 * np.log(density[1] / density[0]), rtol=1e-9)
    assert_allclose(noise.judge(np.full(2, 0.01))[0], sum(apart), rtol=1e-12)


def test_pixels_that_do_not_count_have_no_say():
    data = np.array([5.0, 1e6, 7.0])
    used = np.array([1.0, 0.0, 1.0])
    for variance in (0.0, 9.0):
        noise = PixelNoise(data, used, variance, np.full(3, 6.0))
        deviance, slope, weight = noise.judge(np.full(3, 6.0))
        assert np.isfinite(deviance)
        assert slope[1] == weight[1] == 0.0
        other = PixelNoise(np.array([5.0, 3.0, 7.0]), used, variance, np.full(3, 6.0))
        assert_allclose(other.judge(np.full(3, 6.0))[0], deviance, rtol=1e-12)
