"""The inventory and the truth: what was put in, and how much of it the frame holds."""

import numpy as np
import pytest

from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.assembly.truth import truth_table
from simimg.imaging.render import expected_image
from tests.assembly.scenes import TEXT, scene

ARCSEC = np.pi / 180 / 3600

FIELD = (
    TEXT
    + """
[[star]]
x = 0
y = 40
electrons = 1e5
[[star]]
x = -0.5
y = -0.5
electrons = 2e5
[[star]]
label = "far off"
x = 400
y = 40
electrons = 1e5
[[pair]]
label = "P"
east = "2 arcsec"
north = "1 arcsec"
electrons = [1e4, 5e3]
separation = "0.8 arcsec"
position_angle = "90 deg"
[[galaxy]]
electrons = 1e5
sersic_index = 1.0
effective_radius = "1.5 arcsec"
axis_ratio = 0.5
position_angle = "30 deg"
[[galaxy]]
x = 0
y = 40
electrons = 1e5
effective_radius = "1 arcsec"
[[disc]]
electrons = 1e5
diameter = "3 arcsec"
phase_angle = "100 deg"
position_angle = "45 deg"
[[ring]]
electrons = 1e5
inner_diameter = "4 arcsec"
outer_diameter = "5 arcsec"
inclination = "70 deg"
"""
)


@pytest.fixture
def field(tmp_path):
    return scene(tmp_path, FIELD)


def test_a_pair_is_two_rows_that_know_each_other(field):
    rows = [e for e in inventory(field).entries if e.kind == "pair"]
    first, second = rows
    assert (first.label, second.label) == ("P", "P")
    entries = list(inventory(field).entries)
    assert entries[first.partner].x == second.x
    assert entries[second.partner].x == first.x
    # Position angle 90 degrees is east, which is left.
    assert second.x - first.x == pytest.approx(-0.8 / 0.25)
    assert second.y == pytest.approx(first.y)
    assert second.electrons == 5e3


def test_what_the_truth_says_is_what_the_image_holds(field):
    """electrons_in_frame against the summed image of each object alone, within 2e-3."""
    objects, train = inventory(field), assemble_train(field)
    table = truth_table(objects, train)
    sources = objects.sources
    shapes = iter(sources.shapes)
    size = {"columns": 101, "rows": 81, "pixel_scale": train.pixel_scale}
    for row, entry in enumerate(objects.entries):
        if entry.shape is None:
            alone = sources.points.chosen(np.flatnonzero(sources.points.x == entry.x)[:1])
            source = type(sources)(alone)
        else:
            source = type(sources)(sources.points.chosen([]), (next(shapes),))
        held = expected_image(train.basis, source, **size).sum()
        assert table["electrons_in_frame"][row] == pytest.approx(held, abs=2e-3 * entry.electrons)


def test_inside_is_the_area_of_the_pixels(field):
    table = truth_table(inventory(field), assemble_train(field))
    inside = dict(zip(zip(table["x"], table["y"], strict=True), table["inside"], strict=True))
    assert inside[(0.0, 40.0)]
    assert inside[(-0.5, -0.5)]
    assert not inside[(400.0, 40.0)]


def test_truth_carries_the_keys_of_shapes_in_the_trades_units(field):
    table = truth_table(inventory(field), assemble_train(field))
    galaxy = table[table["kind"] == "galaxy"][0]
    assert galaxy["effective_radius"] == pytest.approx(1.5)
    assert galaxy["position_angle"] == pytest.approx(30)
    assert table["effective_radius"].unit == "arcsec"
    assert np.isnan(table[0]["effective_radius"])
    disc = table[table["kind"] == "disc"][0]
    assert disc["phase_angle"] == pytest.approx(100)


@pytest.mark.parametrize(
    ("angle", "mirrored", "step"), [(0, False, (0, 1)), (90, False, (-1, 0)), (90, True, (1, 0))]
)
def test_the_lit_limb_points_along_its_position_angle(tmp_path, angle, mirrored, step):
    text = (
        FIELD[: FIELD.index("[[star]]")]
        + f"""
[[disc]]
electrons = 1e6
diameter = "6 arcsec"
phase_angle = "120 deg"
position_angle = "{angle} deg"
"""
    )
    s = scene(tmp_path, text, camera__mirrored=mirrored)
    train = assemble_train(s)
    image = expected_image(
        train.basis, inventory(s).sources, columns=101, rows=81, pixel_scale=train.pixel_scale
    )
    y, x = np.indices(image.shape)
    moment = np.array([(image * (x - 50)).sum(), (image * (y - 40)).sum()]) / image.sum()
    assert moment @ np.array(step) > 5
    assert abs(moment @ np.array([step[1], step[0]])) < 0.1


def test_a_galaxys_major_axis_lies_along_its_position_angle(tmp_path):
    text = (
        FIELD[: FIELD.index("[[star]]")]
        + """
[[galaxy]]
electrons = 1e6
sersic_index = 0.5
effective_radius = "2 arcsec"
axis_ratio = 0.4
position_angle = "30 deg"
"""
    )
    s = scene(tmp_path, text)
    train = assemble_train(s)
    image = expected_image(
        train.basis, inventory(s).sources, columns=101, rows=81, pixel_scale=train.pixel_scale
    )
    y, x = np.indices(image.shape)
    dx, dy = x - 50, y - 40
    near = np.hypot(dx, dy) < 35
    xx, yy, xy = ((image * near * a * b).sum() for a, b in ((dx, dx), (dy, dy), (dx, dy)))
    # East is left: a position angle of 30 degrees leans to the left of up.
    assert np.degrees(0.5 * np.arctan2(2 * xy, xx - yy)) % 180 == pytest.approx(120, abs=0.3)
