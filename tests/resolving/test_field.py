"""A field's singles: light and verdicts; a small disc is extended, and no pair."""

from __future__ import annotations

from dataclasses import replace
from math import hypot

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.spatial import cKDTree

import simimg
from simimg.resolving.finding import search_field
from simimg.resolving.measure import measure_frame
from simimg.resolving.observation import observe
from simimg.resolving.psfsource import PsfChoice
from tests.resolving.scenes import frame, pair, scene, star

DISC = """
[[disc]]
label = "D"
x = 60.2
y = 30.4
electrons = 400000
diameter = "0.45 arcsec"
"""


def test_stars_are_points_and_a_disc_of_half_a_fwhm_is_extended_and_no_pair():
    shot = frame(star(2e5, "x = 25.3\ny = 60.1", label="S") + DISC)
    found = measure_frame(shot)
    assert found.pairs == ()
    singles = {single.label: single for single in found.singles}
    assert set(singles) == {"D", "S"}
    assert singles["S"].verdict == "point"
    assert singles["D"].verdict == "extended"
    for label, light in (("S", 2e5), ("D", 4e5)):
        error = singles[label].electrons_error
        assert_allclose(singles[label].electrons, light, atol=4.0 * error)
    # A uniform disc's standard deviation along an axis is a quarter of its diameter.
    error = singles["D"].width_error_arcsec
    assert_allclose(singles["D"].width_arcsec, 0.45 / 4.0, atol=4.0 * error)


def crowd_of_stars(pairs=60, singles=300, side=1000):
    """Places and light of pairs and singles, no two objects nearer than 24 pixels (6.5 FWHM)."""
    rng = np.random.default_rng(60)
    places: list[tuple[float, float]] = []
    while len(places) < pairs + singles:
        x, y = rng.uniform(15.0, side - 15.0, 2)
        if all(hypot(x - a, y - b) > 24.0 for a, b in places):
            places.append((float(x), float(y)))
    doubles = [
        (x, y, *(10.0 ** rng.uniform(4.9, 5.3, 2)), rng.uniform(0.55, 1.4), rng.uniform(0.0, 360.0))
        for x, y in places[:pairs]
    ]
    alone = [(x, y, 10.0 ** rng.uniform(3.7, 5.3)) for x, y in places[pairs:]]
    return doubles, alone


def test_sixty_pairs_among_three_hundred_single_stars():
    doubles, alone = crowd_of_stars()
    objects = [
        pair(f"{separation} arcsec", angle, (first, second), f"x = {x}\ny = {y}", label=f"P{i}")
        for i, (x, y, first, second, separation, angle) in enumerate(doubles)
    ] + [star(light, f"x = {x}\ny = {y}", label=f"S{i}") for i, (x, y, light) in enumerate(alone)]
    shot = frame("".join(objects), columns=1000, rows=1000)
    # Found blind: the truth is looked at only to compare.
    answer = measure_frame(replace(shot, truth=None), workers=2)
    tree = cKDTree(np.array([one[:2] for one in doubles]))
    pulls = []
    matched = set()
    for record in answer.pairs:
        away, index = tree.query((record.x, record.y))
        first, second, separation, angle = doubles[int(index)][2:]
        # Within the pair: the brighter may be its second star.
        assert away < 1.0 + separation / 0.25
        matched.add(int(index))
        flip = 180.0 if second > first else 0.0
        turn = (record.position_angle_deg - angle - flip + 90.0) % 180.0 - 90.0
        pulls.append(
            (
                (record.separation_arcsec - separation) / record.separation_error_arcsec,
                turn / record.position_angle_error_deg,
                (record.magnitude_difference - abs(2.5 * np.log10(first / second)))
                / record.magnitude_difference_error,
            )
        )
    # Every pair once, and no single star among them.
    assert len(answer.pairs) == len(matched) == len(doubles)
    scatter = np.std(pulls, axis=0)
    # Of sixty standard normal deviates: known to 0.09. The order of an equal pair's stars is set
    # by the answer, which narrows the pulls of the magnitude difference.
    assert_allclose(scatter[:2], 1.0, atol=0.3)
    assert scatter[2] < 1.3
    assert_allclose(np.mean(pulls, axis=0)[:2], 0.0, atol=4.0 / np.sqrt(len(pulls)))
    assert len(answer.singles) == len(alone)
    seen = np.array([(single.x, single.y) for single in answer.singles])
    away, index = cKDTree(seen).query(np.array([one[:2] for one in alone]))
    assert away.max() < 0.5
    light = np.array([(s.electrons, s.electrons_error) for s in answer.singles])[index]
    deviation = (light[:, 0] - np.array([one[2] for one in alone])) / light[:, 1]
    assert_allclose(np.std(deviation), 1.0, atol=0.17)
    # A point passes for wide with a chance of 0.01: of 300, nine or more have one of 0.004.
    assert sum(single.verdict == "extended" for single in answer.singles) < 9


