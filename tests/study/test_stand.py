"""Exposures of a stand are those of expose; sums of them are fits of them together; short cuts."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from simimg.exposure import expose_prepared, prepare
from simimg.resolving.judging import judge
from simimg.resolving.measure import named_pairs
from simimg.resolving.pairfit import pair_geometry
from simimg.resolving.pairlimits import PairLimits
from simimg.resolving.sighting import look
from simimg.resolving.starfit import fit_stars
from simimg.study.exposures import Exposures, Recipe
from simimg.study.knownpair import KnownPair
from tests.study.pairs import AIR, SPACE, pair_scene


def draws(scene):
    """The scene's exposures, its pair, and the frames that `expose` makes of it."""
    prepared = prepare(scene)
    frames = [expose_prepared(prepared, index=index) for index in range(4)]
    pairs = named_pairs(frames[0])
    return Exposures(Recipe.of(prepared, pairs, seed=scene.exposure.seed)), pairs[0], frames


def test_exposures_are_those_of_expose(tmp_path):
    made, _, frames = draws(pair_scene(tmp_path, camera__full_well="6000 electron"))
    for number, frame in enumerate(frames):
        one = made.one(number)
        assert_array_equal(one.frame.counts, frame.counts)
        assert_array_equal(one.frame.mask, frame.mask)


def test_sum_leaves_out_what_is_full_in_one(tmp_path):
    made, _, frames = draws(pair_scene(tmp_path, camera__full_well="7200 electron"))
    together = made.together(range(4))
    full_in = [
        np.zeros((48, 48), int) if frame.mask is None else frame.mask & 1 for frame in frames
    ]
    full = np.any(full_in, axis=0)
    assert full.any()
    assert not np.all(full_in, axis=0)[full].all()
    assert_array_equal(together.usable(), ~full)
    parts = sum(made.one(number).electrons() for number in range(4))
    assert_allclose(together.electrons()[~full], parts[~full], rtol=1e-12)
    assert together.variance == 4.0 * made.one(0).variance


def test_noiseless_is_the_mean_of_many(tmp_path):
    made, _, _ = draws(pair_scene(tmp_path))
    mean = np.mean([made.one(number).electrons() for number in range(400)], axis=0)
    expected = made.noiseless().electrons()
    spread = np.sqrt((expected + 25.2) / 400)
    deviates = (mean - expected) / spread
    # 2304 normal deviates: mean within 4 of its errors, none beyond 4.7.
    assert abs(deviates.mean()) < 4 / 48
    assert abs(deviates.std() - 1.0) < 4 / 68
    assert np.abs(deviates).max() < 4.7
    assert_allclose(made.noiseless(3).electrons(), 3.0 * expected)


@pytest.mark.parametrize("text", [AIR, SPACE])
def test_sum_says_what_the_joint_likelihood_says(tmp_path, text):
    made, pair, _ = draws(pair_scene(tmp_path, text))
    offs = []
    for trial in range(12):
        numbers = range(5 * trial, 5 * trial + 5)
        added = look(made.together(numbers), pair.first, other=pair.second)
        each = [cut for number in numbers for cut in _cutouts(made.one(number), added)]
        start = added.double.places
        joint = fit_stars(each, places=start, electrons=added.double.electrons / 5.0)
        one, two = pair_geometry(added.double), pair_geometry(joint)
        assert_allclose(two.errors, one.errors, rtol=0.01)
        offs.append(
            [
                (two.separation - one.separation) / one.errors[0],
                (two.angle - one.angle) / one.errors[1],
                (two.magnitude_difference - one.magnitude_difference) / one.errors[2],
            ]
        )
    # What the split of the read noise over five frames tells beyond their sum is next to nothing.
    assert np.abs(offs).max() < 0.1


def _cutouts(observation, sighting):
    return [
        observation.cutout(
            cutout.x0 + (cutout.electrons.shape[1] - 1) / 2,
            cutout.y0 + (cutout.electrons.shape[0] - 1) / 2,
            (cutout.electrons.shape[1] - 1) / 2,
        )
        for cutout in sighting.cutouts
    ]


CASES = {
    "equal, close": (AIR, {"pair__0__separation": "0.3 arcsec"}),
    "mirror solution": (
        AIR,
        {
            "pair__0__separation": "0.12 arcsec",
            "pair__0__electrons": ["1500000 electron", "300000 electron"],
        },
    ),
    "wide": (AIR, {"pair__0__separation": "3 arcsec"}),
    "faint in the ring": (SPACE, {"pair__0__electrons": ["200000 electron", "4000 electron"]}),
    "faint": (AIR, {"pair__0__electrons": ["500 electron", "400 electron"]}),
}


@pytest.mark.parametrize("case", CASES)
def test_short_cut_finds_what_the_whole_search_finds(tmp_path, case):
    text, changes = CASES[case]
    made, pair, _ = draws(pair_scene(tmp_path, text, **changes))
    known = KnownPair.prepare(made.noiseless(), pair, alone=True)
    limits = PairLimits(made.blank.delivered, pairs=1000)
    quick = 0
    for number in range(40):
        observation = made.one(number)
        short = known._quickly(observation) if known.quick else None
        if short is None:
            continue
        quick += 1
        whole = look(observation, pair.first, other=pair.second)
        one, two = (judge(observation, s, limits, named=pair).record for s in (short, whole))
        off = abs(one.separation_arcsec - two.separation_arcsec)
        assert off < 0.02 * two.separation_error_arcsec
        assert one.rayleigh.verdict == two.rayleigh.verdict
        assert one.sparrow.verdict == two.sparrow.verdict
    assert known.quick == (case not in ("faint", "mirror solution"))
    assert quick == (40 if known.quick else 0)


def test_whole_search_where_others_shine_in(tmp_path):
    made, pair, _ = draws(pair_scene(tmp_path))
    known = KnownPair.prepare(made.noiseless(), pair, alone=False)
    assert not known.quick
    observation = made.one(0)
    whole = look(observation, pair.first, other=pair.second)
    assert_array_equal(known.look(observation).double.places, whole.double.places)
    # Doubt about the quick fit ends in the whole search, too.
    sure = KnownPair.prepare(made.noiseless(), pair, alone=True)
    elsewhere = np.array([[9.0, 9.0, 0.0], [9.0, -9.0, 0.0]])
    lost = replace(sure, double=sure.double + elsewhere)
    assert_array_equal(lost.look(observation).double.places, whole.double.places)
