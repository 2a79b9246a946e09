"""Frames through the whole camera: sizes, places, sections, and what a user reads back."""

import math
import shutil
import subprocess

import numpy as np
import pytest
from astropy.io import fits
from astropy.nddata.utils import Cutout2D
from astropy.wcs import WCS
from numpy.testing import assert_allclose, assert_array_equal

import simimg
from simimg.errors import InputError
from simimg.scene.file import load_scene, replace

SCENE = """
title = "a camera in full"
[telescope]
aperture = "1 m"
focal_length = "10 m"
[air]
seeing = "1.2 arcsec"
[band]
name = "V"
[camera]
pixels = [120, 96]
pixel_size = "12 um"
gain = "1.5 electron/adu"
read_noise = "4 electron"
bias = "500 adu"
bit_depth = 20
serial = 6
[sky]
electrons = "50 electron"
[exposure]
time = "60 s"
seed = 21
[[star]]
label = "A"
x = 40.3
y = 30.8
electrons = "200000 electron"
[[star]]
label = "B"
x = 20.0
y = 33.25
electrons = "90000 electron"
"""


@pytest.fixture
def scene(tmp_path):
    path = tmp_path / "camera.toml"
    path.write_text(SCENE)
    return load_scene(path)


EVERYTHING = {
    "camera.flat_rms": 0.01,
    "camera.vignetting": 0.1,
    "camera.dust_rings": 3,
    "camera.dark_current": "0.1 electron/s",
    "camera.dark_rms": 0.2,
    "camera.hot_pixel_fraction": 0.002,
    "camera.flickering_pixel_fraction": 0.001,
    "camera.dead_pixel_fraction": 0.001,
    "camera.bad_columns": 1,
    "camera.cosmic_ray_rate": "30 / (cm2 min)",
    "camera.full_well": "30000 electron",
    "camera.bleeding": True,
    "camera.shutter": {"kind": "iris", "travel": "30 ms"},
    "camera.transfer_inefficiency": 1e-5,
    "camera.pixel_coupling": 0.01,
    "camera.read_noise_spread": 0.3,
    "camera.nonlinearity": 0.01,
    "camera.amplifier_gains": ["1.5 electron/adu", "1.6 electron/adu"],
    "camera.amplifier_biases": ["500 adu", "520 adu"],
    "camera.crosstalk": 1e-4,
    "camera.bias_rms": "1 adu",
    "camera.bias_drift": "2 adu",
    "camera.prescan": 8,
    "camera.overscan": 32,
    "camera.charge_diffusion": 0.3,
}


def centroid(frame, x, y, *, half=9):
    level = float(frame.value("BIASLVL"))
    cut = Cutout2D(frame.counts.astype(float) - level, (x, y), 2 * half + 1)
    light = cut.data - np.median(cut.data)
    weight = np.where(light > 0.02 * light.max(), light, 0.0)
    rows, columns = np.mgrid[: light.shape[0], : light.shape[1]]
    own = (weight * columns).sum() / weight.sum(), (weight * rows).sum() / weight.sum()
    return cut.to_original_position(own)


@pytest.mark.parametrize("extra", [{}, {"camera.binning": 3}, {"camera.em_gain": 200.0}])
def test_everything_at_once_is_sound_fits_and_the_same_again(scene, tmp_path, extra):
    full = replace(scene, EVERYTHING | extra)
    frame = simimg.expose(full, keep=("expected", "psf"), threads=1)
    again = simimg.expose(full, keep=("expected", "psf"), threads=3)
    assert_array_equal(frame.counts, again.counts)
    assert_array_equal(frame.mask, again.mask)
    frame.write(tmp_path / "f.fits")
    if shutil.which("fitsverify"):
        said = subprocess.run(
            ["fitsverify", "-q", tmp_path / "f.fits"], capture_output=True, text=True, check=False
        )
        assert "verification OK" in said.stdout
    made = simimg.Frame.read(tmp_path / "f.fits")
    assert_array_equal(made.counts, frame.counts)
    assert made.mask.any()


