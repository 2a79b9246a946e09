"""Dithered exposures: the aim moves, the sky stays."""

import astropy.units as u
import numpy as np
import pytest
from astropy.coordinates import SkyCoord
from numpy.testing import assert_allclose, assert_array_equal

from simimg.assembly.dither import aimed_geometry, dither_offset
from simimg.errors import InputError
from simimg.exposure import expose, expose_prepared, prepare
from simimg.resolving.observation import observe
from tests.assembly.scenes import TEXT, scene

ARCSEC = np.pi / 648000.0
STARS = """
[[star]]
label = "two"
electrons = 1e6
ra = "83.6305 deg"
dec = "-5.3902 deg"
[[star]]
electrons = 1e6
x = 71.3
y = 22.9
[[pair]]
electrons = [1e6, 5e5]
east = "4 arcsec"
north = "-5 arcsec"
separation = "3 arcsec"
position_angle = "20 deg"
"""
SQUARE = 'dither = { pattern = "square", step = "2 arcsec" }'
POINTED = (
    TEXT.replace(
        "seed = 4", 'seed = 4\ncount = 4\ndither = { pattern = "square", step = "2 arcsec" }'
    )
    + '[pointing]\nra = "83.632 deg"\ndec = "-5.391 deg"\n'
    + STARS
)


def dithered(folder, **changes):
    return scene(folder, POINTED, camera__rotation="31 deg", **changes)


def test_square_walks_round_the_middle(tmp_path):
    s = dithered(tmp_path)
    steps = [np.array(dither_offset(s, i)) / (2 * ARCSEC) for i in range(25)]
    assert_array_equal(steps[0], [0, 0])
    grid = {tuple(np.rint(step).astype(int)) for step in steps[:9]}
    assert grid == {(i, j) for i in (-1, 0, 1) for j in (-1, 0, 1)}
    assert len({tuple(np.rint(step).astype(int)) for step in steps}) == 25
    assert_allclose([np.hypot(*(b - a)) for a, b in zip(steps, steps[1:])], 1.0, atol=1e-9)
    turned = dithered(tmp_path, exposure__dither__position_angle="90 deg")
    east, north = np.array(dither_offset(s, 4)) / ARCSEC
    assert_allclose(np.array(dither_offset(turned, 4)) / ARCSEC, [north, -east], atol=1e-9)


def test_line_offsets_and_random(tmp_path):
    line = {"pattern": "line", "step": "3 arcsec", "position_angle": "30 deg"}
    s = dithered(tmp_path, exposure__dither=line)
    found = np.array([dither_offset(s, i) for i in range(3)]) / ARCSEC
    assert_allclose(found, np.outer([0, 3, 6], [0.5, np.sqrt(0.75)]), atol=1e-9)
    given = {"offsets": [["1 arcsec", "-2 arcsec"], ["0.1 arcmin", "0 arcsec"]]}
    s = dithered(tmp_path, exposure__dither=given)
    found = np.array([dither_offset(s, i) for i in range(3)]) / ARCSEC
    assert_allclose(found, [[1, -2], [6, 0], [1, -2]], atol=1e-9)
    s = dithered(tmp_path, exposure__dither={"pattern": "random", "step": "3 arcsec"})
    found = np.array([dither_offset(s, i) for i in range(2000)]) / ARCSEC
    assert_array_equal(found[0], [0, 0])
    radius = np.hypot(*found[1:].T)
    assert radius.max() < 3.0
    # Even over the disc: half its places within 1 / sqrt(2) of the radius.
    assert abs(np.mean(radius < 3.0 / np.sqrt(2.0)) - 0.5) < 4 * 0.5 / np.sqrt(1999)
    assert_allclose(found.mean(axis=0), 0.0, atol=4 * 1.5 / np.sqrt(1999))
    assert dither_offset(dithered(tmp_path), 0) == (0.0, 0.0)


def test_coordinates_and_truth_agree_in_every_frame(tmp_path):
    prepared = prepare(dithered(tmp_path))
    places = []
    for index in range(4):
        frame = expose_prepared(prepared, index=index)
        truth = frame.truth
        found = frame.wcs.all_world2pix(np.column_stack([truth["ra"], truth["dec"]]), 0)
        assert_allclose(found, np.column_stack([truth["x"], truth["y"]]), atol=1e-6)
        places.append(np.column_stack([truth["ra"], truth["dec"]]))
        assert_allclose(places[-1], places[0], atol=1e-10)
        centre = SkyCoord(*frame.wcs.wcs.crval, unit="deg")
        aim = SkyCoord(83.632, -5.391, unit="deg").spherical_offsets_to(centre)
        offsets = [frame.value("OFFEAST"), frame.value("OFFNORTH")]
        assert_allclose([one.arcsec for one in aim], offsets, atol=1e-4)
    assert_allclose(offsets, np.degrees(dither_offset(prepared.scene, 3)) * 3600, atol=1e-9)


