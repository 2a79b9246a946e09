"""Verdicts from pixels: the probabilities that are claimed come true as often as they say."""

from __future__ import annotations

import os
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import pytest
from scipy import stats

from simimg.frame import Frame
from simimg.resolving.judging import NamedPair, judge
from simimg.resolving.observation import Observation, observe
from simimg.resolving.pairfit import fit_pair, pair_geometry
from simimg.resolving.pairlimits import PairLimits
from simimg.resolving.records import PairTruth
from simimg.resolving.sighting import Sighting
from simimg.resolving.starfit import Cutout, Likelihood, finished
from simimg.scene.file import scene_record
from tests.resolving.scenes import scene, star

FULL = os.environ.get("SIMIMG_FULL_GRID") == "1"

SKY = 40.0
SURE = 1e-9  # probability of a single star, for pairs that are none


@cache
def stand(air: bool) -> tuple[Observation, PairLimits]:
    """An empty frame's observation and its limits."""
    base = scene(star(1e4), air=air)
    blank = Frame(counts=np.zeros((90, 96)), scene_files=tuple(scene_record(base)))
    observation = replace(observe(blank), saturation=np.inf)
    return observation, PairLimits(observation.delivered, pairs=1000)


@dataclass(frozen=True)
class Pairs:
    """Pairs about a limit: which, the nominal magnitude difference, electrons of the first."""

    criterion: str
    difference: float
    electrons: float
    air: bool = True

    def limit(self, angle: float, difference: float) -> float:
        """Pixels."""
        observation, limits = stand(self.air)
        one = limits.of(angle, difference, 0.1)
        return float(getattr(one, self.criterion)) / observation.sky.pixel_scale

    def stars(self, x, y, length, angle, difference):
        dx, dy = 0.5 * length * np.cos(angle), 0.5 * length * np.sin(angle)
        second = self.electrons * 10.0 ** (-0.4 * difference)
        return [(x - dx, y - dy, self.electrons), (x + dx, y + dy, second)]

    def image(self, stars, middle: int) -> np.ndarray:
        """Expected electrons, the sky among them."""
        psf, size = stand(self.air)[0].psf, 2 * middle + 1
        total = np.full((size, size), SKY)
        for x, y, electrons in stars:
            total += electrons * psf.evaluate(x, y, columns=size, rows=size, order=0)[0]
        return np.maximum(total, 0.0)

    def errors(self, middle: int) -> tuple[float, float]:
        """Bounds at the limit: of the separation's excess over it, of the magnitude difference.

        Sparrow's limit depends on the magnitude difference, most of all near none.
        """
        observation, _ = stand(self.air)
        limit = self.limit(0.3, self.difference)
        stars = self.stars(middle, middle, limit, 0.3, self.difference)
        cutout = Cutout.of(
            self.image(stars, middle), variance=observation.variance, psf=observation.psf
        )
        likelihood, vector = Likelihood([cutout], 2), np.array([*stars[0], *stars[1], SKY])
        truth = finished(likelihood, vector, likelihood.expand(vector), converged=True)
        geometry = pair_geometry(truth)
        variances = np.array(geometry.covariance)[np.ix_([0, 2], [0, 2])]
        step = float(np.sqrt(variances[1, 1]))
        slope = np.array([1.0, (limit - self.limit(0.3, self.difference + step)) / step])
        return float(np.sqrt(slope @ variances @ slope)), float(np.sqrt(variances[1, 1]))


def claimed_and_true(pairs: Pairs, *, draws: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Claimed probabilities, and whether the pair was beyond the limit.

    The truth is uniform over the limit +/- 4 errors, and over +/- 7 errors of the magnitude
    difference; kept are those measured within 4 of them, to which nothing beyond the 7 adds.
    """
    observation, limits = stand(pairs.air)
    psf, rng = observation.psf, np.random.default_rng(seed)
    middle = int(np.ceil(4.0 * psf.fwhm))
    error, spread = pairs.errors(middle)
    claimed, true = [], []
    for _ in range(draws):
        angle = rng.uniform(0.0, 2.0 * np.pi)
        difference = pairs.difference + 7.0 * spread * rng.uniform(-1.0, 1.0)
        limit = pairs.limit(angle, difference)
        length = limit + 4.0 * error * rng.uniform(-1.0, 1.0)
        x, y = middle + rng.uniform(-0.5, 0.5, 2)
        stars = pairs.stars(x, y, length, angle, difference)
        noisy = rng.poisson(pairs.image(stars, middle)).astype(float)
        noisy += np.sqrt(observation.variance) * rng.standard_normal(noisy.shape)
        cutout = Cutout.of(noisy, variance=observation.variance, psf=psf)
        fit = fit_pair([cutout], place=(middle, middle), radius=2.0 * psf.fwhm, geometry=False)
        assert fit.double is not None
        seen = [pair_geometry(fit.double, first=i, second=1 - i) for i in (0, 1)]
        if min(abs(g.magnitude_difference - pairs.difference) for g in seen) > 4.0 * spread:
            continue
        sighting = Sighting((cutout,), fit.single, fit.double, fit.gain, SURE, (), (x, y))
        truth = PairTruth(
            separation_arcsec=np.nan, position_angle_deg=np.nan, magnitude_difference=difference
        )
        named = NamedPair("P", stars[0][:2], stars[1][:2], truth)
        record = judge(observation, sighting, limits, named=named, verdicts_only=True).record
        if abs(record.magnitude_difference - pairs.difference) < 4.0 * spread:
            claimed.append(getattr(record, pairs.criterion).probability)
            true.append(length > limit)
    return np.array(claimed), np.array(true)


EDGES = (0.0, 0.1, 0.2, 0.4, 0.6, 0.8, 0.9, 1.0)


def is_calibrated(claimed: np.ndarray, true: np.ndarray) -> bool:
    """Whether in bins of the claimed probability as many are true as their binomial errors say.

    Their chi-square must be one that chance surpasses in more than a case of a thousand.
    """
    square = 0.0
    for low, high in zip(EDGES, EDGES[1:]):
        inside = (claimed >= low) & (claimed <= high)
        if inside.sum() < 5:
            continue
        variance = max((claimed[inside] * (1.0 - claimed[inside])).sum(), 1e-3)
        square += (true[inside].sum() - claimed[inside].sum()) ** 2 / variance
    return bool(stats.chi2.sf(square, len(EDGES) - 1) > 1e-3)


@pytest.mark.slow
@pytest.mark.parametrize(
    "pairs",
    [
        Pairs("sparrow", 1.5, 3e3),
        *(
            FULL
            * [
                Pairs("rayleigh", 0.0, 6e2),
                Pairs("rayleigh", 1.5, 2e4, air=False),
                Pairs("sparrow", 0.0, 2e4),
            ]
        ),
    ],
    ids=str,
)
def test_claimed_probabilities_come_true(pairs):
    claimed, true = claimed_and_true(pairs, draws=1200, seed=20260412)
    assert np.histogram(claimed, EDGES)[0].min() >= 10
    assert is_calibrated(claimed, true)
    # Errors half as large as they are claim more than comes true, and so do errors twice as large
    # too little.
    deviates = stats.norm.ppf(np.clip(claimed, 1e-12, 1.0 - 1e-12))
    assert not is_calibrated(stats.norm.cdf(2.0 * deviates), true)
    assert not is_calibrated(stats.norm.cdf(0.5 * deviates), true)