def test_overscan_and_sections(scene, tmp_path):
    frame = simimg.expose(replace(scene, {"camera.prescan": 8, "camera.overscan": 32}))
    assert frame.counts.shape == (96, 160)
    assert frame.value("DATASEC") == "[9:128,1:96]"
    assert frame.value("TRIMSEC") == "[9:128,1:96]"
    assert frame.value("BIASSEC") == "[129:160,1:96]"
    beyond = frame.counts[:, 128:].astype(float)
    assert beyond.mean() == pytest.approx(500.0, abs=5 * 4 / 1.5 / math.sqrt(beyond.size))
    assert beyond.std() == pytest.approx(4 / 1.5, rel=0.05)
    # The sky begins where the section says.
    assert frame.counts[:, 8:20].mean() > 520
    assert frame.counts[:, :8].mean() < 505
    # Places count from the frame's own first pixel, and the coordinates agree with them.
    assert_allclose(frame.truth["x"], [48.3, 28.0])
    x, y = frame.wcs.all_world2pix(frame.truth["ra"], frame.truth["dec"], 0)
    assert_allclose(x, frame.truth["x"], atol=1e-6)
    assert_allclose(y, frame.truth["y"], atol=1e-6)
    assert centroid(frame, 48, 31) == pytest.approx((48.3, 30.8), abs=0.05)
    frame.write(tmp_path / "f.fits")
    with fits.open(tmp_path / "f.fits") as hdus:
        assert WCS(hdus[0].header).wcs.crpix[0] == pytest.approx(59.5 + 1 + 8)


def test_binned_frames_are_sums_at_the_right_places(scene):
    plain = simimg.expose(scene, keep=("expected",))
    binned = replace(scene, {"camera.binning": 2, "star.0.x": 19.9, "star.0.y": 15.15,
                             "star.1.x": 9.75, "star.1.y": 16.375,
                             "sky.electrons": "200 electron"})  # fmt: skip
    frame = simimg.expose(binned, keep=("expected",))
    assert frame.counts.shape == (48, 60)
    assert frame.value("BINNING") == 2
    # The same stars: x of a bin is (x - 1/2) / 2 of the pixels'.
    sums = plain.expected.reshape(48, 2, 60, 2).sum(axis=(1, 3))
    assert_allclose(frame.expected, sums, rtol=2e-4, atol=0.02)
    assert_allclose(frame.truth["x"], (plain.truth["x"] - 0.5) / 2)
    assert_allclose(frame.truth["ra"], plain.truth["ra"], atol=1e-9)
    assert float(frame.value("PIXSCALE")) == pytest.approx(2 * float(plain.value("PIXSCALE")))
    # Read once: the variance of an empty corner is the sky's and one read noise's.
    corner = frame.counts[30:, 35:].astype(float) * 1.5
    assert corner.var() == pytest.approx(200 + 16, rel=0.25)
    pair = simimg.limits(binned).objects[0]
    assert pair.peak_electrons == pytest.approx(float(frame.expected.max() - 200), rel=0.02)


def test_diffusion_widens_the_image_as_a_gaussian(scene):
    sharp = simimg.expose(scene, keep=("expected",)).expected
    spread = simimg.expose(
        replace(scene, {"camera.charge_diffusion": 0.6}), keep=("expected",)
    ).expected
    rows, columns = np.mgrid[:96, :120]

    def second(image):
        near = np.hypot(columns - 40.3, rows - 30.8) < 14
        light = np.where(near, image - 50.0, 0.0)
        middle = (light * columns).sum() / light.sum()
        return (light * (columns - middle) ** 2).sum() / light.sum()

    # Variances add, but for what leaves the circle.
    assert second(spread) - second(sharp) == pytest.approx(0.36, rel=0.1)
    assert spread.sum() == pytest.approx(sharp.sum(), rel=1e-4)


def test_multiplication_keeps_electrons_in_the_header(scene):
    frame = simimg.expose(replace(scene, {"camera.em_gain": 100.0, "camera.gain": "30 e-/adu"}))
    assert float(frame.value("GAIN")) == pytest.approx(0.3)
    assert float(frame.value("RDNOISE")) == pytest.approx(0.04)
    assert frame.value("EXCESS") == pytest.approx(1.99)
    light = (frame.counts.astype(float) - 500.0) * 0.3
    corner = light[60:, 70:]
    assert corner.mean() == pytest.approx(50.0, rel=0.05)
    # Twice the variance of counting alone.
    assert corner.var() == pytest.approx(100.0, rel=0.2)


