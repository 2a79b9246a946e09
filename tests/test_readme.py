"""Every command and example of the README runs as it stands there."""

import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text()


def blocks(kind):
    return re.findall(rf"^```{kind}\n(.*?)^```$", README, re.M | re.S)


def simimg_commands():
    """The simimg commands of all shell blocks, in order."""
    for block in blocks("sh"):
        for line in block.splitlines():
            for part in line.split("&&"):
                if part.strip().startswith(".venv/bin/simimg "):
                    yield shlex.split(part)[1:]


def same(found, shown):
    """Word for word; numbers to a hundredth, since another processor may round a draw apart."""
    assert len(found) == len(shown)
    for a, b in zip(found, shown, strict=True):
        number = re.fullmatch(r"([0-9.]+)(.*)", b)
        if number is None or a == b:
            assert a == b
        else:
            assert float(re.match(r"[0-9.]+", a)[0]) == pytest.approx(float(number[1]), rel=0.01)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A folder with the demo scenes, in which the commands run one after another."""
    made = tmp_path_factory.mktemp("readme")
    shutil.copytree(ROOT / "scenes", made / "scenes")
    return made


def test_the_first_two_blocks_set_up_and_run():
    first, second = blocks("sh")[:2]
    for block in (first, second):
        assert block.startswith("python3 -m venv .venv && .venv/bin/pip install")
        assert len(block.strip().splitlines()) == 1
    assert "simimg expose scenes/close-pair.toml -o pair.fits" in first
    assert "simimg measure pair.fits" in first
    assert "pytest" in second


def test_every_command_runs(folder):
    commands = list(simimg_commands())
    assert len(commands) >= 8
    for command in commands:
        done = subprocess.run(
            [sys.executable, "-m", "simimg_cli", *command],
            cwd=folder,
            capture_output=True,
            text=True,
            check=False,
        )
        assert done.returncode == 0, (command, done.stderr)
        if command[:2] == ["measure", "pair.fits"]:
            same(done.stdout.split(), blocks("text")[0].split())


def test_the_python_example_runs(folder):
    (example,) = blocks("python")
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", example],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert (folder / "close-pair.fits").exists()
