"""Instants: exact without air, and on average what theory says of the long exposure."""

import os
from functools import cache

import numpy as np
import pytest
import scipy.fft

from simimg.air.screens import Flow, Screens
from simimg.air.turbulence import KOLMOGOROV, kolmogorov_structure, tilt_removed_transfer
from simimg.errors import InputError
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.instant import Instants, plan_instants, pupil_samples
from simimg.imaging.render import expected_image
from simimg.imaging.sources import PlacedShape, Points, Sources, one_point
from simimg.optics.pupil import annular_pupil
from simimg.optics.transfer import annular_transfer
from simimg.sky.disc import DiscShape

FULL = os.environ.get("SIMIMG_FULL_GRID") == "1"
WAVELENGTH, DIAMETER = 600e-9, 1.0
LIMIT = WAVELENGTH / DIAMETER
ACROSS = 24
STEP = DIAMETER / ACROSS
DRAWS = 12_000 if FULL else 500
STRENGTH = 4.0  # D/r0


def telescope(samples: int, step: float) -> np.ndarray:
    pupil = annular_pupil(DIAMETER, 0.3)
    return pupil_samples(pupil.amplitude, pupil.pitch, samples=samples, step=step)


def instants(sources: Sources, size: tuple[int, int], pixel: float, waves=(WAVELENGTH,), **kind):
    settings = {"finest": DIAMETER / 200, "memory_bytes": 2**30, "diameter": DIAMETER} | kind
    columns, rows = size
    plan = plan_instants(
        sources, columns=columns, rows=rows, pixel_scale=pixel, wavelengths=waves, **settings
    )
    amplitude = telescope(plan.samples, plan.step)
    return Instants(
        plan,
        sources,
        columns=columns,
        rows=rows,
        pupils=[amplitude] * len(waves),
        area=annular_pupil(DIAMETER, 0.3).area,
        wavelength=WAVELENGTH,
        shares={0: np.full(len(waves), 1.0 / len(waves))},
        blur=Transfer(np.inf, box=pixel),
    )


@pytest.mark.parametrize("pixel", [0.4 * LIMIT, 1.3 * LIMIT])
def test_without_air_the_image_is_that_of_the_engine(pixel: float) -> None:
    sources = Sources(
        Points(np.array([20.3, 33.77]), np.array([18.6, 22.1]), np.array([1e4, 3e3])),
        (PlacedShape(28.2, 9.4, 2e4, DiscShape(5.0 * pixel)),),
    )
    made = instants(sources, (50, 40), pixel)
    still = np.zeros((made.plan.samples,) * 2, dtype=np.float32)

    def annulus(f: np.ndarray) -> np.ndarray:
        return annular_transfer(WAVELENGTH * f, diameter=DIAMETER, obstruction=0.3)

    basis = PsfBasis((Transfer(1.0 / LIMIT, (annulus,), box=pixel),))
    wanted = expected_image(basis, sources, columns=50, rows=40, pixel_scale=pixel)
    # Edges of 200 samples, and light that folds back where the engine lets it go.
    np.testing.assert_allclose(made.image([still]), wanted, atol=1e-3 * wanted.max())


def test_light_beside_the_frame_comes_in_and_does_not_wrap() -> None:
    pixel = 0.5 * LIMIT
    left = instants(Sources(one_point(-3.0, 20.0, 1e5)), (40, 40), pixel)
    still = np.zeros((left.plan.samples,) * 2, dtype=np.float32)
    image = left.image([still])
    assert image[20, 0] > 100.0 * image[20, 39]
    assert image[20, 39] < 1e-4 * 1e5
    far = instants(Sources(one_point(5000.0, 20.0, 1e5)), (40, 40), pixel)
    assert far.image([np.zeros((far.plan.samples,) * 2, dtype=np.float32)]).max() == 0.0


