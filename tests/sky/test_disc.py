import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from simimg.sky.disc import DiscShape, darkened_kernel
from tests.reference import shapes
from tests.sky.quadrature import hankel, plane


@pytest.mark.parametrize("darkening", [0.0, 0.3, 0.6, 1.0])
def test_transform_against_direct_quadrature(darkening):
    def brightness(r):
        return 1.0 - darkening * (1.0 - np.sqrt(1.0 - np.minimum(r, 1.0) ** 2))

    k = np.linspace(0.0, 300.0, 250)
    shape = DiscShape(2.0, darkening)
    # Closed form against a quadrature that is exact to rounding.
    assert_allclose(
        shape.transform(k / (2 * np.pi), 0.0), hankel(brightness, k, edge=1.0), atol=1e-11
    )


def test_first_zero_of_an_even_disc():
    zero = brentq(lambda f: float(DiscShape(1.0).transform(f, 0.0)), 1.0, 1.5, xtol=1e-12)
    assert_allclose(zero, shapes.DISC_FIRST_ZERO, atol=shapes.DISC_FIRST_ZERO_ATOL)


def test_first_zero_of_a_disc_dark_at_the_limb():
    zero = brentq(lambda f: float(DiscShape(1.0, 1.0).transform(f, 0.0)), 1.0, 2.0, xtol=1e-12)
    assert_allclose(zero, shapes.DARK_LIMB_FIRST_ZERO, atol=shapes.DARK_LIMB_FIRST_ZERO_ATOL)


def test_series_meets_closed_form():
    below, above = darkened_kernel(np.array([0.3 - 1e-12, 0.3 + 1e-12]))
    assert_allclose(below, above, rtol=1e-12)
    assert_allclose(darkened_kernel(np.array([0.0])), 1.0 / 3.0, rtol=1e-15)


def test_ellipse_and_angle_against_a_plain_sum():
    ratio, angle, darkening = 0.6, 0.5, 0.7
    axis = np.linspace(-1.0, 1.0, 1001)
    x, y = np.meshgrid(axis, axis)
    along = x * np.cos(angle) + y * np.sin(angle)
    across = (y * np.cos(angle) - x * np.sin(angle)) / ratio
    squared = along**2 + across**2
    image = np.where(
        squared <= 1.0, 1.0 - darkening * (1.0 - np.sqrt(np.maximum(0.0, 1.0 - squared))), 0.0
    )
    u, v = np.array([0.3, 0.0, 0.5, -0.5]), np.array([0.0, 0.4, 0.5, 0.5])
    # The jagged edge of the sum is worth 1e-4; the angle's sense 1e-1.
    shape = DiscShape(2.0, darkening, ratio, angle)
    assert_allclose(shape.transform(u, v), plane(image, x, y, u, v), atol=3e-4)
    assert np.abs(shape.transform(u, -v) - shape.transform(u, v)).max() > 0.1


@pytest.mark.parametrize("darkening", [0.0, 0.5, 1.0])
def test_brightness_holds_the_unit_light(darkening):
    shape = DiscShape(2.0, darkening, 0.5)
    t, w = np.polynomial.legendre.leggauss(200)
    a = 0.25 * np.pi * (t + 1.0)
    r = np.sin(a)
    light = (0.25 * np.pi * w * np.cos(a) * 2 * np.pi * 0.5 * r * shape.brightness(r)).sum()
    assert_allclose(light, 1.0, rtol=1e-10)
    assert shape.brightness(1.0001) == 0.0


def test_radii():
    shape = DiscShape(2.0)
    assert shape.radius == shape.radius_below(1e-9) == 1.0
    # Half the light of an even disc lies outside 1/sqrt(2) of the radius.
    assert_allclose(shape.radius_for(0.5), np.sqrt(0.5), rtol=1e-12)
    assert DiscShape(2.0, 0.5).radius_for(0.5) == 1.0


@pytest.mark.parametrize(
    "arguments",
    [
        (0.0,),
        (np.nan,),
        (1.0, -0.1),
        (1.0, 1.1),
        (1.0, np.nan),
        (1.0, 0.0, 0.0),
        (1.0, 0.0, 1.0, np.nan),
    ],
)
def test_refuses(arguments):
    with pytest.raises(ValueError, match="must be"):
        DiscShape(*arguments)
