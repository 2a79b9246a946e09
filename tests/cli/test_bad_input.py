"""What strangers send, through the command line: lines, exit 2, nothing written."""

import pytest

from tests.fits_checks.malformed_frames import MALFORMED as FRAMES
from tests.scene.malformed_scenes import MALFORMED as SCENES


def refused(result, name):
    """Exit 2, a line for each mistake that names the file, and nothing else."""
    assert result.code == 2
    assert result.out == ""
    lines = result.err.splitlines()
    assert lines
    for line in lines:
        assert line.startswith(f"{name}: "), line
        assert "; " in line, line
        assert "internal error" not in line
    return lines


@pytest.mark.parametrize("row", SCENES, ids=lambda row: row.name)
def test_malformed_scenes(run, files, folder, row):
    (folder / "scene.toml").write_bytes(row.content)
    lines = refused(run("check", "scene.toml"), "scene.toml")
    assert any(row.word in line for line in lines)
    assert refused(run("expose", "scene.toml", "-o", "frame.fits"), "scene.toml") == lines
    assert refused(run("limits", "scene.toml", "--json"), "scene.toml") == lines
    assert files() == ["scene.toml"]


@pytest.mark.parametrize("name", FRAMES)
def test_malformed_frames(run, files, folder, name):
    write, word = FRAMES[name]
    write(folder / "bad.fits")
    lines = refused(run("measure", "bad.fits"), "bad.fits")
    assert any(word in line for line in lines)
    assert refused(run("measure", "bad.fits", "--json"), "bad.fits") == lines
    assert refused(run("figure", "bad.fits", "-o", "figure.png"), "bad.fits") == lines
    assert files() == ["bad.fits"]


@pytest.mark.parametrize(
    "name", [name for name in FRAMES if "file" not in name and name not in ("text", "gzip of text")]
)
def test_malformed_frames_as_scenes(run, files, folder, name):
    FRAMES[name][0](folder / "bad.fits")
    refused(run("expose", "bad.fits", "-o", "frame.fits"), "bad.fits")
    refused(run("check", "bad.fits"), "bad.fits")
    assert files() == ["bad.fits"]


@pytest.mark.parametrize("arguments", [["check"], ["expose", "-o", "a.fits"], ["limits"]])
def test_no_such_scene(run, files, arguments):
    lines = refused(run(*arguments, "missing.toml"), "missing.toml")
    assert lines == ["missing.toml: no such file; check the path, or put the file there"]
    assert files() == []


@pytest.mark.parametrize("arguments", [["measure"], ["figure", "-o", "a.png"]])
def test_no_such_frame(run, files, arguments):
    lines = refused(run(*arguments, "missing.fits"), "missing.fits")
    assert lines == ["missing.fits: no such file; check its name"]
    assert files() == []
