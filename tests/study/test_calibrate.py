"""An outside client reduces our night with our calibration frames, and photon transfer works."""

import shutil
import subprocess
import warnings

import astropy.units as u
import numpy as np
import pytest
from astropy.io import fits
from numpy.testing import assert_allclose, assert_array_equal

from simimg.camera.calibration import photon_transfer
from simimg.errors import InputError
from simimg.exposure import expose
from simimg.frame import Frame
from simimg.scene.file import load_scene, replace
from simimg.study.calibrate import calibration

TEXT = """
title = "reduction"
[telescope]
aperture = "1 m"
[air]
seeing = "1.4 arcsec"
[band]
name = "V"
[camera]
pixels = [256, 240]
pixel_scale = "0.5 arcsec"
gain = "1.4 electron/adu"
read_noise = "5 electron"
dark_current = "3 electron/s"
bias = "700 adu"
full_well = "90000 electron"
serial = 12
flat_rms = 0.02
vignetting = 0.15
dust_rings = 4
dark_rms = 0.2
hot_pixel_fraction = 0.002
[sky]
electrons = 900
[exposure]
time = "40 s"
seed = 77
[[star]]
electrons = 3e5
x = 100.3
y = 90.1
[[galaxy]]
electrons = 3e6
east = "-20 arcsec"
sersic_index = 1
effective_radius = "6 arcsec"
"""
GAIN, READ = 1.4, 5.0


def scene(folder, **changes):
    (folder / "s.toml").write_text(TEXT)
    loaded = load_scene(folder / "s.toml")
    return replace(loaded, {k.replace("__", "."): v for k, v in changes.items()})


def verified(path):
    if shutil.which("fitsverify") is None:
        return True
    run = subprocess.run(["fitsverify", str(path)], capture_output=True, text=True, check=False)
    return "found 0 warning(s) and 0 error(s)" in run.stdout


UNEVEN = {
    "camera__bias_rms": "3 adu",
    "camera__bias_drift": "1.5 adu",
    "camera__prescan": 4,
    "camera__overscan": 32,
}


@pytest.fixture(scope="module", params=[{}, UNEVEN], ids=["even", "uneven"])
def night(tmp_path_factory, request):
    """A folder with the frames of a night, and how many of each."""
    folder = tmp_path_factory.mktemp("night")
    numbers = {"bias": 12, "dark": 8, "flat": 10}
    s = scene(folder, **request.param)
    made = calibration(s, **numbers)
    for one in made.frames:
        made.frame(one).write(folder / one.file)
    expose(s, keep=["expected"]).write(folder / "science.fits")
    return folder, numbers


def trimmed(frame):
    """A frame without its overscan, which is taken off row by row, where it has one."""
    import ccdproc

    if "BIASSEC" not in frame.header:
        return frame
    section = frame.header["BIASSEC"]
    level = ccdproc.subtract_overscan(frame, fits_section=section, overscan_axis=1)
    return ccdproc.trim_image(level, fits_section=frame.header["TRIMSEC"])


def masters(folder, numbers):
    import ccdproc
    from astropy.nddata import CCDData

    made = {}
    for kind, count in numbers.items():
        names = [folder / f"{kind}-{i:03d}.fits" for i in range(count)]
        # Hot pixels too: our MASK, which the reader would take out, stays out of it.
        frames = [trimmed(CCDData.read(name, unit="adu", hdu_mask=None)) for name in names]
        made[kind] = ccdproc.Combiner(frames).average_combine()
        made[kind].meta = frames[0].meta
    return made