def test_a_slope_of_the_path_moves_every_colour_alike() -> None:
    pixel, waves = 0.4 * LIMIT, (0.95 * WAVELENGTH, WAVELENGTH, 1.06 * WAVELENGTH)
    made = instants(Sources(one_point(24.0, 24.0, 1e5)), (64, 64), pixel, waves)
    plan = made.plan
    x = (np.arange(plan.samples) - (plan.samples - 1) / 2) * plan.step
    # The path that tilts the wave by four pixels towards +x.
    phase = np.broadcast_to(2 * np.pi / WAVELENGTH * 4.0 * pixel * x, (plan.samples,) * 2)
    tilted, still = made.image([phase]), made.image([0.0 * phase])
    np.testing.assert_allclose(tilted[:, 14:44], still[:, 10:40], atol=2e-4 * still.max())
    both = made.image([phase, 0.0 * phase])
    np.testing.assert_allclose(both, 0.5 * (tilted + still), atol=1e-5 * still.max())


def test_colours_have_their_own_size() -> None:
    pixel, waves = 0.25 * LIMIT, (WAVELENGTH, 1.5 * WAVELENGTH)
    made = instants(Sources(one_point(32.0, 32.0, 1e5)), (64, 64), pixel, waves)
    plan = made.plan
    assert plan.wavelengths == pytest.approx(waves, rel=1.0 / min(plan.sides))
    blue, red = made.psfs([np.zeros((plan.samples,) * 2, dtype=np.float32)])
    assert blue.sum() == pytest.approx(0.995, abs=0.003)
    assert red.sum() == pytest.approx(0.995, abs=0.003)
    assert blue[0, 0] / red[0, 0] == pytest.approx(1.5**2, rel=0.01)


@cache
def averages() -> tuple[np.ndarray, ...]:
    """Transfer functions of many instants, as they are and with Zernike's tilt taken out."""
    made = instants(
        Sources(one_point(24.0, 24.0, 1.0)), (48, 48), 0.5 * LIMIT, finest=STEP, diameter=DIAMETER
    )
    plan = made.plan
    assert plan.samples == ACROSS
    z = np.arange(ACROSS) - (ACROSS - 1) / 2
    x, y = np.meshgrid(z, z)
    inside = np.hypot(x, y) <= ACROSS / 2
    made._pupils[0][:] = inside / np.sqrt(inside.sum()) / plan.sides[0]
    plane = np.linalg.qr(np.array([np.ones(inside.sum()), x[inside], y[inside]]).T)[0]
    moving, recentred, image = [], [], 0.0
    for seed in range(DRAWS):
        air = Screens(
            [Flow(1.0, (1.0, 2.0))],
            r0=DIAMETER / STRENGTH,
            samples=ACROSS,
            step=plan.step,
            rng=np.random.default_rng([seed, 5]),
        )
        phase = air.phase(0.0)
        flat = phase.copy()
        flat[inside] -= (plane @ (plane.T @ phase[inside])).astype(np.float32)
        (psf,), (still,) = made.psfs([phase]), made.psfs([flat])
        image = image + psf.astype(float)
        moving.append(scipy.fft.rfft2(psf)[0, :ACROSS].real)
        recentred.append(scipy.fft.rfft2(still)[0, :ACROSS].real)
    return inside, np.array(moving), np.array(recentred), image / DRAWS, np.array([plan.step])


def overlap(inside: np.ndarray, weight) -> np.ndarray:
    """Mean of a weight of point pairs over the common part of the aperture and itself shifted."""
    values = []
    for shift in range(ACROSS):
        both = inside[:, shift:] & inside[:, : ACROSS - shift]
        first = np.zeros_like(inside)
        first[:, shift:] = both
        second = np.zeros_like(inside)
        second[:, : ACROSS - shift] = both
        number = np.full(inside.shape, -1)
        number[inside] = np.arange(inside.sum())
        pairs = number[first], number[second]
        values.append(np.sum(weight(*pairs)) / inside.sum())
    return np.array(values)


def pairwise(inside: np.ndarray, step: float) -> np.ndarray:
    y, x = np.nonzero(inside)
    distance = np.hypot(x[:, None] - x, y[:, None] - y) * step
    return KOLMOGOROV * (distance * STRENGTH / DIAMETER) ** (5 / 3)


def agrees(values: np.ndarray, theory: np.ndarray) -> bool:
    error = values.std(axis=0, ddof=1) / np.sqrt(len(values))
    return bool((np.abs(values.mean(axis=0) - theory) <= 3.0 * error + 1e-6).all())


