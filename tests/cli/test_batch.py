"""batch: what it says, JSON, exit codes, and wrong input."""

import pytest
from astropy.table import Table

DRAWS = """
[draw]
"pair[0].separation" = { uniform = ["1 arcsec", "3 arcsec"] }
"""


@pytest.fixture
def drawn(folder, scene):
    path = folder / scene
    text = path.read_text().replace("[[pair]]", DRAWS + "\n[[pair]]", 1)
    path.write_text(text)
    return scene


def test_a_batch_and_again(run, drawn, folder):
    result = run("batch", drawn, "--count", 3, "--out", "frames", "--workers", 1)
    assert result.code == 0
    assert "3 of 3 frames are in frames" in result.out
    again = run("batch", drawn, "--count", 3, "--out", "frames", "--json", "--workers", 1)
    assert (again.code, again.err) == (0, "")
    found = again.json
    assert (found["frames"], found["before"], found["failed"]) == (3, 3, [])
    names = sorted(one.name for one in (folder / "frames").iterdir())
    assert names == [
        *(f"frame-00000{number}.fits" for number in range(3)),
        "manifest.ecsv",
        "scene.toml",
        "truth.fits",
    ]
    manifest = Table.read(folder / "frames" / "manifest.ecsv")
    assert manifest["pair_0_separation"].unit == "arcsec"
    measured = run("measure", "frames/frame-000001.fits", "--json")
    assert measured.code == 0
    truth = measured.json["pairs"][0]["truth"]
    assert truth["separation_arcsec"] == pytest.approx(manifest["pair_0_separation"][1], rel=1e-6)


def test_a_dry_run_writes_nothing(run, drawn, files):
    result = run("batch", drawn, "--count", 500, "--out", "frames", "--dry-run", "--json")
    assert result.code == 0
    assert (result.json["frames"], result.json["missing"]) == (500, 500)
    assert result.json["bytes"] > 500 * 2880
    words = run("batch", drawn, "--count", 500, "--out", "frames", "--dry-run")
    assert "500 frames, 500 of them missing" in words.out
    assert files() == ["tiny.toml"]


def test_a_failed_frame_is_told_and_the_exit_is_one(run, drawn):
    change = 'draw={ "pair.0.separation" = { uniform = ["-1 arcsec", "1 arcsec"] } }'
    result = run(
        "batch", drawn, "--count", 6, "--out", "frames", "--set", change, "--json", "--workers", 1
    )
    assert result.code == 1
    assert 0 < len(result.json["failed"]) < 6
    assert "separation" in result.json["failed"][0]["why"]


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["--out", "frames"], "--count"),
        (["--count", "3"], "--out"),
        (["--count", "0", "--out", "frames"], "--count"),
        (["--count", "3", "--out", "no/where"], "does not exist"),
        (["--count", "3", "--out", "tiny.toml"], "not a folder"),
        (["--count", "3", "--out", "frames", "--with", "all"], "--with"),
        (["--count", "3", "--out", "frames", "--set", "draw=3"], "draw"),
    ],
)
def test_wrong_input(run, drawn, files, arguments, says):
    result = run("batch", drawn, *arguments)
    assert result.code == 2
    assert says in result.err
    assert files() == ["tiny.toml"]
