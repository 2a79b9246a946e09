import pickle

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.sky.mosaic import PictureShape
from simimg.sky.shapes import PointedShape

# One bright pixel right of the middle, a fainter one above it: parity and turn both show.
PICTURE = np.array([[0.0, 0.0, 0.0], [0.0, 0.0, 3.0], [0.0, 1.0, 0.0]])


def placed(shape):
    """Places of the brighter and the fainter point, in pixels of the picture."""
    dx, dy, weight = shape.points()
    order = np.argsort(-weight)
    return np.round(np.stack([dx, dy], axis=1)[order] / shape.pixel_side, 12).tolist()


def test_upright():
    shape = PictureShape(PICTURE, 0.1)
    assert placed(shape) == [[1.0, 0.0], [0.0, 1.0]]
    assert_allclose(np.sort(shape.points()[2]), [0.25, 0.75], rtol=1e-15)


def test_mirrored_flips_left_and_right():
    assert placed(PictureShape(PICTURE, 0.1, mirrored=True)) == [[-1.0, 0.0], [0.0, 1.0]]


def test_turned_from_x_to_y():
    assert placed(PictureShape(PICTURE, 0.1, np.pi / 2)) == [[0.0, 1.0], [-1.0, 0.0]]
    # Flipped first, then turned.
    assert placed(PictureShape(PICTURE, 0.1, np.pi / 2, True)) == [[0.0, -1.0], [-1.0, 0.0]]


def test_middle_of_an_even_picture_lies_between_pixels():
    dx, dy, _ = PictureShape(np.ones((2, 4)), 1.0).points()
    assert_allclose([dx.sum(), dy.sum()], 0.0, atol=1e-12)
    assert sorted(set(dx)) == [-1.5, -0.5, 0.5, 1.5]


def test_one_pixel_is_a_turned_square():
    side, angle = 0.2, 0.3
    u, v = 3.0, 1.0
    t, w = np.polynomial.legendre.leggauss(40)
    a, b = np.meshgrid(0.5 * side * t, 0.5 * side * t)
    x, y = a * np.cos(angle) - b * np.sin(angle), a * np.sin(angle) + b * np.cos(angle)
    direct = (np.outer(w, w) / 4.0 * np.exp(-2j * np.pi * (u * x + v * y))).sum()
    # Both are exact to rounding.
    shape = PictureShape(np.ones((1, 1)), side, angle)
    assert_allclose(complex(shape.transform(u, v)), direct, atol=1e-13)


def test_a_fine_picture_of_a_gaussian_has_its_transform():
    axis = (np.arange(81) - 40.0) / 8.0
    picture = np.exp(-0.5 * (axis**2 + (axis[:, None] / 2.0) ** 2))
    shape = PictureShape(picture, 1.0 / 8.0, 0.5)
    u, v = np.array([0.0, 0.1, -0.1, 0.2]), np.array([0.0, 0.05, 0.1, -0.1])
    along, across = u * np.cos(0.5) + v * np.sin(0.5), v * np.cos(0.5) - u * np.sin(0.5)
    expected = np.exp(-2 * np.pi**2 * (along**2 + 4.0 * across**2))
    expected *= np.sinc(along / 8.0) * np.sinc(across / 8.0)
    # The picture cuts the long axis off at 2.5 standard deviations: 1.2e-2 of the light.
    assert_allclose(shape.transform(u, v), expected, atol=2.5e-2)
    assert_allclose(shape.transform(0.0, 0.0), 1.0, rtol=1e-12)


def test_negative_values_are_dark_and_the_scale_does_not_matter():
    values = np.array([[-5.0, 1.0], [1.0, 2.0]])
    shape = PictureShape(values * 1e300, 1.0)
    assert_allclose(shape.values, [[0.0, 0.25], [0.25, 0.5]], rtol=1e-15)
    assert values[0, 0] == -5.0
    assert shape.point_count() == 3


def test_is_fixed_and_pointed():
    shape = PictureShape(PICTURE, 0.1, 0.2)
    assert isinstance(shape, PointedShape)
    assert shape.pixel_angle == 0.2
    with pytest.raises(ValueError, match="read-only"):
        shape.values[0, 0] = 1.0
    with pytest.raises(AttributeError, match="cannot assign"):
        shape.angle = 1.0
    assert_allclose(pickle.loads(pickle.dumps(shape)).values, shape.values, rtol=0)


def test_radius_reaches_the_corner_of_the_farthest_lit_pixel():
    shape = PictureShape(PICTURE, 0.1)
    assert_allclose(shape.radius, 0.1 * np.hypot(1.5, 0.5), rtol=1e-12)
    assert shape.radius_for(0.5) == shape.radius_below(1.0) == shape.radius


@pytest.mark.parametrize(
    ("values", "side", "angle"),
    [
        (np.zeros((2, 2)), 1.0, 0.0),
        (-np.ones((2, 2)), 1.0, 0.0),
        (np.array([[1.0, np.nan]]), 1.0, 0.0),
        (np.array([[1.0, np.inf]]), 1.0, 0.0),
        (np.ones(3), 1.0, 0.0),
        (np.ones((0, 3)), 1.0, 0.0),
        (np.ones((2, 2)), 0.0, 0.0),
        (np.ones((2, 2)), np.nan, 0.0),
        (np.ones((2, 2)), 1.0, np.inf),
    ],
)
def test_refuses(values, side, angle):
    with pytest.raises(ValueError, match="must"):
        PictureShape(values, side, angle)
