"""Objects put into frames that exist: their electrons, places and noise; the rest untouched."""

import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest
from astropy.io import fits
from astropy.table import Table
from astropy.wcs import WCS
from numpy.testing import assert_allclose, assert_array_equal

from simimg.errors import InputError
from simimg.exposure import expose
from simimg.frame import Frame
from simimg.resolving.given import Given
from simimg.scene.file import load_scene, replace
from simimg.study.inject import inject

TELESCOPE = """
[telescope]
aperture = "1 m"
[air]
seeing = "1.2 arcsec"
[band]
name = "V"
[exposure]
seed = 9
"""
ROWS, COLUMNS = 150, 190
GAIN = 2.5


def grid_scene(folder, electrons=4e4, text=""):
    """Thirty stars at uneven places, by pixels."""
    rng = np.random.default_rng(5)
    places = [(20 + 30 * i, 20 + 27 * j) for i in range(6) for j in range(5)]
    stars = [
        f"[[star]]\nx = {x + rng.uniform(-0.5, 0.5)!r}\ny = {y + rng.uniform(-0.5, 0.5)!r}\n"
        f"electrons = {electrons!r}\n"
        for x, y in places
    ]
    path = folder / "grid.toml"
    path.write_text(TELESCOPE + text + "".join(stars))
    return load_scene(path)


def tan(turn=27.0, mirrored=False, columns=COLUMNS, rows=ROWS):
    wcs = WCS(naxis=2)
    wcs.wcs.ctype = ["RA---TAN", "DEC--TAN"]
    wcs.wcs.crval = [214.5, 31.25]
    wcs.wcs.crpix = [columns / 2 + 11.5, rows / 2 - 7.25]
    scale, angle = 0.4 / 3600.0, np.radians(turn)
    east = 1.0 if mirrored else -1.0
    turned = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    wcs.wcs.cd = turned @ np.diag([east, 1.0]) * scale
    return wcs


def foreign(path, *, dtype="u2", sky=300.0, noise=9.0, wcs=None, header=(), extra=()):
    """A frame that astropy alone wrote: a sky with noise, in counts."""
    rng = np.random.default_rng(11)
    counts = 400.0 + rng.normal(sky / GAIN, np.hypot(np.sqrt(sky), noise) / GAIN, (ROWS, COLUMNS))
    counts = counts if dtype[0] == "f" else np.rint(counts)
    hdu = fits.PrimaryHDU(counts.astype(dtype))
    if wcs is not None:
        hdu.header.update(wcs.to_header())
    else:
        hdu.header["PIXSCALE"] = 0.4
    hdu.header["GAIN"] = GAIN
    hdu.header["EXPTIME"] = 60.0
    hdu.header["OBSERVAT"] = "Saltmarsh"
    for keyword, value in header:
        hdu.header[keyword] = value
    fits.HDUList([hdu, *extra]).writeto(path)
    return counts


def verified(path):
    if shutil.which("fitsverify") is None:
        return True
    run = subprocess.run(["fitsverify", str(path)], capture_output=True, text=True, check=False)
    return "found 0 warning(s) and 0 error(s)" in run.stdout


def test_aperture_sums_give_the_electrons_back(tmp_path):
    from photutils.aperture import CircularAperture, aperture_photometry

    foreign(tmp_path / "f.fits")
    scene = grid_scene(tmp_path)
    before = fits.getdata(tmp_path / "f.fits").astype(float)
    pulls = []
    for seed in range(10):
        made = inject(tmp_path / "f.fits", scene, seed=seed)
        made.write(tmp_path / "g.fits", overwrite=True)
        after = fits.getdata(tmp_path / "g.fits").astype(float)
        truth = Frame.read(tmp_path / "g.fits").truth
        assert len(truth) == 30
        assert truth["injected"].all()
        apertures = CircularAperture(np.column_stack([truth["x"], truth["y"]]), 9.0)
        sums = aperture_photometry(after - before, apertures)["aperture_sum"] * GAIN
        held = np.asarray(aperture_photometry(made.expected, apertures)["aperture_sum"])
        # What the aperture leaves out is the seeing's wings.
        assert 0.95 < np.median(held / truth["electrons"]) < 1.0
        pulls.append((sums - held) / np.sqrt(held + apertures.area * GAIN**2 / 6.0))
    pull = np.ravel(pulls)
    # Three hundred draws: their mean and their scatter within 3 sigma of nought and one.
    assert abs(pull.mean()) < 3.0 / np.sqrt(300)
    assert abs(pull.std(ddof=1) - 1.0) < 3.0 / np.sqrt(600)