def test_amplifiers_are_told_in_the_header(scene):
    frame = simimg.expose(
        replace(scene, {"camera.amplifier_gains": ["1 e-/adu", "2 e-/adu"],
                        "camera.amplifier_biases": ["400 adu", "800 adu"]})
    )  # fmt: skip
    assert [frame.value(f"GAIN{i}") for i in (1, 2)] == [1.0, 2.0]
    assert [frame.value(f"BIASLV{i}") for i in (1, 2)] == [400.0, 800.0]
    assert [frame.value(f"AMPSEC{i}") for i in (1, 2)] == ["[1:60,1:96]", "[61:120,1:96]"]
    assert frame.counts[60:, :50].mean() == pytest.approx(450, abs=2)
    assert frame.counts[60:, 70:].mean() == pytest.approx(825, abs=2)


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"camera.bleeding": True}, "full_well"),
        ({"camera.cosmic_ray_rate": 5}, "cosmic_ray_rate"),
        ({"camera.cosmic_ray_rate": "5 / s"}, "cosmic_ray_rate"),
        ({"camera.amplifier_gains": ["1 e-/adu"] * 3}, "amplifier_gains"),
        (
            {"camera.amplifier_gains": ["1 e-/adu"] * 2, "camera.amplifier_biases": ["1 adu"] * 4},
            "amplifier_biases",
        ),
        ({"camera.em_gain": 0.5}, "em_gain"),
        ({"camera.pixel_coupling": 0.3}, "pixel_coupling"),
        ({"camera.shutter": {"kind": "door", "travel": "1 s"}}, "shutter.kind"),
        ({"camera.binning": 0}, "binning"),
        ({"camera.binning": 32, "camera.pixels": [20, 20]}, "binning"),
        ({"camera.hot_pixel_fraction": 1.0}, "hot_pixel_fraction"),
    ],
)
def test_wrong_cameras_name_the_key(scene, changes, says):
    with pytest.raises(InputError, match=says):
        replace(scene, changes)


PAIR = """
[[pair]]
label = "P"
x = 80.2
y = 50.4
electrons = ["60000 electron", "40000 electron"]
separation = "2.6 arcsec"
position_angle = "70 deg"
"""


@pytest.mark.parametrize(
    "extra",
    [
        {"camera.prescan": 8, "camera.overscan": 32},
        {"camera.em_gain": 150.0, "camera.gain": "20 e-/adu"},
        {
            "camera.amplifier_gains": ["1.4 e-/adu", "1.7 e-/adu", "1.3 e-/adu", "1.5 e-/adu"],
            "camera.amplifier_biases": ["450 adu", "520 adu", "480 adu", "500 adu"],
            "camera.overscan": 16,
        },
        {
            "camera.cosmic_ray_rate": "60 / (cm2 min)",
            "camera.hot_pixel_fraction": 0.005,
            "camera.bad_columns": 2,
        },
    ],
)
def test_measured_within_errors_whatever_the_camera(tmp_path, extra):
    path = tmp_path / "pair.toml"
    path.write_text(SCENE + PAIR)
    scene = replace(load_scene(path), extra)
    pulls, light = [], []
    for index in range(6):
        frame = simimg.expose(scene, index=index)
        (pair,) = [one for one in simimg.measure(frame) if one.label == "P"]
        pulls.append((pair.separation_arcsec - 2.6) / pair.separation_error_arcsec)
        assert pair.x == pytest.approx(80.2 + scene.camera.prescan, abs=0.2)
    from simimg.resolving.measure import measure_frame

    for single in measure_frame(frame).singles:
        if single.label in ("A", "B"):
            true = {"A": 2e5, "B": 9e4}[single.label]
            light.append((single.electrons - true) / single.electrons_error)
    assert abs(np.mean(pulls)) < 4 / math.sqrt(6)
    assert np.std(pulls) < 2.0
    assert len(light) == 2
    assert np.abs(light).max() < 5.0