@pytest.mark.slow
def test_mean_of_instants_is_the_long_exposure() -> None:
    inside, moving, _, _, (step,) = averages()
    theory = overlap(inside, lambda a, b: np.exp(-0.5 * pairwise(inside, step)[a, b]))
    assert agrees(moving, theory)
    # The same from the closed form.
    pure = overlap(inside, lambda a, _: np.ones(a.size))
    shift = np.arange(ACROSS) * step
    closed = pure * np.exp(-0.5 * kolmogorov_structure(shift, DIAMETER / STRENGTH))
    np.testing.assert_allclose(theory, closed, atol=1e-12)
    # A seeing better or worse by a tenth is refused.
    for wrong in (0.9, 1.1):
        structure = kolmogorov_structure(wrong * shift, DIAMETER / STRENGTH)
        assert not agrees(moving, pure * np.exp(-0.5 * structure))


@pytest.mark.slow
@pytest.mark.skipif(not FULL, reason="a width to 3 % needs 12000 instants: SIMIMG_FULL_GRID=1")
def test_width_of_the_mean_is_that_of_the_long_exposure() -> None:
    inside, _, _, image, (step,) = averages()
    whole = np.zeros((2 * ACROSS, 2 * ACROSS))
    y, x = np.indices(whole.shape)
    x, y = (np.minimum(k, 2 * ACROSS - k) for k in (x, y))
    padded = np.zeros(whole.shape)
    padded[:ACROSS, :ACROSS] = inside
    pure = np.fft.ifft2(np.abs(np.fft.fft2(padded)) ** 2).real / inside.sum()
    structure = kolmogorov_structure(np.hypot(x, y) * step, DIAMETER / STRENGTH)
    wanted = np.fft.fft2(pure * np.exp(-0.5 * structure)).real
    assert width(image) == pytest.approx(width(wanted), rel=0.03)


def width(psf: np.ndarray) -> float:
    """Side of the square that has the area above half of the central value.

    Of the mean over the eight turns and mirrors, so that no speckle left passes for the peak.
    """
    size = psf.shape[0]
    for axis in (0, 1):
        psf = psf + np.roll(np.flip(psf, axis), 1, axis)
    spectrum = np.fft.fft2(psf + psf.T)
    fine = np.zeros((size * 8, size * 8), dtype=complex)
    h = size // 2
    fine[:h, :h], fine[-h:, :h] = spectrum[:h, :h], spectrum[h:, :h]
    fine[:h, -h:], fine[-h:, -h:] = spectrum[:h, h:], spectrum[h:, h:]
    image = np.fft.ifft2(fine).real
    return float(np.sqrt((image > 0.5 * image[0, 0]).sum()))


@pytest.mark.slow
def test_mean_without_tilt_is_the_exact_average() -> None:
    inside, _, recentred, _, (step,) = averages()
    half = -0.5 * pairwise(inside, step)
    y, x = np.nonzero(inside)
    plane = np.linalg.qr(np.array([np.ones(x.size), x, y], dtype=float).T)[0]
    rest = half - plane @ (plane.T @ half)
    rest = rest - (rest @ plane) @ plane.T
    own = np.diag(rest)

    def weight(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        return np.exp(-0.5 * (own[a] + own[b] - 2.0 * rest[a, b]))

    exact = overlap(inside, weight)
    assert agrees(recentred, exact)
    # Fried's closed form is near it, and is not it; nor is the long exposure.
    pure = overlap(inside, lambda a, _: np.ones(a.size))
    shift = np.arange(ACROSS) * step
    fried = pure * tilt_removed_transfer(shift, DIAMETER / STRENGTH, diameter=DIAMETER)
    np.testing.assert_allclose(fried, exact, atol=0.1)
    assert not agrees(recentred, fried)
    assert not agrees(recentred, overlap(inside, lambda a, b: np.exp(half[a, b])))


def test_nonsense_is_refused() -> None:
    star = Sources(one_point(5.0, 5.0, 1.0))
    with pytest.raises(InputError, match="smaller pixel"):
        instants(star, (10, 10), 100.0 * LIMIT)
    with pytest.raises(InputError, match="bytes of memory"):
        instants(star, (4000, 4000), 0.4 * LIMIT, memory_bytes=10**8)
