"""A small scene, and a way to run the commands on it."""

import json
from dataclasses import dataclass

import pytest
from click.testing import CliRunner

from simimg_cli.main import simimg

TINY = """\
title = "A tiny field"

[telescope]
aperture = "0.5 m"
obstruction = 0.3

[air]
seeing = "1.2 arcsec"

[band]
name = "V"

[camera]
pixels = [48, 40]
pixel_scale = "0.4 arcsec"
bias = "300 adu"
gain = "1.5 electron/adu"
read_noise = "4 electron"

[sky]
surface_brightness = 20.5

[exposure]
time = "10 s"
seed = 3

[[pair]]
label = "SR-1"
magnitudes = [12.0, 12.6]
separation = "2.4 arcsec"
position_angle = "62 deg"

[[star]]
label = "far off"
x = 300
y = 4
magnitude = 13
"""


@dataclass
class Run:
    """What a command left behind."""

    code: int
    out: str
    err: str

    @property
    def json(self):
        return json.loads(self.out)


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """An empty folder that is the current one."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def scene(folder):
    path = folder / "tiny.toml"
    path.write_text(TINY)
    return path.name


@pytest.fixture
def run(folder):  # noqa: ARG001
    def call(*arguments):
        result = CliRunner().invoke(simimg, [str(argument) for argument in arguments])
        assert result.exception is None or isinstance(result.exception, SystemExit), (
            result.exception
        )
        assert "Traceback" not in result.stderr
        return Run(result.exit_code, result.stdout, result.stderr)

    return call


@pytest.fixture
def files(folder):
    """The names of the files in the folder."""
    return lambda: sorted(entry.name for entry in folder.iterdir())
