"""simimg inject from the command line."""

import numpy as np
from astropy.io import fits


def test_puts_objects_in(run, scene, files):
    assert run("expose", scene, "-o", "f.fits", "--quiet").code == 0
    done = run("inject", "f.fits", "--scene", scene, "-o", "g.fits", "--seed", "8")
    assert done.code == 0, done.err
    assert "3 objects put in (2 inside)" in done.out
    again = run("inject", "f.fits", "--scene", "f.fits", "-o", "h.fits", "--seed", "8", "--json")
    assert again.code == 0, again.err
    assert again.json["objects"] == 3
    assert again.json["gain"] == 1.5
    assert again.json["simulated"] is True
    assert files() == ["f.fits", "g.fits", "h.fits", "tiny.toml"]
    measured = run("measure", "g.fits", "--json").json
    assert [one["label"] for one in measured["pairs"]][:2] == ["SR-1", "SR-1"]


def test_options_stand_in_for_a_header(run, scene, folder):
    fits.PrimaryHDU(np.full((40, 50), 100, "i2")).writeto(folder / "bare.fits")
    words = ("inject", "bare.fits", "--scene", scene, "-o", "g.fits")
    refused = run(*words)
    assert refused.code == 2
    assert refused.err.strip() == (
        "bare.fits: gain: no gain is in its header; give --gain, electrons to the count"
    )
    assert not (folder / "g.fits").exists()
    done = run(
        *words, "--gain", "2", "--pixel-scale", "0.4 arcsec", "--saturation", "900", "--hdu", "0"
    )
    assert done.code == 0, done.err
    assert "pixels saturated" in done.out
    assert fits.getdata(folder / "g.fits").max() == 900


def test_wrong_input_writes_nothing(run, scene, files):
    assert run("expose", scene, "-o", "f.fits", "--quiet").code == 0
    before = files()
    for words, said in (
        (("inject", "f.fits", "--scene", scene, "-o", "f.fits"), "is the file that is read"),
        (("inject", "none.fits", "--scene", scene, "-o", "g.fits"), "no such file"),
        (("inject", "f.fits", "--scene", scene, "-o", "g.fits", "--gain", "-1"), "gain"),
        (("inject", "f.fits", "--scene", scene, "-o", "g.fits", "--hdu", "7"), "no HDU 7"),
        (("inject", "f.fits", "-o", "g.fits"), "--scene"),
    ):
        done = run(*words)
        assert done.code == 2, words
        assert said in done.err
        assert files() == before
