"""The proposal figure: what is in it, that it can be read, that it is the same each time."""

import os
import re
import subprocess
import sys

import matplotlib
import numpy as np
import pytest
from astropy import units as u
from numpy.testing import assert_allclose

from simimg.errors import InputError
from simimg.frame import Frame
from simimg.show.canvas import drawable
from simimg.show.caption import with_error
from simimg.show.compass import shown_length
from simimg.show.figure import figure_parts, write_figure
from tests.show import drawn, frames


@pytest.fixture(scope="module")
def pair():
    made = frames.frame(rotation=35.0, mirrored=True)
    measured = frames.measurement(made)
    return made, measured, drawn.figure(made, measurement=measured)


@pytest.fixture(scope="module")
def stars():
    made = frames.frame(frames.STARS)
    return made, drawn.figure(made)


class TestPanels:
    def test_frame_scale_profile_and_residuals(self, pair):
        _, _, figure = pair
        assert len(figure.axes) == 3
        for gid in (
            "frame",
            "scale-bar",
            "arrow-N",
            "arrow-E",
            "simulated",
            "psf-fwhm",
            "fitted-stars",
        ):
            drawn.artist(figure, gid)
        for gid in ("two-stars", "first-star", "second-star"):
            assert drawn.artist(figure, gid).get_xdata().size > 100
        labels = [axes.get_ylabel() for axes in figure.axes]
        assert labels == [
            "y (pixel)",
            "residual (\N{GREEK SMALL LETTER SIGMA})",
            "electrons per pixel",
        ]
        assert "position angle 40.3° (arcsec)" in figure.axes[1].get_xlabel()

    def test_colour_bar_in_electrons(self, pair):
        _, _, figure = pair
        (bar,) = figure.axes[0].child_axes
        assert bar.get_ylabel() == "electrons per pixel above background"
        ticks = [tick.get_text() for tick in bar.get_yticklabels()]
        assert "0" in ticks
        assert any("\N{THIN SPACE}000" in tick for tick in ticks)

    @pytest.mark.parametrize(
        ("rotation", "mirrored"), [(0.0, False), (35.0, True), (160.0, False), (271.0, True)]
    )
    def test_arrows_follow_the_coordinates(self, rotation, mirrored):
        made = frames.frame(frames.STARS, rotation=rotation, mirrored=mirrored)
        figure = drawn.figure(made)
        for gid, position_angle in (("arrow-N", 0.0), ("arrow-E", 90.0)):
            arrow = drawn.artist(figure, gid)
            tail, tip = made.wcs.pixel_to_world(*np.transpose([arrow.xyann, arrow.xy]))
            # Drawn in pixels, the arrow points where the frame's coordinates say; away from the
            # field centre east turns by the distance times tan(dec), 1e-3 degrees here.
            angle = tail.position_angle(tip).wrap_at(270 * u.deg).deg
            assert_allclose(angle, position_angle, atol=0.01)
            (x0, x1), (y0, y1) = figure.axes[0].get_xlim(), figure.axes[0].get_ylim()
            for x, y in (arrow.xy, arrow.xyann):
                assert x0 < x < x1
                assert y0 < y < y1

    def test_scale_bar_is_as_long_as_it_says(self, pair):
        made, _, figure = pair
        bar = drawn.artist(figure, "scale-bar")
        ends = made.wcs.pixel_to_world(bar.get_xdata(), bar.get_ydata())
        arcsec = ends[0].separation(ends[1]).arcsec
        words = [text.get_text() for text in figure.axes[0].texts]
        # The tangent plane's scale varies by 1e-8 over this field.
        assert shown_length(round(arcsec, 6)) in words

    def test_the_word_is_on_the_frame(self, pair):
        _, _, figure = pair
        assert drawn.artist(figure, "simulated").get_text() == "simulated"

    def test_profile_is_the_pair(self, pair):
        made, measured, figure = pair
        marks = figure.findobj(lambda one: (one.get_gid() or "").startswith("star-"))
        places = [float(mark.get_xdata()[0]) for mark in marks]
        # Photon noise leaves 0.005 arcsec, five of it.
        assert_allclose(places, [0.0, 0.6], atol=0.03)
        peaks = [
            line.get_xdata()[np.argmax(line.get_ydata())]
            for line in (drawn.artist(figure, "first-star"), drawn.artist(figure, "second-star"))
        ]
        assert_allclose(peaks, places, atol=0.03)
        bar = drawn.artist(figure, "psf-fwhm").get_xdata()
        _, _, profile, _ = figure_parts(made, measurement=measured)
        assert_allclose(bar[1] - bar[0], profile.fwhm * 0.2, rtol=1e-9)

    def test_single_objects_have_a_profile_too(self, stars):
        _, figure = stars
        assert len(figure.axes) == 3
        assert drawn.artist(figure, "scene-without-noise")
        assert drawn.artist(figure, "this-star-alone")
        assert figure.axes[2].get_title(loc="left") == "bright"


