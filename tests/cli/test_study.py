"""study: tables, pictures, JSON, an interrupt, and wrong input."""

import os
import signal
import subprocess
import sys
import time

import numpy as np
import pytest
from astropy.table import Table
from PIL import Image


def test_prints_a_table(run, scene, files):
    result = run("study", scene, "--vary", "air.seeing=1 arcsec:2 arcsec:2", "--workers", 1)
    assert result.code == 0
    assert "air.seeing" in result.out
    assert "1 arcsec" in result.out
    assert files() == ["tiny.toml"]


def test_json_and_table_say_the_same(run, scene, files):
    result = run(
        "study",
        scene,
        "--vary",
        "pair.0.separation=2 arcsec,3 arcsec",
        "--trials",
        4,
        "-o",
        "s.ecsv",
        "--json",
        "--workers",
        2,
    )
    assert result.code == 0
    found = result.json
    assert found["simulated"] is True
    assert found["trials"] == 4
    assert found["vary"][0] == {
        "key": "pair.0.separation",
        "unit": "arcsec",
        "values": ["2 arcsec", "3 arcsec"],
    }
    table = Table.read("s.ecsv")
    for row, point in zip(table, found["points"], strict=True):
        assert point["pair_0_separation"] == row["pair_0_separation"]
        assert point["fraction_rayleigh_low"] == row["fraction_rayleigh_low"]
        assert point["delivered_fwhm"] == row["delivered_fwhm"]
    assert files() == ["s.ecsv", "tiny.toml"]


@pytest.mark.parametrize("ending", ["png", "pdf", "svg"])
def test_pictures_are_the_same_bytes_twice(run, scene, ending):
    arguments = ["--vary", "pair.0.separation=2 arcsec:3 arcsec:2", "--workers", 1]
    for name in ("a", "b"):
        pictures = ["--plot", f"{name}.{ending}", "--strip", f"{name}-strip.{ending}"]
        result = run("study", scene, *arguments, *pictures)
        assert result.code == 0
        assert "Simulated" in result.out
    for what in ("", "-strip"):
        with open(f"a{what}.{ending}", "rb") as one, open(f"b{what}.{ending}", "rb") as other:
            assert one.read() == other.read()


def test_a_map_shows_its_boundary(run, scene):
    result = run(
        "study",
        scene,
        "--vary",
        "pair.0.separation=1 arcsec:3 arcsec:3",
        "--vary",
        "air.seeing=1 arcsec,2 arcsec",
        "--plot",
        "m.png",
        "--column",
        "delivered_fwhm",
        "--level",
        "1.6",
        "--workers",
        2,
    )
    assert result.code == 0
    assert "The white line is where it is 1.6" in " ".join(result.out.split())
    picture = np.asarray(Image.open("m.png").convert("RGB"))
    assert (picture == 255).all(axis=2).any()
    assert picture.std() > 20


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        ([], "nothing is to be varied"),
        (["--vary", "air.seeing"], "has no values"),
        (["--vary", "air.seeing=1:2"], "no values"),
        (["--vary", "air.seeing=1 arcsec:2 m:3"], "two units"),
        (["--vary", "air.seing=1 arcsec:2 arcsec:3"], "seing"),
        (["--vary", "air.seeing=1 arcsec:2 arcsec:3", "-o", "s.csv"], ".ecsv"),
        (["--vary", "air.seeing=1 arcsec:2 arcsec:3", "--plot", "s.gif"], ".png"),
        (["--vary", "air.seeing=1 arcsec:2 arcsec:3", "--pair", "nobody"], "nobody"),
        (["--vary", "air.seeing=1 arcsec:2 arcsec:3", "--level", "1"], "--plot"),
        (
            [
                *("--vary", "air.seeing=1:2 arcsec:2"),
                *("--vary", "telescope.aperture=1:2 m:2"),
                *("--strip", "s.png"),
            ],
            "vary one key",
        ),
    ],
)
def test_wrong_input(run, scene, files, arguments, says):
    result = run("study", scene, *arguments)
    assert result.code == 2
    assert says in result.err
    assert files() == ["tiny.toml"]


def test_existing_tables_stay(run, scene, folder):
    (folder / "s.ecsv").write_text("mine")
    result = run("study", scene, "--vary", "air.seeing=1:2 arcsec:2", "-o", "s.ecsv")
    assert result.code == 2
    assert "exists already" in result.err
    assert (folder / "s.ecsv").read_text() == "mine"


def test_an_interrupted_study_goes_on_where_it_was(run, scene, folder):
    arguments = [scene, "--vary", "air.seeing=1:2 arcsec:6", "-o", "s.ecsv"]
    process = subprocess.Popen(
        [sys.executable, "-m", "simimg_cli", "study", *arguments],
        stderr=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    left = folder / "s.ecsv.unfinished"
    for _ in range(1200):
        if left.exists() and left.read_bytes().count(b"\n") > 2:
            break
        assert process.poll() is None
        time.sleep(0.05)
    os.kill(process.pid, signal.SIGINT)
    _, err = process.communicate(timeout=60)
    assert process.returncode == 130
    assert "goes on from there" in err
    assert not (folder / "s.ecsv").exists()
    result = run("study", *arguments)
    assert result.code == 0
    assert "were done before" in result.err
    assert not left.exists()
    went_on = (folder / "s.ecsv").read_bytes()
    assert run("study", *arguments[:-1], "undisturbed.ecsv").code == 0
    assert (folder / "undisturbed.ecsv").read_bytes() == went_on
