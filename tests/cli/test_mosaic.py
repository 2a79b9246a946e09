"""Mosaics from the command line."""

import numpy as np
import pytest
from astropy.io import fits

from tests.cli.conftest import TINY

DETECTORS = """
[[detector]]
name = "a"
offset = ["-30 px", "0 px"]
[[detector]]
name = "b"
offset = ["30 px", "2 px"]
rotation = "2 deg"
[[star]]
label = "in b"
x = 54.2
y = 20.3
magnitude = 13
"""


@pytest.fixture
def several(folder):
    (folder / "mosaic.toml").write_text(TINY + DETECTORS)
    return "mosaic.toml"


def test_exposed_again_and_measured(run, several, folder):
    done = run("expose", several, "-o", "m.fits")
    assert done.code == 0, done.err
    assert done.out.splitlines()[0].startswith("m.fits[A]: 48 x 40 pixels")
    with fits.open(folder / "m.fits") as hdus:
        assert [one.name for one in hdus] == ["PRIMARY", "A", "B", "TRUTH", "SCENE"]
    again = run("expose", "m.fits", "-o", "n.fits", "--json")
    assert again.code == 0, again.err
    assert [one["name"] for one in again.json["frames"][0]["detectors"]] == ["A", "B"]
    assert (folder / "m.fits").read_bytes() == (folder / "n.fits").read_bytes()
    measured = run("measure", "m.fits", "--hdu", "B", "--json")
    assert measured.code == 0, measured.err
    with fits.open(folder / "m.fits") as hdus:
        truth = hdus["TRUTH"].data
        row = truth[list(truth["label"]).index("in b")]
        assert row["detector"] == "B"
    (star,) = measured.json["singles"]
    assert np.hypot(star["x"] - row["x"], star["y"] - row["y"]) < 0.05


def test_several_exposures(run, several, files):
    done = run("expose", several, "-o", "m.fits", "--set", "exposure.count=2", "--quiet")
    assert done.code == 0, done.err
    assert files() == ["m-000.fits", "m-001.fits", "mosaic.toml"]


def test_into_one_detector(run, several, folder):
    assert run("expose", several, "-o", "m.fits", "--quiet").code == 0
    done = run("inject", "m.fits", "--hdu", "A", "--scene", several, "-o", "i.fits")
    assert done.code == 0, done.err
    with fits.open(folder / "i.fits") as new, fits.open(folder / "m.fits") as old:
        assert (new["A"].data >= old["A"].data).all()
        assert (new["B"].data == old["B"].data).all()
        added = new["TRUTH"].data[new["TRUTH"].data["injected"]]
        assert set(added["detector"]) == {"A"}


def test_what_mosaics_have_not(run, several, files):
    before = files()
    for extra in (("--preview", "m.png"), ("--with", "psf")):
        done = run("expose", several, "-o", "m.fits", *extra)
        assert done.code == 2
        assert "mosaics have no preview" in done.err
        assert files() == before
    done = run("expose", several, "-o", "m.fits", "--set", "detector.0.name=b")
    assert done.code == 2
    assert "names another detector, too" in done.err
