"""Speckle interferometry of simulated cubes: what was put in comes out, within its errors."""

import os

import numpy as np
import pytest

import simimg
from simimg.cube import Cube
from simimg.errors import InputError
from simimg.resolving import speckle
from simimg.scene.file import load_scene, replace

FULL = os.environ.get("SIMIMG_FULL_GRID") == "1"
ARCSEC = np.degrees(1.0) * 3600.0
WAVELENGTH, DIAMETER = 600e-9, 2.0
LIMIT = WAVELENGTH / DIAMETER * ARCSEC
TEXT = """
title = "speckles of a close pair"
[telescope]
aperture = "2 m"
[air]
seeing = "{seeing} arcsec"
outer_scale = "25 m"
[band]
centre = "600 nm"
width = "10 nm"
[camera]
pixels = [{side}, {side}]
pixel_scale = "{scale} arcsec"
read_noise = "2 electron"
bias = "100 adu"
[exposure]
frame_time = "10 ms"
count = {count}
seed = {seed}
[[pair]]
label = "close"
electrons = [{first}, {second}]
separation = "{separation} arcsec"
position_angle = "62 deg"
"""


def scene(folder, *, strength=15.0, **changes):
    """A pair at 1.2 lambda/D in air of D/r0 = `strength`."""
    fried = DIAMETER / strength / 1.2**1.2
    values = {
        "seeing": 0.9758634 * 500e-9 / fried * ARCSEC,
        "side": 128,
        "scale": 0.45 * LIMIT,
        "count": 300,
        "seed": 1,
        "first": 20000,
        "second": 10000,
        "separation": 1.2 * LIMIT,
    }
    path = folder / "scene.toml"
    path.write_text(TEXT.format(**values | changes))
    return load_scene(path)


@pytest.fixture
def model_once(monkeypatch):
    """The model's single star, the same for every cube of one telescope, is worked out once."""
    kept = {}
    made = speckle._model_power

    def once(seen, shape):
        if shape not in kept:
            kept[shape] = made(seen, shape)
        return kept[shape]

    monkeypatch.setattr(speckle, "_model_power", once)


def offset(pair):
    angle = np.radians(pair.position_angle_deg)
    return pair.separation_arcsec * np.array([np.sin(angle), np.cos(angle)])


def test_a_close_pair_is_recovered(tmp_path):
    (pair,) = speckle.measure_speckle(simimg.expose_cube(scene(tmp_path))).pairs
    truth = 1.2 * LIMIT
    assert abs(pair.separation_arcsec - truth) < 3.5 * pair.separation_error_arcsec
    assert 0.005 < pair.separation_error_arcsec / truth < 0.03
    assert abs(pair.position_angle_deg - 62.0) < 3.5 * pair.position_angle_error_deg
    assert abs(pair.magnitude_difference - 0.7526) < 3.5 * pair.magnitude_difference_error
    assert pair.magnitude_difference_error < 0.1
    assert pair.label == "close"
    assert not pair.ambiguous_180
    assert pair.probability_single < 1e-6
    # The limits are those of the pupil, and the pair lies about the Rayleigh limit.
    assert pair.rayleigh.limit_arcsec == pytest.approx(1.21967 * LIMIT, rel=1e-4)
    assert pair.rayleigh.verdict == "borderline"
    assert pair.sparrow.limit_arcsec == pytest.approx(1.14 * LIMIT, rel=0.03)
    assert pair.truth.separation_arcsec == pytest.approx(truth, rel=1e-6)
    # The air moves the whole image by a fraction of the seeing, 33 pixels here.
    assert abs(pair.x - 63.5) < 6.0
    assert abs(pair.y - 63.5) < 6.0


def test_a_single_star_is_no_pair(tmp_path):
    one = scene(tmp_path, second=1e-3)
    (pair,) = speckle.measure_speckle(simimg.expose_cube(one)).pairs
    assert pair.probability_single > 0.01
    assert pair.rayleigh.verdict == pair.sparrow.verdict == "unresolved"
    assert not pair.elongated


def test_which_star_is_brighter(tmp_path):
    blind = simimg.expose_cube(scene(tmp_path, first=8000, second=20000, count=200))
    cube = Cube(
        planes=blind.planes,
        dtype=blind.dtype,
        header=blind.header,
        wcs=blind.wcs,
        scene_files=blind.scene_files,
        directory=blind.directory,
    )
    (pair,) = speckle.measure_speckle(cube).pairs
    # Nothing names the stars: the fainter about the brighter.
    assert not pair.ambiguous_180
    assert pair.magnitude_difference > 0.0
    assert abs(pair.position_angle_deg - 242.0) < 4.0 * pair.position_angle_error_deg


def test_equal_stars_are_ambiguous(tmp_path):
    equal = scene(tmp_path, second=20000, count=200)
    (pair,) = speckle.measure_speckle(simimg.expose_cube(equal)).pairs
    assert pair.ambiguous_180
    assert abs(pair.separation_arcsec - 1.2 * LIMIT) < 4.0 * pair.separation_error_arcsec


def test_reference_star_in_place_of_the_model(tmp_path):
    cube = simimg.expose_cube(scene(tmp_path))
    single = simimg.expose_cube(scene(tmp_path, second=1e-3, seed=77, count=300))
    (pair,) = speckle.measure_speckle(cube, reference=single).pairs
    assert abs(pair.separation_arcsec - 1.2 * LIMIT) < 0.05 * LIMIT
    small = simimg.expose_cube(scene(tmp_path, side=64, count=30))
    with pytest.raises(InputError, match="same pixels"):
        speckle.measure_speckle(cube, reference=small)


def test_short_cubes_are_refused(tmp_path):
    few = simimg.expose_cube(scene(tmp_path, count=20))
    with pytest.raises(InputError, match="at least 24"):
        speckle.measure_speckle(few)
    bare = Cube(planes=few.planes, dtype=few.dtype)
    with pytest.raises(InputError, match=r"no scene|at least 24"):
        speckle.measure_speckle(bare)


@pytest.mark.slow
@pytest.mark.skipif(not FULL, reason="fifty cubes take minutes: SIMIMG_FULL_GRID=1")
@pytest.mark.usefixtures("model_once")
def test_errors_are_those_of_many_cubes(tmp_path):
    found = []
    start = scene(tmp_path)
    for seed in range(100, 160):
        cube = simimg.expose_cube(replace(start, {"exposure.seed": seed}))
        (pair,) = speckle.measure_speckle(cube).pairs
        found.append(
            [
                pair.separation_arcsec,
                pair.position_angle_deg,
                pair.magnitude_difference,
                pair.separation_error_arcsec,
                pair.position_angle_error_deg,
                pair.magnitude_difference_error,
            ]
        )
    values, errors = np.split(np.array(found), 2, axis=1)
    truth = np.array([1.2 * LIMIT, 62.0, 2.5 * np.log10(2.0)])
    scatter = values.std(axis=0, ddof=1)
    quoted = np.sqrt((errors**2).mean(axis=0))
    told = f"bias {(values.mean(axis=0) - truth) / scatter}, quoted {quoted / scatter} of scatter"
    assert (np.abs(values.mean(axis=0) - truth) < scatter / 3.0).all(), told
    assert (np.abs(quoted / scatter - 1.0) < 0.35).all(), told