def test_a_raw_frame_says_what_is_left_in_it(scene):
    from simimg.resolving.measure import measure_frame

    frame = simimg.expose(replace(scene, {"camera.flat_rms": 0.02, "camera.nonlinearity": 0.01}))
    said = " ".join(measure_frame(frame, near=[(40.3, 30.8)]).warnings)
    assert "flat response, non-linearity not corrected" in said
    clean = measure_frame(simimg.expose(scene), near=[(40.3, 30.8)])
    assert "not corrected" not in " ".join(clean.warnings)


def test_the_saturation_level_is_where_frames_saturate(scene):
    bright = {"star.0.electrons": "3e6 electron", "camera.full_well": "20000 electron"}
    for extra in ({}, {"camera.nonlinearity": 0.1}, {"camera.em_gain": 3.0}):
        frame = simimg.expose(replace(scene, bright | extra))
        top, level = float(frame.counts.max()), float(frame.value("SATURATE"))
        assert top == pytest.approx(level, rel=0.02)
    binned = simimg.expose(replace(scene, bright | {"camera.binning": 2, "star.0.x": 20.0}))
    assert float(binned.value("SATURATE")) == pytest.approx(4 * 20000 / 1.5 + 500)


def test_patterns_stay_whatever_is_read_about_them(scene):
    wide = {"camera.prescan": 8, "camera.overscan": 30}
    pattern = {"camera.bias_rms": "30 adu", "star": None, "sky": None}
    narrow = simimg.expose(replace(scene, pattern)).counts.mean(axis=0)
    about = simimg.expose(replace(scene, pattern | wide)).counts.mean(axis=0)[8:128]
    assert np.corrcoef(narrow, about)[0, 1] > 0.99


def test_a_multiplied_frame_read_by_its_header_alone(scene, tmp_path):
    from simimg.resolving.measure import measure_frame

    full = replace(scene, {"camera.em_gain": 150.0, "camera.gain": "20 e-/adu"})
    frame = simimg.expose(full, keep=("psf",))
    own = measure_frame(frame).singles
    frame.write(tmp_path / "f.fits")
    with fits.open(tmp_path / "f.fits") as hdus:
        hdus[0].writeto(tmp_path / "bare.fits")
    bare = simimg.Frame.read(tmp_path / "bare.fits")
    from simimg.resolving.psfsource import PsfChoice

    alone = measure_frame(bare, psf=PsfChoice(source="file", image=frame.psf)).singles
    by_place = {round(one.x): one for one in alone}
    for one in own:
        other = by_place[round(one.x)]
        assert other.electrons == pytest.approx(one.electrons, rel=0.05)
        assert other.electrons_error == pytest.approx(one.electrons_error, rel=0.15)


def test_limits_know_the_noise_of_multiplication(tmp_path):
    path = tmp_path / "pair.toml"
    path.write_text(SCENE + PAIR)
    scene = load_scene(path)
    plain = {one.label: one for one in simimg.limits(scene).objects}
    many = replace(scene, {"camera.em_gain": 400.0, "camera.bit_depth": 31})
    found = {one.label: one for one in simimg.limits(many).objects}
    # Bright: light's noise alone, with twice its variance; the read noise is gone.
    n, b = 2e5, 50.0
    pixels = (n**2 / plain["A"].snr ** 2 - n) / (b + 16.0)
    excess = 2.0 - 1.0 / 400.0
    expected = n / math.sqrt(excess * (n + pixels * b) + pixels * (4.0 / 400.0) ** 2)
    assert found["A"].snr == pytest.approx(expected, rel=1e-6)
    assert found["A"].peak_electrons == pytest.approx(plain["A"].peak_electrons)
    assert 1.2 < found["P"].bound.separation_arcsec / plain["P"].bound.separation_arcsec < 1.42
    told = simimg.trials(many, count=60)[0]
    assert told.scatter.separation_arcsec == pytest.approx(
        found["P"].bound.separation_arcsec, rel=0.3
    )
