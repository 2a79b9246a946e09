"""Profiles fitted to stars, against astropy's own models and the closed form of the width."""

from __future__ import annotations

import numpy as np
import pytest
from astropy.modeling.models import Moffat2D
from numpy.testing import assert_allclose

from simimg.resolving.empirical import measured_profile, measured_stars
from simimg.resolving.moffat import Moffat, Stamp, fit_moffat, like_the_others
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.starfit import Cutout, Likelihood, fit_stars
from tests.resolving.psfs import model

SKY, READ_NOISE = 50.0, 4.0


def stamps(draw, count, *, light=2e5, half=15, seed=2, noise=True):
    """Stamps of stars drawn by ``draw(x, y, side)`` at sub-pixel places."""
    rng = np.random.default_rng(seed)
    made = []
    for _ in range(count):
        x, y = half + rng.uniform(-0.5, 0.5, 2)
        image = SKY + light * draw(x, y, 2 * half + 1)
        data = rng.poisson(image) + READ_NOISE * rng.standard_normal(image.shape)
        made.append(Stamp(data if noise else image, np.ones(image.shape), half, half))
    return made


def of_astropy(fwhm, power):
    gamma = 0.5 * fwhm / np.sqrt(2.0 ** (1.0 / power) - 1.0)

    def draw(x, y, side):
        profile = Moffat2D((power - 1) / (np.pi * gamma**2), x, y, gamma, power)
        return profile(*np.indices((side, side))[::-1])

    return draw


@pytest.mark.parametrize(("fwhm", "power"), [(3.0, 2.5), (2.2, 4.0), (6.0, 3.0)])
def test_a_round_profile_comes_back(fwhm, power):
    made = stamps(of_astropy(fwhm, power), 5, half=int(5 * fwhm))
    fit = fit_moffat(made, width=1.15 * fwhm, variance=READ_NOISE**2)
    # A million electrons in all: the width to 0.3 %, the power to 4 %.
    image = fit.profile.sampled(oversampling=5, half_width=20)
    assert_allclose(PsfModel.from_image(image, oversampling=5).fwhm, fwhm, rtol=3e-3)
    assert_allclose(fit.profile.power, power, rtol=0.04)
    # Wide profiles look much the same either way.
    assert not fit.profile.averaged or fwhm > 4.0
    assert_allclose(np.hypot(fit.profile.stretch, fit.profile.skew), 0.0, atol=0.01)
    assert_allclose(fit.electrons, 2e5, rtol=0.02)
    assert_allclose(fit.chi_square, 1.0, atol=0.2)


def test_an_ellipse_seen_by_square_pixels():
    """The mean over each pixel of a long profile at an angle, by a fine sum."""
    truth = Moffat(np.log(2.0), 0.25, -0.3, 3.0, False)
    fine = (np.arange(11) - 5) / 11

    def draw(x, y, side):
        axis = np.arange(side)
        across = (axis[:, None] + fine).ravel() - x
        along = (axis[:, None] + fine).ravel() - y
        light = truth.light(across[None, :], along[:, None])[0]
        return light.reshape(side, 11, side, 11).mean(axis=(1, 3))

    fit = fit_moffat(stamps(draw, 6), width=3.0, variance=READ_NOISE**2)
    assert fit.profile.averaged
    got = [fit.profile.stretch, fit.profile.skew, fit.profile.log_radius, fit.profile.power]
    assert_allclose(got, [0.25, -0.3, np.log(2.0), 3.0], atol=0.04)
    # The closed form: the width along an eigenvector of Q is 2 sqrt((2^(1/b) - 1) / eigenvalue).
    values, vectors = np.linalg.eigh(truth.quadratic)
    for value, vector in zip(values, vectors.T):
        half = np.sqrt((2.0 ** (1.0 / 3.0) - 1.0) / value)
        ends = truth.light(half * vector[0], half * vector[1])[0]
        assert_allclose(ends, 0.5 * truth.light(0.0, 0.0)[0])


