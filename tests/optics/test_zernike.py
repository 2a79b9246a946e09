import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.pupil import annular_pupil
from simimg.optics.zernike import (
    KOLMOGOROV_HALF,
    LARGEST_INDEX,
    noll_order,
    noll_residual,
    noll_variance,
    zernike,
)
from tests.reference import turbulence
from tests.reference import wavefront as reference


def polar(obstruction, rings=50, spokes=96):
    """Points and weights of a quadrature over the annulus: exact for the polynomials used here."""
    node, weight = np.polynomial.legendre.leggauss(rings)
    t = obstruction**2 + (1 - obstruction**2) * (node + 1) / 2
    theta = 2 * np.pi * np.arange(spokes) / spokes
    r = np.sqrt(t)[:, None]
    return r * np.cos(theta), r * np.sin(theta), weight[:, None] / 2 / spokes


def test_nolls_order():
    assert {j: noll_order(j) for j in reference.NOLL_ORDER} == reference.NOLL_ORDER


def test_every_pair_of_orders_comes_once():
    orders = [noll_order(j) for j in range(1, LARGEST_INDEX + 1)]
    expected = {(n, m) for n in range(41) for m in range(-n, n + 1, 2)}
    assert len(set(orders)) == LARGEST_INDEX
    assert set(orders) == expected


@pytest.mark.parametrize("obstruction", [0.0, 0.3, 0.9])
def test_orthonormal_over_the_aperture(obstruction):
    x, y, weight = polar(obstruction)
    terms = [zernike(j, x, y, obstruction=obstruction) for j in [*range(1, 67), 800, LARGEST_INDEX]]
    flat = np.array([term.ravel() for term in terms])
    gram = (flat * (weight * np.ones(x.shape)).ravel()) @ flat.T
    # The quadrature is exact; the recurrence loses some digits at radial order 40.
    assert_allclose(gram, np.eye(len(flat)), rtol=0, atol=1e-11)


@pytest.mark.parametrize("obstruction", [0.0, 0.3])
def test_orthonormal_on_the_lattice(obstruction):
    """On a pupil's grey squares, as the wavefront uses them: 1e-3."""
    pupil = annular_pupil(2.0, obstruction)
    axis = (np.arange(512) - 255.5) / 256
    terms = [
        zernike(j, axis, axis[:, None], obstruction=obstruction) * np.ones_like(pupil.amplitude)
        for j in range(1, 37)
    ]
    flat = np.array([term.ravel() for term in terms])
    gram = (flat * pupil.amplitude.ravel()) @ flat.T / pupil.amplitude.sum()
    assert_allclose(gram, np.eye(36), rtol=0, atol=1e-3)


def test_printed_polynomials():
    """Noll 1976, table I, and Mahajan 1981, table I, written out."""
    x, y = np.random.default_rng(3).uniform(-1, 1, (2, 50))
    r, theta = np.hypot(x, y), np.arctan2(y, x)
    e = 0.4
    printed = {
        (1, 0.0): np.ones(50),
        (2, 0.0): 2 * x,
        (3, 0.0): 2 * y,
        (4, 0.0): np.sqrt(3) * (2 * r**2 - 1),
        (5, 0.0): np.sqrt(6) * r**2 * np.sin(2 * theta),
        (6, 0.0): np.sqrt(6) * r**2 * np.cos(2 * theta),
        (7, 0.0): np.sqrt(8) * (3 * r**3 - 2 * r) * np.sin(theta),
        (8, 0.0): np.sqrt(8) * (3 * r**3 - 2 * r) * np.cos(theta),
        (10, 0.0): np.sqrt(8) * r**3 * np.cos(3 * theta),
        (11, 0.0): np.sqrt(5) * (6 * r**4 - 6 * r**2 + 1),
        (2, e): 2 * x / np.sqrt(1 + e**2),
        (4, e): np.sqrt(3) * (2 * r**2 - 1 - e**2) / (1 - e**2),
        (6, e): np.sqrt(6) * r**2 * np.cos(2 * theta) / np.sqrt(1 + e**2 + e**4),
        (8, e): np.sqrt(8)
        * (3 * (1 + e**2) * r**3 - 2 * (1 + e**2 + e**4) * r)
        / ((1 - e**2) * np.sqrt((1 + e**2) * (1 + 4 * e**2 + e**4)))
        * np.cos(theta),
        (11, e): np.sqrt(5)
        * (6 * r**4 - 6 * (1 + e**2) * r**2 + 1 + 4 * e**2 + e**4)
        / (1 - e**2) ** 2,
    }
    for (index, obstruction), value in printed.items():
        got = zernike(index, x, y, obstruction=obstruction)
        assert_allclose(got, value, rtol=0, atol=1e-12, err_msg=f"{index} {obstruction}")


