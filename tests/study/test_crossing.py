"""Where a share crosses a level: coverage of the interval, and curves without a slope."""

import math

import numpy as np
import pytest
from scipy.special import ndtr, ndtri

from simimg.study.crossing import Tried, fit_crossing


def drawn(rng, *, crossing, slope, level, places, count):
    share = ndtr(ndtri(level) + slope * (np.array(places) - crossing))
    return [
        Tried(place, count, int(won))
        for place, won in zip(places, rng.binomial(count, share), strict=True)
    ]


def coverage(*, slope, level, shift=0.0, runs=120):
    rng = np.random.default_rng(77)
    held, places = 0, []
    for _ in range(runs):
        tried = drawn(
            rng, crossing=0.3, slope=slope, level=level, places=[0.0, 0.2, 0.35, 0.6], count=100
        )
        found = fit_crossing(tried, level)
        held += found.low <= 0.3 + shift <= found.high
        places.append(found.place)
    return held / runs, float(np.mean(places))


@pytest.mark.parametrize(("slope", "level"), [(4.0, 0.5), (4.0, 0.8), (-4.0, 0.5), (-3.0, 0.3)])
def test_the_interval_holds_the_truth_as_often_as_it_says(slope, level):
    share, middle = coverage(slope=slope, level=level)
    # Three binomial errors about 95 % for 120 runs.
    assert 0.95 - 3 * 0.0199 < share <= 1.0
    assert middle == pytest.approx(0.3, abs=0.02)


def test_a_wrong_place_is_not_held():
    share, _ = coverage(slope=4.0, level=0.5, shift=0.12)
    assert share < 0.6


def test_nothing_on_the_slope_leaves_the_gap():
    found = fit_crossing([Tried(1.0, 50, 0), Tried(2.0, 50, 0), Tried(3.0, 50, 50)], 0.5)
    assert (found.low, found.place, found.high) == (2.0, 2.5, 3.0)
    falling = fit_crossing([Tried(1.0, 50, 50), Tried(2.0, 50, 50), Tried(3.0, 50, 0)], 0.9)
    assert (falling.low, falling.high) == (2.0, 3.0)


@pytest.mark.parametrize("won", [(0, 0, 3), (97, 98, 99)])
def test_all_on_one_side_is_no_crossing(won):
    tried = [Tried(float(place), 100, one) for place, one in enumerate(won)]
    found = fit_crossing(tried, 0.5)
    assert not found.sure
    assert math.isnan(found.place)
