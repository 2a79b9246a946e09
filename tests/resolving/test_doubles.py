"""How often single stars look double: the theory against draws of its field and of whole fits."""

from __future__ import annotations

import os

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from simimg.resolving.doubles import probability_single
from simimg.resolving.pairfit import fit_pair
from simimg.resolving.secondstar import scan_second_star
from simimg.resolving.starfit import Cutout, fit_stars
from tests.resolving.psfs import expected, exposed, model


def test_the_tail_is_the_expected_euler_characteristic():
    area, rim, level = 35.0, 20.0, 5.0
    wanted = np.exp(-0.5 * level**2) * (
        0.5 * rim / (2.0 * np.pi) + area * level / (2.0 * np.pi) ** 1.5
    )
    # 1 - exp(-E) differs from E by half of E squared.
    assert_allclose(probability_single(level**2, area=area, rim=rim), wanted, rtol=wanted)


def test_probabilities_fall_from_one_and_never_to_zero():
    gains = np.concatenate([[0.0], np.geomspace(1e-3, 1e5, 400)])
    chances = [probability_single(float(gain), area=35.0, rim=20.0) for gain in gains]
    assert chances[0] == 1.0
    assert np.all(np.diff(chances) <= 0.0)
    assert chances[-1] >= 1e-300
    assert probability_single(1000.0, area=35.0, rim=20.0) < 1e-210
    assert probability_single(np.nan, area=35.0, rim=20.0) == 1.0


def test_area_and_rim_of_a_gaussian_on_plain_sky():
    """A closed form: far from the star the field's metric is constant.

    Against white noise the field of a Gaussian template of variance s^2 has the correlation
    exp(-d^2 / 4 s^2), hence the metric 1 / (2 s^2).
    """
    psf = model("coarse")
    sigma = psf.fwhm / np.sqrt(8.0 * np.log(2.0))
    cutout = Cutout.of(
        expected(psf, [(20.0, 20.0, 50.0)], size=41, background=100.0), variance=1e6, psf=psf
    )
    fit = fit_stars([cutout], places=[(20.0, 20.0)])
    near, far = (scan_second_star([cutout], fit, radius=r * sigma) for r in (5.0, 7.0))
    # The ring between the two: the pixels' and the projection's share is a few per cent there.
    assert_allclose(far.area - near.area, np.pi * (7.0**2 - 5.0**2) / 2.0, rtol=0.03)
    assert_allclose(far.rim, 2.0 * np.pi * 7.0 / np.sqrt(2.0), rtol=0.03)


def test_area_and_rim_hardly_depend_on_how_they_are_summed(monkeypatch):
    psf = model("space")
    cutout = Cutout.of(
        expected(psf, [(9.3, 8.9, 1e5)], size=19, background=3.0), variance=9.0, psf=psf
    )
    fit = fit_stars([cutout], places=[(9.0, 9.0)])
    plain = scan_second_star([cutout], fit, radius=2.0 * psf.fwhm)
    monkeypatch.setattr("simimg.resolving.secondstar._RADII_PER_FWHM", 12)
    monkeypatch.setattr("simimg.resolving.secondstar._ANGLES_PER_FWHM", 24)
    fine = scan_second_star([cutout], fit, radius=2.0 * psf.fwhm)
    # Two per cent of the area are two per cent of the probability.
    assert_allclose(plain.area, fine.area, rtol=0.02)
    assert_allclose(plain.rim, fine.rim, rtol=0.02)


def test_near_the_origin_the_score_goes_over_into_that_of_an_infinitesimal_pair():
    psf, rng = model("air"), np.random.default_rng(1)
    image = expected(psf, [(14.2, 13.9, 1e4)], size=29, background=30.0)
    cutout = exposed(image, read_noise=5.0, rng=rng, psf=psf)
    fit = fit_stars([cutout], places=[(14.0, 14.0)])
    tiny = scan_second_star([cutout], fit, radius=0.02 * psf.fwhm)
    on_rim = tiny.scores.reshape(-1, tiny.directions.size)[-1]
    half = tiny.directions.size // 2
    # Directions of the whole circle against those of the half circle, twice as dense.
    assert_allclose(on_rim[:half], tiny.direction_scores[::2], atol=0.1)
    assert_allclose(on_rim[half:], tiny.direction_scores[::2], atol=0.1)


