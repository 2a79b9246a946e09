"""Single stars and backgrounds: truth recovered, masks heeded, exposures stacked."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.resolving.starfit import Cutout, Likelihood, covariance_of, fit_stars
from tests.resolving.psfs import expected, exposed, model
from tests.resolving.statistics import Draws

TRUTH = (12.3, 11.8, 20_000.0)


@pytest.mark.parametrize("kind", ["air", "space", "coarse"])
def test_without_noise_the_truth_comes_back_from_a_start_a_fwhm_off(kind):
    psf = model(kind)
    image = expected(psf, [TRUTH], size=25, background=40.0)
    cutout = Cutout.of(image, variance=25.0, psf=psf, x0=100.0, y0=200.0)
    fit = fit_stars([cutout], places=[[112.3 + 0.7 * psf.fwhm, 211.8 - 0.7 * psf.fwhm]])
    assert fit.converged
    # A datum at its expectation is not the likeliest where the variance grows with it: the most
    # probable background is lower by about variance / (2 total), a hundredth of an error here.
    error = np.sqrt(np.diag(fit.covariance))
    away = np.abs(fit.vector - [112.3, 211.8, 20_000.0, 40.0]) / error
    assert np.all(away[:3] < 0.05)
    assert abs(fit.background[0] - 40.0) < 0.25


def test_the_slope_and_information_are_derivatives_of_the_deviance():
    psf = model("air")
    rng = np.random.default_rng(3)
    cutout = exposed(
        expected(psf, [TRUTH, (14.0, 13.0, 5e3)], size=25, background=9.0),
        read_noise=4.0,
        rng=rng,
        psf=psf,
    )
    likelihood = Likelihood([cutout], 2)
    vector = np.array([12.2, 11.9, 19_500.0, 14.1, 13.2, 5_500.0, 10.0])
    slope = likelihood.expand(vector).slope
    for i, step in enumerate([1e-4, 1e-4, 1.0, 1e-4, 1e-4, 1.0, 1e-3]):
        move = np.zeros(7)
        move[i] = step
        ahead, behind = (likelihood.expand(vector + s * move).deviance for s in (1.0, -1.0))
        # Second differences of this step are below 1e-4 of the slope.
        assert_allclose((ahead - behind) / (4.0 * step), slope[i], rtol=2e-3, atol=1e-6)


def test_pixels_that_do_not_count_change_nothing():
    psf = model("air")
    rng = np.random.default_rng(4)
    image = expected(psf, [TRUTH], size=25, background=40.0)
    data = rng.poisson(image) + 5.0 * rng.standard_normal(image.shape)
    used = np.ones(data.shape, dtype=bool)
    used[11:13, 12] = False
    spoilt = data.copy()
    spoilt[11:13, 12] = (65_535.0, np.nan)
    spoilt[3, 4] = np.nan
    data[3, 4] = np.nan
    fits = [
        fit_stars([Cutout.of(values, variance=25.0, psf=psf, used=used)], places=[TRUTH[:2]])
        for values in (data, spoilt)
    ]
    assert fits[0].pixels == 25 * 25 - 3
    assert_allclose(fits[0].vector, fits[1].vector, rtol=1e-12)
    # Five errors at most: the core is gone, the truth is not.
    error = np.sqrt(np.diag(fits[1].covariance))[:3]
    assert np.all(np.abs(fits[1].vector[:3] - TRUTH) < 5.0 * error)


def test_two_exposures_together_know_twice_as_much():
    psf = model("air")
    rng = np.random.default_rng(5)
    image = expected(psf, [TRUTH], size=25, background=40.0)
    first, second = (exposed(image, read_noise=5.0, rng=rng, psf=psf) for _ in range(2))
    alone = fit_stars([first], places=[TRUTH[:2]])
    both = fit_stars([first, second], places=[TRUTH[:2]])
    assert both.background.shape == (2,)
    ratio = np.diag(both.covariance)[:3] / np.diag(alone.covariance)[:3]
    # Exactly a half at the same expectation; the two fits differ by about an error of 0.7 %.
    assert_allclose(ratio, 0.5, rtol=0.03)


def test_known_light_is_not_fitted():
    psf = model("air")
    other = expected(psf, [(16.0, 12.0, 30_000.0)], size=25, background=0.0)
    image = expected(psf, [TRUTH], size=25, background=40.0) + other
    cutout = Cutout.of(image, variance=25.0, psf=psf, known=other)
    fit = fit_stars([cutout], places=[(12.0, 12.0)])
    # As above: a twentieth of an error.
    error = np.sqrt(np.diag(fit.covariance))[:3]
    assert np.all(np.abs(fit.vector[:3] - TRUTH) < 0.05 * error)
    blind = fit_stars([cutout.with_known(np.zeros_like(other))], places=[(12.0, 12.0)])
    assert abs(blind.electrons[0] / TRUTH[2] - 1.0) > 0.2


@pytest.mark.slow
@pytest.mark.parametrize("read_noise", [0.0, 6.0])
def test_faint_stars_are_unbiased_at_the_bound(read_noise):
    psf, rng = model("space"), np.random.default_rng(6)
    truth, size, background = (9.3, 8.8, 300.0), 19, 0.2
    image = expected(psf, [truth], size=size, background=background)
    bound = covariance_of(
        Likelihood([Cutout.of(image, variance=read_noise**2, psf=psf)], 1)
        .expand(np.array([*truth, background]))
        .information
    )
    deviations, quoted = [], []
    for _ in range(1600):
        cutout = exposed(image, read_noise=read_noise, rng=rng, psf=psf)
        fit = fit_stars([cutout], places=[(9.0, 9.0)])
        deviations.append(fit.vector[:3] - truth)
        quoted.append(np.sqrt(np.diag(fit.covariance))[:3])
    draws = Draws(np.array(deviations), np.array(quoted), np.sqrt(np.diag(bound))[:3])
    assert draws.faults() == []


def test_a_singular_information_gives_no_errors():
    assert np.all(np.isinf(covariance_of(np.array([[1.0, 1.0], [1.0, 1.0]]))))
    assert np.all(np.isinf(covariance_of(np.zeros((2, 2)))))


def test_a_cutout_refuses_nonsense():
    psf = model("air")
    with pytest.raises(ValueError, match="variance"):
        Cutout.of(np.zeros((5, 5)), variance=-1.0, psf=psf)
    with pytest.raises(ValueError, match="shape"):
        Cutout.of(np.zeros((5, 5)), variance=1.0, psf=psf, known=np.zeros((5, 6)))
