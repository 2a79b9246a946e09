"""simimg calibrate from the command line."""

import pytest
from astropy.io import fits


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_makes_a_folder_and_goes_on(run, scene, folder):
    words = ("calibrate", scene, "--bias", "3", "--dark", "2", "--flat", "1", "--out", "cal")
    done = run(*words, "--flat-time", "2.5 s")
    assert done.code == 0, done.err
    assert done.out.strip() == "cal: 3 bias, 2 dark, 1 flat"
    expected = [f"bias-00{i}.fits" for i in range(3)]
    expected += ["dark-000.fits", "dark-001.fits", "flat-000.fits"]
    assert names(folder / "cal") == expected
    assert fits.getheader(folder / "cal/flat-000.fits")["EXPTIME"] == 2.5
    before = {name: (folder / "cal" / name).read_bytes() for name in expected}
    (folder / "cal/dark-000.fits").unlink()
    again = run(*words, "--flat-time", "2.5", "--json")
    assert again.code == 0, again.err
    assert [one["kept"] for one in again.json["frames"]] == [True] * 3 + [False] + [True] * 2
    assert {name: (folder / "cal" / name).read_bytes() for name in expected} == before


def test_another_scenes_frames_stay(run, scene, folder):
    words = ("calibrate", scene, "--bias", "2", "--out", "cal", "--quiet")
    assert run(*words).code == 0
    before = (folder / "cal/bias-001.fits").read_bytes()
    other = run(*words, "--set", "exposure.seed=9")
    assert other.code == 2
    assert "cal/bias-000.fits: exists already, and is another frame" in other.err
    assert (folder / "cal/bias-001.fits").read_bytes() == before
    assert run(*words, "--set", "exposure.seed=9", "--overwrite").code == 0
    assert (folder / "cal/bias-001.fits").read_bytes() != before


def test_ramps_and_pairs(run, scene, folder):
    done = run("calibrate", scene, "--ramp", "3", "--transfer", "2", "--out", "cal")
    assert done.code == 0, done.err
    assert names(folder / "cal") == [
        *(f"ramp-00{i}.fits" for i in range(3)),
        *(f"transfer-00{i}{letter}.fits" for i in range(2) for letter in "ab"),
    ]
    times = [fits.getheader(folder / "cal" / name)["EXPTIME"] for name in names(folder / "cal")]
    assert times[1] == pytest.approx(2 * times[0])
    assert times[3] == times[4] < times[5] == times[6]


def test_wrong_input_writes_nothing(run, scene, files):
    before = files()
    for words, said in (
        (("calibrate", scene, "--out", "cal"), "say how many"),
        (("calibrate", scene, "--bias", "1"), "--out"),
        (("calibrate", scene, "--bias", "-1", "--out", "cal"), "--bias"),
        (("calibrate", scene, "--flat", "1", "--flat-time", "0 s", "--out", "cal"), "--flat-time"),
        (("calibrate", scene, "--bias", "1", "--out", scene), "is a file"),
        (("calibrate", scene, "--bias", "1", "--out", "no/such"), "make the folder above it"),
        (("calibrate", "none.toml", "--bias", "1", "--out", "cal"), "none.toml"),
    ):
        done = run(*words)
        assert done.code == 2, words
        assert said in done.err
        assert files() == before
