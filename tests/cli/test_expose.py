"""expose: frames into files, all or nothing, and the same again."""

import numpy as np
import pytest
from astropy.io import fits

from simimg.frame import Frame


def test_a_frame_and_a_line_about_it(run, scene, files):
    result = run("expose", scene, "-o", "frame.fits")
    assert result.code == 0
    assert result.out.startswith("frame.fits: 48 x 40 pixels, 10 s, 3 objects (1 outside), ")
    assert files() == ["frame.fits", scene]
    frame = Frame.read("frame.fits")
    assert frame.counts.shape == (40, 48)
    assert frame.simulated
    assert list(frame.truth["label"]) == ["SR-1", "SR-1", "far off"] or len(frame.truth) == 3


def test_quiet(run, scene):
    result = run("expose", scene, "-o", "frame.fits", "--quiet")
    assert (result.code, result.out, result.err) == (0, "", "")


def test_as_json(run, scene):
    result = run("expose", scene, "-o", "frame.fits", "--json")
    assert result.err == ""
    found = result.json
    frame = Frame.read("frame.fits")
    assert found["scene_id"] == frame.scene_id
    assert found["simulated"] is True
    (one,) = found["frames"]
    assert one["file"] == "frame.fits"
    assert (one["columns"], one["rows"]) == (48, 40)
    assert one["most_adu"] == frame.counts.max()
    assert one["saturated_pixels"] == 0


def test_saturation_is_counted(run, scene):
    arguments = ["expose", scene, "-o", "frame.fits", "--set", "camera.full_well=100 electron"]
    result = run(*arguments)
    frame = Frame.read("frame.fits")
    full = int((frame.mask & 1).sum())
    assert full > 4
    assert f"{full} pixels saturated" in result.out


def test_extensions_on_request(run, scene):
    assert run("expose", scene, "-o", "frame.fits", "--with", "expected,psf").code == 0
    with fits.open("frame.fits") as hdus:
        names = [hdu.name for hdu in hdus]
    assert names == ["PRIMARY", "TRUTH", "SCENE", "EXPECTED", "PSF"]


def test_several_exposures(run, scene, files):
    result = run("expose", scene, "-o", "night.fits", "--set", "exposure.count=3")
    assert result.code == 0
    assert files() == ["night-000.fits", "night-001.fits", "night-002.fits", scene]
    counts = [Frame.read(f"night-{i:03d}.fits").counts.astype(float) for i in range(3)]
    assert len(result.out.splitlines()) == 3
    for i in range(3):
        # Other noise, the same sky: sigma is about 12 adu, a mean over 1920 pixels 0.3.
        assert np.abs(counts[i] - counts[i - 1]).max() > 0
        assert abs(np.median(counts[i]) - np.median(counts[i - 1])) < 3


def test_a_frame_is_made_again_byte_for_byte(run, scene, folder):
    run("expose", scene, "-o", "night.fits", "--set", "exposure.count=3", "--with", "psf")
    assert run("expose", "night-002.fits", "-o", "again.fits", "--quiet").code == 0
    assert (folder / "again.fits").read_bytes() == (folder / "night-002.fits").read_bytes()


def test_a_frame_is_made_anew_with_a_change(run, scene):
    run("expose", scene, "-o", "frame.fits")
    arguments = ["-o", "brighter.fits", "--set", "telescope.aperture=1 m"]
    assert run("expose", "frame.fits", *arguments).code == 0
    first, second = Frame.read("frame.fits"), Frame.read("brighter.fits")
    assert second.truth["electrons"][0] == pytest.approx(4 * first.truth["electrons"][0])
    assert first.scene_id != second.scene_id


def test_another_version_is_spoken_of(run, scene, folder):
    run("expose", scene, "-o", "frame.fits")
    content = (folder / "frame.fits").read_bytes()
    start = content.index(b"CREATOR = 'simimg ")
    older = content[: start + 18] + b"0.0.1" + content[start + 23 :]
    (folder / "old.fits").write_bytes(older)
    assert "was made by simimg 0.0.1" in run("expose", "old.fits", "-o", "again.fits").err


def test_a_frame_without_scene(run, files):
    fits.PrimaryHDU(np.ones((4, 4), "i2")).writeto("foreign.fits")
    result = run("expose", "foreign.fits", "-o", "frame.fits")
    assert result.code == 2
    assert result.err.startswith("foreign.fits: carries no scene; ")
    assert files() == ["foreign.fits"]


