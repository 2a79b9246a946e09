"""The PSF model against the same PSF sampled finer, and its derivatives against differences."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.resolving.psfmodel import PsfModel
from tests.resolving.psfs import airy, gaussian, kolmogorov, sampled

CASES = {
    # transfer, oversampling, half width: eight samples to the shortest wave that matters
    "gaussian": (gaussian(3.0), 3, 14),
    "air": (kolmogorov(3.0), 3, 20),
    "wide air": (kolmogorov(7.5), 2, 30),
    "Nyquist": (airy(0.5), 4, 20),
    "undersampled": (airy(2.0), 16, 10),
}


@pytest.mark.parametrize("name", CASES)
def test_between_samples_the_spline_is_right_to_a_millionth_of_the_peak(name):
    transfer, oversampling, half = CASES[name]
    psf = PsfModel.from_image(
        sampled(transfer, oversampling=oversampling, half_width=half), oversampling=oversampling
    )
    fine = sampled(transfer, oversampling=4 * oversampling, half_width=half)
    middle, step = fine.shape[0] // 2, 4 * oversampling
    pixels = np.arange(-half + 1, half)
    for across, up in ((1, 2), (3, 1), (2, 2)):
        shift = 1.0 / step
        value = psf.evaluate(
            half - 1 - across * shift, half - 1 - up * shift, columns=len(pixels), rows=len(pixels)
        )[0]
        wanted = fine[np.ix_(middle + pixels * step + up, middle + pixels * step + across)]
        # What the module promises for this oversampling.
        assert_allclose(value, wanted, atol=1e-6 * fine.max(), rtol=0)


def test_at_the_samples_the_image_comes_back():
    image = sampled(airy(0.5), oversampling=4, half_width=12)
    psf = PsfModel.from_image(image, oversampling=4)
    value = psf.evaluate(12.0, 12.0, columns=25, rows=25, order=0)[0]
    # Only the dropped singular values differ: 3e-8 of the peak.
    assert_allclose(value, image[::4, ::4], atol=1e-7 * image.max(), rtol=0)


@pytest.mark.parametrize("name", CASES)
def test_derivatives_are_those_of_the_value(name):
    transfer, oversampling, half = CASES[name]
    psf = PsfModel.from_image(
        sampled(transfer, oversampling=oversampling, half_width=half), oversampling=oversampling
    )
    x, y, step = 9.31, 8.77, 1e-4
    all_planes = psf.evaluate(x, y, columns=19, rows=17, order=2)

    def difference(plane: int, dx: float, dy: float) -> np.ndarray:
        ahead = psf.evaluate(x + dx, y + dy, columns=19, rows=17, order=1)[plane]
        behind = psf.evaluate(x - dx, y - dy, columns=19, rows=17, order=1)[plane]
        return (ahead - behind) / (2 * step)

    wanted = [
        difference(0, step, 0.0),
        difference(0, 0.0, step),
        difference(1, step, 0.0),
        difference(1, 0.0, step),
        difference(2, 0.0, step),
    ]
    for plane, other in zip(all_planes[1:], wanted):
        # A central difference of this step is right to about 1e-6 of the largest derivative.
        assert_allclose(plane, other, atol=3e-6 * np.abs(plane).max(), rtol=0)


def test_nothing_beyond_the_support_and_all_of_it_inside():
    image = sampled(gaussian(2.0), oversampling=4, half_width=5)
    psf = PsfModel.from_image(image, oversampling=4)
    value = psf.evaluate(-4.0, 20.0, columns=40, rows=40, order=1)
    x, y = np.meshgrid(np.arange(40) + 4.0, np.arange(40) - 20.0)
    outside = (np.abs(x) > 5.0) | (np.abs(y) > 5.0)
    assert np.all(value[:, outside] == 0.0)
    assert np.all(value[0][~outside] > 0.0)
    assert_allclose(psf.evaluate(-50.0, 3.0, columns=8, rows=8), 0.0, atol=0)


def test_light_is_kept_at_any_place():
    psf = PsfModel.from_image(sampled(gaussian(2.5), oversampling=4, half_width=15), oversampling=4)
    for x, y in ((20.0, 20.0), (20.37, 19.81), (19.5, 20.5)):
        total = psf.evaluate(x, y, columns=41, rows=41, order=0).sum()
        assert_allclose(total, 1.0, atol=1e-6)


def test_fwhm_of_a_gaussian_is_that_of_gaussian_and_pixel():
    # A pixel of side 1 adds 1/12 to the variance, and a little kurtosis.
    psf = PsfModel.from_image(sampled(gaussian(6.0), oversampling=2, half_width=24), oversampling=2)
    sigma = np.sqrt((6.0 / 2.354820045) ** 2 + 1.0 / 12.0)
    assert_allclose(psf.fwhm, 2.354820045 * sigma, rtol=1e-4)


def test_arrays_are_read_only_copies():
    image = sampled(gaussian(2.0), oversampling=2, half_width=5)
    psf = PsfModel.from_image(image, oversampling=2)
    before = psf.evaluate(5.2, 5.1, columns=11, rows=11)
    image[:] = 0.0
    assert_allclose(psf.evaluate(5.2, 5.1, columns=11, rows=11), before, atol=0)
    with pytest.raises(ValueError, match="read-only"):
        psf.image[0, 0] = 1.0


@pytest.mark.parametrize(
    ("image", "oversampling", "message"),
    [
        (np.ones((10, 10)), 1, "odd"),
        (np.ones((3, 3)), 1, "odd side of 9"),
        (np.ones((7, 9)), 1, "square"),
        (np.full((9, 9), np.nan), 1, "finite"),
        (np.zeros((9, 9)), 1, "positive peak"),
        (np.ones((9, 9)), 0, "oversampling"),
        (np.ones((9, 9)), 1.5, "oversampling"),
    ],
)
def test_images_that_are_no_psf_are_refused(image, oversampling, message):
    with pytest.raises(ValueError, match=message):
        PsfModel.from_image(image, oversampling=oversampling)
