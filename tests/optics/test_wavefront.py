import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.optics.pupil import annular_pupil, map_pupil
from simimg.optics.wavefront import (
    MARECHAL_WAVES,
    axial_strehl,
    defocus_wavefront,
    depth_of_focus,
    map_wavefront,
    marechal_holds,
    marechal_strehl,
    polishing_wavefront,
    pupil_places,
    rms_over_pupil,
    steepest_step,
    without_tilt,
    zernike_wavefront,
)
from tests.reference import wavefront as reference

WAVELENGTH = 500e-9


@pytest.fixture(scope="module")
def pupil():
    return annular_pupil(2.0, 0.3, samples=256)


def test_places_are_the_centres_of_the_squares():
    x, y = pupil_places(annular_pupil(2.0, samples=16))
    assert x.shape == (1, 16)
    assert y.shape == (16, 1)
    assert_allclose(x[0, [0, 8, 15]], [-0.9375, 0.0625, 0.9375])
    assert_allclose(x[0], y[:, 0])


@pytest.mark.parametrize("waves", reference.DEFOCUS_AXIAL_INTENSITY)
def test_defocus_dims_the_axis_as_sinc_squared(waves):
    clear = annular_pupil(1.0)
    focal_length = 12.5
    shift = 8.0 * waves * WAVELENGTH * focal_length**2
    path = defocus_wavefront(clear, shift, focal_length=focal_length)
    # The lattice of 512 squares leaves 1e-5.
    assert_allclose(
        axial_strehl(path, clear, WAVELENGTH),
        reference.DEFOCUS_AXIAL_INTENSITY[waves],
        rtol=0,
        atol=2 * reference.DEFOCUS_AXIAL_INTENSITY_ATOL,
    )


def test_defocus_is_a_length_at_the_focal_plane(pupil):
    path = defocus_wavefront(pupil, 1e-4, focal_length=20.0)
    x, y = pupil_places(pupil)
    at_rim = np.interp(1.0, x[0], path[128])
    # Squares at the rim lie half a square within it.
    assert_allclose(at_rim, 1e-4 / (8 * 10.0**2), rtol=0.01)
    assert_allclose(path, defocus_wavefront(pupil, -1e-4, focal_length=20.0) * -1, atol=0)
    # A positive length has the sign of the fourth term.
    same = zernike_wavefront(pupil, {4: 1e-9})
    assert np.corrcoef(same.ravel(), path.ravel())[0, 1] > 0.999999
    assert y.shape == (256, 1)


def test_depth_of_focus_is_a_quarter_wave_at_the_rim():
    depth = depth_of_focus(WAVELENGTH, 8.0)
    assert_allclose(depth, 64e-6)
    assert_allclose(depth / (8 * 8.0**2), WAVELENGTH / 4)


@pytest.mark.parametrize("index", [2, 4, 5, 8, 11, 22])
def test_zernike_terms_are_given_as_rms(pupil, index):
    path = zernike_wavefront(pupil, {index: -60e-9})
    assert_allclose(rms_over_pupil(path, pupil), 60e-9, rtol=2e-3)


def test_zernike_terms_add_in_squares(pupil):
    path = zernike_wavefront(pupil, {4: 60e-9, 7: 30e-9, 11: -20e-9})
    assert_allclose(rms_over_pupil(path, pupil), 70e-9, rtol=2e-3)
    # Piston is no error.
    assert_allclose(rms_over_pupil(zernike_wavefront(pupil, {1: 5.0}), pupil), 0.0, atol=1e-12)


def test_coma_leans_along_its_axis(pupil):
    """Term 7 is odd along y, term 8 along x."""
    seven, eight = (zernike_wavefront(pupil, {j: 1e-9}) for j in (7, 8))
    assert_allclose(seven[::-1], -seven, rtol=0, atol=1e-22)
    assert_allclose(eight[:, ::-1], -eight, rtol=0, atol=1e-22)
    assert_allclose(seven, eight.T, rtol=0, atol=1e-22)


@pytest.mark.parametrize("obstruction", [0.0, 0.3])
@pytest.mark.parametrize("index", [4, 6, 8, 11])
def test_marechal_within_its_range(index, obstruction):
    telescope = annular_pupil(1.0, obstruction, samples=256)
    for waves, tolerance in ((0.03, 2e-3), (0.1, 0.02), (MARECHAL_WAVES, 0.1)):
        path = zernike_wavefront(telescope, {index: waves * WAVELENGTH})
        exact = axial_strehl(path, telescope, WAVELENGTH)
        got = marechal_strehl(waves * WAVELENGTH, WAVELENGTH)
        assert_allclose(got, exact, rtol=tolerance)
        assert marechal_holds(waves * WAVELENGTH, WAVELENGTH)


def test_marechal_beyond_its_range():
    clear = annular_pupil(1.0, samples=256)
    exact = axial_strehl(zernike_wavefront(clear, {4: 0.2 * WAVELENGTH}), clear, WAVELENGTH)
    assert abs(marechal_strehl(0.2 * WAVELENGTH, WAVELENGTH) / exact - 1) > 0.3
    assert not marechal_holds(0.2 * WAVELENGTH, WAVELENGTH)