@pytest.mark.parametrize("dtype", ["f4", "u2", "i4"])
def test_noise_is_that_of_the_objects_electrons_alone(tmp_path, dtype):
    foreign(tmp_path / "f.fits", dtype=dtype)
    made = inject(tmp_path / "f.fits", grid_scene(tmp_path))
    before = made.original.values(made.original.stored)
    after = made.original.values(made.stored)
    gained = (after - before) * GAIN
    lit = made.expected > 4.0
    rounding = 0.0 if dtype == "f4" else GAIN**2 / 6.0  # mean of f (1 - f)
    chi = (gained - made.expected)[lit] ** 2 / (made.expected[lit] + rounding)
    assert lit.sum() > 3000
    assert_allclose(chi.mean(), 1.0, atol=4.0 * np.sqrt(2.3 / lit.sum()))
    # The check can fail: with read noise, or without photon noise, it would.
    worse = (gained - made.expected)[lit] ** 2 / (made.expected[lit] + rounding + 9.0)
    assert abs(worse.mean() - 1.0) > 4.0 * np.sqrt(2.3 / lit.sum())


def test_faint_wings_are_not_rounded_away(tmp_path):
    foreign(tmp_path / "f.fits")
    made = inject(tmp_path / "f.fits", grid_scene(tmp_path))
    gained = made.original.values(made.stored) - made.original.values(made.original.stored)
    wings = (made.expected > 0.05) & (made.expected < 1.0)
    total = made.expected[wings].sum()
    error = np.sqrt(total + wings.sum() * GAIN**2 / 6.0)
    assert wings.sum() > 3000
    assert abs(gained[wings].sum() * GAIN - total) < 4.0 * error
    # One electron is 0.4 counts: rounding the electrons by themselves loses nearly all of them.
    rng = np.random.default_rng(2)
    rounded = np.rint(rng.poisson(made.expected[wings]) / GAIN) * GAIN
    assert abs(rounded.sum() - total) > 8.0 * error


@pytest.mark.parametrize("mirrored", [False, True])
def test_places_follow_the_coordinates(tmp_path, mirrored):
    wcs = tan(mirrored=mirrored)
    foreign(tmp_path / "f.fits", dtype="f4", sky=0.0, noise=0.0, wcs=wcs)
    sky = wcs.pixel_to_world([40.3, 130.8], [33.6, 110.1])
    (tmp_path / "s.toml").write_text(
        TELESCOPE
        + '[pointing]\nra = "214.5 deg"\ndec = "31.25 deg"\n'
        + "".join(
            f'[[star]]\nra = "{one.ra.deg:.15g} deg"\ndec = "{one.dec.deg:.15g} deg"\n'
            "electrons = 1e7\n"
            for one in sky
        )
        + '[[pair]]\neast = "-2 arcsec"\nnorth = "3 arcsec"\nelectrons = [1e7, 8e6]\n'
        'separation = "12 arcsec"\nposition_angle = "100 deg"\n'
    )
    inject(tmp_path / "f.fits", load_scene(tmp_path / "s.toml")).write(tmp_path / "g.fits")
    truth = Frame.read(tmp_path / "g.fits").truth
    assert_allclose(truth["x"][:2], [40.3, 130.8], atol=1e-5)
    assert_allclose(truth["y"][:2], [33.6, 110.1], atol=1e-5)
    there = wcs.all_world2pix(np.column_stack([truth["ra"], truth["dec"]]), 0)
    assert_allclose(there, np.column_stack([truth["x"], truth["y"]]), atol=1e-5)
    from astropy.coordinates import SkyCoord

    first, second = SkyCoord(truth["ra"][2:], truth["dec"][2:], unit="deg")
    assert_allclose(first.separation(second).arcsec, 12.0, rtol=1e-6)
    assert_allclose(first.position_angle(second).deg, 100.0, atol=1e-3)
    image = fits.getdata(tmp_path / "g.fits").astype(float) - 400.0
    for x, y in zip(truth["x"], truth["y"], strict=True):
        box = np.s_[round(y) - 8 : round(y) + 9, round(x) - 8 : round(x) + 9]
        rows, columns = np.mgrid[box]
        weight = image[box] * np.exp(-((columns - x) ** 2 + (rows - y) ** 2) / 8.0)
        found = [(weight * grid).sum() / weight.sum() for grid in (columns, rows)]
        assert_allclose(found, [x, y], atol=0.02)


