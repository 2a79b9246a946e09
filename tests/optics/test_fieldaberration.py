import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.fieldaberration import FieldAberration, field_nodes
from simimg.optics.pupil import annular_pupil
from simimg.optics.wavefront import rms_over_pupil, zernike_wavefront
from simimg.optics.zernike import zernike

WAVELENGTH = 500e-9
CORNER = np.sqrt(0.5)


@pytest.fixture(scope="module")
def pupil():
    return annular_pupil(2.0, 0.3, samples=64)


def image(pupil, terms):
    path = zernike_wavefront(pupil, terms)
    field = pupil.amplitude * np.exp(2j * np.pi * path / WAVELENGTH)
    return np.abs(np.fft.fft2(field, (256, 256))) ** 2 / pupil.amplitude.sum() ** 2


def test_growth_off_the_axis(pupil):
    coma, bent = FieldAberration(coma=3e-8), FieldAberration(curvature=3e-8, astigmatism=4e-8)
    assert not any(coma.terms(0.0, 0.0).values())
    for aberration, power in ((coma, 1), (bent, 2)):
        half, full = aberration.rms(0.3, 0.4), aberration.rms(0.6, 0.8)
        assert_allclose(full / half, 2.0**power, rtol=1e-12)
        terms = aberration.terms(0.6, 0.8)
        # Orthonormal terms add in squares, and so do they on the lattice.
        assert_allclose(np.sqrt(sum(v**2 for v in terms.values())), full, rtol=1e-12)
        path = zernike_wavefront(pupil, terms)
        assert_allclose(rms_over_pupil(path, pupil), full, rtol=5e-3)
    assert_allclose(bent.rms(0.6, 0.8), 5e-8, rtol=1e-12)


@pytest.mark.parametrize("angle", [0.0, 0.7, 2.5])
def test_the_pattern_turns_with_the_place(angle):
    """At every direction from the centre the wavefront is the same, turned."""
    aberration = FieldAberration(coma=3e-8, curvature=2e-8, astigmatism=4e-8)
    axis = (np.arange(64) - 31.5) / 32
    x, y = axis[np.newaxis, :], axis[:, np.newaxis]
    inside = np.hypot(x, y) < 0.9

    # The turned place asks the unturned wavefront: by the polynomials themselves.
    def value(terms, px, py):
        return sum(v * zernike(j, px, py, obstruction=0.3) for j, v in terms.items())

    here = value(aberration.terms(np.cos(angle), np.sin(angle)), x, y)
    turned_x = x * np.cos(angle) + y * np.sin(angle)
    turned_y = y * np.cos(angle) - x * np.sin(angle)
    reference = value(aberration.terms(1.0, 0.0), turned_x, turned_y)
    assert_allclose(here[inside], reference[inside], rtol=0, atol=1e-20)


@pytest.mark.parametrize(
    ("waves", "count", "error"), [(0.07, 3, 5e-3), (0.07, 5, 5e-4), (0.03, 3, 2e-3)]
)
def test_mixtures_of_a_few_nodes(pupil, waves, count, error):
    aberration = FieldAberration(coma=waves * WAVELENGTH, curvature=0.7 * waves * WAVELENGTH)
    nodes = field_nodes(CORNER, CORNER, count=count)
    members = np.array([image(pupil, aberration.terms(*place)) for place in nodes.places])
    x, y = np.random.default_rng(1).uniform(-CORNER, CORNER, (2, 30))
    x[0] = y[0] = CORNER
    weights = nodes.weights(x, y)
    assert_allclose(weights.sum(axis=1), 1.0, rtol=1e-12)
    misses = [
        np.abs(np.tensordot(row, members, 1) - image(pupil, aberration.terms(*place))).max()
        for row, place in zip(weights, zip(x, y))
    ]
    assert max(misses) <= error
    # What is mixed matters: the field's middle is no stand-in for its corner.
    centre = image(pupil, aberration.terms(0.0, 0.0))
    assert np.abs(centre - image(pupil, aberration.terms(CORNER, CORNER))).max() > 4 * error


def test_weights_are_one_at_their_node():
    nodes = field_nodes(2.0, 1.0, count=3)
    x, y = np.array(nodes.places).T
    assert_allclose(nodes.weights(x, y), np.eye(9), rtol=0, atol=1e-13)
    assert np.abs(x).max() < 2.0
    # Polynomials of degree 2 in each direction are met everywhere.
    px, py = np.random.default_rng(5).uniform(-1, 1, (2, 20))
    got = nodes.weights(2 * px, py) @ (x**2 * y - 3 * y**2)
    assert_allclose(got, 4 * px**2 * py - 3 * py**2, rtol=0, atol=1e-12)
    # Beyond the field its edge is taken.
    assert_allclose(nodes.weights([5.0], [0.2]), nodes.weights([2.0], [0.2]))
    assert_allclose(field_nodes(1.0, 1.0, count=1).weights(px, py), 1.0)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: FieldAberration(coma=np.nan), "coma"),
        (lambda: FieldAberration(curvature=np.inf), "curvature"),
        (lambda: field_nodes(0.0, 1.0), "side"),
        (lambda: field_nodes(1.0, np.inf), "side"),
        (lambda: field_nodes(1.0, 1.0, count=0), "nodes"),
        (lambda: field_nodes(1.0, 1.0, count=10), "nodes"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
