"""A part of the detector that is read: the same sky, the same pixels, the same defects."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

import simimg
from simimg.assembly.detector import camera_settings
from simimg.camera.gathering import Exposure
from simimg.camera.reading import Reading
from simimg.camera.trailing import trail
from simimg.errors import InputError
from simimg.scene.file import load_scene, replace

SCENE = """
title = "a part of a detector"
[telescope]
aperture = "1 m"
[air]
seeing = "1.2 arcsec"
[band]
name = "V"
[camera]
pixels = [90, 80]
pixel_scale = "0.3 arcsec"
pixel_size = "12 um"
gain = "1.5 electron/adu"
bias = "500 adu"
serial = 6
rotation = "25 deg"
[sky]
electrons = "50 electron"
[exposure]
time = "60 s"
seed = 21
[pointing]
ra = "40 deg"
dec = "10 deg"
[[star]]
east = "2 arcsec"
north = "-3 arcsec"
electrons = "200000 electron"
[[star]]
east = "9 arcsec"
north = "4 arcsec"
electrons = "50000 electron"
"""
PART = [20, 12, 48, 40]
CUT = np.s_[12:52, 20:68]


@pytest.fixture
def whole(tmp_path):
    path = tmp_path / "part.toml"
    path.write_text(SCENE)
    return load_scene(path)


def test_it_shows_the_same_sky(whole):
    part = replace(whole, {"camera.sub_frame": PART})
    full, cut = (simimg.expose(one, keep={"expected"}) for one in (whole, part))
    assert cut.counts.shape == (40, 48)
    assert_allclose(cut.expected, full.expected[CUT], atol=1e-5 * full.expected.max())
    assert_allclose(
        cut.wcs.all_pix2world([[0, 0], [30, 7]], 0),
        full.wcs.all_pix2world([[20, 12], [50, 19]], 0),
        atol=1e-10,
    )
    assert_allclose(cut.truth["x"], full.truth["x"] - 20, atol=1e-9)
    assert_allclose(cut.truth["y"], full.truth["y"] - 12, atol=1e-9)
    assert cut.value("DETSEC") == "[21:68,13:52]"
    assert full.value("DETSEC") is None
    off = replace(part, {"camera.field_centre": [30.0, 20.0]})
    moved = simimg.expose(off, keep={"expected"})
    centred = simimg.expose(
        replace(whole, {"camera.field_centre": [30.0, 20.0]}), keep={"expected"}
    )
    assert_allclose(moved.expected, centred.expected[CUT], atol=1e-5 * full.expected.max())


def test_its_pixels_are_those_of_the_detector(whole):
    patterns = {
        "camera.flat_rms": 0.02,
        "camera.vignetting": 0.3,
        "camera.dust_rings": 3,
        "camera.dark_current": "1 electron/s",
        "camera.dark_rms": 0.3,
        "camera.hot_pixel_fraction": 0.02,
        "camera.dead_pixel_fraction": 0.02,
        "camera.bad_columns": 2,
        "camera.flickering_pixel_fraction": 0.02,
        "camera.read_noise": "5 electron",
        "camera.read_noise_spread": 0.4,
        "camera.shutter": {"kind": "iris", "travel": "2 s"},
    }
    full = camera_settings(replace(whole, patterns))
    part = camera_settings(replace(whole, patterns | {"camera.sub_frame": PART}))
    one = Exposure.of(np.full((80, 90), 1e3), full, 1, 0)
    other = Exposure.of(np.full((40, 48), 1e3), part, 1, 0)
    for name in ("response", "currents", "flicker", "mask"):
        assert_array_equal(getattr(other.fixed, name), getattr(one.fixed, name)[CUT])
    assert_array_equal(other.shutter, one.shutter[CUT])
    noise = [Reading.of(a, shape).noise for a, shape in ((one, (80, 90)), (other, (40, 48)))]
    assert_array_equal(noise[1], noise[0][CUT])


@pytest.mark.parametrize("side", [1, 2])
def test_the_structure_of_its_bias_is_that_of_its_columns(whole, side):
    """Without light and read noise the counts are the bias alone, exactly."""
    dark = replace(
        whole,
        {"sky": None, "star": None, "camera.bias_rms": "6 adu", "camera.binning": side},
    )
    full = simimg.expose(dark)
    part = simimg.expose(replace(dark, {"camera.sub_frame": PART}))
    rows, columns = (slice(one.start // side, one.stop // side) for one in CUT)
    assert np.ptp(full.counts) > 10
    assert_array_equal(part.counts, full.counts[rows, columns])


def test_in_bins_it_shows_the_same_sky(whole):
    binned = replace(whole, {"camera.binning": 2})
    full = simimg.expose(binned, keep={"expected"})
    part = simimg.expose(replace(binned, {"camera.sub_frame": PART}), keep={"expected"})
    assert part.counts.shape == (20, 24)
    assert_allclose(part.expected, full.expected[6:26, 10:34], atol=1e-5 * full.expected.max())
    assert_allclose(part.wcs.all_pix2world([[0, 0]], 0), full.wcs.all_pix2world([[10, 6]], 0))


def test_charge_passes_the_rows_before_it():
    """A lone row of charge loses one share for every row on its way."""
    left = []
    for before in (0, 400):
        electrons = np.zeros((3, 200))
        electrons[0] = 1e5
        trail(electrons, inefficiency=1e-4, length=2.0, rng=np.random.default_rng(1), before=before)
        left.append(electrons[0].mean() / 1e5)
    # 200 binomial draws of 1e5: the mean is known to 5e-6 and 4e-5.
    assert_allclose(left, [(1 - 1e-4) ** 1, (1 - 1e-4) ** 401], atol=2e-4)


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"camera.sub_frame": [50, 12, 48, 40]}, "does not lie on the detector's 90 x 80"),
        ({"camera.sub_frame": [0, 0, 0, 40]}, "does not lie on"),
        ({"camera.sub_frame": [1, 0, 10, 10], "camera.binning": 2}, "whole bins of 2"),
        ({"camera.sub_frame": PART, "camera.pixels": None}, "needs camera.pixels"),
        (
            {"camera.sub_frame": PART, "camera.amplifier_gains": ["1 electron/adu"] * 2},
            "read by one amplifier",
        ),
        (
            {"camera.sub_frame": PART, "detector": [{"name": "A", "offset": ["0 px", "0 px"]}]},
            "goes with one detector",
        ),
    ],
)
def test_what_is_no_part_is_refused(whole, changes, said):
    with pytest.raises(InputError, match=said):
        replace(whole, changes)
