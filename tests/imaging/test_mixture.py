"""Several colours in one transfer function."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.imaging.basis import PsfBasis, Transfer, WingLaw
from simimg.imaging.mixture import Part, mixture
from simimg.imaging.render import expected_image
from simimg.imaging.sources import Sources, one_point

SCALE = 1e-6


def gaussian(pixels, ellipse=0.0):
    sigma = pixels * SCALE

    def radial(f):
        return np.exp(-2 * (np.pi * sigma * f) ** 2)

    planar = (lambda u, v: np.exp(-2 * (np.pi * ellipse * SCALE * u) ** 2) + 0 * v,)
    return Transfer(
        1.5 / sigma, (radial,), planar if ellipse else (), wings=WingLaw(core=8 * sigma)
    )


def image(transfer, electrons=1.0):
    return expected_image(
        PsfBasis((transfer.with_pixel(SCALE),)),
        Sources(one_point(20.3, 19.8, electrons)),
        columns=41,
        rows=40,
        pixel_scale=SCALE,
    )


@pytest.mark.parametrize("ellipse", [0.0, 1.0])
def test_the_image_of_a_mixture_is_the_mixture_of_images(ellipse):
    parts = [(gaussian(1.3, ellipse), 0.7), (gaussian(2.1), 0.5), (gaussian(1.0), -0.2)]
    together = image(mixture([Part(t, s) for t, s in parts]))
    apart = sum(s * image(t) for t, s in parts)
    assert_allclose(together, apart, rtol=0, atol=5e-6 * together.max())


def test_colours_fall_where_refraction_puts_them():
    shifted = mixture(
        [Part(gaussian(1.2), 0.5, 3 * SCALE, 0.0), Part(gaussian(1.2), 0.5, 0.0, -2 * SCALE)]
    )
    assert not shifted.even
    seen = image(shifted)
    y, x = np.indices(seen.shape)
    assert (seen * x).sum() / seen.sum() == pytest.approx(20.3 + 1.5, abs=1e-3)
    assert (seen * y).sum() / seen.sum() == pytest.approx(19.8 - 1.0, abs=1e-3)


def test_a_table_of_many_points_is_as_good_as_the_function():
    both = mixture([Part(gaussian(1.2, 0.5), 0.6), Part(gaussian(1.9), 0.4)])
    u = np.linspace(-3e5, 3e5, 301)
    many = both(u[None, :], u[:, None])
    few = np.array(
        [[complex(both(np.array(a), np.array(b))).real for a in u[::50]] for b in u[::50]]
    )
    assert_allclose(many[::50, ::50], few, rtol=0, atol=2e-9)


def test_one_colour_is_itself():
    only = gaussian(1.5)
    assert mixture([Part(only, 1.0)]) is only


@pytest.mark.parametrize(
    "parts", [[], [Part(gaussian(1), 0.4)], [Part(gaussian(1).with_pixel(1e-6), 1.0)]]
)
def test_nonsense_is_refused(parts):
    with pytest.raises(ValueError, match="mixture"):
        mixture(parts)