class TestAllOrNothing:
    def test_refuses_to_overwrite(self, run, scene, folder):
        (folder / "frame.fits").write_bytes(b"precious")
        result = run("expose", scene, "-o", "frame.fits")
        assert result.code == 2
        assert "frame.fits: exists already" in result.err
        assert "--overwrite" in result.err
        assert (folder / "frame.fits").read_bytes() == b"precious"
        assert run("expose", scene, "-o", "frame.fits", "--overwrite").code == 0
        assert Frame.read("frame.fits").simulated

    def test_one_name_taken_of_several(self, run, scene, folder, files):
        (folder / "night-002.fits").write_bytes(b"precious")
        result = run("expose", scene, "-o", "night.fits", "--set", "exposure.count=4")
        assert result.code == 2
        assert "night-002.fits: exists already" in result.err
        assert files() == ["night-002.fits", scene]

    @pytest.mark.parametrize(
        ("arguments", "said"),
        [
            (["-o", "nowhere/frame.fits"], "folder 'nowhere' does not exist"),
            (["-o", "."], "is a folder"),
            (["-o", "frame.fits.gz"], "not packed"),
            (["-o", "tiny.toml", "--overwrite"], "the scene reads"),
            (["-o", "a.fits", "--preview", "tiny.toml", "--overwrite"], "the scene reads"),
            (["-o", "a.fits", "--preview", "./a.fits"], "written twice"),
            (["-o", "a.fits", "--preview", "a.jpg"], "end its name in .png"),
            (["-o", "a.fits", "--preview", "nowhere/a.png"], "does not exist"),
            (["-o", "a.fits", "--without", "exposure"], "exposure.time"),
            (["-o", "a.fits", "--without", "camera"], "camera.pixels"),
            (["-o", "a.fits", "--memory", "10 kB"], "memory"),
            (["-o", "a.fits", "--set", "camera.gain=0 electron/adu"], "camera.gain"),
            (["-o", "a.fits", "--set", "nonsense"], "nonsense"),
            (["-o", "a.fits", "--without", "nonsense"], "nonsense"),
        ],
    )
    def test_nothing_is_written(self, run, scene, files, folder, arguments, said):
        before = (folder / scene).read_bytes()
        result = run("expose", scene, *arguments)
        assert result.code == 2
        assert said in result.err
        assert result.out == ""
        assert files() == [scene]
        assert (folder / scene).read_bytes() == before

    def test_a_file_of_the_scene_is_not_overwritten(self, run, scene, folder):
        fits.PrimaryHDU(np.ones((4, 4), "f4")).writeto("map.fits")
        before = (folder / "map.fits").read_bytes()
        more = '\n[[picture]]\nfile = "map.fits"\nwidth = "3 arcsec"\nmagnitude = 15\n'
        (folder / scene).write_text((folder / scene).read_text() + more)
        result = run("expose", scene, "-o", "map.fits", "--overwrite")
        assert result.code == 2
        assert "the scene reads" in result.err
        assert (folder / "map.fits").read_bytes() == before

    def test_full_disk(self, run, scene, files, monkeypatch):
        import errno
        import os

        def full(_):
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

        monkeypatch.setattr(os, "fsync", full)
        result = run("expose", scene, "-o", "frame.fits")
        assert result.code == 1
        assert "frame.fits: could not be written: No space left on device" in result.err
        assert files() == [scene]


class TestPreview:
    def test_a_picture_beside_the_frame(self, run, scene, files):
        result = run("expose", scene, "-o", "frame.fits", "--preview", "frame.png")
        assert result.code == 0
        assert files() == ["frame.fits", "frame.png", scene]
        assert "preview frame.png" in result.out

    def test_one_for_each_exposure(self, run, scene, files):
        arguments = ["-o", "f.fits", "--preview", "p.png", "--set", "exposure.count=2"]
        assert run("expose", scene, *arguments).code == 0
        assert files() == ["f-000.fits", "f-001.fits", "p-000.png", "p-001.png", scene]

    def test_a_picture_that_exists(self, run, scene, folder, files):
        (folder / "frame.png").write_bytes(b"precious")
        arguments = ["expose", scene, "-o", "frame.fits", "--preview", "frame.png"]
        assert run(*arguments).code == 2
        assert files() == ["frame.png", scene]
        assert (folder / "frame.png").read_bytes() == b"precious"
        assert run(*arguments, "--overwrite").code == 0
        assert (folder / "frame.png").read_bytes().startswith(b"\x89PNG")


def test_no_keyword_that_simimg_fills_can_be_overruled(run, scene, folder):
    run("expose", scene, "-o", "frame.fits", "--set", "exposure.start=2026-04-12T03:00:00")
    # What the scene's own header may say, the frame's title, is no part of the rule.
    for keyword in set(fits.getheader("frame.fits")) - {"OBJECT"}:
        text = (folder / scene).read_text().replace("[sky]", f"[header]\n{keyword} = 'x'\n\n[sky]")
        (folder / "other.toml").write_text(text)
        assert run("check", "other.toml").code == 2, keyword


def test_the_command_compresses_and_makes_the_same_frame_again(run, scene):
    assert run("expose", scene, "-o", "plain.fits", "-q").code == 0
    assert run("expose", scene, "-o", "packed.fits", "--compress", "-q").code == 0
    assert run("expose", "packed.fits", "-o", "again.fits", "-q").code == 0
    with open("plain.fits", "rb") as plain, open("again.fits", "rb") as again:
        assert plain.read() == again.read()
    told = run("measure", "packed.fits", "--json").json
    assert told["pairs"][0]["separation_arcsec"] > 0.0
