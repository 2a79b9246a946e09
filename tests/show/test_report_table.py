"""Cells of a page: what they show, and what a spreadsheet makes of them."""

import csv
import io

import pytest

from simimg.show.reporttable import (
    Column,
    Table,
    count,
    figures,
    harmless,
    number,
    percent,
    percentage,
    plain_text,
    table,
    word,
)


@pytest.mark.parametrize(
    ("value", "digits", "shown"),
    [
        (0.35, 4, "0.3500"),
        (581985.2, 4, "581\u202f985"),
        (-0.0123, 2, "\u22120.012"),
        (1.472e10, 4, "1.472\u00d710\u00b9\u2070"),
        (2.5e-7, 2, "2.5\u00d710\u207b\u2077"),
        (-3e-9, 2, "\u22123.0\u00d710\u207b\u2079"),
        (0.0, 4, "0"),
        (9999999.0, 3, "9\u202f999\u202f999"),
        (1e7, 3, "1.00\u00d710\u2077"),
    ],
)
def test_figures(value, digits, shown):
    assert figures(value, digits) == shown


def test_what_is_no_number_is_a_word_and_an_empty_cell():
    for value in (None, float("nan"), float("inf")):
        assert (number(value).text, number(value).value) == ("none", None)
        assert (percent(value).text, percent(value).value) == ("none", None)
    assert number(None, missing="").text == ""


def test_shares():
    assert percent(0.963).text == "96.3"
    assert percent(0.963).value == pytest.approx(96.3)
    assert percentage(1.0) == "100\u00a0%"
    assert percentage(0.0713) == "7.1\u00a0%"
    assert count(100_000).text == "100\u202f000"


@pytest.mark.parametrize(
    "text",
    [
        "=1+1",
        "+cmd|' /C calc'!A0",
        "-2+3+cmd|' /C calc'!A0",
        "@SUM(A1:A9)",
        " =1+1",
        "\t=1+1",
        "\r=1+1",
        "\uff1d1+1",
        "--5",
        "-",
        "+",
        "-inf",
    ],
)
def test_a_formula_becomes_text(text):
    held = harmless(text)
    assert held.startswith("'")
    assert held == "'" + plain_text(text)


@pytest.mark.parametrize("separator", [";", ",", "|", "; "])
def test_a_formula_behind_another_country_s_separator(separator):
    held = harmless(f"a{separator}=1+1;b")
    assert f"{separator}'=1+1" in held


@pytest.mark.parametrize(
    "text", ["-5", "+3.5", "-1.5e-7", "0", "12", "-.5", "SR-014", "a-b", "x=1"]
)
def test_numbers_and_plain_words_stay(text):
    assert harmless(text) == text


def test_controls_and_marks_of_direction_are_gone():
    assert plain_text("a\u202e b\x00\x1b[31m\n\tc\u200fd") == "a b [31m c d"
    assert plain_text("7.1\u00a0%, 10\u202f000") == "7.1\u00a0%, 10\u202f000"


def test_the_file_holds_all_figures_and_all_rows():
    rows = [[word(f"row {i}"), number(-1.23456789012e-4 * i, 2)] for i in range(70)]
    made = table("some", "Some", (Column("of"), Column("figure", "arcsec", numbers=True)), rows)
    assert made.hidden == 10
    read = list(csv.reader(io.StringIO(made.csv(), newline="")))
    assert read[0] == ["of", "figure (arcsec)"]
    assert len(read) == 71
    assert float(read[3][1]) == pytest.approx(-2.46913578e-4, rel=1e-9)
    assert "\r\n" in made.csv()


def test_a_file_with_quotes_and_line_breaks_is_read_back():
    made = table("t", "T", (Column("of"),), [[word('say "hi",\nthen go')], [word("=2")]])
    read = list(csv.reader(io.StringIO(made.csv(), newline="")))
    assert read == [["of"], ['say "hi", then go'], ["'=2"]]


def test_a_row_of_another_length_is_refused():
    with pytest.raises(ValueError, match="has not 1 cells"):
        Table("t", "T", (Column("of"),), ((word("a"), word("b")),))
