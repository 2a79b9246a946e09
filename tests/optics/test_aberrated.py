"""Transfer functions with a wavefront, against direct quadrature of the diffraction integral.

The reference amplitude is a Gauss-Legendre sum over the annulus itself, with the wavefront's closed
form: no lattice, no FFT, no spline.
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.aberrated import aberrated_transfer
from simimg.optics.pupil import annular_pupil, map_pupil
from simimg.optics.transfer import pupil_transfer
from simimg.optics.wavefront import axial_strehl, pupil_places, zernike_wavefront
from simimg.optics.zernike import zernike
from tests.reference import wavefront as reference

DIAMETER, WAVELENGTH = 2.0, 500e-9

# Directions on the sky as (kx, ky) in wavelength/diameter.
DIRECTIONS = [(0.0, 0.0)] + [
    (k * np.cos(a), k * np.sin(a))
    for k in (0.3, 0.7, 1.2, 1.6, 2.7, 5.0, 11.3, 20.0, 37.7)
    for a in np.radians([0.0, 25.0, 90.0, 160.0, 235.0, 300.0])
]


def direct(terms, obstruction, directions, rings=90, spokes=360):
    """PSF over the perfect peak; terms in waves rms, Noll index -> waves."""
    node, weight = np.polynomial.legendre.leggauss(rings)
    t = obstruction**2 + (1 - obstruction**2) * (node + 1) / 2
    theta = 2 * np.pi * (np.arange(spokes) + 0.5) / spokes
    r = np.sqrt(t)[:, None]
    x, y = r * np.cos(theta), r * np.sin(theta)
    waves = sum(rms * zernike(j, x, y, obstruction=obstruction) for j, rms in terms.items())
    # The light leans towards the longer path: exp(i(phase - 2 pi k.r)).
    values = []
    for kx, ky in directions:
        phase = 2 * np.pi * (waves - 0.5 * (kx * x + ky * y))
        values.append(abs(np.sum(weight[:, None] / 2 / spokes * np.exp(1j * phase))) ** 2)
    return np.array(values)


def spread(transfer, directions, reach=DIAMETER, steps=900):
    """Image in the directions: integral of the transfer function times exp(+2 pi i f.x) (m2)."""
    h = reach / steps
    s = np.arange(-steps, steps + 1) * h
    half = transfer(s[np.newaxis, :], s[steps:, np.newaxis])
    half[1:] *= 2.0
    values = []
    for kx, ky in directions:
        along = half @ np.exp(2j * np.pi * kx / DIAMETER * s)
        values.append((np.exp(2j * np.pi * ky / DIAMETER * s[steps:]) @ along).real)
    return np.array(values) * h * h


@pytest.mark.parametrize(
    ("terms", "obstruction"),
    [
        ({4: 0.1}, 0.0),
        ({8: 0.15}, 0.3),
        ({4: 0.2, 5: -0.1, 7: 0.12, 11: 0.08}, 0.3),
        ({2: 1.0, 3: -0.4}, 0.2),
        ({4: 1.0}, 0.0),
        ({4: -0.8, 6: 0.5, 8: 0.4, 10: 0.3, 11: 0.2}, 0.3),
    ],
)
def test_psf_against_direct_quadrature(terms, obstruction):
    pupil = annular_pupil(DIAMETER, obstruction)
    path = zernike_wavefront(pupil, {j: rms * WAVELENGTH for j, rms in terms.items()})
    transfer = aberrated_transfer(pupil, path, WAVELENGTH)
    got = spread(transfer, DIRECTIONS) / pupil.area
    expected = direct(terms, obstruction, DIRECTIONS)
    # Of the perfect peak: a fifth of what the image as a whole may spend.
    assert_allclose(got, expected, rtol=0, atol=2e-6)


@pytest.mark.parametrize("waves", reference.DEFOCUS_AXIAL_INTENSITY)
def test_defocus_on_the_axis(waves):
    """Sinc squared, from the image itself."""
    pupil = annular_pupil(DIAMETER)
    x, y = pupil_places(pupil)
    path = waves * WAVELENGTH * (x * x + y * y)
    got = spread(aberrated_transfer(pupil, path, WAVELENGTH), [(0.0, 0.0)]) / pupil.area
    assert_allclose(
        got,
        reference.DEFOCUS_AXIAL_INTENSITY[waves],
        rtol=0,
        atol=reference.DEFOCUS_AXIAL_INTENSITY_ATOL,
    )
    # The sum over grey squares has 1e-5 of its own.
    assert_allclose(got, axial_strehl(path, pupil, WAVELENGTH), rtol=0, atol=2e-5)


@pytest.mark.parametrize("index", range(2, 23))
def test_one_wave_rms_keeps_all_the_light(index):
    """Energy: 1 at zero shift, and the image's sum over a wide field comes to it."""
    samples = 128
    pupil = annular_pupil(DIAMETER, 0.2, samples=samples)
    path = zernike_wavefront(pupil, {index: WAVELENGTH})
    transfer = aberrated_transfer(pupil, path, WAVELENGTH)
    assert_allclose(complex(transfer(0.0, 0.0)), 1.0, rtol=0, atol=1e-7)
    # An image sampled as finely as lambda/2D, over 64 lambda/D, is the transform's own.
    s = np.fft.fftfreq(256, 1 / (2 * DIAMETER))
    image = np.fft.ifft2(transfer(s[np.newaxis, :], s[:, np.newaxis]))
    assert_allclose(image.sum().real, 1.0, rtol=0, atol=1e-6)
    assert np.abs(image.imag).max() < 1e-7 * image.real.max()
    peak = np.fft.ifft2(transfer.perfect(s[np.newaxis, :], s[:, np.newaxis])).real.max()
    # No light is negative, but for what 128 squares leave.
    assert image.real.min() > -1e-5 * peak
    if index > 3:
        # The light left the peak; a tilt only moved it.
        assert image.real.max() < 0.4 * peak


