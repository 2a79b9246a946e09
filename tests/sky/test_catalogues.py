import io
from contextlib import suppress

import numpy as np
import pytest
from astropy.table import MaskedColumn, Table
from numpy.testing import assert_allclose

from simimg.errors import InputError
from simimg.sky.catalogues import read_catalogue

ARCSEC = np.pi / 180.0 / 3600.0
MAPPING = {"east": "dx", "north": "dy", "magnitude": "m", "label": "id"}


def table(rows=5):
    rng = np.random.default_rng(1)
    made = Table(
        {
            "id": [f"s{i}" for i in range(rows)],
            "dx": rng.normal(size=rows),
            "dy": rng.normal(size=rows),
            "m": rng.uniform(10.0, 20.0, rows),
        }
    )
    made["dx"].unit = made["dy"].unit = "arcsec"
    made["m"].unit = "mag"
    return made


def saved(made, kind):
    if kind.startswith("ascii"):
        text = io.StringIO()
        made.write(text, format=kind)
        return text.getvalue().encode()
    stream = io.BytesIO()
    made.write(stream, format=kind)
    return stream.getvalue()


def votable(body, attributes=""):
    return (
        '<?xml version="1.0"?><VOTABLE version="1.3" xmlns="http://www.ivoa.net/xml/VOTable/v1.3">'
        f'<RESOURCE><TABLE {attributes}><FIELD name="x" datatype="double"/>'
        f"<DATA>{body}</DATA></TABLE></RESOURCE></VOTABLE>"
    ).encode()


@pytest.mark.parametrize("kind", ["fits", "votable", "ascii.ecsv", "ascii.csv"])
def test_every_format_gives_the_same(kind):
    made = table()
    units = {"east": "arcsec", "north": "arcsec"} if kind == "ascii.csv" else {}
    got = read_catalogue(saved(made, kind), "a", columns=MAPPING, units=units)
    assert list(got) == ["east", "north", "magnitude", "label"]
    # Text keeps every digit of a double; the factor costs a rounding.
    assert_allclose(got["east"], np.array(made["dx"]) * ARCSEC, rtol=1e-14)
    assert_allclose(got["north"], np.array(made["dy"]) * ARCSEC, rtol=1e-14)
    assert_allclose(got["magnitude"], np.array(made["m"]), rtol=1e-14)
    assert got["label"].tolist() == made["id"].tolist()


@pytest.mark.parametrize("kind", ["binary", "binary2"])
def test_binary_votables(kind):
    stream = io.BytesIO()
    table().write(stream, format="votable", tabledata_format=kind)
    got = read_catalogue(stream.getvalue(), "a", columns=MAPPING)
    assert_allclose(got["north"], np.array(table()["dy"]) * ARCSEC, rtol=1e-14)


def test_names_need_no_mapping_and_capitals_do_not_matter():
    content = b"# made up\nRA,DEC,Magnitude,Temperature,other\n-90,-30,3.5,5000,u\n10,20,4,6000,v\n"
    got = read_catalogue(content, "a", units={"ra": "deg", "dec": "deg"})
    assert list(got) == ["ra", "dec", "magnitude", "temperature"]
    assert_allclose(got["ra"], np.radians([270.0, 10.0]), rtol=1e-15)
    assert_allclose(got["dec"], np.radians([-30.0, 20.0]), rtol=1e-15)
    assert got["temperature"].tolist() == [5000.0, 6000.0]


def test_sexagesimal_text():
    content = b"ra,dec,electrons\n06:00:00,-00:30:00\x20,1\n".replace(b"\x20", b"")
    got = read_catalogue(content, "a", units={"ra": "hourangle", "dec": "deg"})
    assert_allclose([got["ra"][0], got["dec"][0]], np.radians([90.0, -0.5]), rtol=1e-14)


def test_labels_may_be_missing_or_numbers():
    content = b"x,y,electrons,label\n1,2,3,7\n1,2,0,\n"
    got = read_catalogue(content, "a")
    assert got["label"].tolist() == ["7", ""]
    assert got["electrons"].tolist() == [3.0, 0.0]


def test_a_mapping_settles_which_place_and_brightness_count():
    content = b"x,y,ra,dec,electrons,magnitude\n1,2,3,4,5,6\n"
    got = read_catalogue(content, "a", columns={"x": "x", "y": "y", "magnitude": "magnitude"})
    assert list(got) == ["x", "y", "magnitude"]


