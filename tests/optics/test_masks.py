import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.masks import Vane, apodised, gaussian_apodiser, with_obstruction, with_vanes
from simimg.optics.pupil import annular_pupil, map_pupil
from simimg.optics.transfer import pupil_transfer
from simimg.optics.wavefront import pupil_places


@pytest.fixture(scope="module")
def clear():
    return annular_pupil(2.0, samples=200)


def test_an_obstruction_in_the_middle_is_the_annulus(clear):
    built = with_obstruction(clear, diameter=0.6)
    assert_allclose(built.amplitude, annular_pupil(2.0, 0.3, samples=200).amplitude, atol=1e-12)
    assert_allclose(built.area, np.pi * (1 - 0.09), rtol=1e-12)
    assert not built.round
    assert not built.enveloped


def test_an_obstruction_stands_where_it_is_put(clear):
    built = with_obstruction(clear, diameter=0.4, centre=(0.5, -0.3))
    assert_allclose(built.area, np.pi * (1 - 0.04), rtol=1e-12)
    shade = clear.amplitude - built.amplitude
    x, y = pupil_places(clear)
    assert_allclose([(shade * place).sum() / shade.sum() for place in (x, y)], [0.5, -0.3])


def test_half_an_obstruction_at_the_rim():
    """The lens that two circles have in common, by its formula."""
    clear = annular_pupil(2.0, samples=400)
    built = with_obstruction(clear, diameter=1.0, centre=(1.0, 0.0))
    small, large = 2 * np.arccos(0.25), 2 * np.arccos(1 - 0.125)
    lens = 0.125 * (small - np.sin(small)) + 0.5 * (large - np.sin(large))
    # Squares that both edges divide: the product stands for the common part.
    assert_allclose(np.pi - built.area, lens, rtol=1e-4)


def test_even_vanes_are_those_of_the_annulus():
    annulus = annular_pupil(2.0, 0.3, samples=200)
    built = with_vanes(annulus, [Vane(0.3 + k * np.pi / 2, 0.02) for k in range(4)])
    known = annular_pupil(2.0, 0.3, vanes=(4, 0.02, 0.3), samples=200)
    assert_allclose(built.amplitude, known.amplitude, rtol=0, atol=1e-10)
    assert_allclose(built.area, known.area, rtol=1e-10)
    assert built.enveloped
    assert_allclose(
        pupil_transfer(built)(0.7, 0.4), pupil_transfer(known)(0.7, 0.4), rtol=0, atol=1e-10
    )


def test_vanes_at_any_angle_and_off_the_middle(clear):
    angle, width, offset = np.radians(150.0), 0.05, 0.2
    built = with_vanes(clear, [Vane(angle, width, offset)])
    shade = clear.amplitude - built.amplitude
    x, y = pupil_places(clear)
    along = x * np.cos(angle) + y * np.sin(angle)
    left = y * np.cos(angle) - x * np.sin(angle)
    assert_allclose((shade * left).sum() / shade.sum(), offset, rtol=1e-3)
    assert shade[along < -0.02].sum() == 0.0
    # From the middle to the rim: a strip less the rim's curvature.
    edge = 0.2 + width * (np.linspace(0, 1, 2001) - 0.5)
    assert_allclose(np.pi - built.area, np.trapezoid(np.sqrt(1 - edge**2), edge), rtol=1e-3)


def test_an_apodiser_takes_light_and_amplitude(clear):
    light = np.full(clear.amplitude.shape, 0.25)
    built = apodised(clear, light)
    assert_allclose(built.amplitude, 0.5 * clear.amplitude)
    assert_allclose(built.transmission, 0.25 * clear.amplitude)
    assert_allclose(built.area, 0.25 * np.pi, rtol=1e-10)
    # An even filter changes no image.
    shift = np.linspace(0.0, 2.1, 60)
    even = pupil_transfer(built)(shift, 0.3)
    assert_allclose(even, pupil_transfer(clear)(shift, 0.3), rtol=0, atol=3e-4)


def test_a_gaussian_taper():
    clear = annular_pupil(2.0, samples=256)
    built = apodised(clear, gaussian_apodiser(clear, 0.1))
    # Integral of 0.1^(r^2) over the disc.
    assert_allclose(built.area, np.pi * (1 - 0.1) / np.log(10), rtol=1e-4)
    x, y = (place.ravel()[[128, 250]] for place in pupil_places(clear))
    light = built.transmission[128, [128, 250]]
    assert_allclose(light, 0.1 ** (x**2 + y[0] ** 2), rtol=1e-12)
    # Fainter rings: less of the transfer function at high frequencies.
    assert pupil_transfer(built)(1.5, 0.0) < 0.6 * pupil_transfer(clear)(1.5, 0.0)


def test_masks_add_up(clear):
    built = with_vanes(with_obstruction(clear, diameter=0.5), [Vane(0.0, 0.1)])
    other = with_obstruction(with_vanes(clear, [Vane(0.0, 0.1)]), diameter=0.5)
    assert_allclose(built.amplitude, other.amplitude, rtol=0, atol=1e-14)
    assert built.grey
    assert not with_vanes(map_pupil(np.ones((32, 32)), 1.0), [Vane(0.0, 0.1)]).grey


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda p: with_obstruction(p, diameter=0.0), "diameter"),
        (lambda p: with_obstruction(p, diameter=np.nan), "diameter"),
        (lambda p: with_obstruction(p, diameter=0.1, centre=(np.inf, 0.0)), "centre"),
        (lambda p: with_obstruction(p, diameter=3.0), "left open"),
        (lambda p: with_vanes(p, [Vane(0.0, 5.0), Vane(np.pi, 5.0)]), "left open"),
        (lambda p: with_vanes(p, [Vane(np.nan, 0.1)]), "angle"),
        (lambda p: with_vanes(p, [Vane(0.0, 0.0)]), "width"),
        (lambda p: apodised(p, np.ones((4, 4))), "lattice"),
        (lambda p: apodised(p, np.full((200, 200), 1.1)), "between 0 and 1"),
        (lambda p: apodised(p, np.zeros((200, 200))), "left open"),
        (lambda p: gaussian_apodiser(p, 0.0), "edge"),
    ],
)
def test_nonsense_is_refused(clear, call, message):
    with pytest.raises(ValueError, match=message):
        call(clear)
