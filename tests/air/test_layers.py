"""Moments of layers: time and angle over which a wavefront stays the same."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.air.layers import (
    Layer,
    coherence_time,
    effective_distance,
    effective_wind,
    isoplanatic_angle,
    normalised,
)
from simimg.air.turbulence import kolmogorov_structure

LAYERS = (Layer(0.0, 0.6, 5.0), Layer(4000.0, 0.3, 15.0, 1.0), Layer(11000.0, 0.1, 30.0, -2.0))


def test_one_layer_has_the_published_spans():
    """t0 = 0.314 r0/v, theta0 = 0.314 r0/h (Fried 1982; Roddier 1981), where D is 1 rad2."""
    one = (Layer(8000.0, 1.0, 20.0),)
    assert coherence_time(0.1, one) == pytest.approx(0.314 * 0.1 / 20.0)
    assert isoplanatic_angle(0.1, one) == pytest.approx(0.314 * 0.1 / 8000.0)
    assert isoplanatic_angle(0.1, one, airmass=2.0) == pytest.approx(0.314 * 0.1 / 16000.0)
    # 0.314 has three digits.
    assert_allclose(kolmogorov_structure(coherence_time(0.1, one) * 20.0, 0.1), 1.0, rtol=2e-3)


def test_several_layers_add_their_structure_functions():
    r0 = 0.12
    shift = 1e-3
    whole = sum(one.share * kolmogorov_structure(one.wind * shift, r0) for one in LAYERS)
    assert_allclose(kolmogorov_structure(effective_wind(LAYERS) * shift, r0), whole)
    angle = 1e-5
    whole = sum(one.share * kolmogorov_structure(one.height * angle, r0) for one in LAYERS)
    assert_allclose(kolmogorov_structure(effective_distance(LAYERS) * angle, r0), whole)


def test_still_air_at_the_telescope_has_no_end():
    still = (Layer(0.0, 1.0, 0.0),)
    assert coherence_time(0.1, still) == np.inf
    assert isoplanatic_angle(0.1, still) == np.inf


def test_shares_and_directions():
    made = normalised([Layer(0.0, 3.0, 1.0), Layer(1.0, 1.0, 1.0)])
    assert [one.share for one in made] == [0.75, 0.25]
    east, north = Layer(0.0, 1.0, 2.0, np.pi / 2).velocity
    assert_allclose((east, north), (2.0, 0.0), atol=1e-12)
    with pytest.raises(ValueError, match="no layer"):
        normalised([Layer(0.0, 0.0, 1.0)])
    for wrong in ((-1.0, 1.0, 1.0), (0.0, np.nan, 1.0), (0.0, 1.0, np.inf)):
        with pytest.raises(ValueError, match="finite and not negative"):
            Layer(*wrong)
