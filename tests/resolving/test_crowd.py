"""Three stars within two FWHM of one another: each companion a pair, all of them fitted at once."""

from __future__ import annotations

from math import hypot

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.resolving.finding import search_field
from simimg.resolving.measure import measure_frame
from simimg.resolving.observation import observe
from tests.resolving.scenes import frame, star

# The FWHM delivered is about 3.6 pixels of 0.25 arcsec.
OPEN = [(45.2, 44.1, 3e5), (49.9, 46.3, 2e5), (45.6, 49.4, 1.2e5)]
HIDDEN = [(45.2, 44.1, 3e5), (47.6, 44.9, 2e5), (43.9, 49.4, 1.2e5)]
CHAIN = [(30.2, 44.1, 3e5), (35.6, 44.4, 2.5e5), (41.1, 44.9, 2e5), (46.6, 44.0, 1.5e5)]


def shown(stars, seed=5):
    """A frame of these stars and one far away."""
    objects = [star(light, f"x = {x}\ny = {y}") for x, y, light in [*stars, (76.3, 15.1, 2e5)]]
    return frame("".join(objects), seed=seed)


def offset(record):
    """Of the second star about the first, pixels to the right (west) and up (north)."""
    angle = np.radians(record.position_angle_deg)
    reach = record.separation_arcsec / 0.25
    return -reach * np.sin(angle), reach * np.cos(angle)


@pytest.mark.parametrize("stars", [OPEN, HIDDEN], ids=["three peaks", "two peaks"])
def test_a_triple_is_two_pairs_about_its_brightest_star(stars):
    answer = measure_frame(shown(stars))
    assert len(answer.pairs) == 2
    assert len(answer.singles) == 1
    (x, y, light), *companions = stars
    for record in answer.pairs:
        error = record.separation_error_arcsec / 0.25
        assert_allclose((record.x, record.y), (x, y), atol=5.0 * error)
        east, north = offset(record)
        away = [hypot(x + east - a, y + north - b) for a, b, _ in companions]
        nearest = int(np.argmin(away))
        assert away[nearest] < 5.0 * error
        expected = -2.5 * np.log10(companions[nearest][2] / light)
        spread = 4.0 * record.magnitude_difference_error
        assert_allclose(record.magnitude_difference, expected, atol=spread)
        companions.pop(nearest)
    assert not companions


def test_a_chain_is_a_pair_for_each_link():
    found = search_field(observe(shown(CHAIN)))
    assert len(found.pairs) == len(CHAIN) - 1
    links = []
    for sighting in found.pairs:
        assert sighting.double is not None
        away = [[hypot(px - x, py - y) for x, y, _ in CHAIN] for px, py in sighting.double.places]
        links.append(tuple(int(np.argmin(one)) for one in away))
        assert np.min(away, axis=1).max() < 0.1
    assert sorted(links) == [(0, 1), (1, 2), (2, 3)]


def test_errors_of_a_pair_in_company_are_those_of_the_joint_fit():
    # The third star's own freedom makes the pair less sure than if it were known.
    pulls, alone = [], []
    for seed in range(24):
        found = search_field(observe(shown(OPEN, seed=seed)), singles=False)
        for sighting in found.pairs:
            double = sighting.double
            assert double is not None
            truth = min(OPEN[1:], key=lambda s: hypot(*(double.places[1] - s[:2])))
            error = double.places[1] - truth[:2]
            pulls += list(error / np.sqrt(np.diag(double.covariance)[[3, 4]]))
            alone.append(float(np.sqrt(double.covariance[5, 5])))
    assert len(alone) == 48
    # Standard normal: the scatter of 96 pulls is known to 0.072.
    assert_allclose(np.std(pulls), 1.0, atol=0.22)
    assert abs(np.mean(pulls)) < 4.0 / np.sqrt(len(pulls))
