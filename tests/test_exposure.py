"""Frames: the same every time, and what an observer would learn of the camera from them alone."""

import hashlib

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

import simimg
from simimg.errors import InputError
from simimg.scene.file import scene_from_record
from tests.assembly.scenes import TEXT, scene

EMPTY = TEXT[: TEXT.index("[[star]]")]


def test_the_same_scene_gives_the_same_frame(tmp_path):
    a, b = (simimg.expose(scene(tmp_path), threads=n) for n in (1, 2))
    assert_array_equal(a.counts, b.counts)
    assert dict(a.header) == dict(b.header)


def test_the_file_is_the_same_byte_for_byte(tmp_path):
    sums = []
    for name in ("a.fits", "b.fits"):
        simimg.expose(scene(tmp_path), keep=("expected", "psf")).write(tmp_path / name)
        sums.append(hashlib.sha256((tmp_path / name).read_bytes()).hexdigest())
    assert sums[0] == sums[1]


def test_every_exposure_and_every_seed_has_its_own_noise(tmp_path):
    base = simimg.expose(scene(tmp_path))
    later = simimg.expose(scene(tmp_path), index=1)
    other = simimg.expose(scene(tmp_path, exposure__seed=5))
    for frame in (later, other):
        difference = frame.counts.astype(float) - base.counts
        assert np.mean(difference != 0) > 0.8
        # Where only sky falls, the two share nothing: 0.05 is three errors of 3,000 pixels.
        corner = frame.counts[:30].astype(float), base.counts[:30].astype(float)
        assert abs(np.corrcoef(corner[0].ravel(), corner[1].ravel())[0, 1]) < 0.05
    assert later.value("EXPNUM") == 1


def test_exposures_begin_one_after_another(tmp_path):
    s = scene(tmp_path, exposure__start="2026-04-12T23:59:50", exposure__overhead="5 s")
    assert simimg.expose(s).value("DATE-OBS") == "2026-04-12T23:59:50.000"
    second = simimg.expose(s, index=1)
    assert second.value("DATE-OBS") == "2026-04-13T00:00:25.000"
    # Modified Julian day of 2026-04-13, from the day number of 2000-01-01 (51544).
    assert second.value("MJD-OBS") == pytest.approx(61143 + 25 / 86400, abs=1e-9)


def test_without_a_start_there_is_no_date(tmp_path):
    assert "DATE-OBS" not in simimg.expose(scene(tmp_path)).header


def test_a_frame_makes_itself_again(tmp_path):
    frame = simimg.expose(scene(tmp_path, camera__rotation="20 deg"))
    frame.write(tmp_path / "frame.fits")
    kept = simimg.Frame.read(tmp_path / "frame.fits")
    again = simimg.expose(
        scene_from_record(kept.scene_files, name="frame.fits", directory=tmp_path)
    )
    assert_array_equal(again.counts, frame.counts)
    assert again.value("SCENEID") == frame.value("SCENEID")


def test_photon_transfer_gives_gain_and_read_noise_from_frames_alone(tmp_path):
    """Janesick: variance = mean / gain + read noise^2 (ADU), over flats of growing level."""
    flats = EMPTY.replace("surface_brightness = 21", "electrons = 1000").replace(
        "pixels = [101, 81]", "pixels = [512, 512]"
    )
    means, variances = [], []
    for level in (0.001, 2000, 5000, 10000, 20000, 40000):
        s = scene(tmp_path, flats, sky__electrons=level)
        a, b = (simimg.expose(s, index=i).counts.astype(float) for i in (0, 1))
        means.append((a.mean() + b.mean()) / 2 - 500)
        variances.append(np.var(a - b) / 2)
    slope, offset = np.polyfit(means, variances, 1, w=1 / np.array(variances))
    # 512 x 512 pixels give a variance to sqrt(2 / 262144) = 0.28 %, five of them the slope to less.
    assert 1 / slope == pytest.approx(1.5, rel=0.006)
    # The converter's rounding adds 1/12 ADU^2 to the read noise of 4 electrons.
    assert np.sqrt(variances[0] - 1 / 12) * 1.5 == pytest.approx(4, rel=0.01)
    assert np.sqrt(max(offset, 0)) * 1.5 == pytest.approx(4.0, rel=0.1)
    # And the check can fail: a gain two per cent off is outside its tolerance.
    assert 1 / slope != pytest.approx(1.5 * 1.02, rel=0.006)


def test_counts_are_electrons_over_gain_plus_bias(tmp_path):
    s = scene(tmp_path, TEXT, star__0__magnitude=14)
    frame = simimg.expose(s, keep=("expected",))
    electrons = (frame.counts.astype(float) - 500) * 1.5
    total = frame.expected.astype(float).sum()
    noise = np.sqrt(total + frame.counts.size * 16)
    assert abs(electrons.sum() - total) < 4 * noise
    assert frame.truth["electrons_in_frame"][0] == pytest.approx(
        (frame.expected.astype(float) - frame.value("SKYLVL")).sum(), rel=1e-3
    )


def test_saturation_is_where_the_header_says(tmp_path):
    s = scene(tmp_path, camera__full_well="30000 electron", star__0__magnitude=9)
    frame = simimg.expose(s)
    assert frame.value("SATURATE") == pytest.approx(30000 / 1.5 + 500)
    assert frame.mask is not None
    assert frame.mask[40, 50] == 1
    # Read noise (4 electrons) sits on top of the full well.
    assert abs(int(frame.counts[40, 50]) - 20500) < 20


def test_the_converter_clips(tmp_path):
    s = scene(tmp_path, camera__bit_depth=12, star__0__magnitude=8)
    frame = simimg.expose(s)
    assert frame.counts.max() == 4095
    assert frame.value("SATURATE") == 4095


def test_tiles_change_the_expected_image_by_no_more_than_the_tolerance(tmp_path):
    s = scene(tmp_path, camera__pixels=[400, 400])
    whole = simimg.expose(s, keep=("expected",)).expected
    tiled = simimg.expose(s, keep=("expected",), memory_bytes=6_000_000).expected
    assert_allclose(tiled, whole, rtol=0, atol=1e-5 * whole.max())


def test_an_impossible_memory_is_refused_with_the_bytes(tmp_path):
    with pytest.raises(InputError, match=r"needs \d+ bytes"):
        simimg.expose(scene(tmp_path), memory_bytes=1000)


def test_what_an_exposure_needs_is_asked_for_at_once(tmp_path):
    s = scene(tmp_path, camera=None, exposure__time=None)
    with pytest.raises(InputError) as caught:
        simimg.expose(s)
    text = "\n".join(caught.value.lines)
    assert "camera" in text
    assert "exposure.time" in text


def test_signals_in_electrons_need_no_exposure_time(tmp_path):
    text = EMPTY.replace("surface_brightness = 21", "electrons = 10").replace('time = "30 s"\n', "")
    s = scene(tmp_path, text + "[[star]]\nelectrons = 1e4\n")
    frame = simimg.expose(s, keep=("expected",))
    assert frame.expected.sum() == pytest.approx(1e4 + 10 * 101 * 81, rel=0.01)


def test_psf_extension_is_a_star_of_unit_light(tmp_path):
    frame = simimg.expose(scene(tmp_path), keep=("psf",))
    n = frame.psf.oversampling
    middle = frame.psf.image.shape[0] // 2
    assert frame.psf.image.argmax() == middle * frame.psf.image.shape[1] + middle
    # Every n-th sample from the middle is one detector pixel; 16 pixels hold 4.5 FWHM each way.
    assert frame.psf.image[middle % n :: n, middle % n :: n].sum() == pytest.approx(1, abs=0.02)
