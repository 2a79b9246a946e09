"""The gridding kernel and the sampling plan."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.errors import InputError
from simimg.imaging.basis import PsfBasis, Transfer, WingLaw
from simimg.imaging.grid import band_edge, peak_share, plan_grid, subdivision
from simimg.imaging.kernel import OVERSAMPLING, WIDTH, alias_error, kernel, kernel_transform
from simimg.imaging.sources import Points, Sources, one_point
from simimg.imaging.spread import spread_points


def gaussian(sigma, box=0.0):
    return Transfer(
        1.3 / sigma,
        (lambda f: np.exp(-2 * (np.pi * sigma * f) ** 2),),
        box=box,
        wings=WingLaw(core=7 * sigma),
    )


def test_kernel_transform_against_a_fine_sum():
    z = np.linspace(-1, 1, 400001)
    k = np.array([0.0, 0.1, 0.29, 0.5])
    direct = np.array(
        [np.trapezoid(kernel(z) * np.cos(np.pi * WIDTH * f * z), z) * WIDTH / 2 for f in k]
    )
    assert_allclose(kernel_transform(k), direct, rtol=1e-6, atol=1e-9)


def test_kernel_error_is_as_published():
    """2e-6 up to the Nyquist frequency over 1.7, for a width of 8 (Barnett et al. 2019)."""
    k = np.linspace(0, 0.5 / OVERSAMPLING, 100)
    assert alias_error(k).max() < 2.5e-6
    assert alias_error(np.array([0.49]))[0] > 0.1
    assert alias_error(np.array([0.6]))[0] == 1


@pytest.mark.parametrize("place", [(20.0, 21.0), (20.37, 19.5), (0.1, 31.9), (-1.3, 2.2)])
def test_a_spread_star_has_the_phase_of_its_place(place):
    """Its spectrum over the kernel's own is a pure wave, to the kernel's error."""
    n = 32
    grid = np.zeros((n, n))
    spread_points(grid, np.array([place[0]]), np.array([place[1]]), np.array([3.0]))
    spectrum = np.fft.fft2(grid)
    k = np.fft.fftfreq(n)
    low = np.abs(k) < 0.5 / OVERSAMPLING
    wave = 3 * np.exp(-2j * np.pi * (k[None, :] * place[0] + k[:, None] * place[1]))
    found = spectrum / kernel_transform(k)[None, :] / kernel_transform(k)[:, None]
    assert_allclose(found[np.ix_(low, low)], wave[np.ix_(low, low)], rtol=0, atol=3 * 5e-6)


def test_cells_grow_coarser_with_the_seeing():
    scale = 1e-6
    counts = [subdivision(PsfBasis((gaussian(s * scale, scale),)), scale) for s in (0.2, 0.6, 2.0)]
    assert counts[0] > counts[1] >= counts[2] == 1


def test_a_hopeless_pixel_is_refused():
    with pytest.raises(InputError, match="times as wide as the finest detail"):
        subdivision(PsfBasis((gaussian(1e-9, 1e-6),)), 1e-6)


def test_peak_share_of_a_gaussian():
    from scipy.special import erf

    scale, sigma = 1e-6, 1.3e-6
    share = erf(0.5 * scale / sigma / np.sqrt(2)) ** 2
    assert peak_share(gaussian(sigma, scale), scale) == pytest.approx(share, rel=1e-3)


def test_band_edge_is_where_nothing_is_left():
    edge = band_edge(gaussian(1e-6))
    assert np.exp(-2 * (np.pi * 1e-6 * edge) ** 2) == pytest.approx(1e-10, rel=0.2)


def test_the_plan_covers_the_frame_once():
    rng = np.random.default_rng(3)
    points = Points(rng.uniform(0, 500, 50), rng.uniform(0, 300, 50), np.full(50, 1e4))
    basis = PsfBasis((gaussian(1.5e-6, 1e-6),))
    size = {"columns": 500, "rows": 300, "pixel_scale": 1e-6}
    plan = plan_grid(basis, Sources(points), **size, memory_bytes=3_000_000)
    assert len(plan.tiles) > 1
    assert plan.bytes <= 3_000_000
    covered = np.zeros((300, 500), dtype=int)
    for t in plan.tiles:
        covered[t.row : t.row + t.rows, t.column : t.column + t.columns] += 1
        assert t.length_x >= t.columns + t.margins[0] + t.margins[1]
        assert t.length_x % 2 == 0
    assert np.all(covered == 1)


def test_a_bright_star_outside_widens_the_margin_and_a_faint_one_does_not():
    law = WingLaw(cubic=1e-7, core=7e-6)
    member = Transfer(1e6, (lambda f: np.exp(-2 * (np.pi * 1e-6 * f) ** 2),), box=1e-6, wings=law)
    size = {"columns": 100, "rows": 100, "pixel_scale": 1e-6, "memory_bytes": 2**30}

    def margin(electrons):
        return (
            plan_grid(PsfBasis((member,)), Sources(one_point(-150, 50, electrons)), **size)
            .tiles[0]
            .margins[0]
        )

    assert margin(1e9) == 150
    assert margin(1.0) == 0
