"""Every key has its description and range, and every reader keeps to its range."""

import tomllib

import pytest
from pydantic_core import PydanticCustomError

from simimg.light.bands import AB_BANDS, STANDARD_BANDS
from simimg.scene.band import AB_NAMES, BLUEST, REDDEST, VEGA_NAMES
from simimg.scene.header import Header
from simimg.scene.keys import (
    Choice,
    FileName,
    Flag,
    Instant,
    Quantity,
    Reader,
    Several,
    Text,
    Whole,
    nearest,
)
from simimg.scene.model import Scene
from simimg.scene.readers import EachAxis, RatioOrFile, UpTo
from simimg.scene.table import REPEATED, table_types
from simimg.scene.wavefront import LARGEST_TERM, Terms

TABLES = [Scene, *table_types()]
FIELDS = [
    pytest.param(table, name, id=f"{table.heading or 'scene'} {name}")
    for table in TABLES
    for name in table.model_fields
]


@pytest.mark.parametrize(("table", "name"), FIELDS)
def test_each_key_is_documented(table, name):
    field = table.model_fields[name]
    assert field.description.endswith(".")
    reader = table.reader(name)
    headings = [one.heading for one in table_types()]
    if reader is None:
        below = f"{table.heading.strip('[]')}.{name}"
        assert {f"[{name}]", f"[[{name}]]", f"[{below}]", f"[[{below}]]"} & set(headings)
        return
    assert isinstance(reader, Reader)
    assert reader.range
    # The example is valid TOML that the reader takes.
    reader.read(tomllib.loads(f"x = {reader.example}")["x"])


@pytest.mark.parametrize(("table", "name"), FIELDS)
def test_a_written_default_is_the_default(table, name):
    extra = table.model_fields[name].json_schema_extra
    reader = table.reader(name)
    if not extra or not extra["absent"]:
        return
    assert extra["meaning"]
    default = table.model_fields[name].default
    if (
        isinstance(reader, Quantity | Whole)
        and default is not None
        and extra["absent"][0].isdigit()
    ):
        assert reader.read(_plain(extra["absent"])) == default


def _plain(text):
    try:
        return tomllib.loads(f"x = {text}")["x"]
    except tomllib.TOMLDecodeError:
        return text


def test_many_are_the_tables_in_double_brackets():
    assert {f"[[{name}]]" for name in REPEATED} == {
        one.heading
        for one in table_types()
        # Those of a table, as the layers of the air, are the table's own affair.
        if one.heading.startswith("[[") and "." not in one.heading
    }


def test_standard_bands_are_those_with_a_zero_point():
    assert tuple(STANDARD_BANDS) == VEGA_NAMES
    assert tuple(AB_BANDS) == AB_NAMES
    centres = [band.centre for band in STANDARD_BANDS.values()]
    assert min(centres) == pytest.approx(BLUEST, rel=1e-12)  # the same decimal number
    assert max(centres) == pytest.approx(REDDEST, rel=1e-12)


@pytest.mark.parametrize(
    ("reader", "good", "bad"),
    [
        (Quantity("ratio", at_least=0, below=1), [0, 0.0, 0.999], [-1e-9, 1, 1.0, "1 %%", True]),
        (Quantity("ratio", above=0, at_most=1), [1e-9, 1], [0, 1.0000001]),
        (Quantity("length", above="0 m"), ["1 nm"], ["0 m", "-1 nm", 1, "1e-400 m"]),
        (Whole(1, 3, 2), [1, 3, 2.0], [0, 4, 1.5, "2", True, float("nan"), float("inf"), [1]]),
        (Text(3), ["abc", " a ", "\u00e9"], ["", "  ", "abcd", "a\nb", "a\x1b", "a\u202e", 3]),
        (Choice(("near", "far")), ["near"], ["Near", "", 3, None]),
        (Flag(), [True, False], [0, 1, "true"]),
        (FileName(), ["a.fits", "../b c.png"], ["", "  ", "a\n", "a\0", "x" * 1001, 3]),
        (Several(Whole(1, 3, 2), 2), [[1, 2], (3, 3)], [[1], [1, 2, 3], [0, 1], 1, "12"]),
        (
            Instant(),
            ["2026-04-12", "1900-01-01T00:00:00"],
            ["", "x", "2101-01-01", "1899-12-31", 3],
        ),
        (
            Instant(),
            ["1900-01-01T01:00:00+01:00"],
            ["1900-01-01T00:30:00+01:00", "0001-01-01T00:00Z"],
        ),
        (
            RatioOrFile(),
            [0.9, 1, "88 %", "0.5", "qe.ecsv", "2026-qe.csv", "a b/88 % qe"],
            [0, 1.1, "0", "120 %", "", " ", True, [0.9], "a\nb", "x" * 1001, float("nan")],
        ),
        (
            EachAxis(Quantity("angle", at_least="0 arcsec")),
            ["1 arcsec", ["1 arcsec", "0 deg"]],
            [1, "-1 arcsec", [], ["1 arcsec"], ["1 arcsec"] * 3, ["1 arcsec", 1], {}],
        ),
        (UpTo(Whole(1, 3, 2), 2), [[1], [1, 2]], [[], 1, "1", [4], [1, 1, 1], {"a": 1}]),
        (
            Terms(),
            [{}, {"4": "60 nm"}, {"2": "-1 um", str(LARGEST_TERM): "0 nm"}],
            [
                3,
                [],
                {"1": "1 nm"},
                {"0": "1 nm"},
                {"04": "1 nm"},
                {"101": "1 nm"},
                {"\u0664": "1 nm"},
                {"": "1 nm"},
                {"4": 60},
                {"4": "2 m"},
                {"9" * 5000: "1 nm"},
            ],
        ),
        (Header(1), [{}, {"A": 1}], [{"A": 1, "B": 2}, 3, []]),
    ],
)
def test_reader(reader, good, bad):
    for value in good:
        reader.read(value)
    for value in bad:
        with pytest.raises(PydanticCustomError):
            reader.read(value)


@pytest.mark.parametrize(
    "keyword",
    ["SIMPLE", "NAXIS1", "BZERO", "CRVAL1", "CD1_1", "DATE-OBS", "MJD-OBS", "SIMULATE", "SCENEID",
     "SEED", "TELESCOP", "INSTRUME", "GAIN", "CHECKSUM", "END", "LONPOLE", "BIASLVL", "PIXSCALE"],
)  # fmt: skip
def test_keywords_that_simimg_writes_are_kept_free(keyword):
    assert Header.check(keyword, "x") is not None
    assert Header.check(keyword.lower(), "x") is not None


@pytest.mark.parametrize(
    ("keyword", "value"),
    [("OBSERVER", "it's"), ("DOME", 3.5), ("NIGHT", 4), ("CLOUDY", False), ("A-B_9", "x" * 68)],
)
def test_good_keywords(keyword, value):
    assert Header.check(keyword, value) is None


def test_nearest_word():
    assert nearest("apperture", ["aperture", "angle"]) == 'did you mean "aperture"?'
    assert nearest("v", ["U", "V"]) == 'did you mean "V"?'
    assert nearest("zzz", ["U", "V"]) == "write one of U, V"
    assert len(nearest("x" * 10**6, ["U", "V"])) < 100