class TestLegibility:
    @pytest.mark.parametrize("which", ["pair", "stars"])
    def test_no_text_is_cut_or_covered_or_small(self, which, request):
        figure = request.getfixturevalue(which)[-1]
        assert drawn.outside(figure) == []
        assert drawn.overlaps(figure) == []
        assert min(text.get_fontsize() for text in drawn.texts(figure)) >= 7.0

    def test_width_of_two_columns(self, stars):
        assert_allclose(stars[1].get_size_inches()[0] * 25.4, 180.0, rtol=1e-9)

    def test_colour_map_survives_grey_print(self, stars):
        picture = drawn.artist(stars[1], "frame")
        red, green, blue, _ = picture.cmap(np.linspace(0.0, 1.0, 64)).T
        lightness = 0.2126 * red**2.2 + 0.7152 * green**2.2 + 0.0722 * blue**2.2
        assert np.diff(lightness).min() > 0.0

    def test_a_long_title_of_a_stranger(self):
        label = "$\\frac{" + "W" * 50
        objects = frames.PAIR.replace("T-1", label.replace("\\", "\\\\"))
        made = frames.frame(objects, overrides=["telescope.name='" + "\u65e5M" * 34 + "'"])
        figure = drawn.figure(made, measurement=frames.measurement(made, label=label))
        assert drawn.outside(figure) == []
        assert drawn.overlaps(figure) == []

    def test_what_the_font_lacks_and_controls(self):
        assert drawable("a\x1b[2J\tb\n\u65e5 \u00e9") == "a [2J b ? \u00e9"
        assert drawable("x" * 100, longest=10) == "x" * 9 + "\N{HORIZONTAL ELLIPSIS}"


class TestResiduals:
    def test_they_scatter_as_their_errors_say(self):
        squares = []
        scene = frames.scene()
        import simimg

        for index in range(6):
            made = simimg.expose(scene, index=index)
            measured = frames.measurement(made)
            _, _, profile, _ = figure_parts(made, measurement=measured)
            squares.append(np.mean(profile.residuals**2))
        # 6 x 38 points, each correlated with its neighbours; 7 parameters fitted to 1000 pixels.
        assert_allclose(np.mean(squares), 1.0, atol=0.35)

    def test_a_wrong_model_shows(self):
        made = frames.frame(frames.STARS)
        without = frames.frame(frames.STARS, overrides=["star.0.electrons=3.9e5"])
        mixed = Frame(
            counts=made.counts,
            header=made.header,
            wcs=made.wcs,
            truth=without.truth,
            scene_files=without.scene_files,
        )
        _, _, profile, _ = figure_parts(mixed)
        assert np.abs(profile.residuals).max() > 4.0


