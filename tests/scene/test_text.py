import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from simimg.scene.text import parse_toml, parse_value, to_toml

PLAIN = st.recursive(
    st.one_of(
        st.booleans(),
        st.integers(-(2**63), 2**63),
        st.floats(allow_nan=False, allow_infinity=False),
        st.text(st.characters(exclude_categories=["Cs"]), max_size=20),
    ),
    lambda inner: st.one_of(
        st.lists(inner, max_size=3),
        st.dictionaries(st.text(st.characters(exclude_categories=["Cs"]), max_size=8), inner),
    ),
    max_leaves=8,
)


@given(st.dictionaries(st.text(st.characters(exclude_categories=["Cs"]), max_size=8), PLAIN))
def test_what_is_written_reads_back(document):
    assert tomllib.loads(to_toml(document)) == document


def test_tables_are_written_as_people_write_them():
    document = {
        "star": [{"magnitude": 3.0, "label": "a"}, {"magnitude": 4.0}],
        "title": 'a "b"\n',
        "telescope": {"aperture": "2 m", "vanes": {"count": 4}},
        "header": {},
    }
    assert to_toml(document) == (
        'title = "a \\"b\\"\\n"\n\n[[star]]\nmagnitude = 3.0\nlabel = "a"\n\n[[star]]\n'
        'magnitude = 4.0\n\n[telescope]\naperture = "2 m"\nvanes = { count = 4 }\n\n[header]\n'
    )


def test_dates_become_text():
    assert parse_toml(b"a = 2026-04-12T03:00:00\nb = [2026-04-12]", "x") == {
        "a": "2026-04-12T03:00:00",
        "b": ["2026-04-12"],
    }


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("3", 3),
        ('"3"', "3"),
        ("[1, 2]", [1, 2]),
        ("V", "V"),
        (" 4 m ", "4 m"),
        ("", ""),
        ('4"', '4"'),
        ("1\nseed = 3", "1\nseed = 3"),
        ("true # yes", True),
    ],
)
def test_value_of_an_override(text, value):
    assert parse_value(text) == value
