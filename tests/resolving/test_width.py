"""Wider than the PSF or not: widths recovered, points called points at the nominal rate."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import ndimage, stats

from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.starfit import Cutout, fit_stars
from simimg.resolving.width import fit_width

FWHM = 3.0
SIDE = 21
MIDDLE = 10.0


def gaussian_psf(fwhm=FWHM, oversampling=8, half=20):
    """A Gaussian PSF, whose convolution with a Gaussian is known in closed form."""
    t = np.arange(-half * oversampling, half * oversampling + 1) / oversampling
    sigma = fwhm / np.sqrt(8.0 * np.log(2.0))
    line = np.exp(-0.5 * (t / sigma) ** 2) / np.sqrt(2.0 * np.pi) / sigma
    return PsfModel.from_image(np.outer(line, line), oversampling=oversampling)


def wide_gaussian(variance, x, y, side=SIDE, fwhm=FWHM):
    total = fwhm**2 / (8.0 * np.log(2.0)) + variance
    grid = np.arange(side)
    squared = (grid - x) ** 2 + (grid[:, None] - y) ** 2
    return np.exp(-0.5 * squared / total) / (2.0 * np.pi * total)


@pytest.fixture(scope="module")
def psf():
    return gaussian_psf()


def fitted(psf, expected, rng, *, background=20.0, noise=3.0, at=(MIDDLE, MIDDLE)):
    """The width that a noise draw of an expectation shows."""
    drawn = rng.poisson(expected + background) + rng.normal(0.0, noise, expected.shape)
    cutout = Cutout.of(drawn, variance=noise**2, psf=psf)
    return fit_width(cutout, fit_stars([cutout], places=[at]))


@pytest.mark.parametrize("sigma", [0.1, 0.5, 0.85, 0.95, 2.0, 5.0])
def test_a_blurred_psf_is_the_convolution(psf, sigma):
    planes = psf.blurred(10.3, 9.6, columns=SIDE, rows=SIDE, variance=sigma**2)
    expected = wide_gaussian(sigma**2, 10.3, 9.6)
    # The spline is good to 1e-6 of the peak; the nodes are to be no worse.
    assert_allclose(planes[0], expected, atol=2e-6 * wide_gaussian(0.0, 10.0, 10.0).max())
    step = 1e-3
    for plane, (dx, dy) in zip(planes[1:3], ((step, 0.0), (0.0, step))):
        ahead = wide_gaussian(sigma**2, 10.3 + dx, 9.6 + dy)
        behind = wide_gaussian(sigma**2, 10.3 - dx, 9.6 - dy)
        assert_allclose(plane, (ahead - behind) / (2.0 * step), atol=2e-5 * expected.max())
    ahead = wide_gaussian(sigma**2 + step, 10.3, 9.6)
    behind = wide_gaussian(sigma**2 - step, 10.3, 9.6)
    slope = (ahead - behind) / (2.0 * step)
    assert_allclose(0.5 * (planes[3] + planes[5]), slope, atol=1e-4 * expected.max())


def test_below_zero_the_model_goes_on_smoothly(psf):
    shapes = [
        psf.blurred(10.0, 10.0, columns=SIDE, rows=SIDE, variance=w)[0] for w in (-1e-3, 0.0, 1e-3)
    ]
    assert_allclose(shapes[1] - shapes[0], shapes[2] - shapes[1], atol=2e-6 * shapes[1].max())


@pytest.mark.parametrize("electrons", [1500.0, 60000.0])
def test_points_are_called_points_at_the_nominal_rate(psf, electrons):
    rng = np.random.default_rng(3)
    draws = 800
    fits = []
    for _ in range(draws):
        x, y = MIDDLE + rng.uniform(-0.5, 0.5, 2)
        fits.append(fitted(psf, electrons * wide_gaussian(0.0, x, y), rng))
    false = sum(fit.extended for fit in fits)
    # One in ten thousand test runs of other seeds would fall outside.
    low, high = stats.binom.ppf([5e-5, 1.0 - 5e-5], draws, 0.01)
    assert low <= false <= high
    scores = np.array([fit.significance for fit in fits])
    assert_allclose(np.mean(scores > stats.norm.isf(0.1)), 0.1, atol=4.0 * np.sqrt(0.09 / draws))
    assert_allclose(scores.std(), 1.0, atol=4.0 / np.sqrt(2.0 * draws))


@pytest.mark.parametrize(("sigma", "electrons"), [(0.5, 60000.0), (1.2, 15000.0), (3.0, 60000.0)])
def test_the_width_is_recovered_within_its_errors(psf, sigma, electrons):
    rng = np.random.default_rng(7)
    side = 41 if sigma > 2.0 else SIDE
    middle = (side - 1) / 2.0
    expected = electrons * wide_gaussian(sigma**2, middle + 0.2, middle - 0.3, side)
    fits = [fitted(psf, expected, rng, at=(middle, middle)) for _ in range(100)]
    pulls = np.array([(fit.width - sigma) / fit.width_error for fit in fits])
    # A hundred draws: the mean to 0.1, the scatter to 0.07; four of these.
    assert abs(pulls.mean()) < 0.4
    assert_allclose(pulls.std(), 1.0, atol=0.28)
    light = np.array([(fit.electrons - electrons) / fit.electrons_error for fit in fits])
    assert abs(light.mean()) < 0.4
    assert_allclose(light.std(), 1.0, atol=0.28)
    assert all(fit.extended for fit in fits)


def test_a_small_disc_shows_a_quarter_of_its_diameter(psf):
    fine = 8
    side = SIDE * fine
    grid = (np.arange(side) + 0.5) / fine - 0.5
    radius = 0.25 * FWHM
    disc = np.hypot(grid - MIDDLE, grid[:, None] - MIDDLE) <= radius
    sigma = FWHM / np.sqrt(8.0 * np.log(2.0)) * fine
    blurred = ndimage.gaussian_filter(disc.astype(float), sigma, truncate=8.0)
    # The PSF of the model is a function of the pixel's centre: average over the fine samples there.
    at = fine // 2
    samples = 0.25 * sum(
        blurred[at - i :: fine, at - j :: fine][:SIDE, :SIDE] for i in (0, 1) for j in (0, 1)
    )
    fit = fitted(psf, 2e5 * samples / samples.sum(), np.random.default_rng(1))
    assert fit.extended
    # The averaging over an eighth of a pixel adds 1/256 to a variance of 0.14.
    assert_allclose(fit.width, 2.0 * radius / 4.0, atol=4.0 * fit.width_error + 0.006)


def test_a_close_neighbour_is_no_width(psf):
    rng = np.random.default_rng(2)
    expected = 3e4 * wide_gaussian(0.0, 8.0, 10.0) + 2e4 * wide_gaussian(0.0, 12.5, 10.2)
    drawn = rng.poisson(expected + 20.0) + rng.normal(0.0, 3.0, expected.shape)
    cutout = Cutout.of(drawn, variance=9.0, psf=psf)
    fit = fit_width(cutout, fit_stars([cutout], places=[(8.0, 10.0), (12.5, 10.2)]))
    assert not fit.extended
    assert_allclose(fit.electrons, 3e4, atol=4.0 * fit.electrons_error)
