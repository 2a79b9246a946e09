"""Layers of a scene: what is seen of them along the line of sight."""

import math

import pytest

from simimg.assembly.atmosphere import GROUND, air_figures, scene_layers
from simimg.assembly.report import describe
from simimg.assembly.train import assemble_train
from tests.assembly.scenes import scene

LAYERS = [
    {"height": "0 m", "share": 3, "wind": "6 m/s"},
    {"height": "8 km", "share": 1, "wind": "36 km/h", "direction": "90 deg"},
]


def test_distances_go_with_the_airmass_and_shares_add_up_to_one(tmp_path):
    made = scene_layers(scene(tmp_path, air__layer=LAYERS).air)
    assert [one.height for one in made] == pytest.approx([0.0, 9600.0])
    assert [one.share for one in made] == [0.75, 0.25]
    assert [one.wind for one in made] == pytest.approx([6.0, 10.0])
    assert made[1].velocity == pytest.approx((10.0, 0.0))


def test_a_scene_without_layers_has_one_at_the_telescope(tmp_path):
    made = scene(tmp_path)
    assert scene_layers(made.air) == (GROUND,)
    figures = air_figures(made.air, 0.1)
    assert figures.coherence_time_ms == pytest.approx(3.14)
    assert figures.isoplanatic_angle_arcsec == math.inf
    listed = {key: value for key, value, _ in describe(made).defaults}
    assert listed["air.layer"] == "one layer"


def test_above_the_air_there_is_nothing(tmp_path):
    assert scene_layers(None) == ()
    assert air_figures(None, None) is None
    values = describe(scene(tmp_path, air=None)).values
    assert values["coherence_time_ms"] is None
    assert values["isoplanatic_angle_arcsec"] is None


def test_check_says_what_the_layers_come_to(tmp_path):
    made = scene(tmp_path, air__layer=LAYERS)
    fried = assemble_train(made).fried
    wind = (0.75 * 6.0 ** (5 / 3) + 0.25 * 10.0 ** (5 / 3)) ** 0.6
    distance = (0.25 * 9600.0 ** (5 / 3)) ** 0.6
    meaning = describe(made)
    assert meaning.values["coherence_time_ms"] == pytest.approx(314.0 * fried / wind)
    angle = math.degrees(0.314 * fried / distance) * 3600.0
    assert meaning.values["isoplanatic_angle_arcsec"] == pytest.approx(angle)
    lines = {name: value for name, value, _ in meaning.lines}
    assert lines["coherence time"] == f"{314.0 * fried / wind:.3g} ms"
    assert lines["isoplanatic angle"] == f"{angle:.3g} arcsec"
    listed = {key for key, _, _ in meaning.defaults}
    assert {"air.layer.0.direction"} <= listed
    assert "air.layer.1.direction" not in listed


def test_layers_alone_change_no_long_exposure(tmp_path):
    plain, layered = (
        assemble_train(one) for one in (scene(tmp_path), scene(tmp_path, air__layer=LAYERS))
    )
    assert plain.fried == layered.fried
    assert plain.effective(2e5, 1e5) == layered.effective(2e5, 1e5)
