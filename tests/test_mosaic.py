"""Several detectors in one file: places, coordinates, light, noise."""

import shutil
import subprocess

import numpy as np
import pytest
from astropy.coordinates import SkyCoord
from astropy.io import fits
from astropy.wcs import WCS
from numpy.testing import assert_allclose, assert_array_equal

from simimg.errors import InputError
from simimg.exposure import expose, prepare
from simimg.frame import Frame
from simimg.mosaic import expose_mosaic
from simimg.scene.file import load_scene, replace

TEXT = """
title = "mosaic"
[telescope]
aperture = "1 m"
focal_length = "8 m"
[air]
seeing = "1.2 arcsec"
[band]
name = "V"
[camera]
pixels = [201, 121]
pixel_size = "15 um"
gain = "1.5 electron/adu"
read_noise = "5 electron"
bias = "400 adu"
rotation = "20 deg"
[sky]
electrons = 50
[exposure]
time = "30 s"
seed = 5
[pointing]
ra = "50 deg"
dec = "30 deg"
[[detector]]
name = "west"
offset = ["-60 px", "0 px"]
pixels = [81, 121]
[[detector]]
name = "east"
offset = ["0.75 mm", "3.86746511 arcsec"]
pixels = [91, 101]
rotation = "ROT"
gain = "1.7 electron/adu"
[[star]]
x = 50.3
y = 60.8
electrons = 2e5
[[star]]
x = 155.1
y = 44.2
electrons = 3e5
[[galaxy]]
x = 40.0
y = 25.5
electrons = 4e5
sersic_index = 1
effective_radius = "1.5 arcsec"
axis_ratio = 0.5
position_angle = "65 deg"
[[pair]]
x = 98.0
y = 60.0
electrons = [1e5, 9e4]
separation = "12 arcsec"
position_angle = "290 deg"
"""


def mosaic(folder, rotation="0 deg", text=TEXT, **changes):
    (folder / "m.toml").write_text(text.replace("ROT", rotation))
    loaded = load_scene(folder / "m.toml")
    return replace(loaded, {k.replace("__", "."): v for k, v in changes.items()})


def written(folder, scene, **how):
    made = expose_mosaic(scene, **how)
    made.write(folder / "m.fits")
    return made


@pytest.mark.parametrize(
    ("rotation", "mirrored"), [("0 deg", False), ("1.5 deg", True), ("-170 deg", False)]
)
def test_coordinates_agree_with_the_truth(tmp_path, rotation, mirrored):
    scene = mosaic(tmp_path, rotation, camera__mirrored=mirrored)
    made = written(tmp_path, scene)
    truth = made.truth
    assert list(truth["kind"]) == ["star", "star", "pair", "pair", "galaxy"]
    assert list(truth["detector"][[0, 1, 4]]) == ["WEST", "EAST", "WEST"]
    headers = {name: fits.getheader(tmp_path / "m.fits", name) for name in made.names}
    for row in truth:
        wcs = WCS(headers[row["detector"]])
        found = wcs.all_world2pix([[row["ra"], row["dec"]]], 0)[0]
        assert_allclose(found, [row["x"], row["y"]], atol=1e-6)
    # Where the middle of each lies, by the coordinates of one camera in their place.
    steady = replace(scene, {"detector": None})
    single = expose(steady).wcs
    for name, (dx, dy) in {"WEST": (-60.0, 0.0), "EAST": (50.0, 10.0)}.items():
        header = headers[name]
        middle = (header["NAXIS1"] - 1) / 2, (header["NAXIS2"] - 1) / 2
        there = WCS(header).pixel_to_world(*middle)
        wanted = single.pixel_to_world(100.0 + dx, 60.0 + dy)
        assert there.separation(wanted).arcsec < 2e-6
        up = WCS(header).pixel_to_world(middle[0], middle[1] + 1)
        turned = 20.0 + (float(rotation.split()[0]) if name == "EAST" else 0.0)
        assert_allclose((there.position_angle(up).deg - turned + 180) % 360, 180, atol=0.01)
        right = WCS(header).pixel_to_world(middle[0] + 1, middle[1])
        quarter = (there.position_angle(right).deg - there.position_angle(up).deg) % 360
        assert_allclose(quarter, 90.0 if mirrored else 270.0, atol=0.01)
    first, second = SkyCoord(truth["ra"][2:4], truth["dec"][2:4], unit="deg")
    assert_allclose(first.separation(second).arcsec, 12.0, rtol=1e-6)