def test_without_pointing_offsets_count_from_the_middle(tmp_path):
    wcs = tan()
    foreign(tmp_path / "f.fits", wcs=wcs)
    (tmp_path / "s.toml").write_text(TELESCOPE + "[[star]]\nelectrons = 1e5\n")
    made = inject(tmp_path / "f.fits", load_scene(tmp_path / "s.toml"))
    assert_allclose(made.truth["x"], (COLUMNS - 1) / 2, atol=1e-5)
    assert_allclose(made.truth["y"], (ROWS - 1) / 2, atol=1e-5)


def test_distorted_coordinates_and_places_beyond_them(tmp_path):
    from astropy.wcs import Sip

    wcs = tan()
    bend = np.zeros((4, 4))
    bend[2, 0] = bend[0, 2] = 4e-5
    wcs.wcs.ctype = ["RA---TAN-SIP", "DEC--TAN-SIP"]
    wcs.sip = Sip(bend, bend.T, None, None, wcs.wcs.crpix)
    counts = np.full((ROWS, COLUMNS), 400.0, "f4")
    hdu = fits.PrimaryHDU(counts, header=wcs.to_header(relax=True))
    hdu.header.update({"GAIN": GAIN, "EXPTIME": 1.0})
    hdu.writeto(tmp_path / "f.fits")
    star = '[[star]]\nelectrons = 1e6\nra = "{:.12f} deg"\ndec = "{:.12f} deg"\n'
    near = wcs.all_pix2world([[30.25, 120.5], [150.0, 20.0]], 0)
    text = '[pointing]\nra = "214.5 deg"\ndec = "31.25 deg"\n'
    text += "".join(star.format(*place) for place in [*near, (214.5, 50.0)])
    (tmp_path / "s.toml").write_text(TELESCOPE + text)
    made = inject(tmp_path / "f.fits", load_scene(tmp_path / "s.toml"))
    assert_allclose(made.truth["x"][:2], [30.25, 150.0], atol=1e-4)
    assert_allclose(made.truth["y"][:2], [120.5, 20.0], atol=1e-4)
    assert list(made.truth["inside"]) == [True, True, False]
    # The bend counts: without it the places are pixels off.
    straight = tan().all_world2pix(near, 0)
    assert np.abs(straight - [[30.25, 120.5], [150.0, 20.0]]).max() > 0.2
    (tmp_path / "s.toml").write_text(TELESCOPE + "[[star]]\nx = 5000\ny = 3\nelectrons = 9\n")
    lost = inject(tmp_path / "f.fits", load_scene(tmp_path / "s.toml"))
    assert "none of the objects lies on the frame" in lost.notes


