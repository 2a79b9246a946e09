"""The saddle in the pixels: its height, and an error that is its scatter."""

from __future__ import annotations

import numpy as np
from numpy.testing import assert_allclose

from simimg.resolving.pairfit import fit_pair
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.saddle import saddle_seen
from simimg.resolving.starfit import Cutout, StarFit
from tests.resolving.psfs import expected, exposed, gaussian, sampled

PSF = PsfModel.from_image(sampled(gaussian(5.0), oversampling=2, half_width=40), oversampling=2)


def two(separation, ratio=1.0, angle=0.5, light=20_000.0, middle=25.0):
    step = 0.5 * separation * PSF.fwhm * np.array([np.cos(angle), np.sin(angle)])
    x, y = middle + 0.3, middle - 0.2
    return [
        (x - step[0], y - step[1], light),
        (x + step[0], y + step[1], ratio * light),
    ]


def fit_of(stars, background=50.0):
    stars = np.array(stars)
    return StarFit(stars[:, :2], stars[:, 2], np.array([background]), np.eye(7), 0.0, 51 * 51, True)


def test_an_equal_gaussian_pair_at_rayleighs_separation():
    stars = two(1.19)
    cutout = Cutout.of(expected(PSF, stars, size=51, background=50.0), variance=9.0, psf=PSF)
    ratio, error = saddle_seen(cutout, fit_of(stars))
    # 0.735 by the closed form; cubic convolution at five pixels to the FWHM is good to a per cent.
    assert_allclose(ratio, 0.735, atol=0.01)
    assert 0.0 < error < 0.1


def test_the_ratio_refers_to_the_lower_peak_and_not_to_which_star_is_first():
    stars = two(2.0, ratio=0.3)
    cutout = Cutout.of(expected(PSF, stars, size=51, background=50.0), variance=9.0, psf=PSF)
    forward = saddle_seen(cutout, fit_of(stars))
    backward = saddle_seen(cutout, fit_of(stars[::-1]))
    assert_allclose(forward, backward, rtol=1e-2)
    # Halfway between, a Gaussian of variance s^2 two FWHM off gives exp(-4 ln 2) of each peak.
    assert 0.10 < forward[0] < 0.30


def test_without_a_saddle_the_ratio_is_one():
    stars = two(0.6)
    cutout = Cutout.of(expected(PSF, stars, size=51, background=50.0), variance=9.0, psf=PSF)
    ratio, error = saddle_seen(cutout, fit_of(stars))
    assert ratio == 1.0
    assert error > 0.0


def test_what_cannot_be_read_is_not_a_number():
    stars = two(1.5)
    image = expected(PSF, stars, size=51, background=50.0)
    used = np.ones(image.shape, dtype=bool)
    used[25, 25] = False
    cutout = Cutout.of(image, variance=9.0, psf=PSF, used=used)
    assert np.isnan(saddle_seen(cutout, fit_of(stars))).all()
    edge = two(1.5, middle=1.0)
    cutout = Cutout.of(image, variance=9.0, psf=PSF)
    assert np.isnan(saddle_seen(cutout, fit_of(edge))).all()


def test_the_error_is_the_scatter():
    stars, rng = two(1.3), np.random.default_rng(20260412)
    image = expected(PSF, stars, size=51, background=50.0)
    truth = saddle_seen(Cutout.of(image, variance=25.0, psf=PSF), fit_of(stars))[0]
    ratios, errors = [], []
    for _ in range(300):
        cutout = exposed(image, read_noise=5.0, rng=rng, psf=PSF)
        fit = fit_pair([cutout], place=(25.0, 25.0), radius=2.0 * PSF.fwhm, geometry=False)
        ratio, error = saddle_seen(cutout, fit.double)
        ratios.append(ratio)
        errors.append(error)
    # 300 draws give the scatter to 4 %, the mean to 0.06 of it; allow three times that.
    assert_allclose(np.median(errors) / np.std(ratios), 1.0, atol=0.15)
    assert abs(np.mean(ratios) - truth) < 0.25 * np.std(ratios)
