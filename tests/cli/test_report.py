"""simimg report: the page, what is printed beside it, and what is refused."""

import re
import shlex

import pytest

from simimg_cli.main import COMMANDS
from tests.show.pages import Page, visible

FAST = ("--set", "band.nodes=1")


def test_the_page_makes_itself_again(run, scene, folder):
    made = run("report", scene, *FAST, "--trials", "4", "--set", "exposure.seed=8")
    assert made.code == 0
    assert made.out.startswith("tiny.html: A tiny field, ")
    assert re.search(
        r"^SR-1  Rayleigh: \w+, in [0-9.]+ % \(.*\) of 4 trials resolved", made.out, re.M
    )
    assert "simulation" in made.err
    first = (folder / "tiny.html").read_bytes()
    page = Page(first.decode())
    assert "seed 8" in visible(page)
    # What the page holds is all that is needed: the scene as run, and the command.
    for name, content in page.files().items():
        if not name.endswith(".csv"):
            (folder / name).write_bytes(content)
    (command,) = re.findall(r"^simimg (report tiny\.toml .*)$", visible(page), re.M)
    assert "--set" not in command
    (folder / "tiny.html").unlink()
    assert run(*shlex.split(command)).code == 0
    assert (folder / "tiny.html").read_bytes() == first


def test_json_is_alone(run, scene, folder):
    made = run("report", scene, *FAST, "--trials", "3", "-o", "page.html", "--json")
    assert (made.code, made.err) == (0, "")
    found = made.json
    assert found["simulated"] is True
    assert len(found["scene_id"]) == 64
    assert (found["report"], found["title"], found["trials"]) == ("page.html", "A tiny field", 3)
    (pair,) = found["pairs"]
    assert pair["label"] == "SR-1"
    assert pair["trials"]["trials"] == 3
    assert pair["sparrow"]["verdict"] in ("resolved", "borderline", "unresolved")
    assert found["cautions"]
    assert found["scene_id"] in (folder / "page.html").read_text(encoding="utf-8")


def test_a_frame_carries_its_scene(run, scene, folder, files):
    assert run("expose", scene, *FAST, "-o", "frame.fits", "--quiet").code == 0
    made = run("report", "frame.fits", "--trials", "0", "--quiet")
    assert (made.code, made.out, made.err) == (0, "", "")
    assert files() == ["frame.fits", "frame.html", "tiny.toml"]
    page = Page((folder / "frame.html").read_text(encoding="utf-8"))
    assert "No trials were made" in visible(page)
    assert "simimg report tiny.toml -o tiny.html --trials 0" in visible(page)


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("-o", "page.pdf"), "page.pdf: a report is a page; end the name in .html"),
        (("-o", "tiny.toml"), "tiny.toml: is a file that the scene reads; choose another name"),
        (("-o", "nowhere/page.html"), "folder 'nowhere' does not exist"),
        (("--without", "camera"), "camera.pixels: is required to expose and missing"),
        (("--pair", "SR-2"), "no pair is labelled 'SR-2'"),
        (("--set", "pair=[]", "--trials", "5"), "trials need a pair"),
        (("--set", "exposure.sead=5"), "exposure.sead"),
        (("--set", "exposure.frame_time=10 ms"), "makes a cube, and a report is of single frames"),
        (("--trials", "-1"), "--trials"),
    ],
)
def test_wrong_wishes(run, scene, files, words, said):
    made = run("report", scene, *FAST, *words)
    assert (made.code, made.out) == (2, "")
    assert said in made.err
    assert files() == ["tiny.toml"]


def test_a_page_that_exists_stays(run, scene, folder):
    (folder / "tiny.html").write_text("mine")
    made = run("report", scene, *FAST)
    assert (made.code, made.out) == (2, "")
    assert "tiny.html: exists already" in made.err
    assert (folder / "tiny.html").read_text() == "mine"


def test_a_mosaic_is_refused(run, scene, folder, files):
    with (folder / scene).open("a") as handle:
        handle.write('\n[[detector]]\nname = "A"\noffset = ["-9 px", "0 px"]\n')
    made = run("report", scene)
    assert (made.code, made.out) == (2, "")
    assert "tiny.toml: detector: " in made.err
    assert files() == ["tiny.toml"]


def test_the_page_of_a_study_makes_itself_again(run, scene, folder):
    vary = ("--vary", "air.seeing=0.5 arcsec:2 arcsec:3:log")
    made = run("study", scene, *FAST, *vary, "--report", "tiny-study.html", "--quiet")
    assert (made.code, made.err) == (0, "")
    first = (folder / "tiny-study.html").read_bytes()
    page = Page(first.decode())
    (folder / "tiny.toml").write_bytes(page.files()["tiny.toml"])
    (command,) = re.findall(r"^simimg (study tiny\.toml .*)$", visible(page), re.M)
    assert run(*shlex.split(command), "--overwrite").code == 0
    assert (folder / "tiny-study.html").read_bytes() == first


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (
            ("--vary", "air.seeing=1 arcsec,2 arcsec", "--report", "page.png"),
            "end the name in .html",
        ),
        (("--pixel-advice", "--report", "page.html"), "stand alone"),
    ],
)
def test_a_study_s_page_that_cannot_be(run, scene, files, words, said):
    made = run("study", scene, *FAST, *words)
    assert (made.code, made.out) == (2, "")
    assert said in made.err
    assert files() == ["tiny.toml"]


def test_it_is_listed(run):
    assert "report" in COMMANDS
    assert COMMANDS["report"] in " ".join(run("--help").out.split())
