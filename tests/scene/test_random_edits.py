"""Whatever is done to a valid scene: it stays a scene or is refused in lines, never a traceback."""

import copy
import math
import tomllib

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from simimg.errors import InputError
from simimg.scene.file import (
    defaults_used,
    load_scene,
    requirements_to_expose,
    scene_from_record,
    scene_id,
    scene_record,
)
from simimg.scene.model import Scene
from simimg.scene.table import Table
from simimg.scene.text import to_toml
from tests.scene.malformed_real import REAL
from tests.scene.malformed_scenes import GOOD

ODD = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-(10**25), 10**25),
    st.just(10**4000),
    st.floats(allow_nan=True, allow_infinity=True),
    st.text(max_size=30),
    st.just("9" * 5000),
    st.just("\x1b[2J\u202e"),
    st.sampled_from(
        ["", " ", "nan m", "inf arcsec", "-1 s", "1e400 m", "0 m", "1e-400 m", "5 kg", "1 m m"]
    ),
    st.sampled_from(["2 m", "1 arcsec", "30 deg", "5 electron", "V", "AB", "near", "/dev/zero"]),
    st.sampled_from(["20 nm", "3 yr", "1 arcsec/h", "5800 K", "70 %", "g", "comet", "scene.toml"]),
    st.lists(st.one_of(st.floats(), st.integers(), st.text(max_size=3)), max_size=4),
    st.dictionaries(st.text(max_size=5), st.integers(), max_size=3),
    st.lists(st.dictionaries(st.sampled_from(["magnitude", "x", "file"]), st.floats()), max_size=3),
)

KEYS = st.one_of(
    st.text(max_size=12),
    st.sampled_from([*Scene.model_fields, "file", "base", "count", "electrons", "ra", "x"]),
    st.sampled_from(["spectrum", "temperature", "orbit", "motion", "angles", "rate", "4", "pupil"]),
)


def places(table, path=()):
    """Every key of a document, as its steps."""
    for name, value in table.items() if isinstance(table, dict) else enumerate(table):
        yield (*path, name)
        if isinstance(value, dict | list):
            yield from places(value, (*path, name))


@st.composite
def edited(draw):
    """A good scene after some edits."""
    document = tomllib.loads(draw(st.sampled_from([GOOD, REAL])))
    for _ in range(draw(st.integers(1, 4))):
        all_places = sorted(places(document), key=str)
        if not all_places:
            break
        *path, last = draw(st.sampled_from(all_places))
        holder = document
        for step in path:
            holder = holder[step]
        action = draw(st.sampled_from(["delete", "change", "rename", "insert", "repeat"]))
        if action == "delete":
            del holder[last]
        elif action == "change":
            holder[last] = copy.deepcopy(draw(ODD.filter(lambda value: value is not None)))
        elif action == "rename" and isinstance(holder, dict):
            holder[draw(KEYS)] = holder.pop(last)
        elif action == "insert" and isinstance(holder, dict):
            value = draw(ODD.filter(lambda value: value is not None))
            holder[draw(KEYS)] = copy.deepcopy(value)
        elif action == "repeat" and isinstance(holder, list):
            holder.append(copy.deepcopy(holder[last]))
    return document


def scene_or_lines(call):
    """What the call returns, or the lines of its refusal; anything else raised is a failure."""
    try:
        return call(), ()
    except InputError as error:
        return None, error.lines


def tables_of(table):
    """A table and every table inside it."""
    yield table
    for _, value in table:
        for one in value if isinstance(value, tuple) else (value,):
            if isinstance(one, Table):
                yield from tables_of(one)


def finite(value):
    """False for a number, or an array or a table with one, that is infinite or undefined."""
    if isinstance(value, dict):
        value = tuple(value.values())
    if isinstance(value, tuple):
        return all(finite(one) for one in value)
    return not isinstance(value, float) or math.isfinite(value)


def check(scene, lines):
    assert (scene is None) == bool(lines)
    for line in lines:
        assert line.isprintable()
        assert "; " in line
        assert "pydantic" not in line
    if scene is not None:
        again = scene_from_record(scene_record(scene), name="frame.fits", directory=".")
        assert scene_id(again) == scene_id(scene)
        assert defaults_used(again) == defaults_used(scene)
        assert len(requirements_to_expose(again)) == len(requirements_to_expose(scene))
        for table in tables_of(scene):
            # An outer scale alone may be infinite.
            assert all(finite(value) for name, value in table if name != "outer_scale")


slow = settings(
    max_examples=300,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
)


@slow
@given(document=edited())
def test_random_edits_of_the_document(document, tmp_path):
    path = tmp_path / "scene.toml"
    path.write_bytes(to_toml(document).encode("utf-8", "surrogatepass"))
    scene, lines = scene_or_lines(lambda: load_scene(path))
    check(scene, lines)
    assert all(str(path) in line for line in lines)


@slow
@given(
    scene=st.sampled_from([GOOD, REAL]),
    part=st.floats(0.0, 1.0),
    cut=st.integers(0, 40),
    text=st.one_of(st.text(max_size=10), st.sampled_from(list('[]{}"=.,\n\\#'))),
)
def test_random_edits_of_the_text(scene, part, cut, text, tmp_path):
    path = tmp_path / "scene.toml"
    place = int(part * len(scene))
    path.write_bytes((scene[:place] + text + scene[place + cut :]).encode("utf-8", "surrogatepass"))
    check(*scene_or_lines(lambda: load_scene(path)))


@st.composite
def changed(draw):
    """A good scene, and changes of its keys or of anything."""
    scene = draw(st.sampled_from([GOOD, REAL]))
    keys = sorted(places(tomllib.loads(scene)), key=str)
    changes = st.builds(
        lambda path, value: f"{'.'.join(map(str, path))}={value}", st.sampled_from(keys), ODD
    )
    return scene, draw(st.lists(st.one_of(st.text(max_size=30), changes), max_size=3))


@slow
@given(
    scene=changed(),
    without=st.lists(
        st.one_of(KEYS, st.sampled_from(["vanes", "wavefront", "telescope.segments", "field"])),
        max_size=2,
    ),
)
def test_random_overrides(scene, without, tmp_path):
    text, overrides = scene
    path = tmp_path / "scene.toml"
    path.write_text(text)
    check(*scene_or_lines(lambda: load_scene(path, overrides=overrides, without=without)))


@slow
@given(content=st.binary(max_size=200))
def test_random_bytes(content, tmp_path):
    path = tmp_path / "scene.toml"
    path.write_bytes(content)
    scene, lines = scene_or_lines(lambda: load_scene(path))
    assert scene is None
    check(scene, lines)


def test_any_other_exception_would_be_seen():
    with pytest.raises(KeyError):
        scene_or_lines(lambda: {}["x"])
    with pytest.raises(AssertionError):
        check(None, ("scene.toml: no mend",))
