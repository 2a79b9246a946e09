import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import jv

from simimg.optics.motion import (
    SIDEREAL_RATE,
    arc_count,
    arc_points,
    arc_transfer,
    drift_transfer,
    field_rotation_rate,
    jitter_transfer,
)

ARCSEC = np.radians(1.0) / 3600
U = np.linspace(-1.5, 1.5, 21)[np.newaxis, :] / ARCSEC
V = np.linspace(-1.2, 1.2, 17)[:, np.newaxis] / ARCSEC


def test_jitter_is_the_transform_of_a_gaussian():
    rng = np.random.default_rng(3)
    angle, one, two = 0.4, 0.05, 0.12
    along, across = rng.normal(0, one, 200_000), rng.normal(0, two, 200_000)
    x = along * np.cos(angle) - across * np.sin(angle)
    y = along * np.sin(angle) + across * np.cos(angle)
    for u, v in ((0.5, 0.0), (1.0, -0.7), (0.3, 1.4)):
        expected = np.mean(np.exp(-2j * np.pi * (u * x + v * y)))
        got = jitter_transfer(
            u / ARCSEC, v / ARCSEC, rms=one * ARCSEC, rms_across=two * ARCSEC, angle=angle
        )
        # 200,000 draws.
        assert_allclose(got, expected.real, rtol=0, atol=0.01)


def test_round_jitter():
    got = jitter_transfer(U, V, rms=0.05 * ARCSEC)
    expected = np.exp(-2 * np.pi**2 * (0.05 * ARCSEC) ** 2 * (U**2 + V**2))
    assert_allclose(got, expected, rtol=1e-12)
    assert_allclose(jitter_transfer(U, V, rms=0.0), 1.0, atol=0)


def test_drift_is_a_mean_along_the_trail():
    dx, dy = 1.3 * ARCSEC, -0.4 * ARCSEC
    t = (np.arange(20000) + 0.5) / 20000 - 0.5
    for u, v in ((0.7, 0.3), (-1.0, 0.4)):
        u, v = u / ARCSEC, v / ARCSEC
        expected = np.mean(np.exp(-2j * np.pi * (u * dx + v * dy) * t))
        got = drift_transfer(u, v, dx=dx, dy=dy)
        assert_allclose(got, expected, rtol=0, atol=1e-7)
    assert drift_transfer(0.0, 0.0, dx=dx, dy=dy) == 1.0
    assert_allclose(drift_transfer(U, V, dx=0.0, dy=0.0), 1.0, atol=0)


