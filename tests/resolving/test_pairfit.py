"""Pairs fitted blind: every angle, both ways round, to the bound that the light allows."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.resolving.pairfit import fit_pair, pair_geometry
from simimg.resolving.starfit import Cutout, Likelihood, StarFit, finished
from tests.resolving.psfs import expected, exposed, model
from tests.resolving.statistics import Draws


def pair(psf, *, separation, difference, electrons, angle, middle, shift=(0.0, 0.0)):
    """Two stars, the first near the middle; separation in FWHM."""
    x, y = middle + shift[0], middle + shift[1]
    length = separation * psf.fwhm
    second = x + length * np.cos(angle), y + length * np.sin(angle)
    return [(x, y, electrons), (*second, electrons * 10.0 ** (-0.4 * difference))]


def matched(fit: StarFit, stars) -> tuple[int, int]:
    wanted = np.array([star[:2] for star in stars])
    straight = ((fit.places - wanted) ** 2).sum()
    crossed = ((fit.places[::-1] - wanted) ** 2).sum()
    return (0, 1) if straight <= crossed else (1, 0)


@pytest.mark.parametrize("separation", [0.3, 0.6, 1.2, 1.9])
@pytest.mark.parametrize("difference", [0.0, 1.0, -3.0, 6.0])
def test_without_noise_every_pair_is_found_from_a_blind_start(separation, difference):
    if difference == 6.0 and separation < 1.0:
        pytest.skip("six magnitudes under one FWHM leave no more than 1e-5 of the light's shape")
    psf = model("air")
    middle = 16
    for angle in np.radians([10.0, 100.0, 200.0, 330.0]):
        stars = pair(
            psf,
            separation=separation,
            difference=difference,
            electrons=3e6,
            angle=angle,
            middle=middle,
            shift=(0.3, -0.2),
        )
        image = expected(psf, stars, size=33, background=50.0)
        cutout = Cutout.of(image, variance=25.0, psf=psf)
        fit = fit_pair([cutout], place=(16.0, 16.0), radius=2.1 * psf.fwhm)
        assert fit.double is not None
        first, second = matched(fit.double, stars)
        geometry = pair_geometry(fit.double, first=first, second=second)
        errors = np.array(geometry.errors)
        turn = (geometry.angle - angle + np.pi) % (2 * np.pi) - np.pi
        away = [
            geometry.separation - separation * psf.fwhm,
            turn,
            geometry.magnitude_difference - difference,
        ]
        # The search ends with under 1e-5 of deviance to win: far below a tenth of an error.
        assert np.all(np.abs(away) < 0.1 * errors)


def test_errors_of_the_geometry_follow_from_the_covariance():
    """The analytic slopes against a numerical derivative of the geometry itself."""
    rng = np.random.default_rng(8)
    root = rng.standard_normal((7, 7))
    covariance = root @ root.T
    vector = np.array([3.0, 4.0, 900.0, 5.0, 3.5, 400.0, 10.0])

    def fit(values):
        stars = values[:6].reshape(2, 3)
        return StarFit(stars[:, :2], stars[:, 2], values[6:], covariance, 0.0, 100, True)

    def values_of(values):
        geometry = pair_geometry(fit(values))
        return np.array([geometry.separation, geometry.angle, geometry.magnitude_difference])

    slopes = np.empty((3, 7))
    for i in range(7):
        step = np.zeros(7)
        step[i] = 1e-5 * max(1.0, vector[i])
        slopes[:, i] = (values_of(vector + step) - values_of(vector - step)) / (2.0 * step[i])
    # Central differences are right to 1e-8 here.
    assert_allclose(
        pair_geometry(fit(vector)).covariance, slopes @ covariance @ slopes.T, rtol=1e-6, atol=1e-9
    )


def test_a_second_star_is_kept_within_the_radius():
    psf = model("air")
    stars = pair(
        psf, separation=1.5, difference=1.0, electrons=1e5, angle=0.4, middle=16, shift=(0.1, 0.2)
    )
    image = expected(psf, stars, size=33, background=50.0)
    cutout = Cutout.of(image, variance=25.0, psf=psf)
    radius = 1.2 * psf.fwhm
    fit = fit_pair([cutout], place=(16.0, 16.0), radius=radius)
    assert fit.double is not None
    apart = np.hypot(*(fit.double.places[1] - fit.double.places[0]))
    assert_allclose(apart, radius, rtol=1e-6)


def draw_pairs(kind, *, separation, difference, electrons, background, read_noise, count, seed):
    """Fit many noise draws of a pair at all angles and sub-pixel places."""
    psf, rng = model(kind), np.random.default_rng(seed)
    radius = max(2.0, separation + 1.0) * psf.fwhm
    middle = int(np.ceil(radius + 2.0 * psf.fwhm))
    deviations, quoted, bounds = [], [], []
    for _ in range(count):
        angle = rng.uniform(0.0, 2.0 * np.pi)
        stars = pair(
            psf,
            separation=separation,
            difference=difference,
            electrons=electrons,
            angle=angle,
            middle=middle,
            shift=rng.uniform(-0.5, 0.5, 2),
        )
        image = expected(psf, stars, size=2 * middle + 1, background=background)
        cutout = exposed(image, read_noise=read_noise, rng=rng, psf=psf)
        likelihood = Likelihood([cutout], 2)
        vector = np.array([*stars[0], *stars[1], background])
        truth = finished(likelihood, vector, likelihood.expand(vector), converged=True)
        bounds.append(pair_geometry(truth).errors)
        fit = fit_pair([cutout], place=(middle, middle), radius=radius, geometry=False)
        assert fit.double is not None
        first, second = matched(fit.double, stars)
        geometry = pair_geometry(fit.double, first=first, second=second)
        turn = (geometry.angle - angle + np.pi) % (2.0 * np.pi) - np.pi
        deviations.append(
            [
                geometry.separation - separation * psf.fwhm,
                turn,
                geometry.magnitude_difference - difference,
            ]
        )
        quoted.append(geometry.errors)
    bound = np.sqrt((np.array(bounds) ** 2).mean(axis=0))
    # The condition under which the bound can be asked for.
    assert bound[0] < 0.2 * separation * psf.fwhm
    assert bound[2] < 0.15
    return Draws(np.array(deviations), np.array(quoted), bound)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("kind", "separation", "difference", "electrons", "background", "read_noise"),
    [
        # Separations in FWHM: 0.5, 0.8, 1 and 1.5 times Rayleigh's limit.
        ("air", 0.60, 2.0, 3e5, 30.0, 5.0),
        ("coarse", 0.95, 0.0, 1.2e3, 10.0, 4.0),
        ("air", 1.19, 0.0, 2e3, 30.0, 5.0),
        ("space", 1.78, 2.0, 2e3, 0.1, 3.0),
    ],
)
def test_pairs_are_measured_as_well_as_the_light_allows(
    kind, separation, difference, electrons, background, read_noise
):
    draws = draw_pairs(
        kind,
        separation=separation,
        difference=difference,
        electrons=electrons,
        background=background,
        read_noise=read_noise,
        count=1600,
        seed=20260412,
    )
    assert draws.faults() == []


def test_the_judgement_of_draws_can_fail():
    rng = np.random.default_rng(9)
    good = rng.standard_normal((1600, 3))
    ones, bound = np.ones((1600, 3)), np.ones(3)
    assert Draws(good, ones, bound).faults() == []
    assert any("errors" in fault for fault in Draws(good, 0.85 * ones, bound).faults())
    assert any("bound" in fault for fault in Draws(1.15 * good, ones, bound).faults())
    assert any("bias" in fault for fault in Draws(good + 0.4, ones, bound).faults())
