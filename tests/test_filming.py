"""Cubes of short exposures: made, written, read and made again."""

import json
import shutil
import subprocess
import tracemalloc

import numpy as np
import pytest
from astropy.io import fits
from click.testing import CliRunner
from PIL import Image

import simimg
from simimg.cube import Cube, holds_cube
from simimg.errors import InputError
from simimg.study.batch import batch
from simimg_cli.main import simimg as command
from tests.assembly.scenes import scene as built

TEXT = """
title = "moving air"
[telescope]
aperture = "1 m"
obstruction = 0.3
[air]
seeing = "1 arcsec"
outer_scale = "25 m"
[[air.layer]]
height = "0 m"
wind = "8 m/s"
[[air.layer]]
height = "5000 m"
wind = "20 m/s"
direction = "80 deg"
[band]
centre = "600 nm"
width = "20 nm"
[camera]
pixels = [33, 31]
pixel_scale = "0.05 arcsec"
read_noise = "2 electron"
bias = "100 adu"
[sky]
electrons = 0.5
[exposure]
frame_time = "10 ms"
count = 6
seed = 5
[[pair]]
electrons = [20000, 10000]
separation = "0.3 arcsec"
position_angle = "62 deg"
"""


def scene(folder, **changes):
    return built(folder, TEXT, **changes)


def test_frames_follow_one_another(tmp_path):
    cube = simimg.expose_cube(scene(tmp_path))
    assert cube.shape == (6, 31, 33)
    counts = cube.counts
    assert counts.dtype == np.uint16
    np.testing.assert_array_equal(counts, np.array(list(cube)))
    flat = counts.reshape(6, -1) - 100.0
    # Speckles change but a little in 10 ms, and more in 50 ms.
    near = [np.corrcoef(flat[i], flat[i + 1])[0, 1] for i in range(5)]
    assert 0.3 < np.mean(near) < 0.995
    assert np.corrcoef(flat[0], flat[5])[0, 1] < np.mean(near)


@pytest.mark.parametrize("threads", [1, 2, 5])
def test_threads_change_no_bit(tmp_path, threads):
    one = scene(tmp_path, exposure__substeps=2)
    np.testing.assert_array_equal(
        simimg.expose_cube(one, threads=threads).counts, simimg.expose_cube(one).counts
    )


def test_electrons_are_of_one_frame(tmp_path):
    quiet = scene(tmp_path, camera__read_noise="0 electron", camera__pixels=[201, 201])
    frames = simimg.expose_cube(quiet).counts.astype(float) - 100.0
    light = frames.sum(axis=(1, 2)) - 0.5 * 201**2
    # Photon noise is 0.7 %; half a per cent goes beyond the transform's reach.
    np.testing.assert_allclose(light, 30000.0, rtol=0.03)


def test_sub_steps_smear(tmp_path):
    quiet = {"camera__read_noise": "0 electron", "pair": [], "exposure__frame_time": "200 ms"}
    star = "\n[[star]]\nelectrons = 1e6\n"
    text = TEXT[: TEXT.index("[[pair]]")] + star
    quiet.pop("pair")
    sharp = simimg.expose_cube(built(tmp_path, text, **quiet)).counts.astype(float)
    smeared = simimg.expose_cube(
        built(tmp_path, text, **quiet, exposure__substeps=16)
    ).counts.astype(float)
    assert (smeared - 100).max(axis=(1, 2)).mean() < 0.8 * (sharp - 100).max(axis=(1, 2)).mean()


def test_above_the_air_all_frames_show_one_image(tmp_path):
    text = TEXT[: TEXT.index("[air]")] + TEXT[TEXT.index("[band]") :]
    space = built(tmp_path, text, band__width="1 nm")
    frames = simimg.expose_cube(space).counts.astype(float)
    still = simimg.expose(space)
    expected = frames.mean(axis=0)
    noise = np.sqrt(np.maximum(expected - 100.0, 0.0) + 4.0)
    # One frame of the engine, and the mean of six: differences are noise.
    assert np.std((still.counts - expected) / noise) < 1.3
    assert np.std((frames[0] - frames[1]) / noise) == pytest.approx(np.sqrt(2.0), rel=0.1)


def test_multiplied_electrons(tmp_path):
    one = scene(tmp_path, camera__em_gain=50.0, camera__read_noise="20 electron")
    frames = simimg.expose_cube(one).counts
    assert frames.max() > 50 * simimg.expose_cube(scene(tmp_path)).counts.max() / 20


def test_file(tmp_path):
    cube = simimg.expose_cube(scene(tmp_path))
    path = tmp_path / "cube.fits"
    cube.write(path)
    with fits.open(path, checksum=True) as hdus:
        assert [one.name for one in hdus] == ["PRIMARY", "CUBE", "TRUTH", "SCENE"]
        assert all(one.header["SIMULATE"] is True for one in hdus)
        np.testing.assert_array_equal(hdus["CUBE"].data, cube.counts)
        assert hdus["CUBE"].header["EXPTIME"] == 0.01
        assert hdus["CUBE"].header["FRAMES"] == 6
        assert hdus["CUBE"].header["CTYPE1"].startswith("RA")
        assert len(hdus["TRUTH"].data) == 2
    if shutil.which("fitsverify"):
        run = subprocess.run(["fitsverify", path], capture_output=True, text=True, check=False)
        assert "0 warning(s) and 0 error(s)" in run.stdout
    again = Cube.read(path)
    assert holds_cube(path)
    assert again.shape == cube.shape
    assert again.dtype == cube.dtype
    np.testing.assert_array_equal(again.counts, cube.counts)
    np.testing.assert_array_equal(again.planes[4], cube.counts[4])
    assert again.value("FRAMES") == 6
    assert again.scene_files == tuple(cube.scene_files)
    with pytest.raises(InputError, match="exists already"):
        cube.write(path)