def test_a_tilt_moves_the_image_towards_the_longer_path():
    pupil = annular_pupil(DIAMETER, 0.3)
    x, y = pupil_places(pupil)
    a, b = 4e-7, -2e-7
    transfer = aberrated_transfer(pupil, a * x + b * y, WAVELENGTH)
    sx, sy = np.random.default_rng(2).uniform(-1.4, 1.4, (2, 200))
    u, v = sx / WAVELENGTH, sy / WAVELENGTH
    moved = pupil_transfer(pupil)(sx, sy) * np.exp(-2j * np.pi * (u * a + v * b))
    # Where edges of the two pupils touch, the overlap has kinks that the spline rounds off.
    assert_allclose(transfer(sx, sy), moved, rtol=0, atol=1e-4)
    # And so the first moment of the image: the slope of the phase at zero frequency.
    step = 0.02
    phase = np.angle(transfer(np.array([step, 0.0]), np.array([0.0, step])))
    assert_allclose(-phase * WAVELENGTH / (2 * np.pi * step), [a, b], rtol=1e-4)


@pytest.mark.parametrize(("index", "axis"), [(8, 0), (7, 1)])
def test_coma_throws_its_tail_along_its_axis(index, axis):
    pupil = annular_pupil(DIAMETER)
    path = zernike_wavefront(pupil, {index: 0.2 * WAVELENGTH})
    t = np.linspace(-12, 12, 241)
    directions = [(k, 0.0) if axis == 0 else (0.0, k) for k in t]
    profile = spread(aberrated_transfer(pupil, path, WAVELENGTH), directions, steps=300)
    mean = np.sum(t * profile) / profile.sum()
    # More light far out on the positive side, and the peak on the other.
    assert np.sum((t - mean) ** 3 * profile) > 0.0
    assert t[profile.argmax()] < 0.0
    assert profile[t > 2.5].sum() > 3.0 * profile[t < -2.5].sum()


