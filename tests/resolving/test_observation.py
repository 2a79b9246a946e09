"""What a frame tells a fit: electrons, noise, PSF."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.resolving.observation import observe, spline_oversampling
from tests.resolving.scenes import frame, pair, scene, star


@pytest.mark.parametrize("air", [True, False])
def test_the_model_of_a_frame_is_its_expected_image(air):
    """The engine's image and the spline of the PSF, two ways to the same light."""
    subject = scene(star(1e6, "x = 40.37\ny = 45.81"), air=air)
    shot = simimg.expose(subject, keep=("expected",), threads=1)
    observation = observe(shot)
    cutout = observation.cutout(40.37, 45.81, 20.0)
    rows, columns = cutout.electrons.shape
    model = (
        40.0
        + 1e6
        * observation.psf.evaluate(
            40.37 - cutout.x0, 45.81 - cutout.y0, columns=columns, rows=rows, order=0
        )[0]
    )
    box = np.s_[int(cutout.y0) :, int(cutout.x0) :]
    wanted = shot.expected[box][:rows, :columns]
    # 1e-5 of the peak is asked of the engine, 1e-6 of the spline; float32 rounds to 6e-8.
    assert_allclose(model, wanted, atol=3e-6 * wanted.max(), rtol=0)


def test_electrons_noise_and_masks():
    shot = frame(
        pair("1.2 arcsec", 40.0, (9e5, 4e5)), overrides=['camera.full_well="40000 electron"']
    )
    observation = observe(shot)
    assert_allclose(observation.variance, 25.0 + 1.4**2 / 12.0)
    corner = observation.electrons()[:20, :20]
    # 400 pixels of 40 electrons and their noise.
    assert_allclose(corner.mean(), 40.0, atol=5.0 * np.sqrt(65.0 / 400.0))
    good = observation.usable()
    assert not good.all()
    assert np.all(observation.electrons()[~good] > 38_000.0)
    assert observation.electrons()[good].max() < 40_000.0


def test_two_far_places_get_a_cutout_each():
    observation = observe(frame(star(1e5)))
    near = observation.cutouts((30.0, 40.0), (36.0, 40.0), 10.0)
    far = observation.cutouts((20.0, 40.0), (70.0, 40.0), 10.0)
    assert len(near) == 1
    assert near[0].electrons.shape == (27, 27)
    assert [cutout.electrons.shape for cutout in far] == [(21, 21), (21, 21)]
    assert (far[1].x0, far[1].y0) == (60.0, 30.0)


def test_finer_detail_asks_for_more_samples():
    wide = observe(frame(star(1e5)))
    sharp = observe(frame(star(1e5), air=False))
    assert wide.psf.oversampling < sharp.psf.oversampling
    scale = sharp.sky.pixel_scale
    assert spline_oversampling(sharp.train.effective, 4.0 * scale) >= 3 * sharp.psf.oversampling
