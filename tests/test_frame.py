"""Frames to FITS and back: whole or not at all, the same bytes, no belief in strangers."""

import contextlib
import errno
import gzip
import os
import subprocess
import sys
import textwrap
import threading
import warnings

import astropy.units as u
import numpy as np
import pytest
from astropy.io import fits
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from simimg.errors import InputError, RunError
from simimg.frame import Frame, PsfImage, check_header
from tests.fits_checks import examples
from tests.fits_checks.malformed_frames import MALFORMED


@pytest.fixture
def path(tmp_path):
    return tmp_path / "frame.fits"


def left(folder):
    return sorted(entry.name for entry in folder.iterdir())


class TestRoundTrip:
    def test_every_part_comes_back(self, path):
        frame = examples.frame()
        frame.write(path)
        back = Frame.read(path)
        assert_array_equal(back.counts, frame.counts)
        assert back.counts.dtype == np.uint16
        assert_array_equal(back.expected, frame.expected)
        assert_array_equal(back.mask, frame.mask)
        assert_array_equal(back.psf.image, frame.psf.image)
        assert back.psf.oversampling == 3
        assert back.scene_files == examples.files()
        assert back.simulated
        assert back.scene_id == "0" * 64
        assert back.value("EXPTIME") == 30.0
        assert back.header["EXPTIME"] == (30.0, "[s] exposure")

    def test_truth_comes_back_with_its_units(self, path):
        frame = examples.frame()
        frame.write(path)
        truth, given = Frame.read(path).truth, frame.truth
        assert truth.colnames == given.colnames
        assert list(truth["label"]) == ["SR-014", "SR-014", "\\u03b2 etoile"]
        for name in given.colnames[2:]:
            assert_array_equal(np.asarray(truth[name]), np.asarray(given[name]))
            assert truth[name].unit == given[name].unit
        assert truth["electrons"].unit == u.electron
        assert truth["x"].description == given["x"].description

    def test_truth_header_states_the_conventions(self, path):
        examples.frame().write(path)
        said = " ".join(str(line) for line in fits.getheader(path, "TRUTH")["COMMENT"])
        assert "from 0 at the centre of the first pixel" in said
        assert "north through east" in said

    def test_coordinates_come_back(self, path):
        frame = examples.frame()
        frame.write(path)
        corners = [[0, 0], [30, 0], [0, 22], [30, 22]]
        # FITS numbers have 15 digits at least: 1e-12 deg of 83 deg.
        assert_allclose(
            Frame.read(path).wcs.wcs_pix2world(corners, 0),
            frame.wcs.wcs_pix2world(corners, 0),
            rtol=0,
            atol=1e-12,
        )

    @pytest.mark.parametrize("dtype", ["u1", "u2", "u4", "i2", "i4", "i8", "f4", "f8"])
    def test_every_type_of_counts(self, path, dtype):
        rng = np.random.default_rng(2)
        if dtype[0] == "f":
            counts = rng.standard_normal((7, 5)).astype(dtype)
        else:
            limits = np.iinfo(dtype)
            counts = rng.integers(limits.min, limits.max, (7, 5), dtype=dtype, endpoint=True)
            counts[0, :2] = limits.min, limits.max
        Frame(counts=counts).write(path)
        back = Frame.read(path)
        assert back.counts.dtype == counts.dtype
        assert_array_equal(back.counts, counts)
        # Another reader, and its own checksum, see the same.
        with fits.open(path, checksum=True) as hdus:
            assert_array_equal(hdus[0].data, counts)

    @pytest.mark.parametrize("shape", [(1, 1), (3, 1), (1, 7), (1201, 1203), (1440, 512)])
    def test_sizes_around_the_blocks(self, path, shape):
        counts = np.random.default_rng(3).integers(0, 65536, shape, dtype=np.uint16)
        Frame(counts=counts).write(path)
        with warnings.catch_warnings(), fits.open(path, checksum=True) as hdus:
            warnings.simplefilter("error")
            hdus.verify("exception")
            assert_array_equal(hdus[0].data, counts)

    def test_a_view_turned_about_is_written_as_it_is_seen(self, path):
        counts = np.arange(12, dtype=np.uint16).reshape(3, 4)
        Frame(counts=counts.T[::-1]).write(path)
        assert_array_equal(Frame.read(path).counts, counts.T[::-1])

    def test_checksums_hold(self, path):
        examples.frame().write(path)
        with warnings.catch_warnings(), fits.open(path, checksum=True) as hdus:
            warnings.simplefilter("error")
            for hdu in hdus:
                assert hdu.verify_checksum() == 1
                assert hdu.verify_datasum() == 1

    def test_a_changed_byte_breaks_the_checksum(self, path):
        examples.frame().write(path)
        content = bytearray(path.read_bytes())
        content[2880 * 2 + 17] ^= 1
        path.write_bytes(content)
        with pytest.warns(match=r"(Check|Data)sum verification failed"):
            fits.open(path, checksum=True).close()

    def test_same_bytes_each_time_and_after_reading(self, path, tmp_path):
        examples.frame().write(path)
        again, reread = tmp_path / "again.fits", tmp_path / "reread.fits"
        examples.frame().write(again)
        Frame.read(path).write(reread)
        assert path.read_bytes() == again.read_bytes()
        assert path.read_bytes() == reread.read_bytes()

    def test_no_clock_in_any_header(self, path):
        examples.frame().write(path)
        with fits.open(path) as hdus:
            for hdu in hdus:
                assert "DATE" not in hdu.header
                assert hdu.header.comments["CHECKSUM"] == "makes the whole HDU's sum zero"
                assert hdu.header.comments["DATASUM"] == "sum of the data's 32-bit words"

    def test_every_header_says_simulated(self, path):
        examples.frame().write(path)
        with fits.open(path) as hdus:
            assert len(hdus) == 6
            for hdu in hdus:
                assert hdu.header["SIMULATE"] is True
                assert hdu.header["CREATOR"].startswith("simimg ")

    def test_header_cannot_deny_the_simulation(self, path):
        examples.frame(header={"SIMULATE": False, "CREATOR": "someone"}).write(path)
        assert fits.getheader(path)["SIMULATE"] is True
        assert fits.getheader(path)["CREATOR"].startswith("simimg ")

    def test_text_outside_ascii_is_plain_in_the_header(self, path):
        examples.frame().write(path)
        header = fits.getheader(path)
        assert header["OBJECT"] == "\\u03b2 Inventee 2"
        assert header["NOTE"] == "it's " * 60 + "the end"
        assert header["LONGSTRN"] == "OGIP 1.0"
        assert "UNKNOWN" not in header

    def test_empty_truth(self, path):
        Frame(counts=np.zeros((2, 2), "u2"), truth=examples.truth()[:0]).write(path)
        truth = Frame.read(path).truth
        assert len(truth) == 0
        assert truth.colnames == examples.truth().colnames