def test_a_unit_given_twice_may_agree():
    got = read_catalogue(saved(table(), "fits"), "a", columns=MAPPING, units={"east": "arcsec"})
    assert_allclose(got["east"], np.array(table()["dx"]) * ARCSEC, rtol=1e-14)


def test_byte_order_mark_and_line_ends():
    content = b"\xef\xbb\xbfx,y,electrons\r\n1,2,3\r\n"
    assert read_catalogue(content, "a")["x"].tolist() == [1.0]


def test_integers_of_fits_know_their_blank():
    made = Table({"x": MaskedColumn([1, 2], mask=[False, True]), "y": [1, 2], "electrons": [1, 2]})
    with pytest.raises(InputError, match="x: row 2 is missing"):
        read_catalogue(saved(made, "fits"), "a")


@pytest.mark.parametrize("kind", ["votable", "ascii.ecsv"])
def test_masked_values_are_missing(kind):
    made = table()
    made["m"] = MaskedColumn(made["m"], mask=[False, True, False, True, False])
    with pytest.raises(InputError, match=r"magnitude \(column m\): row 2 \(and 1 more\) is"):
        read_catalogue(saved(made, kind), "a", columns=MAPPING)


def ascii_fits():
    from astropy.io import fits

    columns = [
        fits.Column(name=name, format="E15.7", ascii=True, array=np.array([1.0, 2.0]))
        for name in ("x", "y", "electrons")
    ]
    stream = io.BytesIO()
    fits.HDUList([fits.PrimaryHDU(), fits.TableHDU.from_columns(columns)]).writeto(stream)
    return stream.getvalue()


def test_text_tables_of_fits():
    assert read_catalogue(ascii_fits(), "a")["y"].tolist() == [1.0, 2.0]


def test_a_column_that_cannot_be_read():
    content = ascii_fits()
    place = content.index(b"1.0000000E+00")
    with pytest.raises(InputError, match="x: the column cannot be read"):
        read_catalogue(content[:place] + b"?" + content[place + 1 :], "a")


@pytest.mark.parametrize("kind", ["fits", "votable", "ascii.ecsv", "ascii.csv"])
def test_random_damage_gives_lines_or_stars(kind):
    whole = saved(table(), kind)
    rng = np.random.default_rng(4)
    for _ in range(60):
        content = bytearray(whole)
        for _ in range(int(rng.integers(1, 5))):
            place = int(rng.integers(len(content)))
            content[place : place + int(rng.integers(0, 40))] = rng.bytes(int(rng.integers(0, 3)))
        # Nothing but an InputError may come out.
        with suppress(InputError):
            assert np.isfinite(read_catalogue(bytes(content), "a", columns=MAPPING)["east"]).all()


def test_a_million_rows_of_fits():
    rows = 1_000_000
    made = Table(
        {"x": np.arange(rows, dtype=np.float32), "y": np.zeros(rows), "magnitude": np.ones(rows)}
    )
    got = read_catalogue(saved(made, "fits"), "a")
    assert got["x"].shape == (rows,)
    assert got["x"][-1] == rows - 1


PLAIN = b"x,y,electrons\n1,2,3\n"


