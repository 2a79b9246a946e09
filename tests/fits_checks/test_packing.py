"""Compressed frames: every bit comes back, other readers know them, the same bytes each time."""

from __future__ import annotations

import os
import shutil
import subprocess

import numpy as np
import pytest
from astropy.io import fits
from astropy.wcs import WCS
from numpy.testing import assert_array_equal

from simimg.frame import Frame
from simimg.study.batch import batch, estimate
from tests.fits_checks import examples
from tests.study.test_batch import hashes, scene_of


def noisy(dtype, shape=(211, 173)):
    """Counts as of a sky, in every type that a frame may have."""
    rng = np.random.default_rng(3)
    return np.clip(rng.normal(400.0, 6.0, shape), 0, 250 if dtype == "u1" else None).astype(dtype)


@pytest.mark.parametrize("dtype", ["u1", "u2", "i2", "i4", "f4"])
def test_every_part_comes_back(tmp_path, dtype):
    counts = noisy(dtype)
    parts = {"expected": counts.astype("f4") / 3, "mask": (counts % 7 == 0).astype("u2") * 300}
    frame = examples.frame(counts, wcs=examples.wcs(*counts.shape[::-1]), **parts)
    plain, packed = tmp_path / "plain.fits", tmp_path / "packed.fits"
    frame.write(plain)
    frame.write(packed, compress=True)
    back, unpacked = Frame.read(packed), Frame.read(plain)
    assert back.counts.dtype == unpacked.counts.dtype
    for name in ("counts", "expected", "mask"):
        assert_array_equal(getattr(back, name), getattr(unpacked, name))
    assert dict(back.header) == dict(unpacked.header)
    assert back.scene_files == unpacked.scene_files
    assert back.simulated
    assert list(back.truth["label"]) == list(unpacked.truth["label"])
    assert back.wcs.to_header() == unpacked.wcs.to_header()


def test_another_reader_finds_image_coordinates_and_that_it_is_simulated(tmp_path):
    counts = noisy("u2")
    frame = examples.frame(counts, wcs=examples.wcs(*counts.shape[::-1]), mask=None, expected=None)
    frame.write(tmp_path / "packed.fits", compress=True)
    frame.write(tmp_path / "plain.fits")
    with fits.open(tmp_path / "packed.fits", checksum=True) as hdus:
        assert hdus[0].header["SIMULATE"] is True
        assert hdus[0].data is None
        image = hdus["COUNTS"]
        assert image.header["SIMULATE"] is True
        assert_array_equal(image.data, counts)
        assert WCS(image.header).has_celestial
    # Noise of six counts has an entropy of 4.6 bits of sixteen.
    assert os.path.getsize(tmp_path / "packed.fits") < 0.75 * os.path.getsize(
        tmp_path / "plain.fits"
    )


def test_the_same_bytes_each_time(tmp_path):
    for name in ("one.fits", "two.fits"):
        examples.frame(noisy("i4"), **dict.fromkeys(("mask", "expected", "wcs"))).write(
            tmp_path / name, compress=True
        )
    assert (tmp_path / "one.fits").read_bytes() == (tmp_path / "two.fits").read_bytes()


@pytest.mark.parametrize("dtype", ["u1", "u2", "i4"])
def test_the_verifier_finds_no_fault(tmp_path, dtype):
    if shutil.which("fitsverify") is None:
        pytest.skip("the Debian package fitsverify is not installed")
    counts = noisy(dtype)
    mask = (counts % 5 == 0).astype("u1")
    frame = examples.frame(counts, mask=mask, wcs=examples.wcs(*counts.shape[::-1]), expected=None)
    frame.write(tmp_path / "packed.fits", compress=True)
    run = subprocess.run(
        ["fitsverify", str(tmp_path / "packed.fits")], capture_output=True, text=True, check=False
    )
    assert "Verification found 0 warning(s) and 0 error(s)" in run.stdout, run.stdout


def test_a_batch_of_compressed_frames(tmp_path):
    scene = scene_of(tmp_path)
    for name, choice in (("plain", False), ("packed", True)):
        batch(scene, count=3, folder=tmp_path / name, workers=1, compress=choice)
    for number in range(3):
        file = f"frame-{number:06d}.fits"
        plain, packed = (Frame.read(tmp_path / name / file) for name in ("plain", "packed"))
        assert_array_equal(plain.counts, packed.counts)
        assert packed.scene_id == plain.scene_id
    truth = [fits.getdata(tmp_path / name / "truth.fits", 1) for name in ("plain", "packed")]
    assert_array_equal(truth[0]["electrons"], truth[1]["electrons"])
    before = hashes(tmp_path / "packed")
    (tmp_path / "packed" / "frame-000001.fits").unlink()
    batch(scene, count=3, folder=tmp_path / "packed", workers=1, compress=True)
    assert hashes(tmp_path / "packed") == before
    sizes = [
        estimate(scene, count=3, folder=tmp_path / "none", compress=choice).bytes
        for choice in (False, True)
    ]
    assert sizes[0] != sizes[1]
