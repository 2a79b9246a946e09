import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import j0

from simimg.sky.ring import RingShape
from tests.sky.quadrature import plane


def test_transform_against_direct_quadrature():
    t, w = np.polynomial.legendre.leggauss(300)
    r = 0.5 * (1.4 + 2.2 + t * (2.2 - 1.4)) / 2.0
    k = np.linspace(0.0, 200.0, 250)
    direct = (w * r * j0(np.multiply.outer(k, r))).sum(axis=1) / (w * r).sum()
    # Closed form against a quadrature that is exact to rounding.
    assert_allclose(RingShape(1.4, 2.2).transform(0.0, k / (2 * np.pi)), direct, atol=1e-11)


def test_tilt_squeezes_the_minor_axis():
    inclination, angle = np.radians(60.0), 0.4
    u, v = np.array([0.4, 0.0, 0.8, -0.6]), np.array([0.0, 0.7, 0.3, 0.6])
    axis = np.linspace(-1.0, 1.0, 1401)
    x, y = np.meshgrid(axis, axis)
    along = x * np.cos(angle) + y * np.sin(angle)
    across = (y * np.cos(angle) - x * np.sin(angle)) / np.cos(inclination)
    squared = along**2 + across**2
    image = ((squared <= 1.0) & (squared >= 0.5**2)).astype(float)
    # The jagged edges of the sum are worth a few 1e-4.
    shape = RingShape(1.0, 2.0, inclination, angle)
    assert_allclose(shape.transform(u, v), plane(image, x, y, u, v), atol=1e-3)


def test_edge_on_is_a_line():
    shape = RingShape(1.0, 2.0, np.pi / 2, 0.0)
    v = np.linspace(0.0, 1e3, 11)
    assert_allclose(shape.transform(0.0, v), 1.0, atol=1e-12)
    assert_allclose(shape.transform(0.3, v), RingShape(1.0, 2.0).transform(0.3, 0.0), atol=1e-12)


def test_without_a_hole_is_a_disc():
    from simimg.sky.disc import DiscShape

    u = np.linspace(0.0, 20.0, 50)
    assert_allclose(RingShape(0.0, 2.0).transform(u, 0.0), DiscShape(2.0).transform(u, 0.0))


def test_radii():
    shape = RingShape(1.0, 2.0)
    assert shape.radius == shape.radius_below(1.0) == 1.0
    # A third of the light lies outside sqrt(1 - (1 - 1/4)/3).
    assert_allclose(shape.radius_for(1.0 / 3.0), np.sqrt(0.75), rtol=1e-12)


@pytest.mark.parametrize(
    "arguments",
    [
        (1.0, 1.0),
        (2.0, 1.0),
        (-1.0, 1.0),
        (np.nan, 1.0),
        (0.0, 0.0),
        (0.0, np.inf),
        (0.5, 1.0, -0.1),
        (0.5, 1.0, 2.0),
        (0.5, 1.0, 0.0, np.nan),
    ],
)
def test_refuses(arguments):
    with pytest.raises(ValueError, match="must be"):
        RingShape(*arguments)
