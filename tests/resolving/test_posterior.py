"""The posterior of a pair: Gaussian where it must be, and a random walk's where it is not."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.resolving.pairfit import fit_pair, pair_geometry
from simimg.resolving.posterior import pair_posterior
from simimg.resolving.starfit import Likelihood
from simimg.resolving.verdict import probability_beyond
from tests.resolving.psfs import expected, exposed, model


def fitted(electrons, *, separation=1.2, difference=0.7, seed=4):
    psf, rng = model("coarse"), np.random.default_rng(seed)
    length = separation * psf.fwhm
    stars = [
        (8.1, 7.7, electrons),
        (8.1 + 0.8 * length, 7.7 + 0.6 * length, electrons * 10.0 ** (-0.4 * difference)),
    ]
    image = expected(psf, stars, size=17, background=30.0)
    cutout = exposed(image, read_noise=5.0, rng=rng, psf=psf)
    fit = fit_pair([cutout], place=(8.0, 8.0), radius=2.0 * psf.fwhm)
    return cutout, fit.double


def test_small_errors_give_the_gaussian():
    cutout, double = fitted(3e5)
    geometry = pair_geometry(double)
    posterior = pair_posterior([cutout], double)
    for away in (-1.5, -0.3, 0.0, 0.8, 2.0):

        def limit(difference, away=away):
            bend = 0.2 * (difference - geometry.magnitude_difference)
            return geometry.separation + away * geometry.errors[0] + bend

        plain = probability_beyond(
            limit,
            separation=geometry.separation,
            magnitude_difference=geometry.magnitude_difference,
            covariance=[geometry.covariance[i][::2] for i in (0, 2)],
        )
        # The separation is known to half a per cent: so much of the skewness is left.
        assert_allclose(posterior.beyond(limit), plain, atol=0.01)


def test_either_star_may_be_the_first():
    cutout, double = fitted(2e3)
    one, other = (pair_posterior([cutout], double, first=a, second=1 - a) for a in (0, 1))
    length = pair_geometry(double).separation
    assert_allclose(
        one.beyond(lambda dm: length + 0.3 * dm),
        other.beyond(lambda dm: length - 0.3 * dm),
        atol=1e-6,
    )
    assert (np.diff(one.differences) > 0).all()


def test_limits_without_end_and_of_nothing():
    cutout, double = fitted(2e3)
    posterior = pair_posterior([cutout], double)
    assert posterior.beyond(np.inf) == 0.0
    assert posterior.beyond(lambda dm: np.full(dm.shape, np.nan)) == 0.0
    assert posterior.beyond(0.0) == 1.0


def walked(cutout, double, steps: int, rng: np.random.Generator) -> np.ndarray:
    """Separations of a Metropolis walk over the likelihood, flat priors in polar coordinates."""
    likelihood = Likelihood([cutout], 2)

    def log_density(p):
        # Photocentre, total, separation, angle, fainter share's log ratio, background.
        share = 1.0 / (1.0 + np.exp(-p[5]))
        dx, dy = p[3] * np.cos(p[4]), p[3] * np.sin(p[4])
        first = [p[0] - share * dx, p[1] - share * dy, (1.0 - share) * p[2]]
        second = [p[0] + (1.0 - share) * dx, p[1] + (1.0 - share) * dy, share * p[2]]
        if p[3] <= 0.0 or p[2] <= 0.0:
            return -np.inf
        return -0.5 * likelihood.expand(np.array([*first, *second, p[6]])).deviance

    geometry, total = pair_geometry(double), float(double.electrons.sum())
    centre = double.electrons @ double.places / total
    ratio = np.log(double.electrons[1] / double.electrons[0])
    here = np.array(
        [*centre, total, geometry.separation, geometry.angle, ratio, double.background[0]]
    )
    lengths = np.array([0.05, 0.05, 0.03 * total, *geometry.errors[:2], geometry.errors[2], 0.5])
    log_here, lengths, kept = log_density(here), 0.55 * lengths, []
    for _ in range(steps):
        there = here + lengths * rng.standard_normal(7)
        log_there = log_density(there)
        if np.log(rng.uniform()) < log_there - log_here:
            here, log_here = there, log_there
        kept.append(here[3])
    return np.array(kept[steps // 20 :])


@pytest.mark.slow
def test_random_walks_over_the_likelihood_find_the_same():
    off, plain_off = [], []
    for seed in range(10, 16):
        cutout, double = fitted(450.0, seed=seed)
        geometry = pair_geometry(double)
        assert 0.05 < geometry.errors[0] / geometry.separation < 0.07
        limit = geometry.separation
        walk = walked(cutout, double, 30_000, np.random.default_rng(seed))
        share = float((walk > limit).mean())
        off.append(pair_posterior([cutout], double).beyond(limit) - share)
        plain = probability_beyond(
            limit,
            separation=limit,
            magnitude_difference=geometry.magnitude_difference,
            covariance=[geometry.covariance[i][::2] for i in (0, 2)],
        )
        plain_off.append(plain - share)
    # Of a walk's shares one is good to 0.01.
    assert np.abs(off).max() < 0.04
    assert abs(np.mean(off)) < 0.015
    assert np.mean(plain_off) > 0.02
