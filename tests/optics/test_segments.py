"""Segmented apertures, against the diffraction of their hexagons by a contour integral."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.aberrated import aberrated_transfer
from simimg.optics.segments import (
    SegmentErrors,
    draw_segment_errors,
    one_segment_moved,
    segment_centres,
    segment_wavefront,
    segmented_pupil,
)
from simimg.optics.transfer import pupil_transfer
from simimg.optics.wavefront import axial_strehl, pupil_places, rms_over_pupil

WIDTH, GAP, WAVELENGTH = 1.2, 0.02, 1e-6


@pytest.fixture(scope="module")
def mirror():
    return segmented_pupil(2, width=WIDTH, gap=GAP, missing_centre=True, angle=0.2)


def hexagon_transform(k, angle):
    """Fourier integral (m2) over one hexagon about the origin; k (n, 2) in cycles per metre.

    Gauss's theorem turns it into a sum over the six straight edges.
    """
    normals = angle + np.arange(6) * np.pi / 3
    side, total = WIDTH / np.sqrt(3), 0.0
    for n in normals:
        normal, along = np.array([np.cos(n), np.sin(n)]), np.array([-np.sin(n), np.cos(n)])
        phase = np.exp(-2j * np.pi * (k @ normal) * 0.5 * WIDTH)
        total = total + (k @ normal) * side * phase * np.sinc((k @ along) * side)
    return 1j / (2 * np.pi * np.sum(k * k, axis=1)) * total


def image(mirror, directions, phases):
    """PSF over the perfect peak, directions (n, 2) in wavelength/diameter, phases in rad."""
    k = np.asarray(directions) / mirror.pupil.diameter
    places = np.exp(-2j * np.pi * k @ mirror.centres.T) @ np.exp(1j * phases)
    amplitude = hexagon_transform(k, 0.2) * places
    return np.abs(amplitude / mirror.pupil.area) ** 2


def spread(transfer, directions, diameter, steps=900):
    """Image in the directions: integral of the transfer function (m2)."""
    h = diameter / steps
    s = np.arange(-steps, steps + 1) * h
    half = transfer(s[np.newaxis, :], s[steps:, np.newaxis]).astype(complex)
    half[1:] *= 2.0
    values = []
    for kx, ky in np.asarray(directions) / diameter:
        along = half @ np.exp(2j * np.pi * kx * s)
        values.append((np.exp(2j * np.pi * ky * s[steps:]) @ along).real)
    return np.array(values) * h * h


def rays(radii, degrees):
    return [(r * np.cos(np.radians(a)), r * np.sin(np.radians(a))) for a in degrees for r in radii]


@pytest.mark.parametrize(
    ("rings", "missing", "count"), [(0, False, 1), (1, True, 6), (3, False, 37)]
)
def test_count_and_order(rings, missing, count):
    centres = segment_centres(rings, width=1.0, gap=0.1, missing_centre=missing, angle=0.3)
    assert centres.shape == (count, 2)
    if rings:
        first = centres[0 if missing else 1]
        assert_allclose(first, 1.1 * np.array([np.cos(0.3), np.sin(0.3)]), atol=1e-12)
        # No two nearer than a width and a gap.
        distance = np.hypot(*(centres[:, None] - centres).T) + 9 * np.eye(count)
        assert_allclose(distance.min(axis=0), 1.1, rtol=1e-12)
        assert_allclose(centres.mean(axis=0), 0.0, atol=1e-12)


def test_area_is_that_of_the_hexagons(mirror):
    area = 18 * np.sqrt(3) / 2 * WIDTH**2
    assert_allclose(mirror.pupil.area, area, rtol=1e-14)
    # The grey squares hold it exactly.
    assert_allclose(mirror.pupil.amplitude.sum() * mirror.pupil.pitch**2, area, rtol=1e-10)
    assert len(mirror.centres) == 18


def test_diameter_goes_round_the_corners(mirror):
    """Two rings: a corner hexagon's outer vertices."""
    step, side = WIDTH + GAP, WIDTH / np.sqrt(3)
    corner = np.hypot(2 * step + 0.5 * WIDTH, 0.5 * side)
    assert_allclose(mirror.pupil.diameter, 2 * corner, rtol=1e-12)
    x, y = pupil_places(mirror.pupil)
    assert mirror.pupil.amplitude[np.hypot(x, y) > corner + mirror.pupil.pitch].max() == 0.0


def test_psf_and_first_ring_against_direct_integration(mirror):
    transfer = pupil_transfer(mirror.pupil)
    diameter = mirror.pupil.diameter
    directions = rays((0.01, 0.4, 0.9, 1.3, 1.7, 2.6, 4.1, 8.0), (0, 20, 41, 90, 130))
    got = spread(transfer, directions, diameter) / mirror.pupil.area
    expected = image(mirror, directions, np.zeros(18))
    # Edges that follow the lattice nowhere: 5e-6 of the peak at 512 squares.
    assert_allclose(got, expected, rtol=0, atol=5e-6)
    radii = np.linspace(0.7, 2.1, 71)
    ray = rays(radii, (41,))
    ring = spread(transfer, ray, diameter, steps=300)
    direct = image(mirror, ray, np.zeros(18))
    assert radii[ring[:40].argmin()] == radii[direct[:40].argmin()]
    bright = ring[30:].max() / mirror.pupil.area
    assert_allclose(bright, direct[30:].max(), rtol=1e-3)


