"""Corrected air against published laws and against integrals that share no code with it."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import j0, j1

from simimg.air.correction import CorrectedAir
from simimg.air.errorbudget import error_budget, fitting_variance
from simimg.air.layers import Layer, coherence_time, isoplanatic_angle
from simimg.air.residual import Loop, Turbulence, beyond_piston, residual_spectrum, tilt_share
from simimg.air.turbulence import von_karman_structure
from simimg.optics.transfer import annular_transfer

R0, DIAMETER = 0.15, 2.0
WAVE = 550e-9
ONE = (Layer(5000.0, 1.0, 10.0, 0.3),)


def air(*, outer_scale=np.inf, layers=ONE, **loop):
    choices = {"diameter": DIAMETER, "pitch": 0.1, "aliasing": False} | loop
    return CorrectedAir(Turbulence(R0, outer_scale, layers), Loop(**choices), WAVE)


@pytest.mark.parametrize("outer_scale", [np.inf, 25.0])
def test_with_nothing_corrected_it_is_the_seeing(outer_scale):
    """A laser below every layer shows nothing of them."""
    loop = air(outer_scale=outer_scale, laser_height=1000.0)
    r = np.array([0.003, 0.05, 0.4, 1.3, 1.99])
    for angle in (0.0, 0.7, 2.0, 4.4):
        found = loop.structure(r * np.cos(angle), r * np.sin(angle))
        assert_allclose(found, von_karman_structure(r, R0, outer_scale), rtol=1e-12)


@pytest.mark.parametrize(("pitch", "outer_scale"), [(0.1, np.inf), (0.5, np.inf), (0.3, 20.0)])
def test_fitting_error(pitch, outer_scale):
    """0.2313 (d/r0)^(5/3) for a square (computed from the spectrum, two ways)."""
    turbulence = Turbulence(R0, outer_scale, ONE)
    found = fitting_variance(turbulence, 0.5 / pitch)
    if outer_scale == np.inf:
        assert_allclose(found, 0.2313 * (pitch / R0) ** (5.0 / 3.0), rtol=5e-4)
    angle, log_f = np.meshgrid((np.arange(400) + 0.5) * np.pi / 1600.0, np.arange(0.0, 14.0, 0.002))
    f = 0.5 / pitch / np.cos(angle) * np.exp(log_f)
    whole = (turbulence.spectrum(f) * f**2 * np.where(log_f == 0.0, 0.5, 1.0)).sum()
    assert_allclose(found, 8.0 * whole * 0.002 * np.pi / 1600.0, rtol=1e-5)
    # Far apart, two points differ by twice the variance.
    far = air(pitch=pitch, outer_scale=outer_scale, diameter=50.0 * pitch)
    apart = float(far.structure(np.array(48.0 * pitch), np.array(3.0 * pitch)))
    assert_allclose(apart, 2.0 * found, rtol=0.01)


def test_delay_alone():
    """(t/t0)^(5/3) with t0 = 0.314 r0/v (Fried 1982; Roddier 1981), the piston kept."""
    lag = 0.02
    found = error_budget(air(lag=lag)).lag
    # The square of control ends at half a period of the pitch, half of v t: 2.1 % are beyond.
    assert_allclose(found, (lag / coherence_time(R0, ONE)) ** (5.0 / 3.0), rtol=0.03)
    assert found < (lag / coherence_time(R0, ONE)) ** (5.0 / 3.0)


def test_angle_alone():
    """(theta/theta0)^(5/3) with theta0 = 0.314 r0/h (Fried 1982; Roddier 1981)."""
    angle = np.radians(10.0 / 3600.0)
    found = error_budget(air(offset=(angle * 0.6, angle * 0.8))).anisoplanatism
    assert_allclose(found, (angle / isoplanatic_angle(R0, ONE)) ** (5.0 / 3.0), rtol=0.03)


def test_lag_and_angle_add_as_ways():
    """A wind that carries the layer from the guide star to the target undoes the lag."""
    lag = 0.02
    angle = ONE[0].wind * lag / ONE[0].height
    east, north = (angle * one / ONE[0].wind for one in ONE[0].velocity)
    together = error_budget(air(lag=lag, offset=(east, north)))
    alone = error_budget(air())
    assert_allclose(together.remainder, alone.remainder, rtol=1e-9)
    twice = error_budget(air(lag=lag, offset=(-east, -north)))
    assert_allclose(
        twice.remainder - alone.remainder,
        error_budget(air(lag=2.0 * lag)).remainder - alone.remainder,
        rtol=1e-9,
    )


@pytest.mark.parametrize("height", [90e3, 30e3])
def test_cone_of_a_laser(height):
    """(0.5 (h/H)^(5/3) - 0.452 (h/H)^2) / 0.423 (D/r0)^(5/3): Sasiela 1994 (from memory).

    Ours takes the displacement's mean over the aperture for that between any two of its points.
    """
    share = ONE[0].height / height
    published = (0.5 * share ** (5.0 / 3.0) - 0.452 * share**2) / 0.423
    found = error_budget(
        air(laser_height=height, diameter=8.0, pitch=0.2, tilt_offset=(0.0, 0.0))
    ).cone
    assert_allclose(found, published * (8.0 / R0) ** (5.0 / 3.0), rtol=0.16)


def test_shares_of_piston_and_tilt_are_those_of_noll():
    """Residual variances after one and three terms: 1.03242 and 0.13466 (D/r0)^(5/3)."""
    turbulence = Turbulence(1.0, np.inf, ONE)

    f = np.exp(np.linspace(-24.0, 12.0, 400_001))
    power = f**2 * turbulence.spectrum(f) * 2.0 * np.pi * (36.0 / 400_000)

    def variance(share):
        return float((power * share).sum())

    # The band from e^-24 to e^12 of the inverse diameter holds all but 1e-4.
    assert_allclose(variance(beyond_piston(f, 1.0)), 1.03242, rtol=2e-3)
    assert_allclose(
        variance(beyond_piston(f, 1.0) - tilt_share(f, 1.0)),
        0.13466,
        rtol=2e-3,
    )


def strehl(loop, obstruction=0.0):
    """Peak of the PSF through a round aperture over that of the aperture alone, by quadrature."""
    knots, weights = np.polynomial.legendre.leggauss(80)
    r, angle = 0.5 * DIAMETER * (knots + 1.0), 2.0 * np.pi * np.arange(48) / 48
    own = weights * r * annular_transfer(r, diameter=DIAMETER, obstruction=obstruction)
    seen = loop.transfer(r[:, None] * np.cos(angle), r[:, None] * np.sin(angle), WAVE)
    return float((own * seen.mean(axis=1)).sum() / own.sum())


@pytest.mark.parametrize(
    "loop",
    [
        {"pitch": 0.05, "lag": 0.001},
        {"pitch": 0.1, "lag": 0.002, "aliasing": True, "noise": 0.05},
        {"pitch": 0.1, "offset": (3e-6, 0.0)},
        {"pitch": 0.1, "laser_height": 90e3, "tilt_offset": (5e-6, 2e-6)},
    ],
)
def test_strehl_of_the_psf_is_that_of_the_variance(loop):
    """exp(-variance) without piston, for remainders that are not too uneven (Marechal)."""
    made = air(**loop)
    remainder = error_budget(made).remainder
    assert 0.01 < remainder < 1.0
    assert_allclose(strehl(made), np.exp(-remainder), rtol=0.03)


def test_structure_function_against_plain_quadrature():
    """Lag of a layer that moves east: a rectangle rule over the square, far finer than ours."""
    loop = air(lag=0.01, layers=(Layer(0.0, 1.0, 10.0, np.pi / 2),), outer_scale=5.0)
    count = 1600
    edge = loop.loop.edge
    f = (np.arange(count) + 0.5) / count * edge
    fx, fy = np.meshgrid(np.concatenate([-f[::-1], f]), f)
    power = residual_spectrum(fx, fy, loop.turbulence, loop.loop) * 2.0 * (edge / count) ** 2
    seeing = von_karman_structure(np.array([0.05, 0.31, 1.2]), R0, 5.0)
    for r, whole in zip((0.05, 0.31, 1.2), seeing):
        for east, north in ((r, 0.0), (0.0, r), (-0.6 * r, 0.8 * r)):
            wave = 2.0 * (1.0 - np.cos(2.0 * np.pi * (fx * east + fy * north)))
            inside = (power * wave).sum()
            gone = (
                loop.turbulence.spectrum(np.hypot(fx, fy)) * 2.0 * (edge / count) ** 2 * wave
            ).sum()
            expected = whole - gone + inside
            found = float(loop.structure(np.array(east), np.array(north)))
            assert_allclose(found, expected, rtol=2e-3, atol=2e-4)


def test_noise_falls_as_the_inverse_of_the_light():
    budgets = [error_budget(air(noise=noise)).noise for noise in (0.1, 0.4)]
    assert_allclose(budgets[1], 4.0 * budgets[0])


def test_aliasing_is_a_third_of_fitting():
    """A third or so for slopes over squares (Rigaut, Veran & Lai 1998; from memory)."""
    found = error_budget(air(aliasing=True))
    assert 0.25 < found.aliasing / found.fitting < 0.42


def test_paths_add_in_squares():
    found = error_budget(air(lag=0.002, noise=0.1, aliasing=True, offset=(2e-6, 1e-6)))
    paths = found.path_nm(WAVE)
    total = paths.pop("total")
    assert_allclose(total, np.sqrt(sum(one**2 for one in paths.values())))
    assert_allclose(paths["fitting"], np.sqrt(found.fitting) * 550.0 / (2.0 * np.pi))


def test_longer_waves_are_corrected_better():
    loop = air(lag=0.002)
    r = np.array([0.3, 1.1])
    short, long = (loop.transfer(r, 0.0 * r, wave) for wave in (WAVE, 2.0 * WAVE))
    assert_allclose(long, short**0.25, rtol=1e-9)


def test_bessel_helpers_agree_with_scipy():
    z = np.array([1e-6, 1e-3, 0.5, 3.0])
    assert_allclose(beyond_piston(z / np.pi, 1.0)[2:], 1.0 - (2.0 * j1(z[2:]) / z[2:]) ** 2)
    assert_allclose(beyond_piston(z / np.pi, 1.0)[:2], 0.25 * z[:2] ** 2, rtol=1e-6)
    assert j0(0.0) == 1.0


def test_what_is_no_loop_is_refused():
    for wrong in ({"pitch": 0.0}, {"diameter": np.inf}, {"lag": -1.0}, {"laser_height": 0.0}):
        with pytest.raises(ValueError, match="must be"):
            Loop(**({"diameter": 1.0, "pitch": 0.1} | wrong))