def centroid(image, x, y):
    """The place at which a window finds the light balanced about itself."""
    rows, columns = np.indices(image.shape)
    for _ in range(60):
        weight = image * np.exp(-((columns - x) ** 2 + (rows - y) ** 2) / (2 * 1.5**2))
        dx = ((columns - x) * weight).sum() / weight.sum()
        dy = ((rows - y) * weight).sum() / weight.sum()
        x, y = x + 1.8 * dx, y + 1.8 * dy
    return np.array([x, y])


def test_stars_come_together_by_their_coordinates(tmp_path):
    text = POINTED.split("[[pair]]")[0].replace("magnitude = 17", "electrons = 1e6")
    steady = scene(tmp_path, text.replace("surface_brightness = 21", "electrons = 0"))
    prepared = prepare(steady)
    first = expose_prepared(prepared, index=0, keep=["expected"])
    for index in (1, 2, 3):
        other = expose_prepared(prepared, index=index, keep=["expected"])
        for row in (1, 2):
            x, y = first.truth["x"][row], first.truth["y"][row]
            here = centroid(first.expected.astype(float), x, y)
            u, v = other.truth["x"][row], other.truth["y"][row]
            assert np.hypot(u - x, v - y) > 5.0
            there = centroid(other.expected.astype(float), u, v)
            brought = first.wcs.all_world2pix(other.wcs.all_pix2world([there], 0), 0)[0]
            assert_allclose(brought, here, atol=1e-3)


def test_shapes_keep_their_angle_on_the_sky_near_the_pole(tmp_path):
    text = """
[telescope]
aperture = "0.1 m"
[band]
name = "V"
[camera]
pixels = [121, 121]
pixel_scale = "20 arcsec"
rotation = "12 deg"
[pointing]
ra = "40 deg"
dec = "89.5 deg"
[exposure]
dither = { offsets = [["0 arcsec", "0 arcsec"], ["13 arcmin", "6 arcmin"]] }
[[galaxy]]
electrons = 1e6
sersic_index = 0.5
effective_radius = "80 arcsec"
axis_ratio = 0.4
position_angle = "70 deg"
"""
    for mirrored in (False, True):
        prepared = prepare(scene(tmp_path, text, camera__mirrored=mirrored))
        turns = []
        for index in (0, 1):
            frame = expose_prepared(prepared, index=index, keep=["expected"])
            image = frame.expected.astype(float)
            rows, columns = np.indices(image.shape)
            dx, dy = columns - frame.truth["x"][0], rows - frame.truth["y"][0]
            moments = [(image * a * b).sum() for a, b in ((dx, dx), (dx, dy), (dy, dy))]
            angle = 0.5 * np.arctan2(2 * moments[1], moments[0] - moments[2])
            centre = SkyCoord(40, 89.5, unit="deg")
            along = centre.directional_offset_by(70 * u.deg, 30 * u.arcsec)
            ends = frame.wcs.all_world2pix([[c.ra.deg, c.dec.deg] for c in (centre, along)], 0)
            wanted = np.arctan2(*(ends[1] - ends[0])[::-1])
            turns.append(wanted)
            # The turn is reckoned at the middle of the detector, which is 14 arcmin away.
            assert abs(np.sin(angle - wanted)) < 3e-3
        # The detector turned against the sky by degrees between the two.
        assert abs(np.sin(turns[1] - turns[0])) > 0.1


def test_measuring_knows_where_the_telescope_pointed(tmp_path):
    s = dithered(tmp_path)
    frame = expose(s, index=2)
    sky = observe(frame).sky
    for row in frame.truth:
        ra, dec = sky.to_sky(row["x"], row["y"])
        assert_allclose(np.degrees([ra, dec]), [row["ra"], row["dec"]], atol=1e-9)


def test_without_a_dither_nothing_changes(tmp_path):
    s = scene(tmp_path)
    assert dither_offset(s, 5) == (0.0, 0.0)
    assert aimed_geometry(s, 5) == prepare(s).objects.geometry
    moved = scene(tmp_path, exposure__dither={"pattern": "line", "step": "3 arcsec"})
    assert_array_equal(expose(s).counts, expose(moved).counts)
    assert (expose(s, index=1).counts != expose(moved, index=1).counts).any()


@pytest.mark.parametrize(
    ("dither", "said"),
    [
        ({"step": "3 arcsec"}, "pattern: is required in dither"),
        ({"pattern": "line"}, "step: is required beside pattern"),
        ({"pattern": "spiral", "step": "1 arcsec"}, "unknown word"),
        ({"pattern": "line", "step": "0 arcsec"}, "must be above 0 arcsec"),
        ({"offsets": [["1 arcsec", "1 arcsec"]], "step": "1 arcsec"}, "contradicts"),
        ({"offsets": [["1 arcsec"]]}, "must be an array of 2 values"),
        ({"offsets": [[1, 2]]}, "bare number"),
    ],
)
def test_wrong_dithers(tmp_path, dither, said):
    with pytest.raises(InputError, match=said):
        scene(tmp_path, exposure__dither=dither)