def test_the_frame_says_how_long(tmp_path):
    foreign(tmp_path / "f.fits")
    text = TELESCOPE.replace("seed = 9", 'seed = 9\ntime = "10 s"')
    (tmp_path / "s.toml").write_text(text + "[[star]]\nmagnitude = 15\n")
    scene = load_scene(tmp_path / "s.toml")
    made = inject(tmp_path / "f.fits", scene)
    assert any("60 s" in line for line in made.notes)
    longer = replace(scene, {"camera.pixels": [9, 9], "camera.pixel_scale": "0.4 arcsec"})
    told = expose(longer).truth["electrons"][0]
    assert_allclose(made.truth["electrons"][0], 6.0 * told, rtol=1e-9)


@pytest.mark.parametrize(
    ("dtype", "bitpix", "zero"),
    [("u2", 16, 32768), ("i2", 16, None), ("f4", -32, None), ("u1", 8, None)],
)
def test_the_rest_of_the_file_stays(tmp_path, dtype, bitpix, zero):
    extra = [
        fits.ImageHDU(np.arange(20, dtype="i2").reshape(4, 5), name="WEIGHT"),
        fits.BinTableHDU(Table({"a": [1, 2, 3]}), name="LOG"),
    ]
    start = -300.0 if dtype == "u1" else 0.0
    rng = np.random.default_rng(3)
    counts = rng.normal(420.0 + start, 10.0, (ROWS, COLUMNS))
    primary = fits.PrimaryHDU(counts.astype(dtype))
    primary.header.update({"GAIN": GAIN, "PIXSCALE": 0.4, "EXPTIME": 1.0, "NOTE": "kept"})
    fits.HDUList([primary, *extra]).writeto(tmp_path / "f.fits", checksum=True)
    scene = grid_scene(tmp_path, 300.0)
    inject(tmp_path / "f.fits", scene).write(tmp_path / "g.fits")
    raw, made = (tmp_path / "f.fits").read_bytes(), (tmp_path / "g.fits").read_bytes()
    with (
        fits.open(tmp_path / "f.fits") as old,
        fits.open(tmp_path / "g.fits", checksum=True) as new,
    ):
        assert [one.name for one in new] == ["PRIMARY", "WEIGHT", "LOG", "TRUTH"]
        assert new[0].header["BITPIX"] == bitpix
        assert new[0].header.get("BZERO") == zero
        assert new[0].header["NOTE"] == "kept"
        assert new[0].header["SIMULATE"] is True
        assert "simulated objects" in str(new[0].header["HISTORY"]).replace("\n", " ")
        for number in (1, 2):
            where, there = old[number].fileinfo(), new[number].fileinfo()
            length = where["datLoc"] + where["datSpan"] - where["hdrLoc"]
            assert (
                raw[where["hdrLoc"] : where["hdrLoc"] + length]
                == made[there["hdrLoc"] : there["hdrLoc"] + length]
            )
        assert new[0].data.dtype == old[0].data.dtype
        assert (new[0].data >= old[0].data).all()
        assert new[0].data.astype(float).sum() > old[0].data.astype(float).sum() + 1000
    assert verified(tmp_path / "g.fits")


def test_saturates_at_the_frames_own_limit(tmp_path):
    foreign(tmp_path / "f.fits", header=[("SATURATE", 5000.0)])
    with fits.open(tmp_path / "f.fits", mode="update") as hdus:
        hdus[0].data[0, :5] = 6000
    made = inject(tmp_path / "f.fits", grid_scene(tmp_path, 3e6))
    values = made.original.values(made.stored)
    assert_array_equal(values[0, :5], 6000.0)
    assert values[1:].max() == 5000.0
    assert made.saturated == np.count_nonzero(values == 5000.0) > 100
    own = inject(tmp_path / "f.fits", grid_scene(tmp_path, 3e6), given=Given(saturation=900.0))
    assert np.delete(own.original.values(own.stored), 0, axis=0).max() == 900.0
    (tmp_path / "f.fits").unlink()
    foreign(tmp_path / "f.fits")
    open_ended = inject(tmp_path / "f.fits", grid_scene(tmp_path, 3e7))
    assert open_ended.original.values(open_ended.stored).max() == 65535.0