def reduced(folder, numbers):
    """The science frame by ccdproc, in electrons, and its masters."""
    import ccdproc
    from astropy.nddata import CCDData

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        made = masters(folder, numbers)
        science = trimmed(CCDData.read(folder / "science.fits", unit="adu", hdu_mask=None))
        bias = made["bias"]
        dark = ccdproc.subtract_bias(made["dark"], bias)
        dark.meta = made["dark"].meta
        dark_way = {
            "exposure_time": "EXPTIME",
            "exposure_unit": u.s,
            "scale": True,
        }
        flat = ccdproc.subtract_bias(made["flat"], bias)
        flat.meta = made["flat"].meta
        flat = ccdproc.subtract_dark(flat, dark, **dark_way)
        science = ccdproc.subtract_bias(science, bias)
        science = ccdproc.subtract_dark(science, dark, **dark_way)
        level = made["flat"].meta["FLATLVL"] / GAIN
        done = ccdproc.flat_correct(science, flat, norm_value=level)
    return np.asarray(done.data) * GAIN, np.asarray(flat.data) / level, made


def test_ccdproc_brings_the_night_back(night):
    pytest.importorskip("ccdproc")
    folder, numbers = night
    found, response, made = reduced(folder, numbers)
    frame = Frame.read(folder / "science.fits")
    quiet, seeing = READ**2 + GAIN**2 / 12, np.s_[:, :]
    if "BIASSEC" in frame.header:
        # The mean of 32 columns of overscan has a noise of its own.
        quiet *= 1 + 1 / 32
        seeing = np.s_[:, 4:260]
        assert frame.value("TRIMSEC") == "[5:260,1:240]"
    expected = frame.expected[seeing].astype(float)
    level = made["flat"].meta["FLATLVL"]
    short = made["flat"].meta["EXPTIME"] / made["dark"].meta["EXPTIME"]
    bias = np.asarray(made["bias"].data)
    darks = np.clip((np.asarray(made["dark"].data) - bias) * GAIN, 0, None)
    share = expected / level
    # reduced = level / flat (science - dark), flat = light + short x dark + bias (1 - short).
    science = expected * response + darks + quiet
    flat = level * response + darks * short + quiet
    variance = (
        science
        + (darks + quiet) / numbers["dark"] * (1 - short * share) ** 2
        + flat / numbers["flat"] * share**2
        + quiet / numbers["bias"] * ((1 - short) * share) ** 2
    ) / response**2
    # A pixel that was full in any frame tells nothing.
    clear = np.ones(expected.shape, bool)
    for path in folder.glob("*.fits"):
        clear &= fits.getdata(path)[seeing] < fits.getheader(path)["SATURATE"]
    assert clear.mean() > 0.995
    pull = ((found - expected) / np.sqrt(variance))[clear]
    assert fits_the_noise(pull)
    # Star and galaxy alone, where the light is: no bias either.
    bright = clear & (expected > 1500)
    assert bright.sum() > 500
    assert fits_the_noise(((found - expected) / np.sqrt(variance))[bright])
    # Left out, each of the three steps shows, and so would a bias of three electrons.
    raw = found * response + darks
    for worse in (raw / response, raw - darks, found + 3.0):
        assert not fits_the_noise(((worse - expected) / np.sqrt(variance))[clear])


def fits_the_noise(pull):
    """Mean 0 and variance 1, within 4 sigma of as many draws."""
    mean_fits = abs(pull.mean()) < 4 / np.sqrt(pull.size)
    return mean_fits and abs((pull**2).mean() - 1) < 4 * np.sqrt(2 / pull.size)


def test_headers_say_what_they_are(night):
    folder, numbers = night
    times = {"bias": 0.0, "dark": 40.0, "flat": 5.0}
    science = fits.getheader(folder / "science.fits")
    assert science["OBSTYPE"] == "object"
    for kind, count in numbers.items():
        names = sorted(path.name for path in folder.glob(f"{kind}-*"))
        assert names == [f"{kind}-{i:03d}.fits" for i in range(count)]
        for number, name in enumerate(names):
            header = fits.getheader(folder / name)
            assert header["OBSTYPE"] == kind
            assert header["EXPTIME"] == times[kind]
            assert header["SIMULATE"] is True
            assert header["EXPNUM"] == number
            assert header["SCENEID"] == science["SCENEID"]
            for key in ("GAIN", "RDNOISE", "SATURATE", "BUNIT"):
                assert header[key] == science[key]
            assert ("FLATLVL" in header) == (kind == "flat")
            assert "DATE-OBS" not in header
        assert verified(folder / names[0])
        with fits.open(folder / names[0], checksum=True) as hdus:
            assert hdus[0].data.dtype == np.uint16
            assert_array_equal(Frame.read(folder / names[0]).counts, hdus[0].data)


