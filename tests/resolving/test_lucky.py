"""Sums of short exposures: what is chosen, where it is laid, and what it says."""

import json

import numpy as np
import pytest
from click.testing import CliRunner

import simimg
from simimg.resolving.cubesum import chosen_frame, measure_cube, sum_frame
from simimg.resolving.lucky import judge_frames, shift_and_add
from simimg.scene.file import scene_from_record
from simimg_cli.main import simimg as command
from tests.resolving.test_speckle import LIMIT, scene


def blob(x, y, width, light=1e4, side=41):
    v, u = np.indices((side, side))
    image = np.exp(-((u - x) ** 2 + (v - y) ** 2) / (2.0 * width**2))
    return light * image / image.sum() + 7.0


@pytest.mark.parametrize("quality", ["peak", "sharpness"])
def test_the_sharpest_are_kept(quality):
    widths = [4.0, 2.0, 3.0, 1.5, 5.0, 2.5]
    frames = [blob(18 + i, 22 - i, width) for i, width in enumerate(widths)]
    sharp = judge_frames(frames, background=7.0, quality=quality)
    assert list(sharp.best(0.5)) == [1, 3, 5]
    assert list(sharp.best(0.01)) == [3]
    assert list(sharp.best(1.0)) == list(range(6))
    assert [tuple(place) for place in sharp.brightest] == [(22 - i, 18 + i) for i in range(6)]
    np.testing.assert_allclose(sharp.centroid, [(22 - i, 18 + i) for i in range(6)], atol=0.05)


def test_shift_and_add_lays_places_on_one_another():
    frames = [blob(12 + 3 * i, 30 - 2 * i, 2.0) for i in range(5)]
    sharp = judge_frames(frames, background=7.0)
    total = shift_and_add(
        frames, sharp.brightest, chosen=[0, 2, 4], target=(20, 20), background=7.0
    )
    np.testing.assert_allclose(
        total[12:29, 12:29], 3.0 * blob(20, 20, 2.0)[12:29, 12:29], rtol=1e-3
    )
    # Counts that came from outside a frame are background.
    assert total[0, 0] == pytest.approx(21.0, abs=1e-6)


@pytest.mark.parametrize("keep", [0.0, -0.1, 1.5, np.nan])
def test_shares_out_of_range(keep):
    sharp = judge_frames([blob(20, 20, 2.0)], background=7.0)
    with pytest.raises(ValueError, match="keep"):
        sharp.best(keep)
    with pytest.raises(ValueError, match="quality"):
        judge_frames([blob(20, 20, 2.0)], background=7.0, quality="beauty")


def test_sum_is_an_exposure_as_long_as_all_frames(tmp_path):
    cube = simimg.expose_cube(scene(tmp_path, count=40, side=64))
    frame = sum_frame(cube)
    np.testing.assert_array_equal(frame.counts, cube.counts.astype(int).sum(axis=0) - 39 * 100)
    assert frame.value("EXPTIME") == pytest.approx(0.4)
    assert frame.value("NCOMBINE") == 40
    longer = scene_from_record(frame.scene_files, name="sum", directory=tmp_path)
    assert longer.exposure.time == pytest.approx(0.4)
    assert longer.exposure.frame_time is None
    assert longer.camera.read_noise == pytest.approx(2.0 * np.sqrt(40.0))
    assert longer.pair[0].electrons == pytest.approx((8e5, 4e5))
    assert frame.truth["electrons"][0] == pytest.approx(8e5)


def test_each_is_sharper_than_the_one_before(tmp_path):
    cube = simimg.expose_cube(scene(tmp_path, strength=8.0, count=120, second=1e-3))

    def peak(frame):
        light = frame.counts - 100.0
        return light.max() / light.sum()

    plain = peak(sum_frame(cube))
    still = peak(chosen_frame(cube, method="recentred"))
    best = peak(chosen_frame(cube, method="lucky", keep=0.05))
    assert plain < 0.95 * still
    assert still < 0.7 * best


@pytest.mark.slow
def test_a_close_pair_is_lost_in_the_sum_and_found_in_the_speckles(tmp_path):
    cube = simimg.expose_cube(scene(tmp_path))
    (long,) = measure_cube(cube, method="sum").pairs
    assert long.rayleigh.verdict == long.sparrow.verdict == "unresolved"
    # The limits are the long exposure's, ten times the telescope's own.
    assert long.rayleigh.limit_arcsec > 8.0 * LIMIT
    assert long.probability_single > 0.01
    (close,) = measure_cube(cube, method="speckle").pairs
    assert close.probability_single < 1e-6
    assert abs(close.separation_arcsec - 1.2 * LIMIT) < 4.0 * close.separation_error_arcsec


@pytest.mark.slow
def test_lucky_frames_split_a_pair(tmp_path):
    wide = scene(tmp_path, strength=5.0, separation=2.5 * LIMIT, count=300)
    found = measure_cube(simimg.expose_cube(wide), method="lucky", keep=0.1)
    (pair,) = found.pairs
    assert abs(pair.separation_arcsec - 2.5 * LIMIT) < 3.0 * pair.separation_error_arcsec
    assert pair.separation_error_arcsec < 0.5 * LIMIT
    assert any("states of the air" in text for text in found.warnings)


def test_command(tmp_path):
    scene(tmp_path, count=30, side=64)
    path = tmp_path / "cube.fits"
    run = CliRunner().invoke(command, ["expose", str(tmp_path / "scene.toml"), "-o", str(path)])
    assert run.exit_code == 0, run.output
    run = CliRunner().invoke(
        command, ["measure", str(path), "--method", "lucky", "--keep", "20%", "--json"]
    )
    assert run.exit_code == 0, run.output
    answer = json.loads(run.stdout)
    assert answer["method"] == "lucky"
    assert answer["simulated"] is True
    assert len(answer["scene_id"]) == 64
    (pair,) = answer["pairs"]
    assert {"separation_arcsec", "ambiguous_180", "rayleigh", "sparrow", "truth"} <= set(pair)


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["--method", "lucky", "--keep", "0%"], "no share"),
        (["--method", "sum", "--reference", "x.fits"], "--reference goes with"),
        (["--method", "sum", "--together"], "--method goes with"),
        (["--method", "speckle"], "no such file"),
    ],
)
def test_wrong_words(tmp_path, words, said):
    run = CliRunner().invoke(command, ["measure", str(tmp_path / "cube.fits"), *words])
    assert run.exit_code == 2
    assert said in run.output
