"""JSON that any reader takes, tables that line up, numbers to the figures that they deserve."""

import io
import json
import sys

import numpy as np
import pytest

from simimg_cli import output
from simimg_cli.options import Memory, Place
from simimg_cli.progress import with_progress
from simimg_cli.words import arcsec, figures, probability, short, with_error


class Terminal(io.StringIO):
    encoding = "utf-8"

    def isatty(self):
        return True


class TestJson:
    def test_what_is_not_finite_is_null(self):
        payload = {"a": float("nan"), "b": [np.inf, 1.5], "c": np.float32(2), "d": np.array([1, 2])}
        found = json.loads(output.document(payload, scene_id=None))
        assert (found["a"], found["b"], found["c"], found["d"]) == (None, [None, 1.5], 2.0, [1, 2])
        assert found["scene_id"] is None
        assert found["warnings"] == []

    def test_numbers_of_numpy_and_nested_tuples(self):
        payload = {"pairs": ({"x": np.int64(3), "flag": np.bool_(True)},), 5: None}
        found = json.loads(output.document(payload, scene_id="id", simulated=False))
        assert found["pairs"] == [{"x": 3, "flag": True}]
        assert found["5"] is None
        assert found["simulated"] is False

    def test_text_beyond_ascii(self):
        assert (
            json.loads(output.document({"t": "\u03b1 \x1b"}, scene_id=None))["t"] == "\u03b1 \x1b"
        )


class TestTables:
    ROWS = (("a", "1.5", "x"), ("bcd", "100", ""))

    def test_plain_where_nobody_watches(self, capsys):
        output.table(("name", "n", ""), self.ROWS, right=(1,))
        assert capsys.readouterr().out == "name    n\na     1.5  x\nbcd   100\n"

    def test_without_headings(self, capsys):
        output.table(("", "", ""), self.ROWS)
        assert capsys.readouterr().out == "a    1.5  x\nbcd  100\n"

    def test_ruled_on_a_terminal(self, monkeypatch):
        screen = Terminal()
        monkeypatch.setattr(sys, "stdout", screen)
        output.table(("name", "n", ""), (("[bold]a", "1", "\x1b[2J"),), right=(1,))
        shown = screen.getvalue()
        assert "[bold]a" in shown
        assert "\\x1b[2J" in shown
        assert "\u2500" in shown or "-" in shown


class TestWords:
    @pytest.mark.parametrize(
        ("value", "said"),
        [
            (0.0556512, "0.05565"),
            (550.0, "550.0"),
            (35285.2, "35285"),
            (2.3e9, "2.300e+09"),
            (1e-9, "1.000e-09"),
            (0.0, "0.000"),
            (None, "-"),
            (float("nan"), "-"),
            (float("inf"), "-"),
        ],
    )
    def test_figures(self, value, said):
        assert figures(value) == said

    def test_arcsec(self):
        assert arcsec(0.89123, 3) == '0.891"'
        assert arcsec(None) == "-"

    def test_short(self):
        assert [short(v) for v in (550.0, 0.12, 62.0, None)] == ["550", "0.12", "62", "-"]

    @pytest.mark.parametrize(
        ("value", "error", "said"),
        [
            (0.35213, 0.01134, "0.352 +/- 0.011"),
            (61.83, 1.92, "61.8 +/- 1.9"),
            (310.2, 24.0, "310 +/- 24"),
            (0.7, float("nan"), "0.7000 +/- ?"),
            (0.7, None, "0.7000 +/- ?"),
            (None, 0.1, "-"),
        ],
    )
    def test_with_error(self, value, error, said):
        assert with_error(value, error) == said

    @pytest.mark.parametrize(
        ("value", "said"),
        [(1e-9, "< 1e-6"), (0.0, "< 1e-6"), (0.0012, "0.0012"), (0.956, "0.96"), (None, "-")],
    )
    def test_probability(self, value, said):
        assert probability(value) == said


class TestOptions:
    @pytest.mark.parametrize(
        ("text", "size"),
        [("2 GiB", 2**31), ("500MB", 500_000_000), ("1.5 kib", 1536), ("100 b", 100)],
    )
    def test_memory(self, text, size):
        assert Memory().convert(text, None, None) == size

    def test_place(self):
        assert Place().convert("12.5, -3", None, None) == (12.5, -3.0)


class TestProgress:
    def test_silent_where_nobody_watches(self, capsys):
        assert list(with_progress([1, 2, 3], "things")) == [1, 2, 3]
        assert capsys.readouterr() == ("", "")

    def test_a_bar_on_a_terminal(self, monkeypatch):
        screen = Terminal()
        monkeypatch.setattr(sys, "stderr", screen)
        assert list(with_progress([1, 2, 3], "things")) == [1, 2, 3]
        assert "things" in screen.getvalue()

    def test_none_when_quiet(self, monkeypatch):
        screen = Terminal()
        monkeypatch.setattr(sys, "stderr", screen)
        assert list(with_progress([1, 2, 3], "things", quiet=True)) == [1, 2, 3]
        assert screen.getvalue() == ""