def test_autocorrelation_by_hand():
    """Sums over the lattice at whole-pixel shifts: the sign of the shift, too."""
    rng = np.random.default_rng(11)
    pupil = map_pupil(rng.uniform(size=(24, 24)), 1.2)
    path = rng.uniform(0.0, 2e-7, (24, 24))
    transfer = aberrated_transfer(pupil, path, WAVELENGTH)
    field = pupil.amplitude * np.exp(2j * np.pi * path / WAVELENGTH)
    padded = np.zeros((72, 72), dtype=complex)
    padded[24:48, 24:48] = field
    for sx, sy in ((3, 0), (0, 5), (-7, 2), (11, -20), (23, 23), (24, 1)):
        shifted = padded[24 + sy : 48 + sy, 24 + sx : 48 + sx]
        expected = np.sum(field * shifted.conj()) * pupil.pitch**2 / pupil.area
        got = transfer(sx * pupil.pitch, sy * pupil.pitch)
        # Single precision.
        assert_allclose(complex(got), expected, rtol=0, atol=3e-7)


@pytest.fixture(scope="module")
def transfer():
    pupil = annular_pupil(DIAMETER, 0.3, vanes=(3, 0.04, 0.3), samples=256)
    path = zernike_wavefront(pupil, {4: 1e-7, 8: 1e-7, 9: -5e-8})
    return aberrated_transfer(pupil, path, WAVELENGTH)


def test_hermitian_bounded_and_nothing_beyond_the_reach(transfer):
    x, y = np.random.default_rng(1).uniform(-2.2, 2.2, (2, 500))
    got = transfer(x, y)
    assert got.dtype == np.complex128
    assert_allclose(got, transfer(-x, -y).conj(), rtol=0, atol=1e-6)
    assert np.abs(got).max() < 1.0
    assert np.all(np.abs(got) <= transfer.perfect(x, y) + 1e-4)
    beyond = transfer.reach * np.array([1.0, 1.0001, 1.5, 1e6])
    assert transfer(beyond, 0.0).tolist() == [0.0] * 4
    assert not transfer.even


def test_grid_equals_points(transfer):
    x = np.fft.fftfreq(40, 1 / 5.0)[np.newaxis, :]
    y = np.linspace(2.3, -2.3, 31)[:, np.newaxis]
    grid = transfer(x, y)
    points = transfer(*np.broadcast_arrays(x, y))
    assert grid.shape == (31, 40)
    # The grid is worked in single precision.
    assert_allclose(grid, points, rtol=0, atol=3e-7)


def test_a_flat_wavefront_changes_nothing():
    pupil = annular_pupil(DIAMETER, 0.3)
    flat = aberrated_transfer(pupil, np.full(pupil.amplitude.shape, 3e-7), WAVELENGTH)
    assert flat.even
    assert flat.coefficients is None
    s = np.linspace(-2.1, 2.1, 50)
    assert_allclose(flat(s, 0.3), pupil_transfer(pupil)(s, 0.3), rtol=0, atol=0)


def test_even_wavefronts_are_real():
    pupil = annular_pupil(DIAMETER, 0.3, samples=128)
    even = aberrated_transfer(pupil, zernike_wavefront(pupil, {4: 2e-7, 6: 1e-7}), WAVELENGTH)
    assert even.even
    assert not np.imag(even(np.linspace(-2, 2, 40), 0.2)).any()


def test_the_perfect_one_serves_every_wavelength():
    pupil = annular_pupil(DIAMETER, 0.3, samples=128)
    path = zernike_wavefront(pupil, {8: 1e-7})
    perfect = pupil_transfer(pupil)
    given = aberrated_transfer(pupil, path, 7e-7, perfect=perfect)
    assert given.perfect is perfect
    assert complex(given(0.5, 0.5)) == complex(aberrated_transfer(pupil, path, 7e-7)(0.5, 0.5))
    # A longer wave suffers less.
    nearer = abs(given(0.5, 0.5)) - abs(aberrated_transfer(pupil, path, 4e-7)(0.5, 0.5))
    assert nearer > 0.01


@pytest.mark.parametrize(
    ("path", "wavelength", "message"),
    [
        (np.zeros((8, 8)), 5e-7, "lattice"),
        (np.full((64, 64), np.nan), 5e-7, "finite"),
        (np.zeros((64, 64)), 0.0, "wavelength"),
        (np.zeros((64, 64)), np.nan, "wavelength"),
    ],
)
def test_nonsense_is_refused(path, wavelength, message):
    with pytest.raises(ValueError, match=message):
        aberrated_transfer(annular_pupil(1.0, samples=64), path, wavelength)
