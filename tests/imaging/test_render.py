"""The engine against direct quadrature, and against itself where two roads must meet."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from simimg.errors import InputError
from simimg.imaging.basis import PsfBasis, Transfer, WingLaw
from simimg.imaging.render import expected_image
from simimg.imaging.sources import PlacedShape, Points, Sources, no_points
from tests.imaging import quadrature

WAVELENGTH = 550e-9
DIAMETER = 2.0
ARCSEC = np.pi / 180 / 3600
# Fried's parameter of ordinary air at 550 nm.
R0 = 0.12


def wings(obstruction, air):
    cusp = WAVELENGTH * 4 / (np.pi * DIAMETER * (1 - obstruction))
    tail = 3.4419385 * (WAVELENGTH / R0) ** (5 / 3) * 0.006653 if air else 0.0
    return WingLaw(cubic=2 * cusp / (4 * np.pi**2), kolmogorov=tail)


def transfer(obstruction=0.0, air=False, box=0.0):
    def optics(f):
        return quadrature.annulus_transfer(
            f, wavelength=WAVELENGTH, diameter=DIAMETER, obstruction=obstruction
        )

    def turbulence(f):
        return np.exp(-3.4419385 * (WAVELENGTH * f / R0) ** (5 / 3))

    factors = (optics, turbulence) if air else (optics,)
    return Transfer(DIAMETER / WAVELENGTH, factors, box=box, wings=wings(obstruction, air))


def one(x, y, electrons=1.0):
    return Sources(Points(np.array([x]), np.array([y]), np.array([electrons])))


@pytest.mark.parametrize("obstruction", [0.0, 0.3, 0.5])
@pytest.mark.parametrize("pixel", [0.5, 2.5], ids=["critical", "5x-undersampled"])
@pytest.mark.parametrize("place", [(14.0, 13.0), (14.37, 12.81), (14.5, 13.5)])
def test_diffraction_image_agrees_with_quadrature(obstruction, pixel, place):
    scale = pixel * WAVELENGTH / DIAMETER
    x, y = place
    image = expected_image(
        PsfBasis((transfer(obstruction, box=scale),)),
        one(x, y),
        columns=30,
        rows=26,
        pixel_scale=scale,
    )

    def psf(r):
        return quadrature.airy(r, wavelength=WAVELENGTH, diameter=DIAMETER, obstruction=obstruction)

    direct = quadrature.pixel_image(
        psf, x=x, y=y, columns=30, rows=26, pixel_scale=scale, order=8 if pixel < 1 else 26
    )
    # The promised tolerance of the engine: 1e-5 of the peak.
    assert_allclose(image, direct, rtol=0, atol=1e-5 * direct.max())


@pytest.mark.parametrize("obstruction", [0.0, 0.3])
@pytest.mark.parametrize("pixel_arcsec", [0.12, 0.9, 2.2])
def test_image_through_air_agrees_with_quadrature(obstruction, pixel_arcsec):
    scale = pixel_arcsec * ARCSEC
    x, y = 15.23, 12.68
    full = transfer(obstruction, air=True)
    direct_psf = quadrature.radial_psf(full.modulus, DIAMETER / WAVELENGTH, 25 * scale)
    direct = quadrature.pixel_image(
        direct_psf, x=x, y=y, columns=32, rows=26, pixel_scale=scale, order=16
    )
    image = expected_image(
        PsfBasis((full.with_pixel(scale),)), one(x, y), columns=32, rows=26, pixel_scale=scale
    )
    assert_allclose(image, direct, rtol=0, atol=1e-5 * direct.max())


def test_a_wrong_pixel_would_be_seen():
    """The comparison can fail: a pixel one per cent too wide is far outside the tolerance."""
    scale = 0.5 * WAVELENGTH / DIAMETER
    good = expected_image(
        PsfBasis((transfer(box=scale),)), one(10, 10), columns=21, rows=21, pixel_scale=scale
    )
    bad = expected_image(
        PsfBasis((transfer(box=1.01 * scale),)), one(10, 10), columns=21, rows=21, pixel_scale=scale
    )
    assert np.abs(good - bad).max() > 1e-4 * good.max()


def field(number, columns, rows, seed=5):
    rng = np.random.default_rng(seed)
    return Points(
        rng.uniform(-30, columns + 30, number),
        rng.uniform(-30, rows + 30, number),
        10 ** rng.uniform(2, 5, number),
    )


@pytest.mark.parametrize("air", [True, False])
def test_tiles_meet_without_a_seam(air):
    scale = 0.25 * ARCSEC if air else 0.5 * WAVELENGTH / DIAMETER
    basis = PsfBasis((transfer(0.3, air=air, box=scale),))
    sources = Sources(field(300, 500, 420))
    size = {"columns": 500, "rows": 420, "pixel_scale": scale}
    whole = expected_image(basis, sources, **size)
    tiled = expected_image(basis, sources, **size, memory_bytes=8_500_000 if air else 15_000_000)
    assert not np.array_equal(whole, tiled)
    assert_allclose(tiled, whole, rtol=0, atol=1e-5 * whole.max())


def test_refusal_names_the_bytes():
    scale = 0.25 * ARCSEC
    basis = PsfBasis((transfer(0.3, air=True, box=scale),))
    with pytest.raises(InputError, match=r"needs \d+ bytes .* allow more memory"):
        expected_image(
            basis, one(5, 5), columns=4000, rows=4000, pixel_scale=scale, memory_bytes=10**6
        )


def test_threads_change_no_bit():
    scale = 0.3 * ARCSEC
    basis = PsfBasis((transfer(0.3, air=True, box=scale),))
    sources = Sources(field(500, 300, 300))
    images = [
        expected_image(basis, sources, columns=300, rows=300, pixel_scale=scale, threads=n)
        for n in (1, 2, 3)
    ]
    assert_array_equal(images[0], images[1])
    assert_array_equal(images[0], images[2])


def test_single_precision_grid_keeps_the_tolerance(monkeypatch):
    """Large grids run in float32; a faint star beside a bright one must survive it."""
    scale = 0.3 * ARCSEC
    basis = PsfBasis((transfer(0.3, air=True, box=scale),))
    sources = Sources(field(400, 256, 256))
    size = {"columns": 256, "rows": 256, "pixel_scale": scale}
    double = expected_image(basis, sources, **size)
    monkeypatch.setattr("simimg.imaging.grid.SINGLE_PRECISION_CELLS", 1)
    single = expected_image(basis, sources, **size)
    assert single.dtype == np.float32
    assert_allclose(single, double, rtol=0, atol=2e-6 * double.max())


def test_a_star_keeps_its_electrons_in_a_frame_that_holds_them():
    scale = 0.3 * ARCSEC
    basis = PsfBasis((transfer(0.3, air=True, box=scale),))
    image = expected_image(basis, one(200.4, 199.7, 1e6), columns=401, rows=401, pixel_scale=scale)
    assert image.sum() == pytest.approx(1e6, rel=1e-3)


def test_light_outside_is_lost_not_wrapped():
    scale = 0.3 * ARCSEC
    basis = PsfBasis((transfer(0.3, air=True, box=scale),))
    image = expected_image(basis, one(-0.5, 50, 1e6), columns=101, rows=101, pixel_scale=scale)
    assert image.sum() == pytest.approx(5e5, rel=0.01)
    # Far side: the true wing at 100 pixels, not a wrapped core.
    assert image[:, -1].max() < 1e-5 * image.max()


def test_a_star_outside_adds_its_wing():
    scale = 0.3 * ARCSEC
    basis = PsfBasis((transfer(0.3, air=True, box=scale),))
    size = {"columns": 101, "rows": 101, "pixel_scale": scale}
    wing = expected_image(basis, one(-60.0, 50.0, 1e8), **size)
    large = expected_image(basis, one(140.0, 150.0, 1e8), columns=401, rows=301, pixel_scale=scale)
    assert_allclose(wing, large[100:201, 200:301], rtol=0, atol=1e-5 * large.max())
    assert wing[50, 0] > 5


def test_weights_mix_the_members():
    """Half of each of two PSFs is the mean of their images; a negative weight subtracts."""
    scale = 0.3 * ARCSEC
    a, b = transfer(0.3, air=True, box=scale), transfer(0.0, air=True, box=scale)
    size = {"columns": 64, "rows": 60, "pixel_scale": scale}
    star = one(30.2, 31.9, 1e4)
    image_a, image_b = (expected_image(PsfBasis((m,)), star, **size) for m in (a, b))
    mixed = PsfBasis((a, b), lambda p: np.tile([1.25, -0.25], (len(p), 1)))
    image = expected_image(mixed, star, **size)
    combined = 1.25 * image_a - 0.25 * image_b
    # The three grids are padded differently, so the light that wraps differs by its allowance.
    assert_allclose(image, combined, rtol=0, atol=5e-6 * image.max())


def test_a_complex_transfer_function_moves_the_star():
    scale = 0.3 * ARCSEC
    base = transfer(0.0, air=True, box=scale)
    shift = (0.37 * scale, -0.21 * scale)
    tilted = Transfer(
        base.band_limit,
        base.radial,
        (lambda u, v: np.exp(-2j * np.pi * (u * shift[0] + v * shift[1])),),
        base.box,
        even=False,
        wings=base.wings,
    )
    size = {"columns": 64, "rows": 60, "pixel_scale": scale}
    moved = expected_image(PsfBasis((tilted,)), one(30, 30), **size)
    placed = expected_image(PsfBasis((base,)), one(30.37, 29.79), **size)
    assert_allclose(moved, placed, rtol=0, atol=5e-6 * placed.max())


class Gaussian:
    """A Gaussian shape, whose image under a Gaussian PSF is known in closed form."""

    def __init__(self, sigma):
        self.sigma = sigma
        self.radius = 7 * sigma

    def radius_below(self, level):  # noqa: ARG002
        return self.radius

    def transform(self, u, v):
        return np.exp(-2 * (np.pi * self.sigma) ** 2 * (u**2 + v**2))


def gaussian_psf(sigma, box=0.0):
    return Transfer(
        1.3 / sigma,
        (lambda f: np.exp(-2 * (np.pi * sigma * f) ** 2),),
        box=box,
        wings=WingLaw(core=7 * sigma),
    )


@pytest.mark.parametrize("sigma_pixels", [0.4, 3.0, 40.0])
def test_shape_image_against_the_closed_form(sigma_pixels):
    from scipy.special import ndtr

    scale = 1e-6
    psf = 1.2 * scale
    shape = PlacedShape(52.3, 60.8, 1e5, Gaussian(sigma_pixels * scale))
    image = expected_image(
        PsfBasis((gaussian_psf(psf, box=scale),)),
        Sources(no_points(), (shape,)),
        columns=110,
        rows=120,
        pixel_scale=scale,
    )
    sigma = np.hypot(sigma_pixels, 1.2)

    def bins(n, centre):
        edges = np.arange(n + 1) - 0.5 - centre
        return np.diff(ndtr(edges / sigma))

    truth = 1e5 * bins(120, 60.8)[:, None] * bins(110, 52.3)[None, :]
    assert_allclose(image, truth, rtol=0, atol=1e-5 * truth.max())


def test_a_shape_over_the_edge_is_cut_not_wrapped():
    scale = 0.3 * ARCSEC
    basis = PsfBasis((transfer(0.3, air=True, box=scale),))
    shape = Gaussian(15 * scale)

    def paint(x, y, columns, rows):
        return expected_image(
            basis,
            Sources(no_points(), (PlacedShape(x, y, 1e6, shape),)),
            columns=columns,
            rows=rows,
            pixel_scale=scale,
        )

    small = paint(-6.3, 90.2, 100, 100)
    large = paint(193.7, 290.2, 500, 500)
    assert_allclose(small, large[200:300, 200:300], rtol=0, atol=1e-5 * large.max())