def test_pixels_without_a_value_and_overscan_stay(tmp_path):
    foreign(tmp_path / "f.fits", dtype="f4", header=[("DATASEC", f"[11:{COLUMNS},1:{ROWS}]")])
    with fits.open(tmp_path / "f.fits", mode="update") as hdus:
        hdus[0].data[18:22, 18:22] = np.nan
    made = inject(tmp_path / "f.fits", grid_scene(tmp_path, 1e6))
    assert np.isnan(made.stored[18:22, 18:22]).all()
    assert_array_equal(made.stored[:, :10], made.original.stored[:, :10])
    assert (made.stored[:, 10:14] > made.original.stored[:, 10:14] + 5.0).any()
    (tmp_path / "b.fits").unlink(missing_ok=True)
    counts = np.full((ROWS, COLUMNS), 500, "i2")
    counts[10:30] = -9
    hdu = fits.PrimaryHDU(counts)
    hdu.header.update({"BLANK": -9, "GAIN": GAIN, "PIXSCALE": 0.4})
    hdu.writeto(tmp_path / "b.fits")
    made = inject(tmp_path / "b.fits", grid_scene(tmp_path))
    assert (made.stored[10:30] == -9).all()
    assert (made.stored[30:] >= 500).all()


def test_our_own_frame_grows_its_truth(tmp_path):
    path = Path(__file__).resolve().parents[2] / "scenes" / "close-pair.toml"
    scene = load_scene(path)
    first = expose(scene)
    first.write(tmp_path / "f.fits")
    others = replace(scene, {"pair.0.east": "6 arcsec", "pair.0.separation": "1.5 arcsec"})
    inject(tmp_path / "f.fits", others).write(tmp_path / "g.fits")
    again = Frame.read(tmp_path / "g.fits")
    truth = again.truth
    assert list(truth["injected"]) == [False, False, True, True]
    assert list(truth["partner"]) == [1, 0, 3, 2]
    assert_allclose(truth["x"][2:] - truth["x"][:2], truth["x"][2] - truth["x"][0], atol=12)
    assert again.scene_files == first.scene_files
    assert again.counts.dtype == first.counts.dtype
    inject(tmp_path / "g.fits", others, seed=4).write(tmp_path / "h.fits")
    assert list(Frame.read(tmp_path / "h.fits").truth["partner"]) == [1, 0, 3, 2, 5, 4]
    assert verified(tmp_path / "h.fits")


def test_expected_and_mask_of_our_own_frame_have_the_new_light(tmp_path):
    text = (
        '[camera]\npixels = [100, 90]\npixel_scale = "0.4 arcsec"\nbias = "500 adu"\n'
        'full_well = "60000 electron"\n[[star]]\nx = 30\ny = 40\nelectrons = 3e6\n'
    )
    (tmp_path / "f.toml").write_text(TELESCOPE + text)
    first = expose(load_scene(tmp_path / "f.toml"), keep={"expected"})
    assert first.mask is not None
    first.write(tmp_path / "f.fits")
    (tmp_path / "new.toml").write_text(
        TELESCOPE + "[[star]]\nx = 70.3\ny = 55.1\nelectrons = 3e6\n"
    )
    made = inject(tmp_path / "f.fits", load_scene(tmp_path / "new.toml"))
    made.write(tmp_path / "g.fits")
    again = Frame.read(tmp_path / "g.fits")
    assert_allclose(again.expected, first.expected + made.expected, rtol=1e-6)
    assert not first.mask[55, 70]
    assert again.mask[55, 70] & 1
    assert_array_equal(again.mask[:, :50], first.mask[:, :50])
    assert ((again.mask & 1) > 0).sum() == ((first.mask & 1) > 0).sum() + made.saturated
    assert verified(tmp_path / "g.fits")


CAMERA = """
[camera]
pixels = [150, 150]
pixel_scale = "0.4 arcsec"
bias = "500 adu"
read_noise = "3 electron"
prescan = 6
overscan = 10
"""