COMA = ['telescope.field={ coma = "40 nm", radius = "3 arcsec" }', "band.nodes=1"]


def test_stars_in_growing_coma_are_points_and_a_pair_among_them_is_found():
    """With the PSF of the middle of the field the stars of the corners look double or wide."""
    places = [(24.3, 23.8), (140.2, 139.9), (82.4, 80.3)]
    objects = "".join(star(3e5, f"x = {x}\ny = {y}") for x, y in places)
    objects += pair("0.07 arcsec", 40.0, (2e5, 1.2e5), "x = 81.2\ny = 138.3")
    shot = frame(objects, columns=165, rows=165, overrides=COMA, air=False)
    unseen = replace(shot, truth=None)
    answer = measure_frame(unseen)
    (found,) = answer.pairs
    assert_allclose(
        (found.separation_arcsec, found.position_angle_deg, found.magnitude_difference),
        (0.07, 40.0, 2.5 * np.log10(2e5 / 1.2e5)),
        atol=4.0 * max(found.separation_error_arcsec, 1e-3),
        rtol=0.02,
    )
    assert len(answer.singles) == len(places)
    assert [single.verdict for single in answer.singles].count("point") == len(places)
    central = search_field(observe(unseen))
    wrong = len(central.pairs) - 1 + sum(single.wide.extended for single in central.singles)
    assert wrong >= 2


GALAXY = """
[[galaxy]]
label = "G"
x = 62.4
y = 55.7
electrons = 3e6
sersic_index = {index}
effective_radius = "{radius} arcsec"
axis_ratio = 0.5
position_angle = "30 deg"
"""


@pytest.mark.parametrize(("index", "radius"), [(1.0, 2.0), (4.0, 2.5), (1.0, 4.0)])
def test_a_large_galaxy_is_one_object_and_a_star_on_it_another(index, radius):
    galaxy = GALAXY.format(index=index, radius=radius)
    shot = frame(galaxy + star(2e5, "x = 20.3\ny = 95.1"), columns=125, rows=115)
    answer = measure_frame(replace(shot, truth=None))
    assert answer.pairs == ()
    assert sorted(single.verdict for single in answer.singles) == ["extended", "point"]
    shot = frame(galaxy + star(2e5, "x = 78.3\ny = 61.1"), columns=125, rows=115)
    answer = measure_frame(replace(shot, truth=None))
    assert answer.pairs == ()
    near = [single for single in answer.singles if hypot(single.x - 78.3, single.y - 61.1) < 0.5]
    assert len(near) == 1


def test_what_a_poor_psf_leaves_is_not_called_a_width():
    """Bright stars under a PSF three per cent too narrow: wide by it, points in the verdict."""
    places = [(20.0 + 26.3 * (i % 4), 20.0 + 26.1 * (i // 4)) for i in range(12)]
    objects = "".join(star(1.5e5, f"x = {x:.2f}\ny = {y:.2f}") for x, y in places)
    disc = DISC.replace("x = 60.2", "x = 116.4").replace("0.45", "1.0")
    shot = frame(objects + disc, columns=140, rows=96)
    wrong = scene(star(1e5), overrides=['air.seeing="0.873 arcsec"'])
    psf = simimg.expose(wrong, keep={"psf"}).psf
    assert psf is not None
    choice = PsfChoice(source="file", image=psf)
    # By the statistic alone most of the stars would be extended.
    observed = search_field(observe(shot, psf=choice))
    assert sum(single.wide.extended for single in observed.singles) > 8
    answer = measure_frame(replace(shot, truth=None), psf=choice)
    verdicts = {single.verdict for single in answer.singles if single.x < 105.0}
    assert verdicts == {"point"}
    assert [single.verdict for single in answer.singles if single.x > 105.0] == ["extended"]
