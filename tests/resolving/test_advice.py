"""Advice is taken: the scene is changed as advised, and the verdict changes as promised."""

from __future__ import annotations

import re

import pytest

import simimg
from simimg.resolving.measure import measure
from simimg.scene.file import replace
from tests.resolving.scenes import pair, scene, star


def advised(subject):
    (record,) = measure(simimg.expose(subject, threads=1))
    return record


def number(pattern: str, text: str) -> float:
    found = re.search(pattern, text)
    assert found is not None, text
    return float(found.group(1))


def test_the_seeing_that_resolves():
    subject = scene(pair("0.5 arcsec", 60.0, (4e5, 2e5)))
    record = advised(subject)
    assert record.sparrow.verdict == "unresolved"
    assert record.elongated
    seeing = number(r'in ([\d.]+)" seeing', record.advice)
    assert "the air sets the limit" in record.advice
    better = advised(replace(subject, {"air.seeing": f"{seeing} arcsec"}))
    assert better.sparrow.verdict == "resolved"
    worse = advised(replace(subject, {"air.seeing": f"{1.15 * seeing} arcsec"}))
    assert worse.sparrow.verdict != "resolved"


def test_the_aperture_that_resolves_above_the_air():
    subject = scene(pair("0.05 arcsec", 60.0, (4e5, 3e5)), air=False, columns=64, rows=64)
    record = advised(subject)
    assert record.sparrow.verdict == "unresolved"
    aperture = number(r"one of ([\d.]+) m", record.advice)
    better = advised(replace(subject, {"telescope.aperture": f"{aperture} m"}))
    assert better.sparrow.verdict == "resolved"


def test_the_pixel_that_resolves():
    subject = scene(
        pair("0.075 arcsec", 60.0, (4e5, 4e5)),
        air=False,
        columns=64,
        rows=64,
        overrides=['telescope.obstruction="0.2"'],
    )
    subject = replace(subject, {"camera.pixel_scale": "0.08 arcsec"})
    record = advised(subject)
    assert record.sparrow.verdict == "unresolved"
    pixel = number(r'pixels of ([\d.]+)"', record.advice)
    better = advised(replace(subject, {"camera.pixel_scale": f"{pixel} arcsec"}))
    assert better.sparrow.verdict == "resolved"


def test_even_without_air():
    subject = scene(pair("0.12 arcsec", 60.0, (4e6, 3e6)), columns=64, rows=64)
    subject = replace(subject, {"camera.full_well": None, "camera.bit_depth": 24})
    record = advised(subject)
    assert "even without air" in record.advice


def test_noise_that_leaves_it_open():
    subject = scene(pair("0.84 arcsec", 60.0, (2.5e3, 2.5e3)))
    record = advised(subject)
    assert record.sparrow.verdict == "borderline"
    assert record.sparrow.limit_arcsec < record.separation_arcsec
    assert number(r"About (\d+) such exposures", record.advice) >= 2


@pytest.mark.parametrize(
    ("objects", "words"),
    [
        (pair("2 arcsec", 60.0, (4e5, 2e5)), "resolved under both criteria"),
        (pair("0.85 arcsec", 60.0, (4e5, 4e5)), "resolved by Sparrow"),
        (pair("1.3 arcsec", 60.0, (4e5, 1e4)), "does not show as a peak"),
    ],
)
def test_what_is_said_of_clear_cases(objects, words):
    assert words in advised(scene(objects)).advice


def test_what_is_said_of_single_stars():
    shot = simimg.expose(scene(star(1e5)), threads=1)
    single, nothing = measure(shot, near=[(47.5, 44.5), (10.0, 10.0)])
    assert "single star" in single.advice or "One star" in single.advice
    assert "No star" in nothing.advice