class TestFrozen:
    def test_arrays_are_read_only_and_its_own(self):
        counts = np.zeros((3, 4), dtype=np.uint16)
        frame = Frame(counts=counts)
        counts[:] = 7
        assert frame.counts.max() == 0
        with pytest.raises(ValueError, match="read-only"):
            frame.counts[0, 0] = 1

    def test_an_array_given_away_is_not_copied(self):
        counts = np.zeros((3, 4), dtype=np.uint16)
        counts.setflags(write=False)
        assert Frame(counts=counts).counts is counts

    @pytest.mark.parametrize(
        "wrong",
        [
            {"counts": np.zeros((0, 3), "u2")},
            {"counts": np.zeros(3, "u2")},
            {"counts": np.zeros((2, 2), complex)},
            {"expected": np.zeros((3, 3), "f4")},
            {"mask": np.zeros((3, 3), "u1")},
        ],
    )
    def test_nonsense_is_refused_at_once(self, wrong):
        with pytest.raises(ValueError, match=r"shape|cannot"):
            Frame(**({"counts": np.zeros((2, 2), "u2")} | wrong))

    def test_psf_without_samples_is_refused(self):
        with pytest.raises(ValueError, match="oversampling"):
            PsfImage(np.ones((3, 3)), 0)


class TestWholeOrNotAtAll:
    def test_refuses_to_overwrite(self, path):
        path.write_bytes(b"precious")
        with pytest.raises(InputError, match=r"exists already; .*--overwrite"):
            examples.frame().write(path)
        assert path.read_bytes() == b"precious"
        assert left(path.parent) == ["frame.fits"]
        examples.frame().write(path, overwrite=True)
        assert Frame.read(path).simulated

    def test_no_folder(self, tmp_path):
        with pytest.raises(InputError, match=r"folder .* does not exist"):
            examples.frame().write(tmp_path / "no" / "frame.fits")

    def test_a_folder_in_the_place(self, tmp_path):
        with pytest.raises(InputError, match="is a folder"):
            examples.frame().write(tmp_path, overwrite=True)

    def test_not_onto_a_device(self):
        with pytest.raises(InputError, match="not an ordinary file"):
            examples.frame().write("/dev/null", overwrite=True)

    def test_a_link_is_followed(self, path, tmp_path):
        target = tmp_path / "target.fits"
        target.write_bytes(b"old")
        path.symlink_to(target)
        examples.frame().write(path, overwrite=True)
        assert path.is_symlink()
        assert Frame.read(target).simulated

    def test_ordinary_permissions(self, path, tmp_path):
        examples.frame().write(path)
        beside = tmp_path / "beside"
        beside.touch()
        assert path.stat().st_mode == beside.stat().st_mode

    @pytest.mark.parametrize("call", ["fsync", "replace"])
    def test_full_disk(self, path, monkeypatch, call):
        def full(*_):
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

        path.write_bytes(b"precious")
        monkeypatch.setattr(os, call, full)
        with pytest.raises(RunError, match=r"frame\.fits: could not be written: No space left"):
            examples.frame().write(path, overwrite=True)
        assert path.read_bytes() == b"precious"
        assert left(path.parent) == ["frame.fits"]

    @pytest.mark.parametrize("stop", [KeyboardInterrupt, SystemExit, MemoryError])
    def test_interrupted(self, path, monkeypatch, stop):
        def interrupt(*_):
            raise stop

        monkeypatch.setattr(os, "fsync", interrupt)
        with pytest.raises(stop):
            examples.frame().write(path)
        assert left(path.parent) == []

    def test_the_system_refuses_a_large_file(self, tmp_path):
        code = """
            import resource, signal, sys
            import numpy as np
            from simimg.errors import RunError
            from simimg.frame import Frame
            signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
            resource.setrlimit(resource.RLIMIT_FSIZE, (100_000, 100_000))
            try:
                Frame(counts=np.zeros((500, 500), "u2")).write("large.fits")
            except RunError as error:
                print(error)
        """
        run = subprocess.run(
            [sys.executable, "-c", textwrap.dedent(code)],
            cwd=tmp_path,
            capture_output=True,
            text=True,
            check=True,
        )
        assert run.stdout.startswith("large.fits: could not be written: File too large")
        assert left(tmp_path) == []

    def test_longest_name(self, tmp_path):
        path = tmp_path / ("n" * 250 + ".fits")
        examples.frame().write(path)
        assert left(tmp_path) == [path.name]

    def test_a_name_too_long(self, tmp_path):
        with pytest.raises(InputError, match="File name too long"):
            examples.frame().write(tmp_path / ("n" * 300))

    @pytest.mark.parametrize("name", ["", "a\0b"])
    def test_not_a_name(self, name):
        with pytest.raises(InputError, match="not a file name"):
            examples.frame().write(name)