def test_frames_differ_by_their_noise_alone(night):
    folder, _ = night

    def levelled(name):
        counts = fits.getdata(folder / name).astype(float)
        if counts.shape[1] == 256:
            return counts
        return counts[:, 4:260] - counts[:, 260:].mean(axis=1, keepdims=True) + 700.0

    quiet = (READ**2 + GAIN**2 / 12) / GAIN**2
    for kind in ("bias", "flat"):
        a, b = (levelled(f"{kind}-00{i}.fits") for i in (0, 1))
        wide = fits.getdata(folder / "bias-000.fits").shape[1] > 256
        variance = quiet * (1 + 1 / 32) if wide else quiet
        if kind == "flat":
            variance += (a.mean() - 700) / GAIN
        assert_allclose(np.var(a - b) / 2, variance, rtol=4 * np.sqrt(2 / a.size))


def test_no_draw_is_used_twice(tmp_path):
    even = {"camera__vignetting": 0.0, "camera__dust_rings": 0, "camera__flat_rms": 0.0}
    steady = {"camera__dark_rms": 0.0, "camera__hot_pixel_fraction": 0.0, "star": None}
    s = scene(tmp_path, galaxy=None, sky__electrons=45000.0, **even, **steady)
    made = calibration(s, bias=2, dark=2, flat=2, ramp=2, transfer=1)
    frames = [made.frame(one).counts for one in made.frames]
    frames += [expose(s, index=index).counts for index in (0, 1)]
    flat = np.array([frame.ravel() for frame in frames], dtype=float)
    found = np.corrcoef(flat)[np.triu_indices(len(frames), 1)]
    assert np.abs(found).max() < 5 / np.sqrt(flat.shape[1])


def test_flats_reach_half_of_what_can_be_recorded(tmp_path):
    for well, depth, limit in (
        ("90000 electron", 16, 90000.0),
        ("200000 electron", 16, (65535 - 700) * GAIN),
        ("90000 electron", 14, (16383 - 700) * GAIN),
    ):
        s = scene(tmp_path, camera__full_well=well, camera__bit_depth=depth)
        (one,) = calibration(s, flat=1).frames
        assert one.light == pytest.approx(limit / 2)


def test_photon_transfer_from_two_flats(tmp_path):
    s = scene(tmp_path, camera__pixels=[600, 600], camera__hot_pixel_fraction=0.0)
    made = calibration(s, bias=2, transfer=3)
    for one in made.frames:
        made.frame(one).write(tmp_path / one.file)
    biases = [fits.getdata(tmp_path / f"bias-00{i}.fits").astype(float) for i in (0, 1)]
    times = []
    for level in (1, 2):
        names = [f"transfer-00{level}{letter}.fits" for letter in "ab"]
        flats = [fits.getdata(tmp_path / name).astype(float) for name in names]
        times.append(fits.getheader(tmp_path / names[0])["EXPTIME"])
        # By hand, from what the trade prints: mean over variance of the difference.
        signal = (flats[0] + flats[1] - biases[0] - biases[1]).mean()
        noise = np.var(flats[0] - flats[1]) - np.var(biases[0] - biases[1])
        gain = signal / noise
        assert gain == pytest.approx(GAIN, rel=0.01)
        read = gain * np.std(biases[0] - biases[1]) / np.sqrt(2)
        assert read == pytest.approx(READ, rel=0.02)
        ours = photon_transfer(*flats, bias=biases[0], other_bias=biases[1])
        assert_allclose(ours, (gain, read), rtol=1e-9)
        # One flat by itself does not do: its scatter holds the response of the pixels.
        assert abs(signal / 2 / np.var(flats[0]) / GAIN - 1) > 0.1
    assert times[1] / times[0] == pytest.approx(9 / 4)
    with pytest.raises(ValueError, match="light and noise"):
        photon_transfer(*biases, bias=biases[0], other_bias=biases[1])