def test_each_amplifier_at_its_own_gain(tmp_path):
    text = CAMERA + 'amplifier_gains = ["1 electron/adu", "4 electron/adu"]\n'
    (tmp_path / "f.toml").write_text(TELESCOPE + text)
    expose(load_scene(tmp_path / "f.toml")).write(tmp_path / "f.fits")
    made = inject(tmp_path / "f.fits", grid_scene(tmp_path))
    gained = made.original.values(made.stored) - made.original.values(made.original.stored)
    assert_array_equal(gained[:, :6], 0.0)
    assert_array_equal(gained[:, 156:], 0.0)
    for half, gain in ((np.s_[:, 6:81], 1.0), (np.s_[:, 81:156], 4.0)):
        total = made.expected[half].sum()
        assert total > 1e5
        assert abs(gained[half].sum() * gain - total) < 4 * np.sqrt(2 * total)


def test_behind_a_multiplying_register_noise_is_twice_as_large(tmp_path):
    # Each electron becomes 200, and 20 of them are a count.
    text = CAMERA + 'gain = "20 electron/adu"\nem_gain = 200\nbit_depth = 24\n'
    (tmp_path / "f.toml").write_text(TELESCOPE + text)
    expose(load_scene(tmp_path / "f.toml")).write(tmp_path / "f.fits")
    made = inject(tmp_path / "f.fits", grid_scene(tmp_path))
    assert made.gain == pytest.approx(0.1)
    gained = made.original.values(made.stored) - made.original.values(made.original.stored)
    lit = made.expected > 20.0
    chi = (gained * 0.1 - made.expected)[lit] ** 2 / made.expected[lit]
    # 2 - 1 / gain; its scatter is that of chi-square and a little more.
    assert_allclose(chi.mean(), 2 - 1 / 200, atol=4 * 2 * np.sqrt(2.5 / lit.sum()))
    assert lit.sum() > 1000


def test_a_scenes_own_camera_is_of_no_effect(tmp_path):
    foreign(tmp_path / "f.fits")
    plain = grid_scene(tmp_path)
    text = CAMERA.replace('pixel_scale = "0.4 arcsec"', 'pixel_size = "9 um"')
    text += 'binning = 2\ncosmic_ray_rate = "5 / (cm2 min)"\nflat_rms = 0.01\nmirrored = true\n'
    text += 'em_gain = 200\ndark_current = "5 electron/s"\n[sky]\nsurface_brightness = 20\n'
    text = TELESCOPE.replace('"1 m"', '"1 m"\nfocal_length = "8 m"') + text
    (tmp_path / "c.toml").write_text(text)
    full = replace(load_scene(tmp_path / "c.toml"), {"star": plain.document["star"]})
    found = [inject(tmp_path / "f.fits", one) for one in (plain, full)]
    assert_array_equal(found[0].stored, found[1].stored)


def test_same_seed_same_bytes(tmp_path):
    foreign(tmp_path / "f.fits")
    scene = grid_scene(tmp_path)
    for name, seed, threads in (("a", 1, 1), ("b", 1, 2), ("c", 2, 1)):
        inject(tmp_path / "f.fits", scene, seed=seed, threads=threads).write(tmp_path / name)
    a, b, c = ((tmp_path / name).read_bytes() for name in "abc")
    assert a == b != c


def test_an_extension_is_chosen(tmp_path):
    foreign(tmp_path / "p.fits")
    counts = fits.getdata(tmp_path / "p.fits")
    chips = [fits.ImageHDU(counts, name=f"CHIP{n}") for n in (1, 2)]
    for chip in chips:
        chip.header["PIXSCALE"] = 0.4
    primary = fits.PrimaryHDU()
    primary.header.update({"GAIN": GAIN, "EXPTIME": 1.0})
    fits.HDUList([primary, *chips]).writeto(tmp_path / "f.fits")
    inject(tmp_path / "f.fits", grid_scene(tmp_path), hdu="CHIP2").write(tmp_path / "g.fits")
    with fits.open(tmp_path / "g.fits") as hdus:
        assert [one.name for one in hdus] == ["PRIMARY", "CHIP1", "CHIP2", "TRUTH"]
        assert_array_equal(hdus[1].data, counts)
        assert (hdus[2].data > counts).any()
        assert hdus[0].header["SIMULATE"]
        assert hdus[2].header["SIMULATE"]
        assert "SIMULATE" not in hdus[1].header
    assert verified(tmp_path / "g.fits")


