import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import dblquad

from simimg.sky.disc import DiscShape
from simimg.sky.geometry import points_transform
from simimg.sky.phase import PhaseDiscShape
from simimg.sky.shapes import PointedShape
from tests.reference import shapes

# Points are promised to 1e-6 up to the frequency asked for.
PROMISE = 1e-6


@pytest.mark.parametrize(("degrees", "fraction"), shapes.LIT_FRACTION.items())
def test_lit_fraction(degrees, fraction):
    assert_allclose(
        PhaseDiscShape(2.0, 0.0, np.radians(degrees)).lit_fraction, fraction, atol=1e-12
    )


@pytest.mark.parametrize("degrees", [0.0, 30.0, 90.0, 150.0])
def test_centroid_of_the_lit_part(degrees):
    phase, angle = np.radians(degrees), 0.7
    dx, dy, weight = PhaseDiscShape(2.0, 0.0, phase, 1.0, angle).points(5.0)
    assert_allclose(weight.sum(), 1.0, rtol=1e-13)
    # The terminator is half an ellipse of the semi-axis cos(phase): the first moment of the lit
    # part is (2/3)(1 - cos^2), its area (pi/2)(1 + cos).
    along = shapes.HALF_DISC_CENTROID * (1.0 - np.cos(phase))
    centroid = ((dx * weight).sum(), (dy * weight).sum())
    assert_allclose(centroid, (along * np.cos(angle), along * np.sin(angle)), atol=1e-8)


@pytest.mark.parametrize("darkening", [0.0, 0.6, 1.0])
def test_full_phase_is_the_whole_disc(darkening):
    highest = 40.0
    shape = PhaseDiscShape(1.0, darkening, 0.0, 0.7, 0.4)
    f = np.linspace(0.0, highest, 25)
    angles = np.linspace(0.0, 2 * np.pi, 25) * 3
    u, v = f * np.cos(angles), f * np.sin(angles)
    got = points_transform(*shape.points(highest), u, v)
    assert_allclose(got, DiscShape(1.0, darkening, 0.7, 0.4).transform(u, v), atol=PROMISE)


@pytest.mark.parametrize("degrees", [40.0, 90.0, 140.0])
def test_against_plain_double_quadrature(degrees):
    phase, darkening, ratio, angle = np.radians(degrees), 0.5, 0.8, 1.1

    def integral(weigh):
        # Over x, y in the disc squeezed to a circle, x towards the light.
        def integrand(x, y):
            mu = np.sqrt(max(0.0, 1.0 - x * x - y * y))
            return (1.0 - darkening * (1.0 - mu)) * weigh(x, ratio * y)

        return dblquad(
            integrand,
            -1.0,
            1.0,
            lambda y: -np.cos(phase) * np.sqrt(1.0 - y * y),
            lambda y: np.sqrt(1.0 - y * y),
            epsabs=1e-9,
            epsrel=1e-9,
        )[0]

    light = integral(lambda *_: 1.0)
    shape = PhaseDiscShape(2.0, darkening, phase, ratio, angle)
    for u, v in [(0.3, 0.0), (0.2, -0.9)]:
        along, across = (
            (u * np.cos(angle) + v * np.sin(angle)),
            (v * np.cos(angle) - u * np.sin(angle)),
        )

        def turn(x, y, along=along, across=across):
            return 2 * np.pi * (along * x + across * y)

        real = integral(lambda x, y: np.cos(turn(x, y))) / light
        imaginary = -integral(lambda x, y: np.sin(turn(x, y))) / light
        assert_allclose(complex(shape.transform(u, v)), real + 1j * imaginary, atol=PROMISE)


@pytest.mark.parametrize("degrees", [0.0, 20.0, 100.0, 160.0, 175.0])
@pytest.mark.parametrize("cycles", [0.5, 4.0, 12.0, 35.0])
def test_points_hold_up_to_the_highest_frequency(degrees, cycles):
    shape = PhaseDiscShape(1.0, 0.8, np.radians(degrees))
    angles = np.linspace(0.0, 2 * np.pi, 24)
    u, v = cycles * np.cos(angles), cycles * np.sin(angles)
    finer = points_transform(*shape.points(2.0 * cycles + 5.0), u, v)
    assert_allclose(points_transform(*shape.points(cycles), u, v), finer, atol=PROMISE)


def test_too_few_points_would_show():
    # The test above can fail: at three times the frequency the points no longer hold.
    shape = PhaseDiscShape(1.0, 0.0, 1.0)
    u = np.linspace(30.0, 36.0, 13)
    coarse = points_transform(*shape.points(12.0), u, 0 * u)
    fine = points_transform(*shape.points(36.0), u, 0 * u)
    assert np.abs(coarse - fine).max() > 1e-3


def test_offers_points_without_a_square():
    shape = PhaseDiscShape(1.0, 0.0, 1.0)
    assert isinstance(shape, PointedShape)
    assert shape.pixel_side == shape.pixel_angle == 0.0
    dx, dy, _ = shape.points(7.0)
    assert dx.size == shape.point_count(7.0)
    assert np.hypot(dx, dy).max() <= shape.radius == 0.5
    assert shape.radius_for(0.1) == shape.radius_below(1.0) == 0.5
    assert shape.transform(np.ones((1, 3)), np.ones((2, 1))).shape == (2, 3)


@pytest.mark.parametrize("phase", [np.pi, np.pi - 1e-6, 4.0, -0.1, np.nan])
def test_refuses_a_phase_without_light(phase):
    with pytest.raises(ValueError, match="phase_angle must be"):
        PhaseDiscShape(1.0, 0.0, phase)


@pytest.mark.parametrize("arguments", [(0.0,), (1.0, 2.0), (1.0, 0.0, 0.0, 2.0)])
def test_refuses(arguments):
    with pytest.raises(ValueError, match="must be"):
        PhaseDiscShape(*arguments)


@pytest.mark.parametrize("highest", [-1.0, np.inf, np.nan])
def test_refuses_a_frequency(highest):
    with pytest.raises(ValueError, match="max_frequency must be"):
        PhaseDiscShape(1.0).points(highest)