@pytest.mark.parametrize("field", ["", pytest.param("coma", marks=pytest.mark.slow)])
def test_each_detector_sees_what_one_large_one_would(tmp_path, field):
    text = TEXT
    if field:
        errors = '{ radius = "60 arcsec", coma = "0.15 um", distortion = 0.004 }'
        text = text.replace('focal_length = "8 m"', f'focal_length = "8 m"\nfield = {errors}')
        text = text.replace('name = "V"', 'name = "V"\nnodes = 1')
    scene = mosaic(tmp_path, "0 deg", text)
    made = expose_mosaic(scene, keep=["expected"])
    whole = expose(replace(scene, {"detector": None}), keep=["expected"]).expected
    peak = whole.max() - 50.0
    # With aberrations over the field the PSF is mixed from nodes, which are other ones.
    limit = 3e-4 if field else 1e-5
    assert_allclose(made["west"].expected, whole[:, :81], atol=limit * peak)
    assert_allclose(made["east"].expected, whole[20:121, 105:196], atol=limit * peak)
    assert made["west"].expected.max() > 0.3 * peak
    assert made["east"].expected.max() > 0.3 * peak
    # A pixel's step would show.
    assert np.abs(made["east"].expected - whole[20:121, 104:195]).max() > 0.01 * peak


def test_a_turned_detector_turns_the_image(tmp_path):
    text = TEXT.replace('"3.86746511 arcsec"', '"0 px"')
    text = text.replace("x = 155.1\ny = 44.2", "x = 155\ny = 57")
    flat = expose_mosaic(mosaic(tmp_path, "0 deg", text), keep=["expected"])["east"].expected
    turned = expose_mosaic(mosaic(tmp_path, "90 deg", text), keep=["expected"])["east"]
    half = expose_mosaic(mosaic(tmp_path, "180 deg", text), keep=["expected"])["east"].expected
    assert_allclose(half, flat[::-1, ::-1], atol=1e-5 * flat.max())
    quarter = turned.expected[5:96, :]
    # +y points where -x did: north through east runs so where east is left.
    assert_allclose(quarter, np.rot90(flat[5:96, :]), atol=1e-5 * flat.max())


def test_places_as_lengths_angles_and_pixels(tmp_path):
    frames = []
    for offset in (
        ["0.75 mm", "0.15 mm"],
        ["50 px", 10],
        ["19.33732557 arcsec", "3.86746511 arcsec"],
    ):
        scene = mosaic(tmp_path, **{"detector__1__offset": offset})
        frames.append(expose_mosaic(scene)["east"].wcs.wcs.crpix)
    assert_allclose(frames, [frames[0]] * 3, atol=1e-5)


def test_noise_and_patterns_are_each_detectors_own(tmp_path):
    dark = {"star": None, "galaxy": None, "pair": None, "camera__flat_rms": 0.05}
    scene = mosaic(tmp_path, **dark, sky__electrons=20000, detector__1__pixels=[81, 121])
    made = expose_mosaic(scene)
    a, b = ((made[name].counts - 400.0) * gain for name, gain in (("west", 1.5), ("east", 1.7)))
    assert_allclose([a.mean(), b.mean()], 20000, rtol=0.005)
    assert abs(np.corrcoef(a.ravel(), b.ravel())[0, 1]) < 0.05
    alike = replace(scene, {"detector.1.serial": 0, "detector.1.gain": "1.5 electron/adu"})
    made = expose_mosaic(alike)
    both = np.corrcoef(made["west"].counts.ravel(), made["east"].counts.ravel())[0, 1]
    # One pattern (5 %) under two draws of photon noise (0.7 %).
    assert 0.9 < both < 1.0
    assert made["west"].value("GAIN") == 1.5


def test_the_file(tmp_path):
    hot = {"camera__hot_pixel_fraction": 0.01, "camera__dark_current": "1 electron/s"}
    scene = mosaic(tmp_path, "1.5 deg", **hot)
    made = written(tmp_path, scene, keep=["expected"])
    path = tmp_path / "m.fits"
    with fits.open(path, checksum=True) as hdus:
        names = [(one.name, one.ver) for one in hdus]
        assert names == [
            ("PRIMARY", 1),
            ("WEST", 1),
            ("MASK", 1),
            ("EXPECTED", 1),
            ("EAST", 1),
            ("MASK", 2),
            ("EXPECTED", 2),
            ("TRUTH", 1),
            ("SCENE", 1),
        ]
        assert hdus[0].data is None
        assert all(one.header["SIMULATE"] for one in hdus)
        assert hdus[0].header["EXPTIME"] == 30.0
        assert "GAIN" not in hdus[0].header
        assert [hdus[name].header["GAIN"] for name in made.names] == [1.5, 1.7]
        for number, name in enumerate(made.names, start=1):
            assert_array_equal(hdus[name].data, made[name].counts)
            assert_array_equal(hdus["MASK", number].data, made[name].mask)
    if shutil.which("fitsverify"):
        run = subprocess.run(["fitsverify", str(path)], capture_output=True, text=True, check=False)
        assert "found 0 warning(s) and 0 error(s)" in run.stdout
    for name in made.names:
        back = Frame.read(path, hdu=name)
        assert_array_equal(back.counts, made[name].counts)
        assert_array_equal(back.mask != 0, made[name].mask != 0)
        assert back.value("EXPTIME") == 30.0
        assert back.simulated
        assert_allclose(back.wcs.wcs.cd, made[name].wcs.wcs.cd, rtol=1e-12)
    again = expose_mosaic(scene, keep=["expected"], threads=1)
    again.write(tmp_path / "n.fits")
    assert path.read_bytes() == (tmp_path / "n.fits").read_bytes()


