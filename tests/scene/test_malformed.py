"""Every malformed scene is refused in our own words, with file, key and mend."""

import pytest

from simimg.errors import InputError
from simimg.scene.file import load_scene
from tests.scene.malformed_scenes import GOOD, MALFORMED, Malformed


def test_the_table_is_long_and_its_names_are_distinct():
    assert len(MALFORMED) >= 60
    assert len({row.name for row in MALFORMED}) == len(MALFORMED)


def test_the_good_scene_is_good(tmp_path):
    path = tmp_path / "good.toml"
    path.write_text(GOOD)
    assert load_scene(path).pair[0].label == "SR-014"


@pytest.mark.parametrize("row", MALFORMED, ids=lambda row: row.name)
def test_a_line_names_file_key_and_mend(row: Malformed, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "scene.toml").write_bytes(row.content)
    with pytest.raises(InputError) as caught:
        load_scene("scene.toml")
    lines = caught.value.lines
    for line in lines:
        assert line.startswith("scene.toml: "), line
        assert line.isprintable()
        assert len(line) < 400
        what, _, mend = line.partition("; ")
        assert what.strip(), line
        assert mend.strip(), line
        for word in ("pydantic", "validation", "Traceback", "input_value", "NoneType"):
            assert word not in line
    named = [line for line in lines if line.removeprefix("scene.toml: ").startswith(row.key)]
    named = named or [line for line in lines if f"{row.key}:" in line.split("; ")[0]]
    assert any(row.word in line for line in named), lines
    # Nothing but the scene that was written here.
    assert [one.name for one in tmp_path.iterdir()] == ["scene.toml"]


def test_every_mistake_is_told_at_once(tmp_path):
    text = GOOD
    for old, new in (
        ('"2.0 m"', "2.0"),
        ("0.30", "1.3"),
        ('seeing = "0.9 arcsec"\n', ""),
        ('name = "V"', 'name = "W"'),
        ("[64, 48]", "[0, 48]"),
        ("[sky]", "[ski]"),
        ('"0.35 arcsec"', '"0 arcsec"'),
        ("OBSERVER", "NAXIS"),
    ):
        text = text.replace(old, new)
    path = tmp_path / "scene.toml"
    path.write_text(text + '\n[[picture]]\nfile = "no.png"\nwidth = "1 deg"\nmagnitude = "x"\n')
    with pytest.raises(InputError) as caught:
        load_scene(path)
    keys = [line.removeprefix(f"{path}: ").split(":")[0] for line in caught.value.lines]
    assert sorted(keys) == [
        "air.seeing",
        "band.name",
        "camera.pixels",
        "header.NAXIS",
        "pair.0.separation",
        "picture.0.file",
        "picture.0.magnitude",
        "ski",
        "telescope.aperture",
        "telescope.obstruction",
    ]


def test_very_many_mistakes_are_cut_short(tmp_path):
    path = tmp_path / "scene.toml"
    path.write_text(GOOD + "\n[[star]]\nmagnitud = 1\n" * 3000)
    with pytest.raises(InputError) as caught:
        load_scene(path)
    assert len(caught.value.lines) == 201
    assert "more mistakes" in caught.value.lines[-1]


@pytest.mark.parametrize(
    ("name", "word"), [("no.toml", "no such file"), (".", "regular file"), ("/dev/zero", "regular")]
)
def test_a_scene_file_that_is_none(name, word, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(InputError, match=word) as caught:
        load_scene(name)
    assert caught.value.exit_code == 2
    assert "; " in caught.value.lines[0]


def test_a_scene_file_too_large(tmp_path):
    path = tmp_path / "scene.toml"
    path.write_bytes(b"#" * (4 * 2**20 + 1))
    with pytest.raises(InputError, match="too large"):
        load_scene(path)