def test_gaps_are_felt():
    """The same comparison fails without them."""
    closed = segmented_pupil(2, width=WIDTH, gap=0.0, missing_centre=True, angle=0.2)
    directions = rays((0.4, 0.9, 1.3, 1.7, 2.6), (0, 41))
    got = (
        spread(pupil_transfer(closed.pupil), directions, closed.pupil.diameter) / closed.pupil.area
    )
    open_mirror = segmented_pupil(
        2, width=WIDTH, gap=0.1, missing_centre=True, angle=0.2, samples=64
    )
    assert np.abs(got - image(open_mirror, directions, np.zeros(18))).max() > 1e-4


def test_pistons_against_direct_integration(mirror):
    errors = draw_segment_errors(18, piston=1e-7, rng=np.random.default_rng(3))
    path = segment_wavefront(mirror, errors)
    transfer = aberrated_transfer(mirror.pupil, path, WAVELENGTH)
    directions = rays((0.01, 0.4, 0.9, 1.3, 1.7, 2.6, 4.1), (0, 90, 130, 200, 275))
    got = spread(transfer, directions, mirror.pupil.diameter) / mirror.pupil.area
    expected = image(mirror, directions, 2 * np.pi * errors.piston / WAVELENGTH)
    # A gap of 0.02 m is 1.6 squares: those that it divides take the nearer segment's path.
    assert_allclose(got, expected, rtol=0, atol=2e-5)
    assert np.abs(got - image(mirror, directions, np.zeros(18))).max() > 0.1


def test_piston_rms_and_strehl(mirror):
    errors = draw_segment_errors(18, piston=5e-8, rng=np.random.default_rng(3))
    assert_allclose([errors.piston.mean(), errors.piston.std()], [0.0, 5e-8], atol=1e-20)
    path = segment_wavefront(mirror, errors)
    assert_allclose(rms_over_pupil(path, mirror.pupil), 5e-8, rtol=1e-3)
    exact = np.abs(np.mean(np.exp(2j * np.pi * errors.piston / WAVELENGTH))) ** 2
    assert_allclose(axial_strehl(path, mirror.pupil, WAVELENGTH), exact, rtol=1e-3)


def test_one_tilted_segment_sends_its_own_light_aside(mirror):
    errors = one_segment_moved(18, 4, tip=3e-6, tilt=-1e-6)
    path = segment_wavefront(mirror, errors)
    x, y = pupil_places(mirror.pupil)
    moved = (mirror.labels == 4) & (mirror.pupil.amplitude == 1.0)
    centre = mirror.centres[4]
    expected = 3e-6 * (x - centre[0]) - 1e-6 * (y - centre[1])
    assert_allclose(path[moved], expected[moved], rtol=0, atol=1e-18)
    assert not path[mirror.labels != 4].any()
    # A plane over a hexagon: its mean square along an axis is 5/72 of the width's square.
    rms = np.sqrt((3e-6**2 + 1e-6**2) * 5 / 72 * WIDTH**2 / 18)
    assert_allclose(rms_over_pupil(path, mirror.pupil), rms, rtol=5e-3)


def test_draws_are_exact_and_repeat():
    one = draw_segment_errors(36, piston=2e-8, tip_tilt=1e-7, rng=np.random.default_rng(8))
    assert_allclose([one.tip.std(), one.tilt.std()], 1e-7, rtol=1e-12)
    assert_allclose([one.tip.mean(), one.tilt.mean()], 0.0, atol=1e-20)
    two = draw_segment_errors(36, piston=4e-8, rng=np.random.default_rng(8))
    assert_allclose(two.piston, 2 * one.piston, rtol=1e-12)
    assert not two.tip.any()


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda m: segment_centres(-1, width=1.0, gap=0.0), "rings"),  # noqa: ARG005
        (lambda m: segment_centres(21, width=1.0, gap=0.0), "rings"),  # noqa: ARG005
        (lambda m: segment_centres(1, width=0.0, gap=0.0), "width"),  # noqa: ARG005
        (lambda m: segment_centres(1, width=1.0, gap=-0.1), "gap"),  # noqa: ARG005
        (lambda m: segment_centres(1, width=1.0, gap=0.1, angle=np.nan), "angle"),  # noqa: ARG005
        (
            lambda m: segment_centres(0, width=1.0, gap=0.1, missing_centre=True),  # noqa: ARG005
            "missing",
        ),
        (lambda m: segmented_pupil(1, width=1.0, gap=0.1, samples=8), "samples"),  # noqa: ARG005
        (lambda m: segment_wavefront(m, one_segment_moved(17, 0)), "18 finite"),
        (
            lambda m: segment_wavefront(
                m, SegmentErrors(np.zeros(18), np.full(18, np.nan), np.zeros(18))
            ),
            "tip needs",
        ),
        (
            lambda m: draw_segment_errors(  # noqa: ARG005
                18, piston=np.nan, rng=np.random.default_rng(1)
            ),
            "piston",
        ),
        (
            lambda m: draw_segment_errors(  # noqa: ARG005
                2, tip_tilt=1e-8, rng=np.random.default_rng(1)
            ),
            "3 segments",
        ),
    ],
)
def test_nonsense_is_refused(mirror, call, message):
    with pytest.raises(ValueError, match=message):
        call(mirror)
