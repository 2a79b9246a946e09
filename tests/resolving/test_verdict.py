"""Probabilities of lying beyond a limit: closed forms, calibration, and the words for them."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import norm

from simimg.resolving.verdict import probability_beyond, verdict


def test_a_fixed_limit_is_a_plain_gaussian_tail():
    for separation in (0.8, 1.0, 1.1):
        chance = probability_beyond(
            1.0,
            separation=separation,
            magnitude_difference=0.4,
            covariance=[[0.01, 0.003], [0.003, 0.04]],
        )
        # Summed over 241 magnitude differences; the tail below zero separation is 1e-15.
        assert_allclose(chance, norm.sf((1.0 - separation) / 0.1), rtol=1e-6)


def test_the_prior_allows_no_negative_separation():
    chance = probability_beyond(
        0.5, separation=0.2, magnitude_difference=0.0, covariance=[[0.04, 0.0], [0.0, 0.01]]
    )
    assert_allclose(chance, norm.sf(1.5) / norm.sf(-1.0), rtol=1e-6)
    # Deep below zero only the ratio of two tiny tails is left.
    far = probability_beyond(
        0.5, separation=-9.0, magnitude_difference=0.0, covariance=[[0.04, 0.0], [0.0, 0.01]]
    )
    assert_allclose(np.log(far), norm.logsf(47.5) - norm.logsf(45.0), rtol=1e-6)


@pytest.mark.parametrize("correlation", [-0.8, 0.0, 0.6])
def test_a_limit_that_depends_on_the_magnitude_difference_shares_its_error(correlation):
    sigma, spread, slope = 0.05, 0.2, 0.3
    cross = correlation * sigma * spread
    chance = probability_beyond(
        lambda difference: 1.0 + slope * difference,
        separation=1.25,
        magnitude_difference=0.7,
        covariance=[[sigma**2, cross], [cross, spread**2]],
    )
    # separation - slope * difference is Gaussian itself.
    error = np.sqrt(sigma**2 - 2.0 * slope * cross + (slope * spread) ** 2)
    assert_allclose(chance, norm.cdf((1.25 - 1.0 - slope * 0.7) / error), rtol=1e-4)


def test_probabilities_are_calibrated():
    """Truth drawn over the limit's neighbourhood; what is claimed comes true as often."""
    rng = np.random.default_rng(20260412)

    def limit(difference):
        return 1.0 + 0.25 * np.abs(difference) ** (2.0 / 3.0)

    covariance = np.array([[0.03**2, 0.4 * 0.03 * 0.1], [0.4 * 0.03 * 0.1, 0.1**2]])
    root = np.linalg.cholesky(covariance)
    claimed, true = [], []
    for _ in range(6000):
        difference = rng.uniform(0.0, 1.5)
        separation = limit(difference) + rng.uniform(-0.16, 0.16)
        seen = np.array([separation, difference]) + root @ rng.standard_normal(2)
        claimed.append(
            probability_beyond(
                limit, separation=seen[0], magnitude_difference=seen[1], covariance=covariance
            )
        )
        true.append(separation > limit(difference))
    claimed, true = np.array(claimed), np.array(true)
    for low in np.arange(0.0, 1.0, 0.2):
        inside = (claimed >= low) & (claimed < low + 0.2)
        error = np.sqrt((claimed[inside] * (1.0 - claimed[inside])).sum()) / inside.sum()
        # Three binomial errors of the bin, and a hundredth for the edges of the drawn box.
        assert abs(true[inside].mean() - claimed[inside].mean()) < 3.0 * error + 0.01


def test_probability_rises_with_separation():
    chances = [
        probability_beyond(
            1.0, separation=s, magnitude_difference=0.0, covariance=[[0.01, 0.0], [0.0, 0.01]]
        )
        for s in np.linspace(0.0, 2.0, 41)
    ]
    assert np.all(np.diff(chances) >= 0.0)
    assert chances[-1] <= 1.0


def test_limits_that_no_separation_reaches_and_errors_that_are_not_known():
    covariance = [[0.01, 0.0], [0.0, 0.01]]
    never = probability_beyond(
        lambda difference: np.full(difference.shape, np.inf),
        separation=3.0,
        magnitude_difference=9.0,
        covariance=covariance,
    )
    assert never == 0.0
    unknown = probability_beyond(
        1.0,
        separation=1.0,
        magnitude_difference=0.0,
        covariance=[[np.inf, np.inf], [np.inf, np.inf]],
    )
    assert np.isnan(unknown)


@pytest.mark.parametrize(
    ("probability", "single", "word"),
    [
        (0.96, 1e-5, "resolved"),
        (0.95, 1e-5, "borderline"),
        (0.5, 1e-5, "borderline"),
        (0.05, 1e-5, "borderline"),
        (0.04, 1e-5, "unresolved"),
        (0.999, 0.011, "unresolved"),
        (0.5, 0.5, "unresolved"),
        (np.nan, 1e-5, "borderline"),
        (0.999, np.nan, "unresolved"),
    ],
)
def test_words(probability, single, word):
    assert verdict(probability, probability_single=single) == word