def test_a_strangers_mask_stays_a_mask(tmp_path):
    flags = np.zeros((ROWS, COLUMNS), "i2")
    flags[5, 6] = 256
    foreign(tmp_path / "f.fits", extra=[fits.ImageHDU(flags, name="MASK")])
    inject(tmp_path / "f.fits", grid_scene(tmp_path)).write(tmp_path / "g.fits")
    frame = Frame.read(tmp_path / "g.fits")
    assert frame.simulated
    assert len(frame.truth) == 30
    assert_array_equal(frame.mask != 0, flags != 0)


def test_what_cannot_be(tmp_path):
    scene = grid_scene(tmp_path)
    fits.PrimaryHDU(np.zeros((20, 20), "i2")).writeto(tmp_path / "bare.fits")
    with pytest.raises(InputError, match="gain: no gain is in its header; give --gain"):
        inject(tmp_path / "bare.fits", scene)
    with pytest.raises(InputError, match="give --pixel-scale"):
        inject(tmp_path / "bare.fits", scene, given=Given(gain=1.0))
    told = Given(gain=1.0, pixel_scale_arcsec=0.5)
    assert inject(tmp_path / "bare.fits", scene, given=told).added == 30
    (tmp_path / "m.toml").write_text(TELESCOPE + "[[star]]\nmagnitude = 12\n")
    with pytest.raises(InputError, match=r"exposure\.time"):
        inject(tmp_path / "bare.fits", load_scene(tmp_path / "m.toml"), given=told)
    fits.HDUList(
        [fits.PrimaryHDU(), fits.CompImageHDU(np.zeros((20, 20), "i2"), name="C")]
    ).writeto(tmp_path / "packed.fits")
    with pytest.raises(InputError, match="stored compressed"):
        inject(tmp_path / "packed.fits", scene, given=told)


def real(package, name):
    path = Path(package.__file__).parent / name
    if not path.exists():
        pytest.skip(f"this {package.__name__} ships no {name}")
    return path


@pytest.mark.parametrize("which", ["astropy", "ccdproc"])
def test_into_a_real_frame(tmp_path, which):
    if which == "astropy":
        import astropy.io.fits as package

        path = real(package, "hdu/compressed/tests/data/m13.fits")
        given, place = Given(gain=8.0), "x = 250.3\ny = 40.6"
    else:
        ccdproc = pytest.importorskip("ccdproc")
        path = real(ccdproc, "tests/data/a8280271.fits")
        given, place = Given(pixel_scale_arcsec=0.6), "x = 300.3\ny = 200.6"
    text = TELESCOPE.replace("1.2", "2.5") + f"[[star]]\n{place}\nelectrons = 60000\n"
    (tmp_path / "s.toml").write_text(text)
    made = inject(path, load_scene(tmp_path / "s.toml"), given=given)
    made.write(tmp_path / "g.fits")
    with fits.open(path) as old, fits.open(tmp_path / "g.fits") as new:
        assert new[0].data.dtype == old[0].data.dtype
        gained = new[0].data.astype(float) - old[0].data.astype(float)
        for keyword in old[0].header:
            if keyword not in ("", "COMMENT", "HISTORY", "EXTEND", "CHECKSUM", "DATASUM"):
                assert new[0].header[keyword] == old[0].header[keyword]
    total = made.expected.sum()
    assert total > 50000
    rounding = np.count_nonzero(made.expected > 0.01) * made.gain**2 / 6.0
    assert abs(gained.sum() * made.gain - total) < 4.0 * np.sqrt(total + rounding)