def test_a_ramp_is_straight_up_to_the_full_well(tmp_path):
    s = scene(tmp_path, camera__pixels=[128, 128], camera__vignetting=0.0, camera__dust_rings=0)
    made = calibration(s, ramp=8)
    times = np.array([one.time for one in made.frames])
    means = np.array([made.frame(one).counts.mean() for one in made.frames]) - 700
    assert_allclose(np.diff(times), times[0])
    assert times[3] == pytest.approx(5.0)
    straight = means[:6] - times[:6] * 3 / GAIN
    assert_allclose(straight / times[:6], straight[0] / times[0], rtol=2e-3)
    # The last is full where the response is above its mean.
    assert means[7] * GAIN < 90000.0 < 1.05 * means[7] * GAIN


def test_same_patterns_as_the_science_frames_and_other_serials_not(tmp_path):
    quiet = {"camera__read_noise": "0 electron", "camera__dark_current": "0 electron/s"}
    flats = []
    for serial in (12, 12, 13):
        s = scene(tmp_path, camera__serial=serial, exposure__seed=len(flats), **quiet)
        made = calibration(s, flat=8)
        flats.append(np.mean([made.frame(one).counts for one in made.frames], axis=0).ravel())
    same, other = (np.corrcoef(flats[0], flats[i])[0, 1] for i in (1, 2))
    high = [flat - np.convolve(flat, np.ones(9) / 9, "same") for flat in flats]
    fine_same, fine_other = (np.corrcoef(high[0], high[i])[0, 1] for i in (1, 2))
    assert same > 0.9
    assert fine_same > 0.9
    assert other < same
    assert abs(fine_other) < 0.2


def test_same_scene_same_bytes(tmp_path):
    made = calibration(scene(tmp_path), flat=2)
    for name, threads in (("a", 1), ("b", 2)):
        made.frame(made.frames[1], threads=threads).write(tmp_path / name)
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()
    # The second is the same whether one is asked for or ten.
    more = calibration(scene(tmp_path), bias=3, flat=10)
    assert_array_equal(more.frame(more.frames[4]).counts, fits.getdata(tmp_path / "a"))


def test_what_cannot_be(tmp_path):
    with pytest.raises(InputError, match=r"exposure\.time"):
        calibration(scene(tmp_path, exposure__time=None, camera__dark_current=None), dark=1)
    with pytest.raises(InputError, match="too many"):
        calibration(scene(tmp_path), bias=100_001)


def test_the_detectors_of_a_mosaic_together(tmp_path):
    chips = """
[[detector]]
name = "a"
offset = ["-140 px", "0 px"]
[[detector]]
name = "b"
offset = ["140 px", "0 px"]
pixels = [100, 90]
full_well = "60000 electron"
"""
    (tmp_path / "m.toml").write_text(TEXT.split("[[star]]")[0] + chips)
    s = load_scene(tmp_path / "m.toml")
    made = calibration(s, bias=2, dark=1, flat=1)
    for one in made.frames:
        made.frame(one).write(tmp_path / one.file)
        assert verified(tmp_path / one.file)
        assert made.made_before(one, tmp_path / one.file)
    with fits.open(tmp_path / "flat-000.fits") as hdus:
        assert [one.name for one in hdus] == ["PRIMARY", "A", "MASK", "B", "MASK"]
        assert hdus["B"].data.shape == (90, 100)
        assert hdus[0].header["OBSTYPE"] == hdus["B"].header["OBSTYPE"] == "flat"
        # Half of the smaller well, on both.
        assert hdus["A"].header["FLATLVL"] == hdus["B"].header["FLATLVL"] == 30000.0
    biases = [fits.getdata(tmp_path / "bias-000.fits", name)[:90, :100] for name in "AB"]
    biases.append(fits.getdata(tmp_path / "bias-001.fits", "A")[:90, :100])
    found = np.corrcoef([one.astype(float).ravel() for one in biases])
    assert np.abs(found[np.triu_indices(3, 1)]).max() < 5 / np.sqrt(9000)