def test_polishing_has_its_rms_and_leaves_the_image_where_it_is(pupil):
    path = polishing_wavefront(pupil, rms=20e-9, slope=2.5, rng=np.random.default_rng(5))
    assert_allclose(rms_over_pupil(path, pupil), 20e-9, rtol=1e-12)
    x, y = pupil_places(pupil)
    moments = [(pupil.transmission * path * place).sum() for place in (1.0, x, y)]
    assert_allclose(moments, 0.0, rtol=0, atol=1e-9 * np.abs(path).sum())
    again = polishing_wavefront(pupil, rms=20e-9, slope=2.5, rng=np.random.default_rng(5))
    assert np.array_equal(path, again)
    other = polishing_wavefront(pupil, rms=20e-9, slope=2.5, rng=np.random.default_rng(6))
    assert abs(np.corrcoef(path.ravel(), other.ravel())[0, 1]) < 0.7
    flat = polishing_wavefront(pupil, rms=0.0, slope=2.5, rng=np.random.default_rng(5))
    assert not flat.any()


@pytest.mark.parametrize("slope", [1.0, 2.5, 4.0])
def test_polishing_follows_its_power_law(slope):
    """Slope of the mean power between 6 and 60 cycles a pupil, through a smooth window."""
    square = map_pupil(np.ones((256, 256)), 1.0)
    window = np.hanning(256)[:, None] * np.hanning(256)
    frequency = np.hypot(np.fft.fftfreq(256)[:, None], np.fft.fftfreq(256)) * 256
    rings = np.digitize(frequency, np.geomspace(6, 60, 9))
    power = np.zeros(8)
    for seed in range(4):
        rng = np.random.default_rng(seed)
        path = polishing_wavefront(square, rms=1.0, slope=slope, rng=rng)
        squares = np.abs(np.fft.fft2(path * window)) ** 2
        power += [squares[rings == k].mean() for k in range(1, 9)]
    centres = [np.log(frequency[rings == k]).mean() for k in range(1, 9)]
    # Some thousand frequencies in four maps: a few hundredths.
    assert_allclose(-np.polyfit(centres, np.log(power), 1)[0], slope, rtol=0, atol=0.1)


def test_tilt_is_taken_out(pupil):
    x, y = pupil_places(pupil)
    path = zernike_wavefront(pupil, {4: 1e-8, 8: 2e-8})
    tilted = path + 3e-8 * x - 5e-8 * y + 7e-8
    lit = pupil.transmission > 0
    assert_allclose(
        (without_tilt(tilted, pupil) - without_tilt(path, pupil))[lit], 0.0, rtol=0, atol=1e-20
    )
    assert_allclose(
        rms_over_pupil(without_tilt(tilted, pupil), pupil), np.sqrt(5) * 1e-8, rtol=2e-3
    )


def test_a_map_on_the_lattice_is_taken_as_it_is(pupil):
    path = zernike_wavefront(pupil, {8: 2e-8})
    assert np.array_equal(map_wavefront(path, pupil), path)
    dark = np.where(pupil.transmission > 0.0, path, np.nan)
    got = map_wavefront(dark, pupil)
    assert np.array_equal(got[pupil.transmission > 0.0], path[pupil.transmission > 0.0])
    # The nearest value goes on, so that the rim meets no step.
    assert got[0, 0] in path
    assert np.isfinite(got).all()


@pytest.mark.parametrize("samples", [100, 700])
def test_a_map_of_another_size(pupil, samples):
    other = annular_pupil(2.0, 0.3, samples=samples)
    given = zernike_wavefront(other, {8: 2e-8})
    given = np.where(other.transmission > 0.0, given, np.nan)
    got = map_wavefront(given, pupil)
    lit = pupil.transmission > 0.99
    # Straight lines between pixels of 1/100 of the aperture, nearest value at the rim.
    assert_allclose(got[lit], zernike_wavefront(pupil, {8: 2e-8})[lit], rtol=0, atol=3e-9)


def test_steepest_step(pupil):
    x, _ = pupil_places(pupil)
    path = 1e-6 * x * np.ones_like(pupil.amplitude)
    assert_allclose(steepest_step(path, pupil), 1e-6 * pupil.pitch, rtol=1e-6)
    # What lies in the dark does not count.
    path[128, 128] = 1.0
    assert_allclose(steepest_step(path, pupil), 1e-6 * pupil.pitch, rtol=1e-6)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda p: zernike_wavefront(p, {0: 1e-9}), "index"),
        (lambda p: zernike_wavefront(p, {4: np.nan}), "term 4"),
        (lambda p: defocus_wavefront(p, np.inf, focal_length=1.0), "defocus"),
        (lambda p: defocus_wavefront(p, 1e-3, focal_length=0.0), "focal length"),
        (lambda p: depth_of_focus(0.0, 8.0), "wavelength"),  # noqa: ARG005
        (lambda p: depth_of_focus(5e-7, np.inf), "focal ratio"),  # noqa: ARG005
        (
            lambda p: polishing_wavefront(p, rms=-1.0, slope=2.0, rng=np.random.default_rng(1)),
            "rms",
        ),
        (
            lambda p: polishing_wavefront(p, rms=1e-9, slope=7.0, rng=np.random.default_rng(1)),
            "slope",
        ),
        (lambda p: map_wavefront(np.ones((20, 21)), p), "square"),
        (lambda p: map_wavefront(np.ones((4, 4)), p), "16 to 2048"),
        (lambda p: map_wavefront(np.full((16, 16), np.nan), p), "no finite"),
        (lambda p: map_wavefront(np.where(np.eye(256) > 0, np.nan, 0.0), p), "row"),
        (lambda p: marechal_strehl(-1e-9, 5e-7), "rms"),  # noqa: ARG005
        (lambda p: marechal_strehl(1e-9, 0.0), "wavelength"),  # noqa: ARG005
    ],
)
def test_nonsense_is_refused(pupil, call, message):
    with pytest.raises(ValueError, match=message):
        call(pupil)