def field_maxima(kind, *, electrons, background, read_noise, draws, seed):
    """Highest scores of the linear model: unit noise on densely placed projected templates."""
    psf, rng = model(kind), np.random.default_rng(seed)
    radius = 2.0 * psf.fwhm
    middle = int(np.ceil(4.0 * psf.fwhm))
    size = 2 * middle + 1
    x, y = middle + 0.23, middle - 0.31
    image = expected(psf, [(x, y, electrons)], size=size, background=background)
    cutout = Cutout.of(image, variance=read_noise**2, psf=psf)
    fit = fit_stars([cutout], places=[(x, y)])
    scan = scan_second_star([cutout], fit, radius=radius)
    # Templates made here by hand: PSF over noise, single-star directions projected off.
    weight = 1.0 / np.sqrt(image + read_noise**2)

    def planes(dx, dy, order):
        return psf.evaluate(x + dx, y + dy, columns=size, rows=size, order=order) * weight

    own = planes(0.0, 0.0, 2)
    nuisance = np.array([own[0], own[1], own[2], weight]).reshape(4, -1)
    basis = np.linalg.qr(nuisance.T)[0]
    radii = radius * (np.arange(20) + 1.0) / 20.0
    angles = 2.0 * np.pi * np.arange(48) / 48.0
    templates = [planes(r * np.cos(a), r * np.sin(a), 0)[0] for r in radii for a in angles]
    templates += [
        np.cos(a) ** 2 * own[3] + 2.0 * np.cos(a) * np.sin(a) * own[4] + np.sin(a) ** 2 * own[5]
        for a in angles[:24]
    ]
    flat = np.array(templates).reshape(len(templates), -1)
    flat = flat - (flat @ basis) @ basis.T
    flat /= np.linalg.norm(flat, axis=1)[:, None]
    maxima = [
        (flat @ rng.standard_normal((size * size, 500))).max(axis=0) for _ in range(draws // 500)
    ]
    return np.concatenate(maxima), scan


@pytest.mark.slow
@pytest.mark.parametrize(
    ("kind", "electrons", "background", "read_noise"),
    [("air", 1e3, 30.0, 5.0), ("space", 1e5, 1.0, 3.0)],
)
def test_theory_holds_for_the_linear_field(kind, electrons, background, read_noise):
    draws = 20_000
    maxima, scan = field_maxima(
        kind,
        electrons=electrons,
        background=background,
        read_noise=read_noise,
        draws=draws,
        seed=20260412,
    )
    chances = np.array(
        [probability_single(float(max(m, 0.0) ** 2), area=scan.area, rim=scan.rim) for m in maxima]
    )
    for nominal, slack in ((0.1, 0.01), (0.03, 0.003), (0.01, 0.001)):
        found = float((chances < nominal).mean())
        # Three binomial errors, and a tenth: excursions are not quite Poisson, nor the grid dense.
        error = np.sqrt(nominal * (1.0 - nominal) / draws)
        assert abs(found - nominal) < slack + 3.0 * error, (nominal, found)


def single_stars(kind, *, electrons, background, read_noise, draws, seed, second=0.0):
    """Chances quoted for draws of single stars, or of stars with a fainter second at 0.8 FWHM."""
    psf, rng = model(kind), np.random.default_rng(seed)
    middle = int(np.ceil(4.0 * psf.fwhm))
    chances, gains = [], []
    for _ in range(draws):
        x, y = middle + rng.uniform(-0.5, 0.5, 2)
        angle = rng.uniform(0.0, 2.0 * np.pi)
        away = 0.8 * psf.fwhm
        stars = [
            (x, y, electrons),
            (x + away * np.cos(angle), y + away * np.sin(angle), second * electrons),
        ]
        image = expected(psf, stars, size=2 * middle + 1, background=background)
        cutout = exposed(image, read_noise=read_noise, rng=rng, psf=psf)
        fit = fit_pair([cutout], place=(middle, middle), radius=2.0 * psf.fwhm)
        gains.append(fit.gain)
        chances.append(probability_single(fit.gain, area=fit.scan.area, rim=fit.scan.rim))
    return np.array(chances), np.array(gains)


# Three signal levels, from where read noise and sky rule to where the star's own photons do.
LEVELS = [(kind, electrons) for kind in ("air", "space") for electrons in (1e3, 1e4, 1e5)]
SPREAD = [("air", 1e3), ("space", 1e4), ("air", 1e5)]


@pytest.mark.slow
@pytest.mark.parametrize(
    ("kind", "electrons"), LEVELS if os.environ.get("SIMIMG_FULL_GRID") == "1" else SPREAD
)
def test_single_stars_look_double_as_often_as_is_said(kind, electrons):
    draws = 1000
    background, read_noise = (0.1, 3.0) if kind == "space" else (30.0, 5.0)
    chances, gains = single_stars(
        kind,
        electrons=electrons,
        background=background,
        read_noise=read_noise,
        draws=draws,
        seed=20260412,
    )

    def slack(share: float) -> float:
        return 2.0 * np.sqrt(share * (1.0 - share) / draws)

    def holds(told: np.ndarray) -> bool:
        rare, common = (told < 0.01).mean(), (told < 0.1).mean()
        few = rare <= 0.015 + slack(0.015)
        return few and 0.07 - slack(0.07) <= common <= 0.13 + slack(0.13)

    assert holds(chances)
    # Would the test notice? A second star as three plain parameters calls far too many double.
    assert not holds(stats.chi2.sf(gains, 3))


def test_a_real_second_star_is_not_called_chance():
    chances, _ = single_stars(
        "air", electrons=1e4, background=30.0, read_noise=5.0, draws=40, seed=2, second=0.3
    )
    # Its expected gain is several hundred.
    assert np.all(chances < 1e-12)
