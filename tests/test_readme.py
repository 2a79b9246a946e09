"""Every command and example of the README runs as it stands there."""

import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from tests.commands import in_one_colour, quickly, run

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text()
WORKING_TOGETHER = ("study", "solve", "batch")


def blocks(kind):
    return re.findall(rf"^```{kind}\n(.*?)^```$", README, re.M | re.S)


def commands(block):
    """The simimg commands of a shell block, in order, without the folder of an environment."""
    for line in block.splitlines():
        for part in line.split("&&"):
            command = part.strip().removeprefix(".venv/bin/")
            if command.startswith("simimg "):
                yield command.split(" > ")[0]


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


def test_the_first_two_blocks_set_up_and_run(folder, monkeypatch):
    first, second = blocks("sh")[:2]
    for block in (first, second):
        assert block.startswith("python3 -m venv .venv && .venv/bin/pip install")
        assert len(block.strip().splitlines()) == 1
    assert "pytest" in second
    expose, measure = commands(first)
    assert expose == "simimg expose scenes/close-pair.toml -o pair.fits --overwrite"
    assert measure == "simimg measure pair.fits"
    with quickly(monkeypatch):
        assert run(expose, folder).exit_code == 0
        found = run(measure, folder)
    assert found.exit_code == 0
    same(found.stdout.split(), blocks("text")[0].split())


def test_every_other_command_runs(folder, monkeypatch):
    in_one_colour(folder / "scenes")
    every = [one for block in blocks("sh")[2:] for one in commands(block)]
    assert len(every) >= 18
    assert {shlex.split(one)[1] for one in every} >= {
        *("begin", "check", "expose", "limits", "measure", "batch", "study", "solve"),
        *("calibrate", "inject", "figure", "report"),
    }
    with quickly(monkeypatch):
        for command in every:
            words = shlex.split(command)
            if words[1] in WORKING_TOGETHER:
                # Of no effect on the result; starting processes takes longer than the work.
                words += ["--workers", "1"]
            done = run(words, folder)
            assert done.exit_code == 0, (command, done.stderr)
            for option in ("-o", "--plot", "--report", "--out"):
                if option in words:
                    assert (folder / words[words.index(option) + 1]).exists()


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


def test_its_links_lead_somewhere():
    links = re.findall(r"\]\(([^)#]+)\)", README)
    assert len(links) >= 5
    for link in links:
        assert (ROOT / link).exists(), link
