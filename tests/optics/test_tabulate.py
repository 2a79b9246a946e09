import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.tabulate import MOST_STEPS, tabulated_transfer
from simimg.optics.transfer import annular_transfer

DIAMETER, OBSTRUCTION, FRIED = 2.0, 0.3, 0.1
WAVELENGTHS = np.linspace(500e-9, 600e-9, 6)


def perfect(u, v):
    f = np.hypot(u, v)
    parts = [
        annular_transfer(x * f, diameter=DIAMETER, obstruction=OBSTRUCTION) for x in WAVELENGTHS
    ]
    return sum(parts) / len(parts)


def through_air(u, v):
    """With turbulence, and dispersion of half a second of arc along +x."""
    f, total = np.hypot(u, v), 0.0
    for x in WAVELENGTHS:
        fried = FRIED * (x / 500e-9) ** 1.2
        blur = np.exp(-3.44 * (x * f / fried) ** (5 / 3))
        pupil = annular_transfer(x * f, diameter=DIAMETER, obstruction=OBSTRUCTION)
        total = total + pupil * blur * np.exp(-2j * np.pi * u * (x - 550e-9) * 25)
    return total / len(WAVELENGTHS)


def image(transfer, limit, angles, steps=700):
    h = limit / steps
    s = np.arange(-steps, steps + 1) * h
    values = transfer(s[np.newaxis, :], s[:, np.newaxis])
    rows = [np.exp(2j * np.pi * y * s) @ (values @ np.exp(2j * np.pi * x * s)) for x, y in angles]
    return np.real(rows) * h * h


def rays(unit, radii):
    return [(unit * r * np.cos(a), unit * r * np.sin(a)) for r in radii for a in (0.1, 0.8, 2.0)]


@pytest.mark.parametrize(
    ("function", "limit", "steps", "unit"),
    [
        (perfect, DIAMETER / WAVELENGTHS[0], 128, 550e-9 / DIAMETER),
        (through_air, 3.2 * FRIED / WAVELENGTHS[0], 128, 550e-9 / FRIED),
    ],
)
def test_image_of_the_table_is_that_of_the_function(function, limit, steps, unit):
    table = tabulated_transfer(function, limit=limit, step=limit / steps)
    angles = rays(unit, (0.0, 0.4, 0.9, 1.3, 2.2, 3.7, 8.0, 15.0))
    expected = image(function, limit, angles)
    assert_allclose(image(table, limit, angles), expected, rtol=0, atol=1e-6 * expected[0])
    coarse = tabulated_transfer(function, limit=limit, step=limit / 16)
    assert np.abs(image(coarse, limit, angles) - expected).max() > 1e-5 * expected[0]


def test_values_grid_points_and_ends():
    limit = 3.2 * FRIED / WAVELENGTHS[0]
    table = tabulated_transfer(through_air, limit=limit, step=limit / 100)
    u, v = np.random.default_rng(3).uniform(-1.1 * limit, 1.1 * limit, (2, 300))
    expected = np.where(np.hypot(u, v) < limit, through_air(u, v), 0.0)
    assert_allclose(table(u, v), expected, rtol=0, atol=2e-5)
    assert_allclose(table(u, v), table(-u, -v).conj(), rtol=0, atol=1e-6)
    grid = table(u[np.newaxis, :40], v[:30, np.newaxis])
    points = table(*np.broadcast_arrays(u[np.newaxis, :40], v[:30, np.newaxis]))
    # The grid is worked in single precision.
    assert_allclose(grid, points, rtol=0, atol=1e-6)
    assert_allclose(table(0.0, 0.0), 1.0, rtol=0, atol=1e-6)
    assert table(limit, 0.0) == 0.0


@pytest.mark.parametrize(
    ("limit", "step", "message"),
    [(0.0, 1.0, "limit"), (1.0, np.nan, "step"), (1.0 + MOST_STEPS, 1.0, "at most")],
)
def test_nonsense_is_refused(limit, step, message):
    with pytest.raises(ValueError, match=message):
        tabulated_transfer(perfect, limit=limit, step=step)
