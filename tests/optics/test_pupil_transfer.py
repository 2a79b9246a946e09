"""Transfer functions by autocorrelation, against direct quadrature of the aperture's diffraction.

The reference amplitude is the Fourier integral of the open aperture itself: Bessel functions for
the annulus, less each vane integrated as a bundle of straight lines.
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import j1

from simimg.optics.pupil import annular_pupil, map_pupil
from simimg.optics.transfer import annular_transfer, pupil_transfer

DIAMETER, OBSTRUCTION = 2.0, 0.3

# Directions on the sky as (kx, ky) in wavelength/diameter: core, rings, spikes and between them.
DIRECTIONS = [(0.0, 0.0)] + [
    (k * np.cos(a), k * np.sin(a))
    for k in (0.3, 0.9155, 1.6, 2.7, 5.0, 11.3, 20.0, 37.7, 60.0)
    for a in np.radians([0.0, 20.0, 45.0, 110.0, 135.0])
]


def amplitude(k, vanes):
    """Fourier integral over the aperture (m2), ``k`` in wavelength/diameter."""
    kx, ky = k[0] / DIAMETER, k[1] / DIAMETER

    def disc(radius):
        x = 2 * np.pi * radius * np.hypot(kx, ky)
        return np.pi * radius**2 * (2 * j1(x) / x if x else 1.0)

    outer, inner = DIAMETER / 2, DIAMETER / 2 * OBSTRUCTION
    total = complex(disc(outer) - disc(inner))
    if vanes is None:
        return total
    count, width, angle = vanes
    node, weight = np.polynomial.legendre.leggauss(60)
    t, w = 0.5 * width * node, 0.5 * width * weight
    first, last = np.sqrt(inner**2 - t**2), np.sqrt(outer**2 - t**2)
    for i in range(count):
        direction = angle + 2 * np.pi * i / count
        along = kx * np.cos(direction) + ky * np.sin(direction)
        across = ky * np.cos(direction) - kx * np.sin(direction)
        length = (last - first) * np.sinc(along * (last - first))
        phase = np.exp(-2j * np.pi * (along * 0.5 * (first + last) + across * t))
        total -= np.sum(w * length * phase)
    return total


def spread(transfer, k, reach, steps=1200):
    """Fourier integral of the transfer function (m2) in the directions ``k``."""
    h = reach / steps
    x = np.arange(-steps, steps + 1) * h
    half = transfer(x[np.newaxis, :], x[steps:, np.newaxis])
    half[1:] *= 2.0
    values = []
    for kx, ky in k:
        px, py = 2 * np.pi * kx / DIAMETER * x, 2 * np.pi * ky / DIAMETER * x[steps:]
        # Even in (x, y) together: the cosine of the sum, halves added.
        values.append(np.cos(py) @ (half @ np.cos(px)) - np.sin(py) @ (half @ np.sin(px)))
    return np.array(values) * h * h


@pytest.mark.parametrize(
    "vanes", [(4, 0.02, np.pi / 4), (3, 0.05, 0.2), (4, 0.1, 0.0), (1, 0.03, 2.0)]
)
def test_psf_of_a_pupil_with_vanes(vanes):
    pupil = annular_pupil(DIAMETER, OBSTRUCTION, vanes=vanes)
    got = spread(pupil_transfer(pupil), DIRECTIONS, DIAMETER)
    direct = np.array([abs(amplitude(k, vanes)) ** 2 for k in DIRECTIONS])
    # The integral of the transfer function is the area; the image as a whole has 1e-5 of the peak
    # to spend, and the pupil may take a fifth of it.
    assert_allclose(got / pupil.area, direct / direct[0], rtol=0, atol=2e-6)
    assert_allclose(pupil.area, np.sqrt(direct[0]), rtol=5e-6)


def test_vanes_are_felt():
    """The same comparison fails without the vanes: it is not blind to them."""
    vanes = (4, 0.1, 0.0)
    plain = annular_pupil(DIAMETER, OBSTRUCTION)
    got = spread(pupil_transfer(plain), DIRECTIONS, DIAMETER) / plain.area
    direct = np.array([abs(amplitude(k, vanes)) ** 2 for k in DIRECTIONS])
    assert np.abs(got - direct / direct[0]).max() > 1e-3


def test_round_pupil_is_the_closed_form():
    transfer = pupil_transfer(annular_pupil(DIAMETER, OBSTRUCTION))
    x, y = np.linspace(-2.1, 2.1, 7)[np.newaxis, :], np.linspace(-2.1, 2.1, 5)[:, np.newaxis]
    expected = annular_transfer(np.hypot(x, y), diameter=DIAMETER, obstruction=OBSTRUCTION)
    assert_allclose(transfer(x, y), expected, rtol=0, atol=0)


def test_autocorrelation_comes_to_the_closed_form():
    """A map of an annulus, drawn as steps, converges to the analytic PSF."""
    k = np.array(DIRECTIONS)
    direct = np.array([abs(amplitude(one, None)) ** 2 for one in k])
    errors = []
    for samples in (128, 512):
        axis = (np.arange(samples) + 0.5) / samples * 2 - 1
        radius = np.hypot(axis[np.newaxis, :], axis[:, np.newaxis])
        pupil = map_pupil(((radius < 1) & (radius > OBSTRUCTION)).astype(float), DIAMETER)
        got = spread(pupil_transfer(pupil), k, pupil.reach) / pupil.area
        errors.append(np.abs(got - direct / direct[0]).max())
    # Steps miss the rim by a fraction of a pixel here and there.
    assert errors[0] < 3e-3
    assert errors[1] < errors[0] / 4


def test_a_map_of_the_built_pupil_is_the_built_pupil():
    """Read back from a file of open parts: the same image, without the closed form's help."""
    vanes = (4, 0.02, np.pi / 4)
    built = annular_pupil(DIAMETER, OBSTRUCTION, vanes=vanes)
    read = map_pupil(built.amplitude, DIAMETER, hard_edges=True)
    x, y = np.linspace(-1.9, 1.9, 40)[np.newaxis, :], np.linspace(-1.9, 1.9, 37)[:, np.newaxis]
    # Where edges touch, the spline alone rounds the kinks off.
    assert_allclose(pupil_transfer(read)(x, y), pupil_transfer(built)(x, y), rtol=0, atol=5e-5)
    got = spread(pupil_transfer(read), DIRECTIONS, DIAMETER) / read.area
    direct = np.array([abs(amplitude(k, vanes)) ** 2 for k in DIRECTIONS])
    assert_allclose(got, direct / direct[0], rtol=0, atol=2e-6)


