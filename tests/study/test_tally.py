"""Shares with intervals, bias and scatter."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import binom, binomtest

from simimg.resolving.bound import PairPrecision
from simimg.resolving.records import PairTruth
from simimg.study.tally import fraction, tally


@pytest.mark.parametrize(("resolved", "count"), [(0, 7), (3, 10), (50, 400), (9, 9), (799, 800)])
def test_interval_is_wilsons(resolved, count):
    found = fraction(resolved, count)
    outside = binomtest(resolved, count).proportion_ci(0.95, method="wilson")
    assert found.fraction_resolved == resolved / count
    assert_allclose([found.low, found.high], [outside.low, outside.high], atol=1e-12)


def test_interval_covers():
    count = 120
    intervals = [fraction(k, count) for k in range(count + 1)]
    low, high = (np.array([getattr(one, end) for one in intervals]) for end in ("low", "high"))
    true = np.linspace(0.005, 0.995, 199)
    chances = binom.pmf(np.arange(count + 1), count, true[:, None])
    covered = (chances * ((low <= true[:, None]) & (true[:, None] <= high))).sum(axis=1)
    # Discrete as it is, it covers 95 % on the average and dips near the ends.
    assert abs(covered.mean() - 0.95) < 0.01
    assert covered.min() > 0.83


BOUND = PairPrecision(
    label="P",
    x=0.0,
    y=0.0,
    separation_arcsec=0.1,
    position_angle_deg=1.0,
    magnitude_difference=0.1,
    expected_significance=9.0,
)


def test_bias_and_scatter_around_north_and_without_the_unmeasured():
    truth = PairTruth(separation_arcsec=1.0, position_angle_deg=359.0, magnitude_difference=0.5)
    rows = np.array(
        [
            [1.1, 1.0, 0.6, 0.1, 2.0, 0.3, 1, 1, 0],
            [1.3, 357.0, 0.2, 0.2, 3.0, 0.4, 1, 0, 0],
            [np.nan, np.nan, np.nan, np.nan, np.nan, np.nan, 0, 0, 0],
        ]
    )
    found = tally(rows, truth=truth, bound=BOUND)
    assert (found.trials, found.measured) == (3, 2)
    assert_allclose(found.bias.separation_arcsec, 0.2)
    assert_allclose(found.bias.position_angle_deg, 0.0, atol=1e-12)
    assert_allclose(found.bias.magnitude_difference, -0.1)
    assert_allclose(found.scatter.separation_arcsec, np.sqrt(0.02))
    assert_allclose(found.scatter.position_angle_deg, np.sqrt(8.0))
    assert_allclose(found.error.position_angle_deg, 2.5)
    assert_allclose(
        [one.fraction_resolved for one in (found.double, found.rayleigh, found.sparrow)],
        [2 / 3, 1 / 3, 0.0],
    )


def test_nothing_measured():
    truth = PairTruth(separation_arcsec=1.0, position_angle_deg=9.0, magnitude_difference=0.5)
    rows = np.array([[np.nan] * 6 + [0.0] * 3] * 4)
    found = tally(rows, truth=truth, bound=BOUND)
    assert found.measured == 0
    assert np.isnan([found.bias.separation_arcsec, found.scatter.separation_arcsec]).all()
    assert found.sparrow.low == 0.0
    assert found.sparrow.high > 0.3