class TestForeign:
    def test_a_plain_image(self, path):
        image = np.arange(30, dtype=np.int16).reshape(5, 6)
        fits.PrimaryHDU(image, header=fits.Header({"OBJECT": "m"})).writeto(path)
        frame = Frame.read(path)
        assert_array_equal(frame.counts, image)
        assert not frame.simulated
        assert frame.wcs is None
        assert frame.truth is None
        assert frame.value("OBJECT") == "m"
        assert frame.value("NOTHING", 3) == 3

    def test_scaled_and_blank_pixels(self, path):
        image = np.arange(30, dtype=np.int16).reshape(5, 6)
        header = fits.Header({"BLANK": 7, "BSCALE": 0.5, "BZERO": 10.0})
        hdu = fits.PrimaryHDU(image)
        hdu.header.update(header)
        hdu.writeto(path)
        counts = Frame.read(path).counts
        assert counts.dtype.kind == "f"
        assert np.isnan(counts[1, 1])
        assert counts[0, 1] == 10.5

    def test_first_extension_and_gzip(self, path, tmp_path):
        image = np.random.default_rng(4).random((8, 9)).astype("f4")
        table = fits.BinTableHDU(examples.truth()[["x"]], name="TRUTH")
        fits.HDUList([fits.PrimaryHDU(), table, fits.ImageHDU(image)]).writeto(path)
        packed = tmp_path / "frame.fits.gz"
        packed.write_bytes(gzip.compress(path.read_bytes()))
        assert_array_equal(Frame.read(path).counts, image)
        assert_array_equal(Frame.read(packed).counts, image)
        # A table called TRUTH of another program is none of ours.
        assert Frame.read(path).truth is None

    def test_tile_compressed(self, path):
        image = np.random.default_rng(5).integers(0, 200, (40, 50)).astype("i2")
        fits.HDUList([fits.PrimaryHDU(), fits.CompImageHDU(image)]).writeto(path)
        assert_array_equal(Frame.read(path).counts, image)

    def test_last_block_not_filled(self, path):
        fits.PrimaryHDU(np.ones((5, 6), "i2")).writeto(path)
        path.write_bytes(path.read_bytes()[: 2880 + 60])
        assert_array_equal(Frame.read(path).counts, np.ones((5, 6)))

    def test_written_again_it_is_not_called_simulated(self, path, tmp_path):
        fits.PrimaryHDU(np.ones((5, 6), "i2")).writeto(path)
        again = tmp_path / "again.fits"
        Frame.read(path).write(again)
        assert "SIMULATE" not in fits.getheader(again)

    def test_coordinates_that_are_not_celestial(self, path):
        header = fits.Header({"CTYPE1": "LINEAR", "CTYPE2": "LINEAR"})
        fits.PrimaryHDU(np.ones((5, 6), "i2"), header=header).writeto(path)
        assert Frame.read(path).wcs is None


