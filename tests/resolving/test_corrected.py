"""A pair that the air hides and adaptive optics brings apart: the demo scene, end to end."""

from __future__ import annotations

from pathlib import Path

import pytest

import simimg
from simimg.scene.file import load_scene, replace

SCENE = Path(__file__).parents[2] / "scenes" / "corrected-pair.toml"


@pytest.fixture(scope="module")
def scene():
    return replace(load_scene(SCENE), {"camera.pixels": [72, 72]})


def test_with_correction_it_is_resolved_by_sparrow(scene):
    """1.2 lambda/D at D/r0 = 15, beyond the delivered limit."""
    found = simimg.limits(scene)
    (pair,) = found.objects
    assert 2.0 / found.r0_m == pytest.approx(15.0, rel=0.02)
    assert pair.separation_arcsec > pair.delivered.sparrow_arcsec
    (told,) = simimg.measure(simimg.expose(scene))
    assert told.sparrow.verdict == "resolved"
    error = told.separation_error_arcsec
    assert told.separation_arcsec == pytest.approx(pair.separation_arcsec, abs=4.0 * error)


def test_without_it_the_air_hides_it(scene):
    blurred = replace(scene, {"correction": None})
    (told,) = simimg.measure(simimg.expose(blurred))
    assert told.sparrow.verdict == "unresolved"
    assert told.sparrow.limit_arcsec > 8.0 * told.truth.separation_arcsec
