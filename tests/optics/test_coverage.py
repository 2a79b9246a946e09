import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.coverage import disc_coverage, polygon_coverage

X, Y = np.linspace(-0.8, 1.4, 41), np.linspace(-0.9, 0.9, 31)
HEXAGON = 0.6 * np.array([[np.cos(a), np.sin(a)] for a in 0.2 + np.arange(6) * np.pi / 3])
NEEDLE = np.array([[-0.5, -0.41], [1.1, 0.601], [1.1, 0.602], [-0.5, -0.409]])
ARROW = np.array([[-0.6, -0.5], [1.2, 0.0], [-0.6, 0.5], [0.1, 0.0]])


def counted(is_within, fine=60):
    """Share of points of each square within the figure."""
    offsets = (np.arange(fine) + 0.5) / fine
    x = (X[:-1, None] + offsets * (X[1] - X[0])).ravel()
    y = (Y[:-1, None] + offsets * (Y[1] - Y[0])).ravel()
    points = is_within(x[None, :], y[:, None])
    return points.reshape(Y.size - 1, fine, X.size - 1, fine).mean(axis=(1, 3))


def within(vertices):
    """Points from which the polygon's outline goes once round."""

    def is_within(x, y):
        inside = np.zeros(np.broadcast_shapes(x.shape, y.shape), dtype=bool)
        for (x0, y0), (x1, y1) in zip(vertices, np.roll(vertices, -1, axis=0)):
            if y0 != y1:
                crosses = (y0 > y) != (y1 > y)
                inside ^= crosses & (x < x0 + (x1 - x0) * (y - y0) / (y1 - y0))
        return inside

    return is_within


def shoelace(vertices):
    x, y = vertices.T
    return 0.5 * abs(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1)))


@pytest.mark.parametrize("radius", [0.05, 0.7, 3.0])
def test_disc_against_counting(radius):
    got = disc_coverage(X, Y, radius)
    # 3600 points a square, of which an edge leaves about 60 undecided.
    assert_allclose(got, counted(lambda x, y: np.hypot(x, y) < radius), rtol=0, atol=0.01)


@pytest.mark.parametrize("vertices", [HEXAGON, HEXAGON[::-1], ARROW, HEXAGON * 3, NEEDLE])
def test_polygon_against_counting(vertices):
    assert_allclose(polygon_coverage(X, Y, vertices), counted(within(vertices)), rtol=0, atol=0.02)


@pytest.mark.parametrize("vertices", [HEXAGON, ARROW, NEEDLE])
@pytest.mark.parametrize("turn", [0.0, 0.3, np.pi / 2])
def test_whole_polygon_keeps_its_area(vertices, turn):
    rotation = np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])
    x, y = np.linspace(-2, 2, 53), np.linspace(-2, 2, 47)
    area = polygon_coverage(x, y, vertices @ rotation).sum() * (x[1] - x[0]) * (y[1] - y[0])
    # A closed form: rounding errors only, even of a figure far thinner than a square.
    assert_allclose(area, shoelace(vertices), rtol=1e-10)


def test_rectangle_along_the_squares():
    got = polygon_coverage(
        np.arange(5.0), np.arange(4.0), [[0.5, 1], [2, 1], [2, 2.25], [0.5, 2.25]]
    )
    assert_allclose(got, [[0, 0, 0, 0], [0.5, 1, 0, 0], [0.125, 0.25, 0, 0]], rtol=0, atol=1e-15)


def test_neighbours_share_their_edge():
    left = polygon_coverage(X, Y, [[-0.5, -0.5], [0.1, -0.5], [0.4, 0.5], [-0.5, 0.5]])
    right = polygon_coverage(X, Y, [[0.1, -0.5], [1.0, -0.5], [1.0, 0.5], [0.4, 0.5]])
    whole = polygon_coverage(X, Y, [[-0.5, -0.5], [1.0, -0.5], [1.0, 0.5], [-0.5, 0.5]])
    assert_allclose(left + right, whole, rtol=0, atol=1e-13)


def test_a_polygon_elsewhere_covers_nothing():
    assert not polygon_coverage(X, Y, HEXAGON + np.array([5.0, 0.0])).any()
    assert not polygon_coverage(X, Y, HEXAGON - np.array([0.0, 5.0])).any()


@pytest.mark.parametrize(
    ("vertices", "message"),
    [([[0, 0], [1, 1]], "three"), ([0, 1, 2], "three"), ([[0, 0], [1, 0], [np.nan, 1]], "finite")],
)
def test_nonsense_is_refused(vertices, message):
    with pytest.raises(ValueError, match=message):
        polygon_coverage(X, Y, vertices)