class TestMalformed:
    @pytest.mark.parametrize("name", MALFORMED)
    def test_one_clear_line(self, path, name):
        write, word = MALFORMED[name]
        write(path)
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            with pytest.raises(InputError) as caught:
                Frame.read(path)
        for line in caught.value.lines:
            assert line.startswith(f"{path}: ")
            assert "; " in line
            assert "\n" not in line
        assert word in str(caught.value)

    @pytest.mark.parametrize("name", ["missing.fits", "a\0b", "n" * 300])
    def test_no_such_file(self, tmp_path, name):
        with pytest.raises(InputError):
            Frame.read(f"{tmp_path}/{name}")

    def test_a_folder(self, tmp_path):
        with pytest.raises(InputError, match="is a folder"):
            Frame.read(tmp_path)

    def test_a_pipe(self, tmp_path):
        pipe = tmp_path / "pipe"
        os.mkfifo(pipe)

        def feed():
            with contextlib.suppress(BrokenPipeError):
                pipe.write_bytes(b"SIMPLE")

        feeder = threading.Thread(target=feed, daemon=True)
        feeder.start()
        with pytest.raises(InputError, match="not an ordinary file"):
            Frame.read(pipe)
        feeder.join()

    @settings(
        max_examples=150,
        deadline=None,
        derandomize=True,
        suppress_health_check=[HealthCheck.function_scoped_fixture],
    )
    @given(data=st.data())
    def test_any_damage_is_read_or_refused_in_a_line(self, tmp_path, data):
        whole = tmp_path / "whole.fits"
        if not whole.exists():
            examples.frame().write(whole)
        content = bytearray(whole.read_bytes())
        for _ in range(data.draw(st.integers(1, 6))):
            # Headers and tables matter more than pixels: most damage goes there.
            place = data.draw(st.integers(0, len(content) - 1))
            content[place] = data.draw(st.one_of(st.integers(0, 255), st.sampled_from(b"0 9'=/T&")))
        if data.draw(st.booleans()):
            del content[data.draw(st.integers(0, len(content))) :]
        damaged = tmp_path / "damaged.fits"
        damaged.write_bytes(content)
        try:
            frame = Frame.read(damaged)
        except InputError as error:
            lines, frame = error.lines, None
        else:
            lines = ()
        assert all(line.startswith(f"{damaged}: ") for line in lines)
        assert lines or frame.counts.ndim == 2


class TestHeaderKeys:
    def test_what_is_right(self):
        extra = {"OBSERVER": "example", "PROG-ID": 3, "T_AMB": -4.5, "CLOUDY": False, "OBJECT": "x"}
        assert check_header(extra, "scene.toml") == []

    @pytest.mark.parametrize(
        ("keyword", "value", "said"),
        [
            ("observer", "x", "capitals; write OBSERVER"),
            ("TOO-LONG-KEY", "x", "not a FITS keyword"),
            ("WITH BLANK"[:8], "x", "not a FITS keyword"),
            ("", "x", "not a FITS keyword"),
            ("\u00c9TOILE", "x", "not a FITS keyword"),
            ("NAXIS1", 3, "layout"),
            ("BZERO", 3, "layout"),
            ("END", "x", "layout"),
            ("CHECKSUM", "x", "layout"),
            ("TTYPE12", "x", "layout"),
            ("CRVAL1", 3.0, "coordinates"),
            ("CD1_2", 3.0, "coordinates"),
            ("RADESYS", "FK5", "coordinates"),
            ("SIMULATE", False, "written by simimg"),
            ("GAIN", 2.0, "set camera.gain"),
            ("EXPTIME", 2.0, "set exposure.time"),
            ("DATE-XYZ", "today", "dates"),
            ("LIST", [1, 2], "type list"),
            ("TABLE", {"a": 1}, "a table"),
            ("NAN", float("nan"), "finite"),
            ("INF", float("inf"), "finite"),
            ("HUGE", 2**70, "too large"),
            ("LONG", "x" * 3000, "over 2000"),
            ("OBSERVER", 4, "must be text"),
            ("HISTORY", 4, "must be text"),
            ("DATAMAX", "x", "must be a number"),
        ],
    )
    def test_what_is_wrong(self, keyword, value, said):
        (line,) = check_header({keyword: value}, "scene.toml")
        assert line.startswith(f"scene.toml: header.{keyword if keyword.isascii() else 'ETOILE'}")
        assert said in line
        assert "; " in line

    def test_every_mistake_at_once(self):
        assert len(check_header({"gain": 1, "END": 2, "A": 3, "B": float("nan")}, "s")) == 3
