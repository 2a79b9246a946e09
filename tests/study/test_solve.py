"""Solving backwards: the answer is tried again, closed forms, and why there is none."""

import math
import re

import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.errors import InputError
from simimg.scene.file import replace
from simimg.study.reach import Reach
from tests.study.pairs import SPACE, pair_scene


@pytest.mark.slow
def test_rerun_at_the_answer_finds_the_target(tmp_path):
    scene = pair_scene(tmp_path)
    found = simimg.solve(
        scene,
        "pair.0.separation",
        until="resolved=0.7",
        between=("0.5 arcsec", "1.5 arcsec"),
        trials=150,
        workers=2,
    )
    assert found.reached
    assert found.unit == "arcsec"
    assert found.low < found.value < found.high
    assert found.high / found.low < 1.02
    assert _share(scene, found.value) == pytest.approx(0.7, abs=3.0 * _ERROR)
    # The interval brackets the truth: fresh noise falls short at its low end, exceeds at its high.
    assert _share(scene, found.low) < 0.7 + 2.0 * _ERROR
    assert _share(scene, found.high) > 0.7 - 2.0 * _ERROR
    # The check can fail: five intervals away the share is another.
    off = found.value - 5.0 * (found.high - found.low)
    assert _share(scene, off) < 0.7 - 5.0 * _ERROR


_FRESH = 500
_ERROR = math.sqrt(0.7 * 0.3 / _FRESH)


def _share(scene, separation):
    """Share resolved of noise draws that the search has not seen."""
    there = replace(scene, {"pair.0.separation": f"{separation} arcsec"})
    told = simimg.trials(there, count=_FRESH, seed=987654, workers=2)[0]
    return told.sparrow.fraction_resolved


def test_a_column_is_met_exactly(tmp_path):
    scene = replace(
        pair_scene(tmp_path),
        {
            "pair.0.electrons": None,
            "exposure.time": "10 s",
            "pair.0.magnitudes": [15.0, 15.5],
            "sky": {"surface_brightness": 21.0},
        },
    )
    goal = 1.5 * simimg.limits(scene).objects[0].snr
    found = simimg.solve(scene, "exposure.time", until=f"snr={goal}", between=("10 s", "100 s"))
    assert found.reached
    assert found.trials == 0
    there = replace(scene, {"exposure.time": f"{found.value:.12g} s"})
    assert simimg.limits(there).objects[0].snr == pytest.approx(goal, rel=1e-4)
    assert found.low < found.value < found.high


def test_rayleigh_by_diffraction_is_solved_for_the_aperture(tmp_path):
    # 1.21967 lambda / D (Airy 1835).
    scene = replace(pair_scene(tmp_path, SPACE), {"telescope.obstruction": None, "camera": None})
    found = simimg.solve(
        scene, "telescope.aperture", until="diffraction_rayleigh=0.1", between=("0.5 m", "5 m")
    )
    wavelength = simimg.limits(scene).wavelength_nm * 1e-9
    expected = 1.21967 * wavelength / (0.1 * math.pi / 180 / 3600)
    assert_allclose(found.value, expected, rtol=2e-4)


@pytest.mark.parametrize(
    ("changes", "key", "between", "says"),
    [
        ({}, "camera.read_noise", ("1 electron", "9 electron"), r"resolution \(the air\)"),
        ({"air": None, "pair.0.separation": "0.2 arcsec"}, "camera.read_noise",
         ("1 electron", "9 electron"), "sampling"),
        ({"pair.0.separation": "1.3 arcsec", "pair.0.electrons": ["60 electron", "60 electron"]},
         "camera.read_noise", ("4 electron", "9 electron"), "photons"),
    ],
)  # fmt: skip
def test_what_cannot_be_reached_says_why(tmp_path, changes, key, between, says):
    scene = replace(pair_scene(tmp_path), {"pair.0.separation": "0.5 arcsec"})
    found = simimg.solve(
        replace(scene, changes), key, until="resolved=0.95", between=between, trials=50
    )
    assert not found.reached
    assert math.isnan(found.value)
    assert found.to_dict()["value"] is None
    assert re.match(says, found.reason)


def test_search_by_factors_and_evenly(tmp_path):
    scene = pair_scene(tmp_path)
    reach = Reach.of(scene, "telescope.aperture", None)
    assert reach.by_factors
    assert reach.number(reach.start) == pytest.approx(2.0)
    assert reach.number(reach.high) == pytest.approx(200.0, rel=0.8)
    even = Reach.of(replace(scene, {"telescope.obstruction": 0.2}), "telescope.obstruction", None)
    assert not even.by_factors
    # The key's own range bounds the search.
    assert 0.0 <= even.number(even.low) < 0.2 < even.number(even.high) < 1.0
    second = Reach.of(scene, "pair.0.separation", ("100 mas", "2000 mas"))
    assert second.unit == "mas"


@pytest.mark.parametrize(
    ("key", "until", "between", "says"),
    [
        ("air.seing", "resolved=0.9", None, "not in the scene"),
        ("title", "resolved=0.9", None, "no number"),
        ("air.seeing", "resolved=0.999", None, "0.02 to 0.98"),
        ("air.seeing", "resolved", None, "no target"),
        ("air.seeing", "beauty=3", None, "no target"),
        ("air.seeing", "resolved=0.9", ("1 arcsec", "1 arcsec"), "two different"),
        ("air.seeing", "resolved=0.9", ("1 arcsec", "3 s"), "two units"),
        ("air.seeing", "resolved=0.9", ("1 s", "3 s"), "air.seeing"),
    ],
)
def test_wrong_questions(tmp_path, key, until, between, says):
    with pytest.raises(InputError, match=says):
        simimg.solve(pair_scene(tmp_path), key, until=until, between=between)


def test_no_pair_cannot_be_resolved(tmp_path):
    with pytest.raises(InputError, match="none to be resolved"):
        simimg.solve(
            replace(pair_scene(tmp_path), {"pair": None}), "air.seeing", until="resolved=0.9"
        )