def test_a_thin_obstruction_changes_nothing():
    x, y, _ = polar(0.0, rings=8, spokes=8)
    for index in (4, 8, 11, 37):
        assert_allclose(
            zernike(index, x, y, obstruction=1e-6), zernike(index, x, y), rtol=0, atol=1e-10
        )


def test_axes_broadcast():
    axis = np.linspace(-1, 1, 5)
    grid = zernike(5, axis[None, :], axis[:, None])
    assert grid.shape == (5, 5)
    assert_allclose(grid[4, 3], zernike(5, 0.5, 1.0))
    assert zernike(1, axis[None, :], axis[:, None]).shape == (5, 5)


def test_nolls_residuals():
    got = {count: noll_residual(count) for count in reference.NOLL_RESIDUAL}
    assert_allclose(
        list(got.values()),
        list(reference.NOLL_RESIDUAL.values()),
        rtol=0,
        atol=reference.NOLL_RESIDUAL_ATOL,
    )


@pytest.mark.parametrize("count", reference.NOLL_RESIDUAL_PRINTED)
def test_nolls_printed_residuals(count):
    assert_allclose(
        noll_residual(count),
        reference.NOLL_RESIDUAL_PRINTED[count],
        rtol=reference.NOLL_RESIDUAL_PRINTED_RTOL,
    )


def test_residual_follows_nolls_law_far_out():
    """Noll 1976, eq. 34: 0.2944 J^(-sqrt(3)/2), good to some per cent."""
    for count in (21, 105, 496):
        assert_allclose(noll_residual(count), 0.2944 * count ** (-np.sqrt(3) / 2), rtol=0.08)


@pytest.mark.parametrize("index", [2, 4, 8])
def test_variance_by_the_structure_function(index):
    """Projected on the polynomial itself, in the plane of the pupil, without a power spectrum."""
    x, y, weight = (np.broadcast_to(a, (16, 24)).ravel() for a in polar(0.0, 16, 24))
    value = zernike(index, x, y) * weight
    distance = np.hypot(x[:, None] - x, y[:, None] - y) / 2
    structure = turbulence.KOLMOGOROV_FACTOR * distance ** (5 / 3)
    # The kink of the structure function at zero distance leaves a per cent at 384 points.
    assert_allclose(-0.5 * value @ structure @ value, noll_variance(index), rtol=0.02)


def test_constant_of_the_structure_function():
    assert_allclose(2 * KOLMOGOROV_HALF, turbulence.KOLMOGOROV_FACTOR, rtol=0, atol=1e-6)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: noll_order(0), "index"),
        (lambda: noll_order(LARGEST_INDEX + 1), "index"),
        (lambda: zernike(4, 0.0, 0.0, obstruction=1.0), "obstruction"),
        (lambda: zernike(4, 0.0, 0.0, obstruction=np.nan), "obstruction"),
        (lambda: zernike(-1, 0.0, 0.0), "index"),
        (lambda: noll_residual(0), "index"),
        (lambda: noll_variance(1), "piston"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
