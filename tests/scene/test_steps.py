"""Values along which a key is varied."""

import math

import pytest
from numpy.testing import assert_allclose

from simimg.errors import InputError
from simimg.scene.file import replace
from simimg.scene.steps import StepsError, steps_from_text, steps_from_value, written
from tests.study.pairs import pair_scene


def test_even_steps_keep_the_unit():
    steps = steps_from_text("0.05 arcsec:0.2 arcsec:4")
    assert steps.values == ("0.05 arcsec", "0.1 arcsec", "0.15 arcsec", "0.2 arcsec")
    assert steps.numbers == (0.05, 0.1, 0.15, 0.2)
    assert (steps.unit, steps.spacing) == ("arcsec", "linear")
    assert steps.at(0.12) == "0.12 arcsec"


def test_equal_factors():
    steps = steps_from_text("1 s:1000 s:4:log")
    assert_allclose(steps.numbers, [1, 10, 100, 1000], rtol=1e-11)
    assert steps.values[0] == "1 s"
    assert steps.values[-1] == "1000 s"


@pytest.mark.parametrize("text", ['"0.1 arcsec":"0.2 arcsec":2', "0.1:0.2 arcsec:2"])
def test_quotes_and_a_unit_said_once(text):
    assert steps_from_text(text).values == ("0.1 arcsec", "0.2 arcsec")


def test_lists_of_numbers_and_of_words():
    assert steps_from_text("[V, R, I]").values == ("V", "R", "I")
    assert steps_from_text("V,R").numbers == ()
    assert steps_from_text("1,2.5,4").values == (1, 2.5, 4)
    assert steps_from_value(["1 s", "3 s"]).numbers == (1.0, 3.0)


def test_a_table_as_in_a_scene():
    given = {"from": "1 m", "to": "4 m", "count": 3, "spacing": "log"}
    assert_allclose(steps_from_value(given).numbers, [1.0, 2.0, 4.0], rtol=1e-11)


def test_whole_numbers_stay_whole():
    assert written(3.0, "") == 3
    assert isinstance(written(3.0, ""), int)
    assert written(0.1 + 0.2, "m") == "0.3 m"


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("1:2", "no values"),
        ("a:b:3", "not a number"),
        ("0:1:3:log", "above 0"),
        ("1 m:2 cm:3", "two units"),
        ("1 m:1 m:3", "the same"),
        ("1:2:1", "count"),
        ("1:2:100000", "count"),
        ("1:2:3:cubic", "spacing"),
        ("nan:1:3", "not a number"),
        ("1e999:1:3", "not a number"),
        ("", "no values"),
    ],
)
def test_what_is_wrong_is_said(text, says):
    with pytest.raises(StepsError, match=says):
        steps_from_text(text)


@pytest.mark.parametrize(
    "given",
    [
        {"from": "1 m", "count": 3},
        {"from": "1 m", "to": "2 m", "count": 3, "step": 1},
        {"from": "1 m", "to": "2 m", "count": 2.5},
        {"from": "1 m", "to": "2 m", "count": True},
        [],
        7,
        [["nested"]],
        [math.inf, 1.0],
    ],
)
def test_a_scene_with_wrong_steps_names_the_key(tmp_path, given):
    if given == [math.inf, 1.0]:
        with pytest.raises(InputError):
            replace(pair_scene(tmp_path), {"camera.pixel_scale": math.inf})
        return
    with pytest.raises(InputError, match=r"study\.vary.*telescope\.aperture"):
        replace(pair_scene(tmp_path), {"study": {"vary": {"telescope.aperture": given}}})
