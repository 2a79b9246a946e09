"""Stars and pairs found in a frame: all that stand out, and nothing that is not there."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.resolving.finding import find_pairs
from simimg.resolving.measure import measure
from simimg.resolving.neighbours import PlacedStar, find_neighbours
from simimg.resolving.observation import observe
from simimg.resolving.starlist import find_stars
from tests.resolving.scenes import frame, pair, star


def grid_of_stars(light, *, columns=200, rows=190, step=31):
    """Stars on a grid with sub-pixel places of their own, and where they stand."""
    rng = np.random.default_rng(11)
    places = [
        (x + rng.uniform(-0.5, 0.5), y + rng.uniform(-0.5, 0.5))
        for y in range(20, rows - 15, step)
        for x in range(20, columns - 15, step)
    ]
    objects = "".join(
        star(light(i), f"x = {x:.4f}\ny = {y:.4f}", label=f"S{i}")
        for i, (x, y) in enumerate(places)
    )
    return objects, places


def test_stars_are_found_where_they_are():
    objects, places = grid_of_stars(lambda i: 3000.0 * 1.12**i)
    found = find_stars(observe(frame(objects, columns=200, rows=190)))
    assert len(found) == len(places)
    for star_found in found:
        away = np.hypot(*(np.array(places) - star_found[:2]).T)
        # The faintest has a signal to noise of 30 or so at 3.7 pixels to the FWHM: 0.06 an error.
        assert away.min() < 0.25
    light = [one.electrons for one in found]
    assert light == sorted(light, reverse=True)
    assert_allclose(light[0], 3000.0 * 1.12 ** (len(places) - 1), rtol=0.02)


def test_rings_of_a_bright_star_are_no_stars():
    shot = frame(
        star(4e7, "x = 50\ny = 44"),
        air=False,
        overrides=['camera.full_well="1e9 electron"', "camera.bit_depth=30"],
    )
    observation = observe(shot)
    assert len(find_stars(observation)) == 1
    assert find_pairs(observation) == []


def test_single_stars_are_not_taken_for_pairs():
    objects, places = grid_of_stars(lambda i: 2e4 + 1e4 * i)
    shot = frame(objects, columns=200, rows=190)
    assert find_pairs(observe(shot)) == []
    chances = [record.probability_single for record in measure(shot, near=places)]
    # Thirty draws: one below 1/3000 has a chance of a hundredth.
    assert min(chances) > 1.0 / 3000.0
    assert np.mean(np.array(chances) < 0.1) < 0.35


def test_pairs_among_stars():
    objects, places = grid_of_stars(lambda i: 1e5 + i)
    at = places[7]
    close = pair("0.7 arcsec", 10.0, (8e4, 5e4), f"x = {at[0] + 15:.3f}\ny = {at[1] + 15:.3f}")
    (sighting,) = find_pairs(observe(frame(objects + close, columns=200, rows=190)))
    assert sighting.double is not None
    assert_allclose(sighting.double.places.mean(axis=0), np.array(at) + 15.0, atol=2.0)


@pytest.mark.parametrize("separation", [9.0, 14.0])
def test_neighbours_are_seen_and_isolated_stars_left_alone(separation):
    alone = observe(frame(star(2e5, "x = 45.3\ny = 44.1")))
    own = PlacedStar(45.3, 44.1, 2e5)
    assert find_neighbours(alone, [own], half=22.0) == []
    both = observe(
        frame(star(2e5, "x = 45.3\ny = 44.1") + star(6e4, f"x = {45.3 + separation}\ny = 44.1"))
    )
    (neighbour,) = find_neighbours(both, [own], half=22.0)
    # A fit in a narrow window; the flux error is a half per cent.
    assert_allclose(neighbour[:2], (45.3 + separation, 44.1), atol=0.05)
    assert_allclose(neighbour.electrons, 6e4, rtol=0.02)
