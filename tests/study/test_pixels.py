"""Pixel advice: aliased power against quadrature, the range against the bound itself, trials."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.errors import InputError
from simimg.imaging.basis import Transfer
from simimg.scene.file import replace
from simimg.study.pixels import WITHIN, aliased_power, pixel_advice
from tests.study.pairs import pair_scene


def test_aliased_power_of_a_gaussian_psf():
    # Gaussian and pixel both separate into x and y: a sum along one axis says all.
    sigma, pixel = 0.35, 1.0
    transfer = Transfer(
        band_limit=6.0,
        radial=(lambda f: np.exp(-2.0 * (math.pi * sigma * f) ** 2),),
        box=pixel,
    )
    u = (np.arange(6000) + 0.5) / 1000.0
    line = (np.exp(-2.0 * (math.pi * sigma * u) ** 2) * np.sinc(u)) ** 2
    # The transfer function separates, so the share inside is the square of that of one axis.
    inside = (line[u < 0.5].sum() / line.sum()) ** 2
    assert aliased_power(transfer) == pytest.approx(1.0 - inside, abs=1e-4)


def test_a_band_that_ends_within_nyquist_is_not_aliased():
    transfer = Transfer(band_limit=0.4, radial=(lambda f: 1.0 - f / 0.4,), box=1.0)
    assert aliased_power(transfer) == 0.0


@pytest.mark.slow
def test_range_keeps_within_a_tenth_of_the_best_bound(tmp_path):
    scene = replace(pair_scene(tmp_path), {"camera.read_noise": "25 electron",
                                           "camera.pixels": [120, 120], "pair.0.x": 59.7,
                                           "pair.0.y": 60.2})  # fmt: skip
    found = pixel_advice(scene, steps=9, count=200, workers=2)

    def bound(scale):
        there = replace(scene, {"camera.pixel_scale": f"{scale} arcsec"})
        return simimg.precision(there)[0].separation_arcsec

    least = found.figures["bound_separation"].min()
    assert found.finest < found.best < found.coarsest
    # Both ends are real here, and lie where the bound is a tenth above its best.
    for end in (found.finest, found.coarsest):
        assert bound(end) == pytest.approx(WITHIN * least, rel=0.03)
    assert [one.holds for one in found.confirmed] == [True, True]
    assert_allclose([one.pixel_scale for one in found.confirmed], [found.finest, found.coarsest])
    assert any("read noise" in one for one in found.reasons)
    assert any("inside" in one or "outside" in one for one in found.reasons)
    figures = found.figures
    assert (np.diff(figures["aliased_power"]) >= 0.0).all()
    assert_allclose(figures["field"], 120 * figures["pixel_scale"])


def test_no_pair_no_advice(tmp_path):
    with pytest.raises(InputError, match="there is none"):
        pixel_advice(replace(pair_scene(tmp_path), {"pair": None}))