class TestFiles:
    @pytest.mark.parametrize("suffix", [".png", ".pdf", ".svg", ".PNG"])
    def test_same_bytes_whatever_the_user_has_set(self, pair, suffix, tmp_path, monkeypatch):
        made, measured, _ = pair
        one, two = tmp_path / f"one{suffix}", tmp_path / f"two{suffix}"
        write_figure(made, one, measurement=measured)
        monkeypatch.setitem(matplotlib.rcParams, "font.size", 20.0)
        monkeypatch.setitem(matplotlib.rcParams, "savefig.bbox", "tight")
        monkeypatch.setenv("SOURCE_DATE_EPOCH", "86400")
        write_figure(made, two, measurement=measured)
        content = one.read_bytes()
        assert content == two.read_bytes()
        start = {".png": b"\x89PNG", ".pdf": b"%PDF", ".svg": b"<?xml"}[suffix.lower()]
        assert content.startswith(start)
        assert b"CreationDate" not in content
        assert b"<dc:date>" not in content
        assert matplotlib.rcParams["font.size"] == 20.0
        assert sorted(tmp_path.iterdir()) == [one, two]

    def test_metadata_says_simulated(self, stars, tmp_path):
        from PIL import Image

        caption = write_figure(stars[0], tmp_path / "a.png")
        with Image.open(tmp_path / "a.png") as picture:
            assert picture.text["Title"].startswith("Simulated: ")
            assert picture.text["Description"] == caption
        write_figure(stars[0], tmp_path / "a.svg")
        text = (tmp_path / "a.svg").read_text()
        assert 'id="simulated"' in text
        assert len(set(re.findall(r'id="([^"]*)"', text))) == text.count(' id="')
        assert "Simulated frame" in text

    @pytest.mark.parametrize(
        ("name", "words"),
        [
            ("a.gif", "'.gif' is no format of a figure; end it in .png, .pdf or .svg"),
            ("a", "the name has no ending"),
            ("no/a.png", "does not exist"),
            ("there.png", "exists already"),
        ],
    )
    def test_refused_before_any_work(self, name, words, tmp_path):
        (tmp_path / "there.png").write_bytes(b"mine")
        with pytest.raises(InputError, match=words.replace(".", r"\.")) as caught:
            write_figure(None, tmp_path / name)
        assert len(caught.value.lines) == 1
        assert [path.name for path in tmp_path.iterdir()] == ["there.png"]
        assert (tmp_path / "there.png").read_bytes() == b"mine"

    def test_overwrite(self, stars, tmp_path):
        path = tmp_path / "there.png"
        path.write_bytes(b"mine")
        write_figure(stars[0], path, overwrite=True)
        assert path.read_bytes().startswith(b"\x89PNG")

    def test_no_global_state(self, tmp_path):
        made = frames.frame(frames.STARS)
        made.write(tmp_path / "f.fits")
        code = (
            "import sys; import simimg.show.figure as f; assert 'matplotlib' not in sys.modules;"
            "from simimg.frame import Frame; f.write_figure(Frame.read('f.fits'), 'f.png');"
            "assert 'matplotlib.pyplot' not in sys.modules"
        )
        done = subprocess.run(
            [sys.executable, "-W", "error", "-c", code],
            cwd=tmp_path,
            env=os.environ | {"MPLBACKEND": "tkagg"},
            capture_output=True,
            text=True,
            check=False,
        )
        assert done.returncode == 0, done.stderr


class TestCaption:
    def test_set_up_and_verdict(self, pair, tmp_path):
        made, measured, _ = pair
        caption = write_figure(made, tmp_path / "a.png", measurement=measured)
        for words in (
            "Simulated frame: A pair for tests.",
            "Tester 1 m, aperture 1 m, obstruction 0.3, Tester camera, V, 10 s, pixels of 0.2″",
            "seeing 0.8″ (500 nm, zenith), airmass 1.",
            "part of the frame, asinh stretch, crosses at the fitted stars.",
            "along position angle 40.3°, with 1-sigma errors; two stars of the frame's own PSF",
            "T-1: separation 0.6012 ± 0.0042″, position angle 40.30 ± 0.51°",
            "magnitude difference 0.752 ± 0.030, chance of a single star below 1e-6.",
            "In this one exposure: Rayleigh (limit 0.95″): unresolved, with a chance of 0.00",
            "Sparrow (limit 0.61″): borderline, with a chance of 0.41 beyond it as measured.",
            "A sentence of advice. How often such a pair would be split, a single noise draw does",
            "Every frame is a simulation",
        ):
            assert words in caption
        assert "\n" not in caption

    def test_above_the_atmosphere_and_no_second_star(self, tmp_path):
        nan = float("nan")
        made = frames.scene(frames.PAIR)
        import simimg
        from simimg.scene.file import replace

        made = simimg.expose(replace(made, {"air": None}))
        measured = frames.measurement(
            made, separation_arcsec=nan, position_angle_deg=nan, probability_single=0.4
        )
        caption = write_figure(made, tmp_path / "a.png", measurement=measured)
        assert "above the atmosphere" in caption
        assert "T-1: no second star found, chance of a single star 0.4." in caption

    def test_a_place_without_a_label(self, pair, tmp_path):
        made, _, _ = pair
        measured = frames.measurement(made, label="")
        caption = write_figure(made, tmp_path / "a.png", measurement=measured)
        assert "pair at 31.5, 27.5: separation" in caption

    @pytest.mark.parametrize(
        ("value", "error", "words"),
        [
            (0.35217, 0.0112, "0.352 ± 0.011"),
            (61.84, 1.94, "61.8 ± 1.9"),
            (0.7, 0.00004, "0.700000 ± 0.000040"),
            (310.0, 25.0, "310 ± 25"),
            (1.234567, float("nan"), "1.235"),
            (float("nan"), 1.0, "unknown"),
        ],
    )
    def test_numbers_have_the_digits_of_their_errors(self, value, error, words):
        assert with_error(value, error) == words


