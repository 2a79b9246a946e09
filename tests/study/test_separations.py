"""The map of separations: against the limits, the bound, and trials."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.scene.file import replace
from simimg.study.outlook import blurred_limit
from simimg.study.separations import separation_map
from tests.study.pairs import pair_scene


@pytest.mark.slow
def test_map_against_limits_bound_and_trials(tmp_path):
    scene = pair_scene(tmp_path)
    found = separation_map(scene, largest=3.0, steps=4, share=0.9, workers=2)
    assert_allclose(found.magnitude_difference, [0.0, 1.0, 2.0, 3.0])
    unequal = replace(
        scene, {"pair.0.electrons": ["80000 electron", f"{80000 * 10**-0.8} electron"]}
    )
    limits = simimg.limits(unequal).objects[0].delivered
    assert found.sparrow_limit[2] == pytest.approx(limits.sparrow_arcsec, rel=1e-6)
    assert found.rayleigh_limit[2] == pytest.approx(limits.rayleigh_arcsec, rel=1e-6)
    # Noise puts what is resolved beyond the limit, and the second star shows long before.
    assert (found.resolved_sparrow > found.sparrow_limit).all()
    assert (found.shows < found.sparrow_limit).all()
    # At the separation where it begins to show, its significance is five.
    there = replace(unequal, {"pair.0.separation": f"{found.shows[2]} arcsec"})
    assert simimg.precision(there)[0].expected_significance == pytest.approx(5.0, rel=0.02)
    # Trials: 3 % nearer few are resolved, 3 % farther nearly all.
    for factor, low, high in ((0.97, 0.0, 0.6), (1.03, 0.9, 1.0)):
        apart = factor * found.resolved_sparrow[2]
        told = simimg.trials(replace(unequal, {"pair.0.separation": f"{apart} arcsec"}), count=200)[
            0
        ]
        assert low <= told.sparrow.fraction_resolved <= high


def test_contrast_is_the_map_read_the_other_way(tmp_path):
    found = separation_map(pair_scene(tmp_path), largest=8.0, steps=3)
    known = np.isfinite(found.contrast)
    assert known.any()
    assert (np.diff(found.contrast[known]) >= -1e-9).all()
    assert not known[0]


def test_an_uncertain_difference_raises_the_limit_of_an_equal_pair():
    sharp, _ = blurred_limit(1.0, 1.3, difference=0.0, spread=0.0)
    blurred, scatter = blurred_limit(1.0, 1.3, difference=0.0, spread=0.02)
    assert sharp == 1.0
    # The mean of |x|^(2/3) of a normal deviate: 2^(1/3) Gamma(5/6) / sqrt(pi).
    mean = 2 ** (1 / 3) * math.gamma(5 / 6) / math.sqrt(math.pi)
    assert blurred == pytest.approx(1.0 + 0.43 * 0.02 ** (2 / 3) * mean, rel=2e-3)
    assert scatter > 0.0
    other, _ = blurred_limit(1.0, 1.3, difference=1.0, spread=1e-6)
    assert other == pytest.approx(1.3, rel=1e-6)


@pytest.mark.parametrize("wrong", [{"share": 1.0}, {"largest": 0.0}, {"steps": 1}])
def test_out_of_range(tmp_path, wrong):
    with pytest.raises(ValueError, match="out of range"):
        separation_map(pair_scene(tmp_path), **wrong)
