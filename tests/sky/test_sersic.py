import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from simimg.sky.sersic import SersicShape, sersic_b, sersic_transform
from simimg.sky.shapes import Shape
from tests.reference import shapes
from tests.sky.quadrature import hankel, plane, sersic_rotated

# Transforms are promised to 1e-6 at every frequency.
PROMISE = 1e-6


def at(shape, k):
    """Transform at k = 2 pi f Re along +x."""
    return shape.transform(np.asarray(k) / (2.0 * np.pi * shape.effective_radius), 0.0)


@pytest.mark.parametrize(("index", "value"), shapes.SERSIC_B.items())
def test_b_is_the_published_one(index, value):
    assert_allclose(sersic_b(index), value, atol=shapes.SERSIC_B_ATOL, rtol=0)


@pytest.mark.parametrize("index", [2.0, 4.0, 10.0])
def test_b_agrees_with_the_published_series(index):
    one, zero, *inverse = shapes.SERSIC_B_SERIES
    series = one * index + zero + sum(c / index ** (i + 1) for i, c in enumerate(inverse))
    # The first term left out is of order 1e-4/n^3.
    assert_allclose(sersic_b(index), series, atol=1e-4 / index**3, rtol=0)


def test_gaussian_closed_form():
    k = np.logspace(-4, 4, 2000)
    assert_allclose(at(SersicShape(2e-6, 0.5), k), np.exp(-(k**2) / (4 * np.log(2))), atol=PROMISE)


def test_exponential_closed_form():
    k = np.logspace(-4, 4, 2000)
    expected = (1.0 + (k / sersic_b(1.0)) ** 2) ** -1.5
    assert_allclose(at(SersicShape(2e-6, 1.0), k), expected, atol=PROMISE)
    # The integral itself, without the table, is good to rounding.
    assert_allclose(sersic_transform(k, 1.0), expected, atol=1e-12, rtol=0)


@pytest.mark.parametrize("index", [1.3, 2.0, 2.5, 4.0, 5.5, 8.0, 10.0])
def test_peaked_profiles_against_a_contour_without_oscillation(index):
    k = np.logspace(-4, 5, 40)
    direct = np.array([sersic_rotated(one, index) for one in k])
    assert_allclose(at(SersicShape(1e-5, index), k), direct, atol=PROMISE, rtol=0)
    # Without the table: the integral and this quadrature are both good to 1e-12 or so.
    assert_allclose(sersic_transform(k, index), direct, atol=1e-11, rtol=0)


@pytest.mark.parametrize("index", [0.3, 0.4, 0.7, 0.9])
def test_flat_profiles_against_direct_quadrature(index):
    b = sersic_b(index)
    k = np.concatenate([np.logspace(-3, 0, 10), np.linspace(1.0, 60.0, 100)])
    # Beyond (40/b)^n the profile is under exp(-40).
    direct = hankel(lambda r: np.exp(-b * r ** (1.0 / index)), k, edge=(40.0 / b) ** index)
    assert_allclose(at(SersicShape(1e-5, index), k), direct, atol=PROMISE, rtol=0)


@pytest.mark.parametrize("index", [0.3, 1.0, 4.0, 10.0])
def test_ends_of_the_table(index):
    shape = SersicShape(1e-5, index)
    assert shape.transform(0.0, 0.0) == 1.0
    assert_allclose(shape.transform([1e-12, 1e-3, 1e30], 0.0), [1.0, 1.0, 0.0], atol=PROMISE)


@pytest.mark.parametrize("index", [0.5, 1.0])
def test_ellipse_and_angle_against_a_plain_sum_over_astropys_image(index):
    from astropy.modeling.models import Sersic2D

    ratio, angle = 0.55, 0.6
    model = Sersic2D(amplitude=1.0, r_eff=1.0, n=index, ellip=1.0 - ratio, theta=angle)
    axis = np.linspace(-12.0, 12.0, 961)
    x, y = np.meshgrid(axis, axis)
    u = np.array([0.1, 0.0, 0.2, -0.15, 0.3])
    v = np.array([0.0, 0.1, 0.1, 0.25, 0.3])
    direct = plane(model(x, y), x, y, u, v)
    shape = SersicShape(1.0, index, ratio, angle)
    # The cusp of n = 1 costs the sum 1e-5 at this step of 1/40 Re; swapping the sense of the angle
    # would cost 1e-1.
    assert_allclose(shape.transform(u, v), direct, atol=2e-5, rtol=0)
    assert np.abs(shape.transform(u, -v) - direct).max() > 0.05


@pytest.mark.parametrize("index", [0.5, 1.0, 2.5, 4.0, 10.0])
def test_profile_against_astropy(index):
    from astropy.modeling.models import Sersic2D

    ratio, angle = 0.4, -0.8
    shape = SersicShape(3.0, index, ratio, angle)
    amplitude = float(shape.brightness(3.0))
    model = Sersic2D(amplitude=amplitude, r_eff=3.0, n=index, ellip=1.0 - ratio, theta=angle)
    r = np.array([0.0, 0.01, 0.5, 3.0, 20.0])
    # Both are closed forms: rounding only, amplified by the exponent of up to 40.
    assert_allclose(shape.brightness(r), model(r * np.cos(angle), r * np.sin(angle)), rtol=1e-10)


@pytest.mark.parametrize("index", [0.3, 0.5, 1.0, 4.0, 10.0])
def test_brightness_integrates_to_one_with_half_inside(index):
    shape = SersicShape(2.0, index, 0.7)

    def light(lower, upper):
        def integrand(y):
            r = np.exp(y)
            return 2.0 * np.pi * 0.7 * r * r * float(shape.brightness(r))

        return quad(integrand, np.log(lower), np.log(upper), epsrel=1e-10, limit=400)[0]

    assert_allclose(light(1e-12, 2.0), 0.5, rtol=1e-7)
    assert_allclose(light(2.0, 2.0 * 200.0**index), 0.5, rtol=1e-7)


@pytest.mark.parametrize("index", [0.5, 1.0, 4.0, 10.0])
def test_radii(index):
    shape = SersicShape(2.0, index)
    assert_allclose(shape.radius_for(0.5), 2.0, rtol=1e-12)
    assert shape.radius == shape.radius_for(1e-6) > shape.radius_for(1e-3) > 2.0
    level = float(shape.brightness(5.0))
    assert_allclose(shape.radius_below(level), 5.0, rtol=1e-9)
    assert shape.radius_below(2.0 * float(shape.brightness(0.0))) == 0.0


def test_broadcasts_and_is_a_shape():
    shape = SersicShape(1.0, 4.0, 0.5, 0.3)
    assert isinstance(shape, Shape)
    assert shape.transform(np.ones((1, 5)), np.ones((3, 1))).shape == (3, 5)


@pytest.mark.parametrize(
    "arguments",
    [
        (0.0, 1.0, 1.0, 0.0),
        (-1.0, 1.0, 1.0, 0.0),
        (np.inf, 1.0, 1.0, 0.0),
        (np.nan, 1.0, 1.0, 0.0),
        (1.0, 0.29, 1.0, 0.0),
        (1.0, 10.1, 1.0, 0.0),
        (1.0, np.nan, 1.0, 0.0),
        (1.0, 1.0, 0.0, 0.0),
        (1.0, 1.0, 1.1, 0.0),
        (1.0, 1.0, 1.0, np.inf),
    ],
)
def test_refuses(arguments):
    with pytest.raises(ValueError, match="must be"):
        SersicShape(*arguments)