class TestWhichPair:
    def test_by_label_or_number(self, monkeypatch, pair):
        made, measured, _ = pair
        other = frames.measurement(made, label="T-2")
        _with_measure(monkeypatch, lambda _: [measured, other])
        assert figure_parts(made)[1].label == "T-1"
        assert figure_parts(made, pair="T-2")[1].label == "T-2"
        assert figure_parts(made, pair=1)[1].label == "T-2"
        with pytest.raises(InputError, match="no pair 'T-3'; the frame has: T-1, T-2"):
            figure_parts(made, pair="T-3")

    def test_a_pair_that_is_not_found_leaves_the_brightest_object(self, monkeypatch, pair):
        _with_measure(monkeypatch, lambda _: [])
        assert figure_parts(pair[0])[1].measurement is None


def _with_measure(monkeypatch, function):
    import types

    stand_in = types.ModuleType("simimg.resolving.measure")
    stand_in.measure = function
    monkeypatch.setitem(sys.modules, "simimg.resolving.measure", stand_in)


class TestAnyFrame:
    @pytest.mark.parametrize("shape", [(1, 1), (2, 2), (5, 7), (3, 400), (400, 30), (64, 64)])
    def test_any_shape_of_a_strange_frame(self, shape, tmp_path):
        counts = np.random.default_rng(5).normal(100.0, 5.0, shape).astype("f4")
        counts[0, 0] = np.nan if counts.size > 1 else 1.0
        made = Frame(counts=counts, simulated=False)
        caption = write_figure(made, tmp_path / "a.png")
        assert "Simulated" not in caption
        assert "it carries no directions" in caption
        figure = drawn.figure(made)
        assert (
            figure.findobj(lambda one: one.get_gid() in ("simulated", "arrow-N", "arrow-E")) == []
        )
        assert drawn.outside(figure) == []
        bar = drawn.artist(figure, "scale-bar").get_xdata()
        words = f"{bar[1] - bar[0]:.6g} pixel"
        assert any(text.get_text().startswith(words) for text in figure.axes[0].texts)

    def test_a_scene_that_cannot_be_read_leaves_no_model(self, stars, tmp_path):
        made = stars[0]
        files = [("x.toml", "0" * 64, b"not a scene")]
        damaged = Frame(
            counts=made.counts,
            header=made.header,
            wcs=made.wcs,
            truth=made.truth,
            scene_files=files,
        )
        caption = write_figure(damaged, tmp_path / "a.png")
        assert "Simulated frame" in caption
        assert "without noise" not in caption

    def test_nothing_finite(self, tmp_path):
        counts = np.full((9, 9), np.nan, "f4")
        write_figure(Frame(counts=counts, simulated=False), tmp_path / "a.png")

    @pytest.mark.parametrize("x", [-3.0, 0.0, 63.0])
    def test_a_pair_at_the_edge(self, x, tmp_path):
        made = frames.frame()
        measured = frames.measurement(made, x=x, y=1.0)
        write_figure(made, tmp_path / "a.png", measurement=measured)

    def test_expected_of_the_frame_is_used(self, stars):
        made = frames.frame(frames.STARS, keep=("expected",))
        plain, kept = figure_parts(stars[0])[2], figure_parts(made)[2]
        # EXPECTED is kept as float32.
        assert_allclose(kept.curves[0].values, plain.curves[0].values, rtol=1e-5, atol=1e-3)