def test_the_light_is_one_and_its_slopes_are_slopes():
    profile = Moffat(0.7, 0.2, 0.1, 3.5, True)
    axis = np.arange(-200, 201)
    value, _, _ = profile.light(axis[None, :] - 0.3, axis[:, None] + 0.2)
    # Beyond 200 pixels is (200 / 2)^-5 of it.
    assert_allclose(value.sum(), 1.0, atol=1e-4)
    step = 1e-4
    ahead = profile.light(np.array([1.3 + step, 1.3]), np.array([0.4, 0.4 + step]))[0]
    behind = profile.light(np.array([1.3 - step, 1.3]), np.array([0.4, 0.4 - step]))[0]
    _, at_x, at_y = profile.light(np.array([1.3]), np.array([0.4]))
    assert_allclose((ahead - behind) / (2 * step), [at_x[0], at_y[0]], rtol=1e-6)


def test_blends_and_galaxies_are_left_out():
    draw = of_astropy(3.0, 3.0)
    good = stamps(draw, 7)
    double = stamps(lambda x, y, n: 0.6 * draw(x, y, n) + 0.4 * draw(x + 1.8, y, n), 2, seed=8)
    wide = stamps(of_astropy(4.5, 3.0), 1, seed=9)
    fit = fit_moffat([*good, *double, *wide], width=3.2, variance=READ_NOISE**2)
    assert like_the_others(fit).tolist() == [True] * 7 + [False] * 3
    # They count for little before they are left out, too.
    assert_allclose(fit.profile.fwhm, 3.0, rtol=0.02)


def misfit(measured, draw, *, light=2e5, half=15):
    """Deviance that a measured PSF leaves in noiseless stars of its own, and their S/N squared."""
    psf = PsfModel.from_image(measured.image, oversampling=measured.oversampling)
    left, power = [], []
    rng = np.random.default_rng(77)
    for _ in range(6):
        x, y = half + rng.uniform(-0.5, 0.5, 2)
        share = draw(x, y, 2 * half + 1)
        image = SKY + light * share
        cutout = Cutout.of(image, variance=READ_NOISE**2, psf=psf, tilted=True)
        fit = fit_stars([cutout], places=[(x, y)])
        model_image = Likelihood([cutout], 1).jacobian(fit.own(0), 0)[0].reshape(image.shape)
        variance = image + READ_NOISE**2
        left.append(((image - model_image) ** 2 / variance).sum())
        power.append(((light * share) ** 2 / variance).sum())
    return float(np.mean(left)), float(np.mean(power))


@pytest.mark.parametrize("kind", ["air", "coarse"])
def test_an_empirical_psf_is_as_good_as_its_stars(kind):
    """What it leaves in other stars is what its own noise foretells, and falls with their number.

    A Moffat profile's misfit stays, where it is not the truth.
    """
    psf = model(kind)

    def draw(x, y, side):
        return psf.evaluate(x, y, columns=side, rows=side, order=0)[0]

    left = {}
    for count in (2, 10):
        made = stamps(draw, count, half=14, seed=count)
        for measure in (measured_stars, measured_profile):
            measured = measure(made, width=psf.fwhm, variance=READ_NOISE**2, half_width=25)
            left[measure, count], power = misfit(measured, draw)
            if measure is measured_stars:
                # The expectation of the noise is known; one draw, and a little misfit besides.
                assert 0.4 < left[measure, count] / (measured.noise * power) < 2.0
    assert left[measured_stars, 10] < 0.8 * left[measured_stars, 2]
    if kind == "air":
        # Turbulence has other wings than a Moffat profile, however many stars there are.
        assert left[measured_stars, 10] < 0.8 * left[measured_profile, 10]
        assert_allclose(left[measured_profile, 10], left[measured_profile, 2], rtol=0.5)
    else:
        # A Gaussian seen by pixels is the profile of a large power: four parameters, all of it.
        assert left[measured_profile, 10] < 10.0


def test_missing_pixels_of_a_star_do_not_count():
    draw = of_astropy(3.0, 3.0)
    made = stamps(draw, 4)
    rng = np.random.default_rng(4)
    spoilt = []
    for stamp in made:
        used = rng.random(stamp.used.shape) > 0.1
        spoilt.append(
            Stamp(np.where(used, stamp.electrons, 6e4), used.astype(float), stamp.x, stamp.y)
        )
    fit = fit_moffat(spoilt, width=3.3, variance=READ_NOISE**2)
    assert_allclose(fit.profile.fwhm, 3.0, rtol=0.01)
    measured = measured_stars(spoilt, width=3.3, variance=READ_NOISE**2, half_width=20)
    assert_allclose(
        PsfModel.from_image(measured.image, oversampling=measured.oversampling).fwhm, 3.0, rtol=0.02
    )
