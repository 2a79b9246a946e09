"""simimg measure --trials."""

import json
import subprocess
import sys

import pytest


def test_json(run, scene):
    found = run("measure", scene, "--trials", "6", "--set", "exposure.count=2", "--json").json
    assert found["simulated"]
    assert len(found["scene_id"]) == 64
    pair = found["pairs"][0]
    assert (pair["label"], pair["trials"], pair["exposures"]) == ("SR-1", 6, 2)
    figures = {"separation_arcsec", "position_angle_deg", "magnitude_difference"}
    for part in (pair, pair["together"]):
        for criterion in ("rayleigh", "sparrow"):
            share = part[criterion]
            assert set(share) == {"fraction_resolved", "low", "high"}
            assert 0.0 <= share["low"] <= share["fraction_resolved"] <= share["high"] <= 1.0
        assert set(part["bias"]) == set(part["scatter"]) == figures
        assert set(part["bound"]) == figures | {"expected_significance"}
        assert 0.2 < part["scatter"]["separation_arcsec"] / part["bound"]["separation_arcsec"] < 2
    bounds = [part["bound"]["separation_arcsec"] for part in (pair, pair["together"])]
    assert bounds[0] / bounds[1] == pytest.approx(2**0.5)
    alone = run("measure", scene, "--trials", "3", "--json").json["pairs"][0]
    assert alone["together"] is None


def test_text(run, scene):
    found = run("measure", scene, "--trials", "4")
    assert found.code == 0
    assert "SR-1   4 trials" in found.out
    for words in ("second star certain", "resolved by Sparrow", "bias", "scatter", "bound"):
        assert words in found.out
    assert "simulation" in found.err
    assert "trials" not in found.err


def test_a_frame_carries_its_scene(run, scene, folder):
    frame = folder / "frame.fits"
    assert run("expose", scene, "-o", str(frame), "--quiet").code == 0
    of_scene, of_frame = (
        run("measure", path, "--trials", "3", "--json").json["pairs"]
        for path in (scene, str(frame))
    )
    assert of_scene == of_frame


def test_workers_of_the_command_itself(scene):
    """Processes started from the installed command, which must not start themselves again."""
    command = [
        sys.executable,
        "-m",
        "simimg_cli",
        "measure",
        str(scene),
        "--json",
        "--trials",
        "20",
    ]
    answers = [
        subprocess.run([*command, "--workers", workers], capture_output=True, text=True, check=True)
        for workers in ("1", "2")
    ]
    assert len(json.loads(answers[0].stdout)["pairs"]) == 1
    assert answers[0].stdout == answers[1].stdout


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("--trials", "0"), "--trials"),
        (("--trials", "2", "--near", "3,4"), "--trials takes one scene"),
        (("--set", "exposure.seed=4"), "go with --trials"),
        (("--workers", "0"), "--workers"),
        (("--trials", "2", "--without", "camera"), "camera.pixels"),
        (("--trials", "2", "--set", "exposure.sead=4"), "seed"),
    ],
)
def test_wrong_wishes(run, scene, words, said):
    found = run("measure", scene, *words)
    assert found.code == 2
    assert found.out == ""
    assert said in found.err


def test_no_pair(run, scene):
    assert run("measure", scene, "--trials", "2", "--set", "pair=[]", "--json").json["pairs"] == []