def test_one_row_an_object_and_all_its_light(tmp_path):
    made = expose_mosaic(mosaic(tmp_path))
    truth = made.truth
    assert list(truth["partner"]) == [-1, -1, 3, 2, -1]
    assert list(truth["inside"][[0, 1, 4]]) == [True] * 3
    parts = np.array([frame.truth["electrons_in_frame"] for frame in made.frames])
    assert_allclose(truth["electrons_in_frame"], parts.sum(axis=0))
    assert (truth["electrons_in_frame"] <= truth["electrons"] * (1 + 1e-9)).all()
    # In the gap, some of its light on either side.
    assert not truth["inside"][2]
    assert 0.0 < truth["electrons_in_frame"][2] < 0.2 * truth["electrons"][2]


def test_dithered_mosaics_keep_their_coordinates(tmp_path):
    dither = {"pattern": "square", "step": "3 arcsec"}
    scene = mosaic(tmp_path, "1.5 deg", exposure__dither=dither)
    first, second = (expose_mosaic(scene, index=index) for index in (0, 2))
    for made in (first, second):
        for row in made.truth:
            found = made[row["detector"]].wcs.all_world2pix([[row["ra"], row["dec"]]], 0)[0]
            assert_allclose(found, [row["x"], row["y"]], atol=1e-6)
    assert_allclose(first.truth["ra"], second.truth["ra"], atol=1e-10)
    moved = np.hypot(second.truth["x"] - first.truth["x"], second.truth["y"] - first.truth["y"])
    assert_allclose(moved[[0, 1, 4]], np.sqrt(18.0) / 0.386746511, rtol=1e-3)


def test_one_camera_off_the_field_centre(tmp_path):
    text = TEXT.split("[[detector]]")[0] + '[[star]]\neast = "4 arcsec"\nelectrons = 1e5\n'
    (tmp_path / "s.toml").write_text(text)
    scene = load_scene(tmp_path / "s.toml")
    aside = replace(scene, {"camera.field_centre": [30, 250.5]})
    frame = expose(aside)
    assert_array_equal(frame.wcs.wcs.crpix, [31.0, 251.5])
    assert not frame.truth["inside"][0]
    near = expose(scene)
    assert_allclose(
        [frame.truth["x"][0] - 30, frame.truth["y"][0] - 250.5],
        [near.truth["x"][0] - 100, near.truth["y"][0] - 60],
        atol=1e-9,
    )
    found = frame.wcs.all_world2pix([[frame.truth["ra"][0], frame.truth["dec"][0]]], 0)[0]
    assert_allclose(found, [frame.truth["x"][0], frame.truth["y"][0]], atol=1e-6)


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"detector.1.name": "west"}, "names another detector, too"),
        ({"detector.1.name": "truth"}, "names another part of a frame"),
        ({"detector.1.name": "2nd"}, "is not the name of a detector"),
        ({"detector.1.name": None}, "name: is required and missing"),
        ({"detector.1.offset": ["3 kg", "0 px"]}, "must be a length, an angle or a number of pix"),
        ({"detector.1.offset": ["3 km", "0 px"]}, "lies too far out"),
        ({"detector.1.offset": "3 mm"}, "must be an array of 2 values"),
        ({"camera.pixel_size": None, "camera.pixel_scale": "1 arcsec"}, "size of a pixel"),
        ({"detector.0.colour": 3}, "is not a known key"),
    ],
)
def test_wrong_mosaics(tmp_path, changes, said):
    scene = mosaic(tmp_path)
    with pytest.raises(InputError, match=said):
        replace(scene, changes)


def test_a_mosaic_is_not_exposed_as_one_camera(tmp_path):
    scene = mosaic(tmp_path)
    with pytest.raises(InputError, match="a mosaic has a frame of its own kind"):
        prepare(scene)
    with pytest.raises(InputError, match="is required for a mosaic"):
        expose_mosaic(replace(scene, {"detector": None}))
