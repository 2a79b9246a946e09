"""The gallery of the demo scenes: whole, up to date, and made by commands that run."""

import importlib.util
import shutil
from pathlib import Path

import pytest
from PIL import Image

from tests.commands import in_one_colour, quickly

FOLDER = Path(__file__).parents[1] / "scenes"
BASES = {"station", "orbiter"}
MOST_BYTES = 1_500_000
ANEW = "write the gallery anew by: python scenes/make_gallery.py"


def _script():
    specification = importlib.util.spec_from_file_location("gallery", FOLDER / "make_gallery.py")
    module = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(module)
    return module


gallery = _script()


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    made = tmp_path_factory.mktemp("gallery")
    shutil.copytree(FOLDER, made / "scenes")
    in_one_colour(made / "scenes")
    return made


def test_every_scene_is_in_it():
    names = [entry.name for entry in gallery.ENTRIES]
    assert len(names) == len(set(names))
    scenes = {path.stem for path in FOLDER.glob("*.toml")}
    assert set(names) == scenes - BASES, f"add an entry to scenes/make_gallery.py, then {ANEW}"
    page = gallery.page()
    for name in BASES:
        assert f"({name}.toml)" in page


def test_the_page_is_up_to_date():
    same = (FOLDER / "README.md").read_text(encoding="utf-8") == gallery.page()
    assert same, ANEW


def test_every_entry_says_what_it_shows_in_two_lines():
    for entry in gallery.ENTRIES:
        lines = entry.shows.split("\n")
        assert len(lines) == 2, entry.name
        assert all(20 <= len(line) <= 100 for line in lines), entry.name


def test_every_picture_is_there_and_small():
    pictures = {path.name: path for path in (FOLDER / "pictures").iterdir()}
    assert set(pictures) == {f"{entry.name}.png" for entry in gallery.ENTRIES}, ANEW
    for path in pictures.values():
        with Image.open(path) as picture:
            picture.load()
            assert picture.format == "PNG"
            assert 200 <= picture.width <= gallery.WIDTH
            # A picture of nothing has one colour.
            assert len(picture.getcolors(256)) > 20
    assert sum(path.stat().st_size for path in pictures.values()) < MOST_BYTES


@pytest.mark.parametrize("entry", gallery.ENTRIES, ids=[one.name for one in gallery.ENTRIES])
def test_its_commands_run(entry, folder, monkeypatch):
    assert entry.commands
    with quickly(monkeypatch):
        content = gallery.picture(entry, folder)
    assert content.startswith(b"\x89PNG")
    assert (folder / f"{entry.name}.png").exists()


def test_the_same_bytes_each_time(tmp_path):
    shutil.copytree(FOLDER, tmp_path / "scenes")
    (entry,) = (one for one in gallery.ENTRIES if one.name == "raw-frame")
    made = []
    for _ in range(2):
        made.append(gallery.picture(entry, tmp_path))
        for path in tmp_path.glob("raw-frame.*"):
            path.unlink()
    assert made[0] == made[1]


def test_a_command_that_fails_is_told(folder):
    wrong = gallery.Entry("none", "", ("simimg expose scenes/none.toml -o none.fits",))
    with pytest.raises(RuntimeError, match=r"none\.toml: no such file"):
        gallery.picture(wrong, folder)