def test_square_map_is_a_product_of_triangles():
    transfer = pupil_transfer(map_pupil(np.full((64, 64), 0.5), 1.6))
    shift = np.arange(-70, 71) * 0.025
    got = transfer(shift[np.newaxis, :], shift[:, np.newaxis])
    triangle = np.maximum(1 - np.abs(shift) / 1.6, 0.0)
    # Whole-pixel shifts: the spline passes through the sums themselves.
    assert_allclose(got, triangle[:, np.newaxis] * triangle, rtol=0, atol=1e-12)
    assert_allclose(transfer.reach, 1.6 * np.sqrt(2.0))
    assert transfer(1.5, 1.5) > 0.0
    assert transfer([1.61, 0.0], [0.0, 1.61]).tolist() == [0.0, 0.0]


@pytest.fixture(scope="module", params=["vanes", "map"])
def transfer(request):
    if request.param == "vanes":
        return pupil_transfer(
            annular_pupil(DIAMETER, OBSTRUCTION, vanes=(3, 0.04, 0.3), samples=256)
        )
    rng = np.random.default_rng(7)
    return pupil_transfer(map_pupil(rng.uniform(size=(48, 48)), DIAMETER))


def test_ends(transfer):
    assert_allclose(transfer(0.0, 0.0), 1.0, rtol=0, atol=1e-14)
    beyond = transfer.reach * np.array([1.0, 1.0001, 1.5, 1e6])
    assert transfer(beyond, 0.0).tolist() == [0.0] * 4
    assert transfer(0.6 * beyond, 0.8 * beyond + 1e-9).tolist() == [0.0] * 4


def test_even_real_and_within_bounds(transfer):
    x, y = np.random.default_rng(1).uniform(-2.2, 2.2, (2, 500))
    got = transfer(x, y)
    assert got.dtype == np.float64
    assert_allclose(got, transfer(-x, -y), rtol=0, atol=1e-12)
    assert got.min() >= 0.0
    assert got.max() < 1.0


def test_grid_equals_points(transfer):
    """The separable path in any order of shifts, FFT order included."""
    x = np.fft.fftfreq(40, 1 / 5.0)[np.newaxis, :]
    y = np.linspace(2.3, -2.3, 31)[:, np.newaxis]
    grid = transfer(x, y)
    points = transfer(*np.broadcast_arrays(x, y))
    assert grid.shape == (31, 40)
    assert_allclose(grid, points, rtol=0, atol=1e-13)


def test_axes_are_x_then_y():
    """A slit that is wide along x keeps its overlap for long shifts along x."""
    opening = np.zeros((32, 32))
    opening[12:20, :] = 1.0
    transfer = pupil_transfer(map_pupil(opening, 1.0))
    assert_allclose(transfer(0.5, 0.0), 0.5, atol=1e-12)
    assert_allclose(transfer(0.0, 0.5), 0.0, atol=1e-12)


def test_an_obstruction_dims_but_leaves_no_hole_in_the_image():
    for vanes in (None, (4, 0.05, 0.0)):
        pupil = annular_pupil(DIAMETER, OBSTRUCTION, vanes=vanes)
        transfer = pupil_transfer(pupil)
        assert pupil.area < annular_pupil(DIAMETER).area * (1 - OBSTRUCTION**2) * 1.000001
        psf = spread(transfer, [(0.0, 0.0), (0.1, 0.0), (0.2, 0.0), (0.3, 0.0)], DIAMETER)
        # Brightest in the middle, and all the light that enters is in the image.
        assert np.all(np.diff(psf) < 0.0)
        assert_allclose(transfer(0.0, 0.0), 1.0, rtol=0, atol=1e-14)
