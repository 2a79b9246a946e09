"""solve: words, JSON, and wrong input."""

import pytest


def test_a_column_in_json(run, scene):
    arguments = ["--for", "exposure.time", "--until", "snr=300", "--between", "2 s:100 s"]
    found = run("solve", scene, *arguments, "--json", "--workers", 2)
    assert (found.code, found.err) == (0, "")
    answer = found.json
    assert answer["key"] == "exposure.time"
    assert answer["unit"] == "s"
    assert answer["target"] == "snr=300"
    assert answer["criterion"] is None
    assert answer["reached"] is True
    assert answer["trials"] == 0
    assert answer["low"] < answer["value"] < answer["high"]
    limits = run("limits", scene, "--set", f"exposure.time={answer['value']:.12g} s", "--json").json
    (pair,) = (one for one in limits["objects"] if one["kind"] == "pair")
    assert pair["snr"] == pytest.approx(300, rel=1e-3)


def test_what_cannot_be_reached_is_an_answer(run, scene):
    result = run(
        "solve",
        scene,
        "--for",
        "exposure.time",
        "--until",
        "resolved=0.9",
        "--between",
        "1 s:20 s",
        "--set",
        "pair.0.separation=0.7 arcsec",
        "--trials",
        50,
        "--json",
    )
    assert result.code == 0
    answer = result.json
    assert answer["reached"] is False
    assert answer["value"] is None
    assert answer["criterion"] == "sparrow"
    assert answer["reason"].startswith("resolution (the air)")


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["--until", "snr=3"], "--for"),
        (["--for", "air.seeing"], "--until"),
        (["--for", "air.seeing", "--until", "snr"], "no target"),
        (["--for", "air.seeing", "--until", "snr=3", "--between", "1 arcsec"], "START:STOP"),
        (["--for", "band.name", "--until", "snr=3"], "no number"),
        (["--for", "air.seeing", "--until", "resolved=0.9", "--trials", "3"], "--trials"),
    ],
)
def test_wrong_input(run, scene, files, arguments, says):
    result = run("solve", scene, *arguments)
    assert result.code == 2
    assert says in result.err
    assert files() == ["tiny.toml"]