def test_memory_stays_flat(tmp_path):
    few = simimg.expose_cube(scene(tmp_path, camera__pixels=[64, 64], exposure__count=150))
    tracemalloc.start()
    few.write(tmp_path / "cube.fits")
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    # Screens of two layers take most of it; all frames at once would be 1.2 MB more.
    again = simimg.expose_cube(scene(tmp_path, camera__pixels=[64, 64], exposure__count=20))
    tracemalloc.start()
    again.write(tmp_path / "short.fits")
    assert peak < 1.15 * tracemalloc.get_traced_memory()[1] + 4e5
    tracemalloc.stop()


def test_command_makes_the_same_again(tmp_path):
    scene(tmp_path)
    first, second = tmp_path / "one.fits", tmp_path / "two.fits"
    run = CliRunner().invoke(command, ["expose", str(tmp_path / "scene.toml"), "-o", str(first)])
    assert run.exit_code == 0, run.output
    assert "6 frames of 33 x 31 pixels" in run.output
    run = CliRunner().invoke(command, ["expose", str(first), "-o", str(second), "--threads", "1"])
    assert run.exit_code == 0, run.output
    assert first.read_bytes() == second.read_bytes()


def test_a_preview_shows_some_frames(tmp_path):
    scene(tmp_path)
    path, picture = tmp_path / "cube.fits", tmp_path / "cube.png"
    words = ["expose", str(tmp_path / "scene.toml"), "-o", str(path), "--preview", str(picture)]
    run = CliRunner().invoke(command, [*words, "--json"])
    assert run.exit_code == 0, run.output
    assert json.loads(run.stdout)["cubes"][0]["preview"] == str(picture)
    with Image.open(picture) as drawn:
        assert drawn.width / drawn.height == pytest.approx(3 * 33 / (2 * 31))


@pytest.mark.parametrize(
    ("extra", "said"),
    [
        (["--set", "air.tilt_removed=near"], "air.tilt_removed"),
        (["--set", "camera.binning=2"], "camera.binning"),
        (["--with", "psf"], "no further extensions"),
        (["--set", "camera.pixel_scale=20 arcsec"], "smaller pixel"),
        (["--set", 'detector=[{name="A", offset=["0 px", "9 px"]}]'], "detector: is a mosaic"),
    ],
)
def test_what_cubes_have_not(tmp_path, extra, said):
    scene(tmp_path)
    path = tmp_path / "cube.fits"
    run = CliRunner().invoke(
        command, ["expose", str(tmp_path / "scene.toml"), "-o", str(path), *extra]
    )
    assert run.exit_code == 2
    assert said in run.output
    assert not path.exists()
    assert not list(tmp_path.glob(".simimg*"))


def test_a_batch_is_of_single_frames(tmp_path):
    with pytest.raises(InputError, match=r"exposure\.frame_time: makes a cube"):
        batch(scene(tmp_path), count=2, folder=tmp_path / "many")
    assert not (tmp_path / "many").exists()


def test_a_frame_time_is_needed(tmp_path):
    text = TEXT.replace("frame_time", "time")
    with pytest.raises(InputError, match="frame_time"):
        simimg.expose_cube(built(tmp_path, text))


def test_one_of_two_times(tmp_path):
    with pytest.raises(InputError, match=r"contradicts exposure\.time"):
        built(tmp_path, TEXT.replace("count = 6", 'time = "1 s"'))


def test_a_cube_at_a_station_of_long_exposures_and_back(tmp_path):
    long = TEXT.replace('frame_time = "10 ms"', 'time = "30 s"')
    (tmp_path / "station.toml").write_text(long)
    over = tmp_path / "over.toml"
    over.write_text(
        'base = "station.toml"\n[exposure]\nframe_time = "20 ms"\nsubsteps = 3\ncount = 2\n'
    )
    moving = simimg.load_scene(over)
    assert moving.exposure.frame_time == moving.exposure.time == 0.02
    assert simimg.expose_cube(moving).shape == (2, 31, 33)
    still = simimg.load_scene(over, overrides=["exposure.time=2 s"])
    assert still.exposure.frame_time is None
    assert (still.exposure.time, still.exposure.substeps) == (2.0, 1)


@pytest.mark.parametrize("length", [-3000, -40000])
def test_damaged_cubes(tmp_path, length):
    path = tmp_path / "cube.fits"
    simimg.expose_cube(scene(tmp_path)).write(path)
    path.write_bytes(path.read_bytes()[:length])
    with pytest.raises(InputError):
        Cube.read(path).counts.sum()