def test_a_trail_keeps_its_light_length_and_angle():
    """Moments of the image itself, made from the transfer function."""
    pixel, size = 0.1 * ARCSEC, 256
    length, angle = 3.0 * ARCSEC, np.radians(35.0)
    u = np.fft.fftfreq(size, pixel)[np.newaxis, :]
    v = np.fft.fftfreq(size, pixel)[:, np.newaxis]
    blur = jitter_transfer(u, v, rms=0.2 * ARCSEC)
    trail = drift_transfer(u, v, dx=length * np.cos(angle), dy=length * np.sin(angle))
    image = np.fft.fftshift(np.fft.ifft2(blur * trail).real)
    place = (np.arange(size) - size // 2) * pixel
    assert_allclose(image.sum(), 1.0, rtol=1e-12)
    x, y = place[np.newaxis, :], place[:, np.newaxis]
    assert_allclose([(image * x).sum(), (image * y).sum()], 0.0, atol=1e-6 * length)
    xx, yy, xy = ((image * m).sum() for m in (x * x, y * y, x * y))
    assert_allclose(0.5 * np.arctan2(2 * xy, xx - yy), angle, rtol=1e-4)
    # Variance of an even trail: length^2 / 12.
    spread = np.hypot(xx - yy, 2 * xy)
    assert_allclose(np.sqrt(12 * spread), length, rtol=1e-4)


def test_arc_against_a_mean_over_the_turn():
    x, y, angle = 40 * ARCSEC, -25 * ARCSEC, np.radians(3.0)
    turn = angle * ((np.arange(40000) + 0.5) / 40000 - 0.5)
    dx = x * np.cos(turn) - y * np.sin(turn) - x
    dy = x * np.sin(turn) + y * np.cos(turn) - y
    got = arc_transfer(U, V, x=x, y=y, angle=angle)
    for row, column in ((0, 0), (3, 12), (8, 10), (16, 4)):
        u, v = U[0, column], V[row, 0]
        expected = np.mean(np.exp(-2j * np.pi * (u * dx + v * dy)))
        assert_allclose(got[row, column], expected, rtol=0, atol=2e-6)


def test_a_whole_turn_is_a_ring():
    """Mean over the circle about the centre: the Bessel function, seen from the star's place."""
    radius = 0.8 * ARCSEC
    got = arc_transfer(U, V, x=radius, y=0.0, angle=2 * np.pi)
    ring = jv(0, 2 * np.pi * radius * np.hypot(U, V)) * np.exp(2j * np.pi * U * radius)
    assert_allclose(got, ring, rtol=0, atol=2e-6)


def test_an_arc_leans_towards_the_centre():
    dx, dy, weight = arc_points(100.0, 0.0, angle=0.2, count=12)
    assert_allclose(weight.sum(), 1.0)
    assert_allclose((weight * dx).sum(), 100 * (np.sin(0.1) / 0.1 - 1), rtol=1e-10)
    assert_allclose((weight * dy).sum(), 0.0, atol=1e-12)
    # A turn from +x towards +y: the last point is up.
    assert dy[-1] > 9.0
    assert_allclose(np.hypot(100 + dx, dy), 100.0, rtol=1e-12)


def test_a_short_arc_is_a_straight_trail():
    x, y, angle = 300 * ARCSEC, 100 * ARCSEC, 1e-3
    got = arc_transfer(U, V, x=x, y=y, angle=angle)
    # The sagitta is 1/8 of a thousandth of the trail.
    straight = drift_transfer(U, V, dx=-y * angle, dy=x * angle)
    assert_allclose(got, straight, rtol=0, atol=2e-3)


def test_a_star_in_the_centre_stays():
    assert_allclose(arc_transfer(U, V, x=0.0, y=0.0, angle=0.5), 1.0, rtol=0, atol=1e-14)
    assert arc_count(0.0, 1e6) == 12


def parallactic(hour, latitude, declination):
    return np.arctan2(
        np.sin(hour),
        np.cos(declination) * np.tan(latitude) - np.sin(declination) * np.cos(hour),
    )


@pytest.mark.parametrize(
    ("hour", "declination"), [(0.0, 0.2), (0.7, -0.3), (-1.1, 0.9), (0.0, 1.2)]
)
def test_field_rotation_is_the_parallactic_angles_rate(hour, declination):
    latitude, step = 0.6, 1e-5
    sine = np.sin(latitude) * np.sin(declination)
    altitude = np.arcsin(sine + np.cos(latitude) * np.cos(declination) * np.cos(hour))
    azimuth = np.arctan2(
        -np.cos(declination) * np.sin(hour),
        np.sin(declination) * np.cos(latitude)
        - np.cos(declination) * np.cos(hour) * np.sin(latitude),
    )
    ahead, behind = (parallactic(hour + s, latitude, declination) for s in (step, -step))
    turned = np.angle(np.exp(1j * (ahead - behind)))
    expected = SIDEREAL_RATE * turned / (2 * step)
    assert_allclose(field_rotation_rate(latitude, azimuth, altitude), expected, rtol=1e-6)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: jitter_transfer(0.0, 0.0, rms=-1.0), "jitter rms"),
        (lambda: jitter_transfer(0.0, 0.0, rms=1e-7, rms_across=np.nan), "rms_across"),
        (lambda: jitter_transfer(0.0, 0.0, rms=1e-7, angle=np.inf), "angle"),
        (lambda: drift_transfer(0.0, 0.0, dx=np.nan, dy=0.0), "trail"),
        (lambda: arc_points(1.0, np.nan, angle=0.1, count=3), "arc"),
        (lambda: arc_points(1.0, 0.0, angle=0.1, count=0), "points"),
        (lambda: arc_count(1.0, np.inf), "finite"),
        (lambda: arc_count(1.0, 1e6), "more than"),
        (lambda: arc_transfer(0.0, 0.0, x=0.0, y=0.0, angle=np.nan), "arc"),
        (lambda: field_rotation_rate(2.0, 0.0, 0.5), "latitude"),
        (lambda: field_rotation_rate(0.5, 0.0, 0.5 * np.pi), "altitude"),
        (lambda: field_rotation_rate(0.5, np.nan, 0.5), "azimuth"),
    ],
)
def test_nonsense_is_refused(call, message):
    with pytest.raises(ValueError, match=message):
        call()
