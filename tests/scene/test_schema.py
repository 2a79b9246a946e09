"""The JSON schema of a scene: what is written right passes, what is written wrong does not."""

import json
import tomllib
from pathlib import Path

import pytest
from jsonschema import Draft202012Validator

from simimg.quantities import KINDS
from simimg.scene.keys import Quantity, Reader
from simimg.scene.model import Scene
from simimg.scene.schema import scene_schema, value_schema
from simimg.scene.table import table_types
from simimg.scene.walk import keys_of, tables_of

SCENES = sorted((Path(__file__).parents[2] / "scenes").glob("*.toml"))
GOOD = """\
[telescope]
aperture = "2 m"
obstruction = 0.3
[band]
name = "V"
[camera]
pixels = [64, 64]
pixel_scale = "0.1 arcsec"
[[pair]]
magnitudes = [11.2, 11.9]
separation = "0.35 arcsec"
"""
WRITTEN = [(table, one) for table in tables_of(Scene) for one in keys_of(table) if one.reader]


@pytest.fixture(scope="module")
def validator():
    schema = json.loads(json.dumps(scene_schema(), allow_nan=False))
    Draft202012Validator.check_schema(schema)
    return Draft202012Validator(schema)


def mistakes(validator, text):
    return sorted(".".join(map(str, e.absolute_path)) for e in validator.iter_errors(parsed(text)))


def parsed(text):
    return tomllib.loads(text)


@pytest.mark.parametrize("path", SCENES, ids=[path.stem for path in SCENES])
def test_every_demo_scene_passes(validator, path):
    assert mistakes(validator, path.read_text()) == []


def test_there_are_demo_scenes():
    assert len(SCENES) >= 12


def test_the_starter_passes(validator):
    from simimg_cli.starter import STARTER

    assert mistakes(validator, STARTER) == []


@pytest.mark.parametrize(
    ("right", "wrong", "place"),
    [
        ('aperture = "2 m"', 'apertur = "2 m"', "telescope"),
        ('aperture = "2 m"', "aperture = 2", "telescope.aperture"),
        ('aperture = "2 m"', 'aperture = "2"', "telescope.aperture"),
        ("obstruction = 0.3", "obstruction = 1.2", "telescope.obstruction"),
        ("obstruction = 0.3", "obstruction = true", "telescope.obstruction"),
        ('pixel_scale = "0.1 arcsec"', "pixel_scale = 0.1", "camera.pixel_scale"),
        ("pixels = [64, 64]", "pixels = [64]", "camera.pixels"),
        ("pixels = [64, 64]", "pixels = [64, 0]", "camera.pixels.1"),
        ("pixels = [64, 64]", "pixels = [64, 6.5]", "camera.pixels.1"),
        ('separation = "0.35 arcsec"', "separation = 0.35", "pair.0.separation"),
        ('separation = "0.35 arcsec"', 'separaton = "0.35 arcsec"', "pair.0"),
        ("magnitudes = [11.2, 11.9]", "magnitudes = [11.2]", "pair.0.magnitudes"),
        ("[[pair]]", "[pair]", "pair"),
        ("[band]", "[bands]", ""),
        ('name = "V"', 'name = "Q"', "band.name"),
        ('aperture = "2 m"', "", "telescope"),
        (
            '[[pair]]\nmagnitudes = [11.2, 11.9]\nseparation = "0.35 arcsec"',
            "[[galaxy]]\nmagnitude = 12",
            "galaxy.0",
        ),
        ("[[pair]]", "[telescope.vanes]\ncount = 4\n[[pair]]", "telescope.vanes"),
    ],
)
def test_a_wrong_scene_fails_where_it_is_wrong(validator, right, wrong, place):
    assert mistakes(validator, GOOD) == []
    assert GOOD.count(right) == 1
    assert place in mistakes(validator, GOOD.replace(right, wrong))


def test_a_scene_over_another_may_leave_out_what_that_gives(validator):
    over = 'base = "station.toml"\n[telescope]\nname = "mine"\n[[pair]]\nmagnitudes = [9, 9]\n'
    assert mistakes(validator, over) == []
    assert mistakes(validator, over.replace('base = "station.toml"\n', "")) != []


@pytest.mark.parametrize(
    ("table", "one"), WRITTEN, ids=[f"{table.__name__}.{one.name}" for table, one in WRITTEN]
)
def test_what_a_reader_takes_its_schema_takes(table, one):
    del table
    form = Draft202012Validator(value_schema(one.reader))
    example = parsed(f"x = {one.reader.example}")["x"]
    one.reader.read(example)
    assert form.is_valid(example)
    for nonsense in ({"no": {"such": "key"}}, [[[]]], "\t"):
        assert not form.is_valid(nonsense), nonsense
    if isinstance(one.reader, Quantity) and KINDS[one.reader.kind].usual:
        bare = 0.5
        # An obstruction is a ratio that may be a length; all others need their unit.
        assert not form.is_valid(bare)
        assert not form.is_valid("0.5")


@pytest.mark.parametrize(
    ("kind", "good", "bad"),
    [
        ("angle", ["0.8 arcsec", "-5d23m28s", "1:2:3", "12h30m", "0.8arcsec", "1e-3 rad"], ["0.8"]),
        ("right ascension", ["05:34:32", "05 34 32", "83.6 deg"], ["83.6", "north"]),
        ("length", ["2 m", ".5 inch", "9 um", "\u22121 mm"], ["2", "m", "two m"]),
        ("electron rate", ["0.02 electron/s", "1 e-/s"], ["0.02"]),
        ("hit rate", ["5 / (cm2 min)"], ["5"]),
        ("magnitude", [11.2, "11.2", "11.2 mag", 12], ["bright", True]),
        ("ratio", [0.5, "50 %"], ["half"]),
    ],
)
def test_quantities_as_they_are_written(kind, good, bad):
    reader = Quantity(kind)
    form = Draft202012Validator(value_schema(reader))
    for text in good:
        reader.read(text)
        assert form.is_valid(text), text
    for text in bad:
        with pytest.raises(Exception, match=";"):
            reader.read(text)
        assert not form.is_valid(text), text


def test_a_reader_without_a_schema_is_told():
    class Strange(Reader):
        read = example = range = None

    with pytest.raises(TypeError, match=r"simimg/scene/schema\.py has no schema .* Strange"):
        value_schema(Strange())


def test_every_table_is_in_it(validator):
    held = {table.__name__ for table in tables_of(Scene)}
    # Readers' own tables, such as a catalogue's columns, are no tables of the model.
    assert {table.__name__ for table in table_types()} <= held
    assert set(validator.schema["$defs"]) == held - {"Scene"}
