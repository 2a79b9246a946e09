"""Pairs fitted blind: every angle, both ways round, to the bound that the light allows."""

from __future__ import annotations

import os
from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

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


@cache
def rayleigh(kind: str) -> float:
    """Separation (pixels) at which an equal pair's saddle is 0.735 of its peaks."""
    psf = model(kind)
    t = np.linspace(-psf.fwhm, psf.fwhm, 801)

    def excess(length: float) -> float:
        return 2.0 * float(psf.value(0.5 * length, 0.0)) - 0.735 * float(
            (psf.value(t - 0.5 * length, 0.0) + psf.value(t + 0.5 * length, 0.0)).max()
        )

    return float(brentq(excess, 0.8 * psf.fwhm, 1.8 * psf.fwhm))


def bounds_of(cutout, stars, background):
    """Bounds on separation, angle and magnitude difference."""
    likelihood = Likelihood([cutout], 2)
    vector = np.array([*stars[0], *stars[1], background])
    return pair_geometry(
        finished(likelihood, vector, likelihood.expand(vector), converged=True)
    ).errors


@dataclass(frozen=True)
class Case:
    """Pairs of one kind: separation in Rayleigh's limits, magnitude difference."""

    kind: str
    separation: float
    difference: float

    def __str__(self) -> str:
        return f"{self.kind} {self.separation} {self.difference}"

    @property
    def noise(self) -> tuple[float, float]:
        """Background (electrons a pixel) and read noise."""
        return (0.1, 3.0) if "space" in self.kind else (30.0, 5.0)

    def field(self) -> tuple[int, float, float]:
        """Middle pixel, search radius (pixels), separation (FWHM)."""
        psf = model(self.kind)
        apart = self.separation * rayleigh(self.kind) / psf.fwhm
        radius = max(2.0, apart + 1.0) * psf.fwhm
        return int(np.ceil(radius + 2.0 * psf.fwhm)), radius, apart

    def draw(self, electrons: float, rng: np.random.Generator):
        """Stars at a random angle and sub-pixel place, and their expected image."""
        middle, _, apart = self.field()
        angle = rng.uniform(0.0, 2.0 * np.pi)
        stars = pair(
            model(self.kind),
            separation=apart,
            difference=self.difference,
            electrons=electrons,
            angle=angle,
            middle=middle,
            shift=rng.uniform(-0.5, 0.5, 2),
        )
        size = 2 * middle + 1
        image = expected(model(self.kind), stars, size=size, background=self.noise[0])
        return stars, angle, image

    def brink(self) -> float:
        """Electrons of the first star with which the bound can just be asked for."""
        psf, (background, read_noise) = model(self.kind), self.noise
        length = self.separation * rayleigh(self.kind)
        electrons = 1e4
        for _ in range(6):
            rng, bounds = np.random.default_rng(1), []
            for _ in range(16):
                stars, _, image = self.draw(electrons, rng)
                cutout = Cutout.of(image, variance=read_noise**2, psf=psf)
                bounds.append(bounds_of(cutout, stars, background))
            bound = np.sqrt((np.array(bounds) ** 2).mean(axis=0))
            electrons *= max(bound[0] / (0.2 * length), bound[2] / 0.15) / BRINK
        return electrons


BRINK = 0.9
"""Share of a fifth of the separation, or of 0.15 mag, that the larger of the bounds comes to."""


def draw_pairs(case: Case, *, electrons: float, count: int, seed: int) -> Draws:
    """Fit many noise draws of a pair at all angles and sub-pixel places."""
    psf, rng = model(case.kind), np.random.default_rng(seed)
    background, read_noise = case.noise
    middle, radius, _ = case.field()
    length = case.separation * rayleigh(case.kind)
    deviations, quoted, bounds = [], [], []
    for _ in range(count):
        stars, angle, image = case.draw(electrons, rng)
        cutout = exposed(image, read_noise=read_noise, rng=rng, psf=psf)
        bounds.append(bounds_of(cutout, stars, background))
        fit = fit_pair([cutout], place=(middle, middle), radius=radius, geometry=False)
        assert fit.double is not None
        first, second = matched(fit.double, stars)
        geometry = pair_geometry(fit.double, first=first, second=second)
        turn = (geometry.angle - angle + np.pi) % (2.0 * np.pi) - np.pi
        off = geometry.separation - length
        deviations.append([off, turn, geometry.magnitude_difference - case.difference])
        quoted.append(geometry.errors)
    bound = np.sqrt((np.array(bounds) ** 2).mean(axis=0))
    # The condition under which the bound can be asked for.
    assert bound[0] < 0.2 * length
    assert bound[2] < 0.15
    return Draws(np.array(deviations), np.array(quoted), bound)


GRID = [
    Case(kind, separation, difference)
    for kind in ("air", "coarse air", "space", "coarse space")
    for separation in (0.5, 0.8, 1.0, 1.5, 3.0)
    for difference in (0.0, 2.0)
]
SPREAD = [Case("coarse air", 0.5, 2.0), Case("coarse space", 0.8, 2.0), Case("air", 1.0, 0.0)]
CASES = GRID if os.environ.get("SIMIMG_FULL_GRID") == "1" else SPREAD


@pytest.mark.slow
@pytest.mark.parametrize("case", CASES, ids=str)
def test_pairs_are_measured_as_well_as_the_light_allows(case):
    """At the brink of what can be asked for, where the likelihood is least quadratic."""
    draws = draw_pairs(case, electrons=case.brink(), count=1600, seed=20260412)
    assert draws.faults() == []


def test_the_judgement_of_draws_can_fail():
    rng = np.random.default_rng(9)
    good = rng.standard_normal((1600, 3))
    ones, bound = np.ones((1600, 3)), np.ones(3)
    assert Draws(good, ones, bound).faults() == []
    assert any("errors" in fault for fault in Draws(good, 0.85 * ones, bound).faults())
    assert any("bound" in fault for fault in Draws(1.15 * good, ones, bound).faults())
    assert any("bias" in fault for fault in Draws(good + 0.4, ones, bound).faults())