@pytest.mark.parametrize(
    ("content", "options", "says"),
    [
        (b"", {}, ["the file is empty"]),
        (b"\xff\xfe\x00\x01", {}, ["neither FITS nor text"]),
        (b"a,b\n1,2\n", {}, ["no place", "no brightness"]),
        (b"x,y,electrns\n1,2,3\n", {}, ['did you mean columns = { electrons = "electrns" }?']),
        (b"x,y,mag\n1,2,3\n", {}, ['did you mean columns = { magnitude = "mag" }?']),
        (b"x,electrons\n1,3\n", {}, ["no place"]),
        (PLAIN, {"columns": {"x": "X_pix"}}, ["x: the table has no column 'X_pix'"]),
        (PLAIN, {"columns": {"electrons": "elektrons"}}, ["did you mean 'electrons'?"]),
        (PLAIN, {"columns": {"flux": "x"}}, ["flux: no column of a catalogue"]),
        (PLAIN, {"units": {"electrn": "arcsec"}}, ["did you mean 'electrons'?"]),
        (PLAIN, {"units": {"x": "arcsec"}}, ["x: the unit 'arcsec' does not fit"]),
        (PLAIN, {"columns": {"ra": "x", "dec": "y"}}, ["ra (column x): no unit", "dec"]),
        (
            PLAIN,
            {"columns": {"ra": "x", "dec": "y"}, "units": {"ra": "m", "dec": "blub"}},
            ["ra (column x): the unit 'm' is not an angle", "the unit 'blub' is not an angle"],
        ),
        (b"x,y,electrons\n", {}, ["no rows"]),
        (b"x,y,electrons\n1,2\n", {}, ["electrons: row 1 is missing"]),
        (b"x,y,electrons\n1,2,3,4\n", {}, ["the text table cannot be read"]),
        (b"x,y,electrons\n1,nan,inf\n", {}, ["y: row 1 is not finite", "electrons: row 1 is not"]),
        (b"x,y,electrons\n1,2,3\n1,b,3\n", {}, ["y: row 2 is not a number: 'b'"]),
        (b"x,y,electrons\n1,2,-3\n", {}, ["electrons: row 1 is negative"]),
        (b"x,y,magnitude,temperature\n1,2,3,0\n", {}, ["temperature: row 1 is not above 0"]),
        (
            b"ra,dec,electrons\n1,91,1\n",
            {"units": {"ra": "deg", "dec": "deg"}},
            ["dec: row 1 is beyond a pole"],
        ),
        (
            b"ra,dec,electrons\nnoon,1,1\n",
            {"units": {"ra": "hourangle", "dec": "deg"}},
            ["ra: not an angle"],
        ),
        (b"x,y,ra,dec,electrons\n1,2,3,4,5\n", {}, ["two columns could give the place"]),
        (b"x,y,magnitude,electrons\n1,2,3,4\n", {}, ["two columns could give the brightness"]),
        (saved(table(), "fits")[:5800], {"columns": MAPPING}, ["ends before its table"]),
        (saved(table(), "fits")[:2880], {"columns": MAPPING}, ["no table in the FITS file"]),
        (saved(table(), "fits")[:3000], {"columns": MAPPING}, ["FITS"]),
        (saved(table(), "votable")[:900], {}, ["the VOTable table cannot be read"]),
        (saved(table(), "ascii.ecsv")[:60], {}, ["the text table cannot be read"]),
        (b"<VOTABLE/>", {}, ["the VOTable table cannot be read"]),
        (b"<html></html>", {}, ["the VOTable table cannot be read"]),
        (
            saved(table(), "fits"),
            {"columns": MAPPING, "units": {"east": "deg"}},
            ["the table gives the unit 'arcsec'; leave units.east = 'deg' out"],
        ),
        (
            saved(Table({"x": np.ones((2, 3)), "y": [1, 2], "electrons": [1, 2]}), "fits"),
            {},
            ["x: each row holds more than one value"],
        ),
    ],
)
def test_refuses_with_every_mistake(content, options, says):
    with pytest.raises(InputError) as caught:
        read_catalogue(content, "stars.cat", **options)
    lines = caught.value.lines
    assert all(line.startswith("stars.cat: ") for line in lines)
    assert len(lines) == len(says), lines
    for line, words in zip(lines, says, strict=True):
        assert words in line


class TestDangerousVotables:
    """What a stranger's VOTable must not make the reader do."""

    def test_plain_one_passes(self):
        body = "<TABLEDATA><TR><TD>1</TD></TR></TABLEDATA>"
        with pytest.raises(InputError, match="no place"):
            read_catalogue(votable(body), "a")

    @pytest.mark.parametrize("kind", ["BINARY", "BINARY2", "FITS"])
    def test_fetches_nothing(self, kind, tmp_path):
        away = tmp_path / "away.bin"
        away.write_bytes(b"\0" * 8)
        body = f'<{kind}><STREAM actuate=">" href="file://{away}"/></{kind}>'
        with pytest.raises(InputError, match="its data are elsewhere"):
            read_catalogue(votable(body), "a")

    def test_prefixed_elements_fetch_nothing(self):
        body = '<BINARY><v:STREAM xmlns:v="u" href="file:///nowhere"/></BINARY>'
        with pytest.raises(InputError, match="its data are elsewhere"):
            read_catalogue(votable(body), "a")

    def test_takes_no_memory_on_a_promise(self):
        body = "<TABLEDATA><TR><TD>1</TD></TR></TABLEDATA>"
        with pytest.raises(InputError, match="declares 10000000000 rows"):
            read_catalogue(votable(body, 'nrows="10000000000"'), "a")

    @pytest.mark.parametrize(
        "content",
        [
            b'<!DOCTYPE a [<!ENTITY b "c">]><VOTABLE/>',
            votable("<TABLEDATA/>").decode().encode("utf-16"),
        ],
    )
    def test_expands_no_entities(self, content):
        with pytest.raises(InputError, match=r"document type, entities|neither FITS nor text"):
            read_catalogue(content, "a")
