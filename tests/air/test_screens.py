"""Phase screens against the theory of turbulence: structure, Zernike residuals, lucky frames."""

import os
from functools import cache

import numpy as np
import pytest

from simimg.air.screenblocks import Blocks, block_amplitudes, block_side
from simimg.air.screens import Flow, Screens
from simimg.air.screenwaves import cells
from simimg.air.turbulence import kolmogorov_structure, von_karman_structure
from simimg.optics.zernike import zernike
from tests.reference.turbulence import LUCKY_SHARES, NOLL_RESIDUALS

FULL = os.environ.get("SIMIMG_FULL_GRID") == "1"
SAMPLES = 32
DIAMETER = 1.0
STEP = DIAMETER / SAMPLES
DRAWS = 5000 if FULL else 500
LAGS = (2, 3, 4, 8, 16, 24, 31)


def screens(seed: int, *, r0: float = DIAMETER, outer_scale: float = np.inf, **kind: object):
    settings = {"flows": [Flow(1.0, (3.0, 2.0))], "samples": SAMPLES, "step": STEP} | kind
    return Screens(r0=r0, outer_scale=outer_scale, rng=np.random.default_rng(seed), **settings)


@cache
def drawn(outer_scale: float) -> np.ndarray:
    """Independent screens of D/r0 = 1, each at a time of its own."""
    every = [
        screens(seed, outer_scale=outer_scale).phase(0.37 * (seed % 11)) for seed in range(DRAWS)
    ]
    return np.array(every, dtype=float)


def structures(patches: np.ndarray) -> np.ndarray:
    """Mean squared difference of each patch at each lag, along both axes."""
    columns = []
    for lag in LAGS:
        across = (patches[:, :, lag:] - patches[:, :, :-lag]) ** 2
        along = (patches[:, lag:] - patches[:, :-lag]) ** 2
        columns.append(0.5 * (across.mean(axis=(1, 2)) + along.mean(axis=(1, 2))))
    return np.array(columns).T


def agrees(values: np.ndarray, theory: np.ndarray, share: float) -> bool:
    """Means equal theory within a share or three standard errors, whichever is wider."""
    error = values.std(axis=0, ddof=1) / np.sqrt(len(values))
    return bool(
        (np.abs(values.mean(axis=0) - theory) <= np.maximum(share * theory, 3 * error)).all()
    )


@pytest.mark.slow
@pytest.mark.parametrize("outer_scale", [np.inf, 25.0])
def test_structure_function(outer_scale: float) -> None:
    theory = von_karman_structure(np.array(LAGS) * STEP, DIAMETER, outer_scale)
    assert agrees(structures(drawn(outer_scale)), theory, 0.03)


@pytest.mark.slow
def test_structure_function_can_refuse() -> None:
    lags = np.array(LAGS) * STEP
    infinite, bounded = kolmogorov_structure(lags, DIAMETER), von_karman_structure(lags, 1.0, 25.0)
    assert not agrees(structures(drawn(np.inf)), bounded, 0.03)
    assert not agrees(structures(drawn(25.0)), infinite, 0.03)
    assert not agrees(structures(drawn(25.0)), bounded * 1.1, 0.03)
    # Without the lowest frequencies, too.
    flat = drawn(25.0)
    plane = np.indices((SAMPLES, SAMPLES)).reshape(2, -1).T - (SAMPLES - 1) / 2
    tilts = flat.reshape(DRAWS, -1) @ np.linalg.pinv(plane).T
    flat = flat - (tilts @ plane.T).reshape(flat.shape)
    assert not agrees(structures(flat), bounded, 0.03)


@cache
def aperture() -> tuple[np.ndarray, np.ndarray]:
    """The samples within the aperture and Zernike's 21 terms on them, made orthonormal."""
    z = (2.0 * np.arange(SAMPLES) + 1.0) / SAMPLES - 1.0
    x, y = np.meshgrid(z, z)
    inside = np.hypot(x, y) <= 1.0
    terms = np.array([zernike(j, x[inside], y[inside]) for j in range(1, 22)]).T
    return inside, np.linalg.qr(terms)[0]


def residuals(patches: np.ndarray, count: int) -> np.ndarray:
    """Variance over the aperture of each patch after removal of so many terms."""
    inside, terms = aperture()
    # The samples inside stand for a disc of their own area, 0.5 % wider than the aperture.
    wider = np.sqrt(4.0 * inside.sum() / np.pi) / SAMPLES
    phase = patches[:, inside] / wider ** (5 / 6)
    phase = phase - (phase @ terms[:, :count]) @ terms[:, :count].T
    return (phase**2).mean(axis=1)


