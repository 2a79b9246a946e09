"""Limits of a PSF known as an image: closed forms, and the same PSF's transfer function."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.resolving.criteria import fwhm, rayleigh_saddle, sparrow
from simimg.resolving.imagecut import ImageDirections
from simimg.resolving.observation import observe
from simimg.resolving.pairlimits import PairLimits
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.stackedcut import StackedDirections
from tests.resolving import scenes

SCALE = 2e-6  # radians to the pixel


def gaussian(wide, narrow=None, *, angle=0.0, oversampling=4, half=20, centre=(0.0, 0.0)):
    """An elliptical Gaussian as a model: FWHM in pixels along `angle` and across it."""
    axis = np.arange(-half * oversampling, half * oversampling + 1) / oversampling
    x, y = axis[None, :] - centre[0], axis[:, None] - centre[1]
    c, s = np.cos(angle), np.sin(angle)
    along, across = c * x + s * y, c * y - s * x
    power = (along / wide) ** 2 + (across / (narrow or wide)) ** 2
    return PsfModel.from_image(np.exp(-4.0 * np.log(2.0) * power), oversampling=oversampling)


@pytest.mark.parametrize("oversampling", [1, 2, 5])
def test_a_gaussian_of_any_sampling(oversampling):
    psf = gaussian(3.5, oversampling=oversampling)
    cut = ImageDirections(psf, pixel_scale=SCALE)
    assert cut.even
    profile = cut.profile(0.4)
    # What a quintic spline makes of 3.5 samples to the FWHM: 1e-3.
    rtol = 2e-3 if oversampling == 1 else 1e-5
    assert_allclose(fwhm(profile), 3.5 * SCALE, rtol=rtol)
    # Two standard deviations.
    assert_allclose(sparrow(profile, 0.0), 0.849322 * 3.5 * SCALE, rtol=3 * rtol)
    assert_allclose(rayleigh_saddle(profile), 1.1888 * 3.5 * SCALE, rtol=max(rtol, 1e-4))
    # Unequal stars of a Gaussian are resolved where its closed form says so: 1 magnitude at 1.157.
    assert sparrow(profile, 1.0) > 1.1 * sparrow(profile, 0.0)


def test_every_direction_has_its_own():
    psf = gaussian(5.0, 3.0, angle=0.5)
    cut = ImageDirections(psf, pixel_scale=SCALE)
    for direction in (0.5, 0.5 + np.pi / 2, 1.1, -2.0):
        turned = direction - 0.5
        wanted = 1.0 / np.hypot(np.cos(turned) / 5.0, np.sin(turned) / 3.0)
        assert_allclose(fwhm(cut.profile(direction)), wanted * SCALE, rtol=1e-5)


def test_the_cut_goes_through_the_peak():
    cut = ImageDirections(gaussian(3.0, centre=(0.37, -0.21)), pixel_scale=SCALE)
    assert not cut.even
    assert_allclose(fwhm(cut.profile(2.0)), 3.0 * SCALE, rtol=1e-5)


def test_a_lopsided_psf_has_two_sides():
    axis = np.arange(-80, 81) / 4.0
    x, y = axis[None, :], axis[:, None]
    bright = np.exp(-(x**2 + y**2) / 4.0) + 0.05 * np.exp(-((x - 5.0) ** 2 + y**2) / 4.0)
    cut = ImageDirections(PsfModel.from_image(bright, oversampling=4), pixel_scale=SCALE)
    ahead, behind = (sparrow(cut.profile(angle), 3.0) for angle in (0.0, np.pi))
    assert abs(ahead / behind - 1.0) > 0.05
    # Seen from the fainter star the brighter lies on the other side.
    assert_allclose(sparrow(cut.profile(0.0), -3.0), behind, rtol=1e-4)


def test_it_agrees_with_the_transfer_function():
    """The same effective PSF, in air, cut from its transfer function and from its samples."""
    seen = observe(scenes.frame(""))
    exact = PairLimits(seen.delivered)
    sampled = PairLimits(ImageDirections(seen.psf, pixel_scale=seen.sky.pixel_scale))
    for angle, difference in ((0.0, 0.0), (0.7, 1.0), (1.3, -3.0)):
        one, other = (limits.of(angle, difference, 0.2) for limits in (exact, sampled))
        # The image is cut off at 12 FWHM and interpolated to 1e-6 of the peak.
        assert_allclose(other.rayleigh, one.rayleigh, rtol=1e-5)
        assert_allclose(other.sparrow, one.sparrow, rtol=1e-4)


def test_a_stack_has_the_mean_psf():
    narrow, wide = (gaussian(w) for w in (3.0, 4.5))
    cuts = [ImageDirections(psf, pixel_scale=SCALE) for psf in (narrow, wide)]
    one = StackedDirections(cuts, weights=[1.0, 0.0], turns=[np.eye(2)] * 2)
    assert_allclose(fwhm(one.profile(0.3)), 3.0 * SCALE, rtol=1e-5)
    both = StackedDirections(cuts, weights=[2.0, 3.0], turns=[np.eye(2)] * 2)
    image = 2.0 * narrow.image + 3.0 * wide.image
    mean = ImageDirections(PsfModel.from_image(image, oversampling=4), pixel_scale=SCALE)
    for limit in (fwhm, rayleigh_saddle):
        assert_allclose(limit(both.profile(0.3)), limit(mean.profile(0.3)), rtol=1e-4)
    # Directions are those of the first frame; the second is turned by a quarter.
    long = ImageDirections(gaussian(5.0, 3.0), pixel_scale=SCALE)
    quarter = np.array([[0.0, -1.0], [1.0, 0.0]])
    same = StackedDirections([long, long], weights=[1.0, 1.0], turns=[np.eye(2), quarter])
    assert_allclose(fwhm(same.profile(0.0)), fwhm(same.profile(np.pi / 2)), rtol=1e-6)
