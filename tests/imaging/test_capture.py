"""The share of a star's light that a frame holds."""

import numpy as np
import pytest
from scipy.special import ndtr

from simimg.imaging.basis import PsfBasis, Transfer, WingLaw
from simimg.imaging.capture import share_in_frame
from simimg.imaging.sources import Points

SCALE, SIGMA = 1e-6, 1.4


@pytest.fixture
def basis():
    sigma = SIGMA * SCALE
    member = Transfer(
        1.3 / sigma,
        (lambda f: np.exp(-2 * (np.pi * sigma * f) ** 2),),
        box=SCALE,
        wings=WingLaw(core=7 * sigma),
    )
    return PsfBasis((member,))


@pytest.mark.parametrize(("columns", "rows"), [(60, 40), (900, 700)])
def test_against_the_error_function(basis, columns, rows):
    rng = np.random.default_rng(8)
    x = np.concatenate([rng.uniform(-6, 6, 30), rng.uniform(columns - 6, columns + 6, 30)])
    y = np.concatenate(
        [rng.uniform(-6, 6, 20), rng.uniform(rows - 6, rows + 6, 20), np.full(20, 20.0)]
    )

    def within(place, size):
        return ndtr((size - 0.5 - place) / SIGMA) - ndtr((-0.5 - place) / SIGMA)

    share = share_in_frame(
        basis, Points(x, y, np.ones(60)), columns=columns, rows=rows, pixel_scale=SCALE
    )
    # Cubic interpolation of the summed PSF between whole pixels.
    np.testing.assert_allclose(share, within(x, columns) * within(y, rows), atol=1e-3)


def test_far_from_the_edge_all_is_held(basis):
    share = share_in_frame(
        basis,
        Points([30.0, 3000.0], [20.0, 20.0], [1.0, 1.0]),
        columns=60,
        rows=40,
        pixel_scale=SCALE,
    )
    assert share == pytest.approx([1.0, 0.0], abs=1e-6)