@pytest.mark.slow
@pytest.mark.parametrize("count", sorted(NOLL_RESIDUALS))
def test_residual_variances(count: int) -> None:
    left = residuals(drawn(np.inf), count)
    assert agrees(left[:, None], np.array([NOLL_RESIDUALS[count]]), 0.05)
    assert not agrees(left[:, None], np.array([1.4 * NOLL_RESIDUALS[count]]), 0.05)


@pytest.mark.slow
def test_share_of_lucky_frames() -> None:
    left = residuals(drawn(np.inf), 3)
    for strength, share in LUCKY_SHARES.items():
        found = np.mean(left * strength ** (5 / 3) <= 1.0)
        error = np.sqrt(share * (1.0 - share) / DRAWS)
        assert abs(found - share) <= 3.0 * error
        # Turbulence stronger by a fifth would be found out.
        assert abs(np.mean(left * (1.2 * strength) ** (5 / 3) <= 1.0) - share) > 3.0 * error


def test_wind_carries_the_screen_unchanged() -> None:
    air = screens(5, flows=[Flow(1.0, (4.0 * STEP, -2.0 * STEP))])
    before, after = air.phase(3.0), air.phase(4.0)
    difference = after[:-2, 4:] - before[2:, :-4]
    assert np.std(difference) < 0.01 * np.std(before[2:, :-4])
    other_way = after[2:, 4:] - before[:-2, :-4]
    assert np.std(other_way) > 0.05 * np.std(before)


def test_any_order_of_times_gives_the_same_screens() -> None:
    air, again = screens(7), screens(7)
    later = air.phase(40.0)
    for time in (0.0, 13.0, 40.0):
        last = again.phase(time)
    np.testing.assert_array_equal(later, last)
    np.testing.assert_array_equal(air.phase(13.0), screens(7).phase(13.0))
    assert np.std(screens(8).phase(13.0) - air.phase(13.0)) > 0.1


def test_nothing_comes_back() -> None:
    blocks = Blocks(
        SAMPLES, outer_scale=np.inf, direction=(1.0, 0.0), key=(0,), entropy=(1, 2, 3, 4)
    )
    first = blocks.patch(0, 0)
    for periods in range(1, 6):
        other = blocks.patch(8 * SAMPLES * periods, 0)
        assert abs(np.corrcoef(first.ravel(), other.ravel())[0, 1]) < 0.6
        assert 0.3 < np.std(other) / np.std(first) < 3.0
    assert len(blocks._pairs) <= 2


def test_shares_add_up_to_one_turbulence() -> None:
    flows = [Flow(3.0, (5.0, 0.0)), Flow(1.0, (0.0, -20.0)), Flow(0.0, (1.0, 1.0))]
    several = [
        screens(seed, flows=flows, outer_scale=2.0).phase(1.0).astype(float) for seed in range(120)
    ]
    theory = von_karman_structure(np.array(LAGS) * STEP, DIAMETER, 2.0)
    values = structures(np.array(several))
    assert agrees(values, theory, 0.03)
    assert not agrees(values, 1.3 * theory, 0.03)


def test_waves_and_blocks_share_the_plane_between_them() -> None:
    # Cells of the half plane, doubled, and the middle one fill the square that blocks leave.
    parts = cells(SAMPLES, 25.0 / STEP)
    area = sum(side**2 * len(middles) * 2.0 for side, middles in parts[:-1]) + parts[-1][0] ** 2
    assert area == pytest.approx((17.0 / (8 * SAMPLES)) ** 2, rel=1e-12)
    assert block_side(SAMPLES) == 8 * SAMPLES
    assert block_side(122) == 980
    amplitudes = block_amplitudes(8 * SAMPLES, 25.0 / STEP)
    assert (amplitudes[:9, :9] == 0.0).all()
    assert (amplitudes[:9, 9] > 0.0).all()
    assert (amplitudes[-8:, :9] == 0.0).all()


@pytest.mark.parametrize(
    "wrong",
    [{"r0": 0.0}, {"r0": np.nan}, {"outer_scale": 0.0}, {"samples": 33}, {"flows": [Flow(0.0)]}],
)
def test_nonsense_is_refused(wrong: dict[str, object]) -> None:
    with pytest.raises(ValueError, match=r"must be|no layer"):
        screens(1, **wrong)
