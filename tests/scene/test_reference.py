"""The reference of keys is that of the models, and every key says what it means."""

import subprocess
import sys
from pathlib import Path

import pytest

from simimg.scene.model import Scene
from simimg.scene.reference import key_reference
from simimg.scene.walk import keys_of, tables_of

PAGE = Path(__file__).parents[2] / "scenes" / "KEYS.md"
KEYS = [(table, one) for table in tables_of(Scene) for one in keys_of(table)]


def test_the_page_is_up_to_date():
    same = PAGE.read_text(encoding="utf-8") == key_reference()
    assert same, "keys were changed; write the page anew by: python scenes/make_keys.py"


def test_the_script_writes_the_page(tmp_path):
    script = PAGE.parent / "make_keys.py"
    subprocess.run([sys.executable, script, tmp_path], check=True)
    assert (tmp_path / PAGE.name).read_bytes() == PAGE.read_bytes()


@pytest.mark.parametrize(
    ("table", "one"), KEYS, ids=[f"{table.__name__}.{one.name}" for table, one in KEYS]
)
def test_every_key_says_what_it_means(table, one):
    assert one.description.endswith("."), f"{table.__name__}.{one.name} needs a description"
    assert one.description[0].isupper() or one.description.split(":")[0].islower()
    assert one.reader is not None or one.table is not None
    if one.reader is not None:
        assert one.reader.range
        assert one.reader.example


def test_every_table_says_what_it_is():
    for table in tables_of(Scene):
        assert (table.__doc__ or "").strip().split("\n")[0].endswith("."), table


def test_known_keys_are_in_it():
    page = PAGE.read_text(encoding="utf-8")
    for line in (
        '| `aperture` | Clear diameter of the aperture. | a length from 1 mm to 1 km, as `"2 m"` '
        "| required |",
        "## `[[pair]]`",
        "## `[pair.orbit]`",
    ):
        assert page.count(line) == 1
