"""The report of a study: its words and tables are the study's, and it can be made again."""

import re
import shlex

import numpy as np
import pytest

from simimg.scene.file import load_scene
from simimg.scene.steps import steps_from_text
from simimg.show.reportstudy import study_page
from simimg.study.sweep import Varied, make, plan
from tests.show.frames import PAIR, STARS, STATION
from tests.show.frames import scene as coloured
from tests.show.pages import Page, visible


def study(*vary, objects=PAIR, trials=0):
    overrides = ["band.nodes=1", "title='<script>alert(1)</script>'"]
    scene = coloured(objects.replace("T-1", "T<1>"), overrides=overrides)
    varied = [Varied(key, steps_from_text(values)) for key, values in vary]
    return make(plan(scene, vary=varied, trials=trials), workers=1)


@pytest.fixture(scope="module")
def made():
    return study(("air.seeing", "0.3 arcsec:1.2 arcsec:3:log"), trials=4)


@pytest.fixture(scope="module")
def page(made):
    return Page(study_page(made))


def test_it_holds_the_study(made, page):
    rows = page.table("all-columns")
    assert len(rows) == 3
    for row, found, (value,) in zip(rows, made.rows, made.points, strict=True):
        assert float(row["air.seeing (arcsec)"]) == pytest.approx(float(value.split()[0]))
        for name, (unit, _) in made.columns.items():
            held = row[f"{name} ({unit})" if unit else name]
            if np.isfinite(found[name]):
                assert float(held) == pytest.approx(found[name], rel=1e-9)
            else:
                assert held == ""
    shares = [float(row["share resolved by Sparrow"]) for row in page.table("points")]
    assert shares == [row["fraction_sparrow"] for row in made.rows]


def test_its_words_say_where_it_is_best(made, page):
    bounds = [row["bound_separation"] for row in made.rows]
    assert bounds == sorted(bounds)
    assert re.search(r"measured best, to [0-9.]+ arcsec, at air\.seeing 0\.3 arcsec", visible(page))
    assert "At each point 4 noise draws" in visible(page)


def test_it_is_a_page_like_the_others(page):
    assert page.one("title")["text"] == "<script>alert(1)</script>"
    assert page.all("script", "b") == []
    (picture,) = page.all("img")
    assert "0.3 arcsec to 1.2 arcsec" in picture["attrs"]["alt"]
    assert page.all("strong")[0]["text"] == "Simulated"


def test_its_command_says_the_same_study(made, page):
    (command,) = re.findall(r"^simimg study .*$", visible(page), re.M)
    words = shlex.split(command)
    key, values = words[words.index("--vary") + 1].split("=")
    assert (key, steps_from_text(values)) == ("air.seeing", made.varied[0].steps)
    assert words[words.index("--trials") + 1] == "4"


def test_a_map_of_a_scene_without_a_pair():
    made = study(("air.seeing", "0.5 arcsec,0.9 arcsec"), ("band.name", "B,R"), objects=STARS)
    page = Page(study_page(made))
    assert "The map" in [one["text"] for one in page.all("h2")]
    assert [row["band.name"] for row in page.table("points")] == ["B", "R", "B", "R"]
    assert "air.seeing=0.5 arcsec,0.9 arcsec" in visible(page)
    # Without a pair no bound and no share is claimed.
    assert "measured best" not in visible(page)


def test_a_point_that_cannot_be_is_told_without_the_path(tmp_path):
    file = tmp_path / "sharp.toml"
    text = STATION.format(rotation=0.0, mirrored="false", ra=0.0, dec=0.0)
    file.write_text(text.replace('seeing = "0.8', 'image_quality = "0.8') + STARS)
    scene = load_scene(file, overrides=["band.nodes=1"])
    varied = [Varied("telescope.aperture", steps_from_text("0.05 m,1 m"))]
    page = study_page(make(plan(scene, vary=varied), workers=1))
    assert "Not every point could be worked out: sharp.toml: air.image_quality: " in page
    assert str(tmp_path) not in page
