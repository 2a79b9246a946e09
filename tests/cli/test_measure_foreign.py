"""measure and figure on frames that others made: options, files, tables, what is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from astropy.io import fits
from astropy.table import Table
from numpy.testing import assert_allclose

import simimg
from simimg.frame import Frame
from simimg.resolving.observation import observe
from simimg.resolving.psfquality import judge_psf
from tests.resolving import outsiders as out

DOUBLE = out.pair(60.3, 58.7, 2.6, 25.0, (2.5e5, 1.2e5))
PLAIN = ("--gain", "1.6", "--read-noise", "6", "--pixel-scale", "0.4", "--near", "60,59")


@pytest.fixture(scope="module")
def counts():
    return out.exposed(out.expected([*out.STARS, *DOUBLE]), 5)


@pytest.fixture
def foreign(folder, counts):  # noqa: ARG001
    """A file with no more than counts in it."""
    out.written("plain.fits", counts)
    return "plain.fits"


@pytest.fixture
def psf(folder):  # noqa: ARG001
    axis = np.arange(-96, 97) / 4.0
    header = fits.Header([("OVERSAMP", 4)])
    fits.PrimaryHDU(out.moffat()(axis[None, :], axis[:, None]), header).writeto("psf.fits")
    return "psf.fits"


def separation(found):
    return found["pairs"][0]["separation_arcsec"]


class TestSources:
    def test_a_profile_by_default_and_what_is_said(self, run, foreign):
        result = run("measure", foreign, *PLAIN, "--json")
        assert (result.code, result.err) == (0, "")
        found = result.json
        assert found["psf"]["source"] == "profile"
        assert found["psf"]["stars"] == 6
        assert 0.6 < found["psf"]["reduced_chi_square"] < 1.4
        assert_allclose(found["psf"]["fwhm_arcsec"], 3.2 * 0.4, rtol=0.02)
        assert found["simulated"] is False
        assert found["scene_id"] is None
        assert any("north is taken as up" in text for text in found["warnings"])
        (pair,) = found["pairs"]
        assert pair["file"] == foreign
        assert pair["ra_deg"] is None
        error = abs(pair["separation_arcsec"] - 2.6 * 0.4)
        assert error < 5 * pair["separation_error_arcsec"]

    def test_as_text(self, run, foreign):
        result = run("measure", foreign, *PLAIN)
        assert result.code == 0
        assert result.out.startswith("x 60.")
        assert "PSF from a profile of the frame's stars, FWHM 1.2" in result.err
        assert "warning: no bias level is told" in result.err
        assert "simulation" not in result.err

    def test_every_source(self, run, foreign, psf):
        answers = {
            "file": run("measure", foreign, *PLAIN, "--psf", psf, "--json").json,
            "profile": run("measure", foreign, *PLAIN, "--psf-profile", "--json").json,
            "stars": run(
                "measure",
                foreign,
                *PLAIN,
                "--psf-star",
                "22,24",
                "--psf-star",
                "101,100",
                "--psf-star",
                "21,96",
                "--json",
            ).json,
        }
        for source, found in answers.items():
            assert found["psf"]["source"] == source
            assert_allclose(separation(found), 2.6 * 0.4, rtol=0.01)
        # The stars that it was made from do not judge it: two are left.
        assert answers["stars"]["psf"]["stars"] == 3

    def test_the_oversampling_may_be_given(self, run, foreign, psf):
        with fits.open(psf, mode="update") as hdus:
            del hdus[0].header["OVERSAMP"]
        told = run("measure", foreign, *PLAIN, "--psf", psf, "--psf-oversampling", "4", "--json")
        assert_allclose(separation(told.json), 2.6 * 0.4, rtol=0.01)
        # Taken for pixels it is four times as wide, and that shows.
        untold = run("measure", foreign, *PLAIN, "--psf", psf, "--json").json
        assert untold["psf"]["reduced_chi_square"] > 10
        assert any("do not trust the verdict" in text for text in untold["warnings"])

    def test_a_simulated_frames_own(self, run, scene):
        run("expose", scene, "-o", "own.fits", "--with", "psf", "--quiet")
        found = {
            word: run("measure", "own.fits", "--psf", word, "--json").json
            for word in ("scene", "extension", "own.fits")
        }
        assert [one["psf"]["source"] for one in found.values()] == ["scene", "extension", "file"]
        values = [separation(one) for one in found.values()]
        # 16 pixels of it, four samples to the pixel: a fiftieth of an error.
        assert_allclose(values, values[0], rtol=1e-4)


class TestFiles:
    """Files as others write them."""

    @pytest.mark.parametrize("packing", ["RICE_1", "GZIP_2", "HCOMPRESS_1", "PLIO_1"])
    def test_tile_compressed(self, run, folder, counts, packing):  # noqa: ARG002
        hdu = fits.CompImageHDU(counts.astype(np.int32), compression_type=packing)
        fits.HDUList([fits.PrimaryHDU(), hdu]).writeto("packed.fits")
        assert_allclose(
            separation(run("measure", "packed.fits", *PLAIN, "--json").json), 1.04, rtol=0.01
        )

    @pytest.mark.parametrize("name", ["2", "sci,2", "SCI"])
    def test_several_extensions(self, run, folder, counts, name):  # noqa: ARG002
        """The image asked for, keywords of the primary header, and a mask."""
        primary = fits.PrimaryHDU()
        primary.header["EGAIN"], primary.header["RON"], primary.header["SECPIX"] = 1.6, 6.0, 0.4
        empty = np.random.default_rng(1).normal(650, 11, counts.shape).astype("f4")
        first = fits.ImageHDU(empty, name="SCI", ver=1)
        second = fits.ImageHDU(counts.astype("f4"), name="SCI", ver=2)
        flags = np.zeros(counts.shape, "u1")
        flags[50:54] = 4
        second.data[50:54] = 6e4
        fits.HDUList([primary, first, second, fits.ImageHDU(flags, name="DQ")]).writeto("mef.fits")
        result = run("measure", "mef.fits", "--hdu", name, "--near", "60,59", "--json")
        if name == "SCI":
            # The first of that name, which is empty.
            assert result.code == 2
            assert "no star stands alone" in result.err
            return
        pair = result.json["pairs"][0]
        assert abs(pair["separation_arcsec"] - 1.04) < 5 * pair["separation_error_arcsec"]

    def test_a_plane_of_a_cube_of_one(self, run, folder, counts):  # noqa: ARG002
        fits.PrimaryHDU(counts[None].astype("u2")).writeto("cube.fits")
        assert_allclose(
            separation(run("measure", "cube.fits", *PLAIN, "--json").json), 1.04, rtol=0.01
        )

    def test_blank_pixels(self, run, folder, counts):  # noqa: ARG002
        values = counts.astype(np.int16)
        values[57, 62] = values[30:40, 30:40] = -32768
        fits.PrimaryHDU(values, fits.Header([("BLANK", -32768)])).writeto("blank.fits")
        assert_allclose(
            separation(run("measure", "blank.fits", *PLAIN, "--json").json), 1.04, rtol=0.01
        )


class TestSeveral:
    @pytest.fixture
    def two(self, folder):  # noqa: ARG002
        names = []
        for seed, dx in enumerate((0.0, 0.6)):
            stars = [*out.STARS[:4], *out.pair(60.3, 58.7, 2.6, 25.0, (3e4, 2e4))]
            image = out.expected([(x + dx, y - 0.5 * dx, e) for x, y, e in stars])
            names.append(str(out.written(f"{'ab'[seed]}.fits", out.exposed(image, seed))))
        return names

    def test_one_table_of_all(self, run, two):
        result = run("measure", *two, *PLAIN)
        lines = result.out.splitlines()
        assert lines[0].split()[:3] == ["file", "pair", "separation"]
        assert [line.split()[0] for line in lines[1:3]] == two
        found = run("measure", *two, *PLAIN, "--json").json
        assert [pair["file"] for pair in found["pairs"]] == two
        assert [one["frame"] for one in found["frames"]] == two
        assert all(text.split(":")[0] in two for text in found["warnings"])

    def test_together(self, run, two):
        alone = run("measure", two[0], *PLAIN, "--json").json["pairs"][0]
        found = run("measure", *two, *PLAIN, "--together", "--json").json
        assert found["together"] == two
        assert [psf["frame"] for psf in found["psfs"]] == two
        (pair,) = found["pairs"]
        ratio = alone["separation_error_arcsec"] / pair["separation_error_arcsec"]
        assert_allclose(ratio, np.sqrt(2), rtol=0.15)
        assert abs(pair["separation_arcsec"] - 1.04) < 4 * pair["separation_error_arcsec"]

    @pytest.mark.parametrize("ending", ["ecsv", "fits"])
    def test_a_table_file(self, run, two, ending):
        result = run("measure", *two, *PLAIN, "--quiet", "-o", f"t.{ending}")
        assert result.code == 0
        assert result.err == ""
        table = Table.read(f"t.{ending}", **({"hdu": 1} if ending == "fits" else {}))
        pairs, singles = (table[table["kind"] == kind] for kind in ("pair", "single"))
        assert list(pairs["file"]) == two
        assert_allclose(pairs["separation_arcsec"], 1.04, rtol=0.1)
        assert len(singles) > 0
        assert set(singles["verdict"]) <= {"point", "extended"}
        assert np.all(singles["electrons"] > 6.0 * singles["electrons_error"])
        assert run("measure", *two, *PLAIN, "-o", f"t.{ending}").code == 2
        assert run("measure", two[0], *PLAIN, "-q", "-o", f"t.{ending}", "--overwrite").code == 0


class TestRefused:
    """Exit 2, one line for each mistake, and nothing written."""

    @pytest.mark.parametrize(
        ("arguments", "said"),
        [
            ([], "plain.fits: pixel scale: neither"),
            (["--pixel-scale", "0.4", "--gain", "x"], "'x' will not do; write for example 1.4"),
            (["--pixel-scale", "0"], "--pixel-scale: must be a number from"),
            (["--pixel-scale", "0.4", "--gain", "-1"], "--gain: must be a number from"),
            (["--pixel-scale", "0.4", "--read-noise", "nan"], "will not do"),
            (["--pixel-scale", "0.4", "--saturation", "inf"], "--saturation: must be a number"),
            (["--pixel-scale", "0.4", "--psf", "no.fits"], "no.fits: no such file"),
            (["--pixel-scale", "0.4", "--psf", "plain.fits", "--psf-profile"], "one of the three"),
            (["--pixel-scale", "0.4", "--psf-oversampling", "3"], "goes with --psf FILE"),
            (["--pixel-scale", "0.4", "--psf", "scene"], "carries no scene"),
            (["--pixel-scale", "0.4", "--psf", "extension"], "no PSF extension"),
            (["--pixel-scale", "0.4", "--psf-star", "5,60"], "shows no"),
            (["--pixel-scale", "0.4", "--psf-star", "5"], "is not a place"),
            (["--pixel-scale", "0.4", "--hdu", "3"], "there is no HDU 3"),
            (["--pixel-scale", "0.4", "--hdu", "SCI"], "its 2-D images are in HDU 0"),
            (["--pixel-scale", "0.4", "--together"], "two frames or more"),
            (["--pixel-scale", "0.4", "-o", "t.csv"], "end it in .ecsv or .fits"),
            (["--pixel-scale", "0.4", "-o", "nowhere/t.fits"], "does not exist"),
            (["--pixel-scale", "0.4", "--near", "500,3"], "not on the frame"),
            (["--trials", "3", "--gain", "2"], "--trials takes one scene"),
        ],
    )
    def test_one_mistake(self, run, foreign, files, arguments, said):
        result = run("measure", foreign, *arguments)
        assert result.code == 2
        assert said in result.err
        assert result.out == ""
        assert files() == [foreign]

    @pytest.mark.parametrize(
        "content", [np.full((9, 9), np.nan), np.zeros((9, 9)), -np.ones((9, 9))]
    )
    def test_no_psf_in_its_file(self, run, foreign, content):
        fits.PrimaryHDU(content).writeto("bad.fits")
        result = run("measure", foreign, *PLAIN, "--psf", "bad.fits")
        assert result.code == 2
        assert result.err.startswith("bad.fits: ")

    def test_amounts_may_have_units(self, run, foreign):
        plain = run("measure", foreign, *PLAIN, "--json").json
        units = (
            "--gain",
            "1.6 electron/adu",
            "--read-noise",
            "6 electron",
            "--pixel-scale",
            "400 mas",
            "--near",
            "60,59",
        )
        assert separation(run("measure", foreign, *units, "--json").json) == separation(plain)


def test_a_figure_with_a_restored_view(run, foreign, scene, folder):
    run("expose", scene, "-o", "own.fits", "--quiet")
    result = run("figure", "own.fits", "-o", "own.png", "--restored", "--iterations", "7")
    assert result.code == 0
    assert "restored by 7 iterations" in " ".join(result.out.split())
    assert "adds no information beyond the fit" in " ".join(result.out.split())
    # A frame that tells no scale has a restored view all the same.
    assert run("figure", foreign, "-o", "their.svg", "--restored").code == 0
    assert (folder / "their.svg").exists()
    refused = run("figure", "own.fits", "-o", "x.png", "--iterations", "7")
    assert refused.code == 2
    assert "goes with --restored" in refused.err


class TestRealFrames:
    """Frames of the sky that come with other packages."""

    def test_a_globular_cluster(self):
        import astropy.io.fits as package

        path = Path(package.__file__).parent / "hdu/compressed/tests/data/m13.fits"
        if not path.exists():
            pytest.skip("this astropy does not ship its test data")
        frame, place = Frame.read(path), (169.0, 91.0)
        seen = observe(frame, apart=[place])
        assert seen.sourced.source == "profile"
        # A photographic plate, scanned: stars are some three pixels of an arcsecond wide.
        assert 2.5 < seen.fwhm < 3.6
        assert any("the gain is not known" in text for text in seen.notes)
        # Its noise is not that of photons, and it is crowded: no verdict is to be trusted.
        assert judge_psf(seen, apart=[place]).report.reduced_chi_square > 2.0
        # An elongated blend, seen in any display of the frame.
        (blend,) = simimg.measure(frame, near=[place])
        assert blend.probability_single < 1e-6
        assert 2.0 < blend.separation_arcsec < 6.0
        assert abs(blend.ra_deg - 250.42) < 0.05
        assert abs(blend.dec_deg - 36.46) < 0.05

    def test_a_frame_with_overscan_and_cosmic_rays(self, run):
        import ccdproc

        path = Path(ccdproc.__file__).parent / "tests/data/a8280271.fits"
        if not path.exists():
            pytest.skip("this ccdproc does not ship its test data")
        arguments = ("--near", "451,434", "--pixel-scale", "0.31")
        found = run("measure", path, *arguments, "--json").json
        said = " ".join(found["warnings"])
        assert "useful section" in said
        # GAIN and RDNOISE are in the header, the bias in its overscan: nothing is assumed.
        assert "gain is not known" not in said
        assert "read noise is not known" not in said
        # The stars, not the many cosmic rays, tell the PSF: seven and a half pixels.
        assert 6.5 < found["psf"]["fwhm_arcsec"] / 0.31 < 8.5
        (pair,) = found["pairs"][:1]
        # A companion two and a half magnitudes fainter, eleven pixels below.
        assert pair["probability_single"] < 1e-10
        assert_allclose(pair["position_angle_deg"], 180.0, atol=5.0)
        assert_allclose(pair["separation_arcsec"] / 0.31, 11.0, atol=1.0)
        assert_allclose(pair["magnitude_difference"], 2.5, atol=0.2)
