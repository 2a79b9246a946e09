"""measure prints what a frame says of its pairs; figure draws it."""

import re

import numpy as np
import pytest
from astropy.io import fits

PAIR_KEYS = {
    "label",
    "x",
    "y",
    "ra_deg",
    "dec_deg",
    "separation_arcsec",
    "separation_error_arcsec",
    "separation_low_arcsec",
    "separation_high_arcsec",
    "position_angle_deg",
    "position_angle_error_deg",
    "magnitude_difference",
    "magnitude_difference_error",
    "probability_single",
    "elongated",
    "ambiguous_180",
    "saddle_ratio",
    "saddle_ratio_error",
    "rayleigh",
    "sparrow",
    "truth",
}


@pytest.fixture
def frame(run, scene):
    assert run("expose", scene, "-o", "frame.fits", "--quiet").code == 0
    return "frame.fits"


class TestMeasure:
    def test_json_holds_what_is_promised(self, run, frame):
        result = run("measure", frame, "--json")
        assert (result.code, result.err) == (0, "")
        found = result.json
        assert set(found) >= {"version", "scene_id", "simulated", "warnings", "pairs", "frame"}
        assert found["simulated"] is True
        assert found["frame"] == frame
        (pair,) = found["pairs"]
        assert set(pair) >= PAIR_KEYS
        assert pair["label"] == "SR-1"
        assert set(pair["rayleigh"]) >= {"limit_arcsec", "probability", "verdict"}
        assert set(pair["truth"]) == {
            "separation_arcsec",
            "position_angle_deg",
            "magnitude_difference",
        }
        # Five errors: the test is of the way from the frame to the page, not of the fit.
        error = abs(pair["separation_arcsec"] - 2.4)
        assert error < 5 * pair["separation_error_arcsec"]
        assert pair["truth"]["separation_arcsec"] == pytest.approx(2.4)

    def test_as_text(self, run, frame):
        result = run("measure", frame)
        assert result.code == 0
        lines = result.out.splitlines()
        assert lines[0].startswith("SR-1  2.4")
        for word in ("+/-", "PA 6", "dm 0.", "chance of a single star"):
            assert word in lines[0]
        assert any(line.startswith("      truth    2.4") for line in lines)
        for criterion in ("Rayleigh", "Sparrow"):
            (line,) = [line for line in lines if f"      {criterion}" in line]
            assert "limit" in line
            assert "(probability " in line
        assert "confirmed with the observatory" in result.err

    def test_a_lopsided_separation_has_an_interval(self, run, scene):
        close = ("--set", "pair.0.separation=0.35 arcsec", "--set", "pair.0.magnitudes=[15, 15.3]")
        assert run("expose", scene, "-o", "close.fits", "--quiet", *close).code == 0
        (pair,) = run("measure", "close.fits", "--json").json["pairs"]
        low, high = pair["separation_low_arcsec"], pair["separation_high_arcsec"]
        assert 0.0 <= low < pair["separation_arcsec"] < high
        lines = run("measure", "close.fits").out.splitlines()
        assert re.match(r'SR-1  [0-9.]+ \([0-9.]+ to [0-9.]+\)"   PA ', lines[0])
        said = " ".join(" ".join(lines).split())
        assert "The likelihood of the separation is lopsided: with 68 % confidence" in said
        assert "of the FWHM errors of the separation grow as 1/separation" in said
        # A pair well apart has neither.
        assert run("expose", scene, "-o", "frame.fits", "--quiet").code == 0
        (wide,) = run("measure", "frame.fits", "--json").json["pairs"]
        assert wide["separation_low_arcsec"] is None
        assert wide["separation_high_arcsec"] is None

    def test_a_scene_is_to_be_exposed_first(self, run, scene):
        result = run("measure", scene)
        assert result.code == 2
        assert result.err.startswith("tiny.toml: is a scene, not a frame; expose it first: ")

    def test_places_come_after_the_pairs_in_their_order(self, run, frame):
        arguments = ["measure", frame, "--near", "43,36", "--near", "24,20", "--json"]
        pairs = run(*arguments).json["pairs"]
        assert [pair["label"] for pair in pairs] == ["SR-1", "", ""]
        # Nothing is at the first place, the pair at the second.
        assert pairs[1]["separation_arcsec"] is None
        assert pairs[1]["probability_single"] > 0.01
        assert pairs[1]["truth"] is None
        assert pairs[2]["separation_arcsec"] == pytest.approx(2.4, abs=0.1)

    def test_a_single_star_is_said_to_be_one(self, run, frame):
        out = run("measure", frame, "--near", "43,36").out
        (line,) = [line for line in out.splitlines() if line.startswith("x 43, y 36")]
        assert "no second star" in line

    def test_a_place_off_the_frame(self, run, frame):
        result = run("measure", frame, "--near", "999,2")
        assert result.code == 2
        assert result.out == ""
        assert result.err.startswith("frame.fits: near: ")

    def test_many_frames(self, run, scene):
        run("expose", scene, "-o", "n.fits", "--quiet", "--set", "exposure.count=2")
        result = run("measure", "n-000.fits", "n-001.fits")
        assert result.code == 0
        lines = result.out.splitlines()
        assert lines[0].split()[:3] == ["file", "pair", "separation"]
        assert [line.split()[:2] for line in lines[1:3]] == [
            ["n-000.fits", "SR-1"],
            ["n-001.fits", "SR-1"],
        ]
        found = run("measure", "n-000.fits", "n-001.fits", "--json").json
        assert [one["frame"] for one in found["frames"]] == ["n-000.fits", "n-001.fits"]
        assert found["scene_id"] == found["frames"][0]["scene_id"]
        assert found["simulated"] is True
        assert found["warnings"] == []
        assert len(found["frames"][1]["pairs"]) == 1
        assert [pair["file"] for pair in found["pairs"]] == ["n-000.fits", "n-001.fits"]

    def test_one_bad_frame_of_two(self, run, frame):
        result = run("measure", frame, "missing.fits", "--json")
        assert result.code == 2
        assert result.err == "missing.fits: no such file; check its name\n"
        found = result.json
        assert len(found["frames"][0]["pairs"]) == 1
        assert found["frames"][1] == {
            "frame": "missing.fits",
            "error": ["missing.fits: no such file; check its name"],
        }

    def test_a_frame_of_another_program(self, run, files):
        image = np.random.default_rng(1).poisson(100, (30, 30)).astype("i2")
        fits.PrimaryHDU(image).writeto("foreign.fits")
        result = run("measure", "foreign.fits")
        assert result.code in (0, 2)
        assert "internal error" not in result.err
        assert files() == ["foreign.fits"]

    def test_of_many_pairs_a_line_for_each(self, run, scene, folder):
        pair = (
            '\n[[pair]]\nlabel = "P{0}"\nx = {1}\ny = {2}\nmagnitudes = [13, 13.2]\n'
            'separation = "2.4 arcsec"\nposition_angle = "{0} deg"\n'
        )
        more = "".join(pair.format(i, 10 + 14 * (i % 3), 4 + 13 * (i // 3)) for i in range(9))
        text = (folder / scene).read_text()
        (folder / scene).write_text(text[: text.index("[[pair]]")] + more)
        run("expose", scene, "-o", "many.fits", "--quiet")
        lines = run("measure", "many.fits").out.splitlines()
        assert lines[0].split()[:3] == ["pair", "separation", "PA"]
        assert [line.split()[0] for line in lines[1:10]] == [f"P{i}" for i in range(9)]


class TestFigure:
    @pytest.mark.parametrize(
        ("ending", "start"), [("png", b"\x89PNG"), ("pdf", b"%PDF"), ("svg", b"<?xml")]
    )
    def test_a_figure_and_its_caption(self, run, frame, folder, ending, start):
        result = run("figure", frame, "-o", f"figure.{ending}")
        assert result.code == 0
        assert (folder / f"figure.{ending}").read_bytes().startswith(start)
        assert "imulated" in result.out
        assert "SR-1" in result.out
        assert max(len(line) for line in result.out.splitlines()) <= 80

    def test_as_json(self, run, frame):
        result = run("figure", frame, "-o", "figure.png", "--json")
        assert result.err == ""
        found = result.json
        assert found["figure"] == "figure.png"
        assert "SR-1" in found["caption"]
        assert found["simulated"] is True

    @pytest.mark.parametrize(
        ("width", "inches"), [("88mm", 88 / 25.4), ("18 cm", 180 / 25.4), ("7inch", 7.0)]
    )
    def test_a_width(self, run, frame, folder, width, inches):
        from PIL import Image

        result = run("figure", frame, "-o", "figure.png", "--width", width)
        assert result.code == 0
        with Image.open(folder / "figure.png") as picture:
            assert picture.width == pytest.approx(300 * inches, abs=1)
        # Narrow figures have their panels over one another, and say so.
        assert ("Above: " in result.out) == (width == "88mm")
        assert ("Left: " in result.out) == (width != "88mm")

    def test_trials_tell_the_probability_of_a_split(self, run, frame):
        found = run("figure", frame, "-o", "a.png", "--trials", "12", "--json").json
        caption, tried = found["caption"], found["trials"]
        assert tried["trials"] == 12
        for name in ("rayleigh", "sparrow"):
            share = tried[name]
            words = (
                f"{share['fraction_resolved']:.3g} by {name.capitalize()} "
                f"(95 % interval {share['low']:.2g} to {share['high']:.2g})"
            )
            assert words in caption
        assert "Probability of a split, from 12 noise draws: " in caption
        # The pair is well apart: it is split each time, which says no more than its interval.
        assert tried["rayleigh"]["fraction_resolved"] == 1.0
        assert tried["rayleigh"]["low"] < 0.8
        # The same trials as measure --trials makes.
        (pair,) = run("measure", "tiny.toml", "--trials", "12", "--json").json["pairs"]
        assert tried == pair

    def test_one_noise_draw_is_no_probability_of_a_split(self, run, frame):
        out = " ".join(run("figure", frame, "-o", "a.png").out.split())
        assert "robability of a split" not in out
        assert "probability" not in out
        assert "would be split, a single noise draw does not tell." in out

    @pytest.mark.parametrize(
        "arguments", [["--pair", "SR-1"], ["--pair", "0"], ["--near", "24,20"]]
    )
    def test_what_it_is_about(self, run, frame, arguments):
        result = run("figure", frame, "-o", "figure.png", "--quiet", *arguments)
        assert (result.code, result.out, result.err) == (0, "", "")

    @pytest.mark.parametrize(
        ("arguments", "said"),
        [
            (["-o", "f.png", "--pair", "SR-9"], "SR-9"),
            (["-o", "f.png", "--pair", "7"], "7"),
            (["-o", "f.png", "--near", "999,1"], "999"),
            (["-o", "f.png", "--near", "1,1", "--pair", "SR-1"], "give one of them"),
            (["-o", "f.jpg"], "end it in .png, .pdf or .svg"),
            (["-o", "f.png", "--width", "88"], "is not a width; write 88mm"),
            (["-o", "f.png", "--width", "88 arcsec"], "is not a width; write 88mm"),
            (["-o", "f.png", "--width", "4cm"], "80 to 400 mm wide, got 40"),
            (["-o", "f.png", "--trials", "0"], "0 is not in the range"),
            (["-o", "f.png", "--workers", "2"], "--workers goes with --trials"),
            (["-o", "f.png", "--trials", "2", "--near", "24,20"], "no pair of the scene"),
            (["-o", "nowhere/f.png"], "does not exist"),
            (["-o", "frame.fits", "--overwrite"], "end it in"),
        ],
    )
    def test_nothing_is_written(self, run, frame, scene, files, folder, arguments, said):
        before = (folder / frame).read_bytes()
        result = run("figure", frame, *arguments)
        assert result.code == 2
        assert said in result.err
        assert files() == [frame, scene]
        assert (folder / frame).read_bytes() == before

    def test_refuses_to_overwrite(self, run, frame, folder):
        (folder / "figure.png").write_bytes(b"precious")
        assert run("figure", frame, "-o", "figure.png").code == 2
        assert (folder / "figure.png").read_bytes() == b"precious"
        assert run("figure", frame, "-o", "figure.png", "--overwrite").code == 0


class TestOptics:
    def test_of_a_scene_and_of_a_frame(self, run, scene, frame, folder):
        first = run("figure", scene, "--what", "pupil,psf", "-o", "a.png")
        assert first.code == 0
        assert first.out.startswith("Simulated optics: A tiny field.")
        second = run("figure", frame, "--what", "pupil,psf", "-o", "b.png")
        assert second.out == first.out
        assert (folder / "a.png").read_bytes() == (folder / "b.png").read_bytes()

    def test_of_a_changed_scene(self, run, scene):
        found = run(
            "figure",
            scene,
            *("--what", "wavefront", "-o", "a.svg", "--json", "--without", "air"),
            *("--set", 'telescope.wavefront={ zernike = { 4 = "50 nm" } }'),
        ).json
        assert found["figure"] == "a.svg"
        assert "wavefront 50 nm rms" in found["caption"]
        assert found["simulated"] is True

    @pytest.mark.parametrize(
        ("arguments", "said"),
        [
            (["--what", "pupil,rays"], "'rays' is none of pupil, wavefront, psf, transfer"),
            (["--what", "psf", "--near", "1,2"], "leave out the rest"),
            (["--what", "psf", "--restored"], "leave out the rest"),
            (["--what", "psf", "--trials", "3"], "leave out the rest"),
            (["--set", "air.seeing='1 arcsec'"], "go with --what"),
            (["--what", "psf", "--set", "air.seing='1 arcsec'"], "seeing"),
        ],
    )
    def test_nothing_is_written(self, run, scene, files, arguments, said):
        result = run("figure", scene, "-o", "f.png", *arguments)
        assert result.code == 2
        assert said in result.err
        assert files() == [scene]

    def test_a_scene_without_what(self, run, scene, files):
        result = run("figure", scene, "-o", "f.png")
        assert result.code == 2
        assert result.err == (
            "tiny.toml: is a scene, not a frame; expose it first: simimg expose tiny.toml -o "
            "FRAME.fits; or draw its optics by --what\n"
        )
        assert files() == [scene]
