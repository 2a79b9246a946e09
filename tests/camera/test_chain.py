import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from simimg.camera.chain import CameraSettings, record
from simimg.camera.masks import SATURATED
from tests.reference import noise

# Rows and columns that are no multiple of the block.
SHAPE = (200, 150)


def flat(level, shape=SHAPE, kind=np.float32):
    return np.full(shape, level, dtype=kind)


def variance_of_difference(settings, level, *, frames=(0, 1), shape=(400, 400)):
    """Mean above bias and variance of a pair of flats, from the counts alone."""
    first, second = (
        record(flat(level, shape), settings=settings, seed=11, frame=frame).counts.astype(float)
        for frame in frames
    )
    mean = 0.5 * (first.mean() + second.mean()) - settings.bias
    return mean, 0.5 * np.var(first - second, ddof=1)


def transfer_fit(settings):
    """Slope and its error of the photon transfer line through pairs of flats."""
    levels = np.array([200.0, 500.0, 1000.0, 2000.0, 5000.0, 10000.0])
    points = [
        variance_of_difference(settings, level, frames=(2 * i, 2 * i + 1))
        for i, level in enumerate(levels)
    ]
    mean, variance = np.array(points).T
    # The variance of n normal draws has a relative error of sqrt(2/n).
    error = variance * np.sqrt(2.0 / (400 * 400))
    (slope, _), covariance = np.polyfit(mean, variance, 1, w=1.0 / error, cov="unscaled")
    return slope, np.sqrt(covariance[0, 0])


SETTINGS = CameraSettings(gain=1.6, read_noise=6.0, bias=500.0)


@pytest.mark.slow
def test_slope_of_the_photon_transfer_is_one_over_gain():
    slope, error = transfer_fit(SETTINGS)
    # Four standard errors, for a fixed seed; the error itself is 0.2 % of the slope.
    assert_allclose(slope, 1.0 / 1.6, atol=4.0 * error, rtol=0)
    assert error < 0.003 / 1.6


@pytest.mark.slow
def test_the_photon_transfer_can_tell_a_wrong_gain():
    # A gain 3 % off lies far outside the same tolerance.
    slope, error = transfer_fit(CameraSettings(gain=1.6 * 1.03, read_noise=6.0, bias=500.0))
    assert abs(slope - 1.0 / 1.6) > 6.0 * error


@pytest.mark.slow
@pytest.mark.parametrize("gain", [0.5, 1.6, 4.0])
@pytest.mark.parametrize("level", [5.0, 300.0, 20000.0])
def test_variance_follows_mean_gain_and_read_noise(gain, level):
    settings = CameraSettings(gain=gain, read_noise=6.0, bias=1000.0)
    mean, variance = variance_of_difference(settings, level)
    n = 400 * 400
    expected = noise.photon_transfer_variance(level / gain, gain, 6.0)
    # Five standard errors: of the mean of 2 n draws, of the variance of n differences.
    assert_allclose(mean, level / gain, atol=5.0 * np.sqrt(expected / (2 * n)), rtol=0)
    assert_allclose(variance, expected, rtol=5.0 * np.sqrt(2.0 / n))


@pytest.mark.slow
def test_read_noise_from_biases():
    settings = CameraSettings(gain=1.3, read_noise=4.2, bias=300.0)
    mean, variance = variance_of_difference(settings, 0.0)
    n = 400 * 400
    # Rounding to whole counts adds 1/12; five standard errors of a standard deviation.
    read_noise = 1.3 * np.sqrt(variance - 1.0 / 12.0)
    assert_allclose(read_noise, 4.2, rtol=5.0 / np.sqrt(2.0 * n))
    assert_allclose(mean, 0.0, atol=5.0 * np.sqrt(variance / (2 * n)))


@pytest.mark.slow
def test_dark_signal_arrives_with_its_own_noise():
    settings = CameraSettings(time=600.0, dark_current=0.5, bias=100.0)
    mean, variance = variance_of_difference(settings, 0.0)
    n = 400 * 400
    assert_allclose(mean, 300.0, atol=5.0 * np.sqrt(300.0 / (2 * n)))
    # Whole electrons at a gain of one: no rounding.
    assert_allclose(variance, 300.0, rtol=5.0 * np.sqrt(2.0 / n))


@pytest.mark.slow
def test_neighbours_and_frames_share_no_noise():
    settings = CameraSettings(read_noise=5.0, bias=1000.0)
    first, second = (
        record(flat(100.0, (400, 400)), settings=settings, seed=1, frame=frame).counts - 1100.0
        for frame in (0, 1)
    )
    variance = 125.0
    for a, b in [
        (first, second),
        (first[1:], first[:-1]),
        (first[:, 1:], first[:, :-1]),
        (first[64:], first[:-64]),
    ]:
        # Five standard errors of a correlation of independent draws.
        assert abs((a * b).mean() / variance) < 5.0 / np.sqrt(a.size)


@pytest.mark.parametrize("bit_depth", [16, 24])
def test_threads_change_nothing(bit_depth):
    rng = np.random.default_rng(3)
    light = rng.uniform(0.0, 5e4, SHAPE).astype(np.float32)
    settings = CameraSettings(
        time=10.0,
        gain=1.4,
        read_noise=5.0,
        dark_current=0.3,
        bias=400.0,
        full_well=4e4,
        bit_depth=bit_depth,
    )
    one, two, three = (
        record(light, settings=settings, seed=5, frame=2, threads=n) for n in (1, 2, 3)
    )
    for other in (two, three):
        assert one.counts.tobytes() == other.counts.tobytes()
        assert one.mask.tobytes() == other.mask.tobytes()
    assert one.counts.dtype == (np.uint16 if bit_depth == 16 else np.int32)


def test_seed_and_frame_change_the_draws():
    def counts(seed, frame):
        return record(flat(100.0), settings=CameraSettings(), seed=seed, frame=frame).counts

    assert_array_equal(counts(1, 0), counts(1, 0))
    assert (counts(1, 0) != counts(2, 0)).any()
    assert (counts(1, 0) != counts(1, 1)).any()


def test_read_noise_leaves_the_photons_alone():
    # Stages draw from streams of their own: read noise far below a count changes nothing.
    quiet = record(flat(100.0), settings=CameraSettings(), seed=1).counts
    noisy = record(flat(100.0), settings=CameraSettings(read_noise=0.01), seed=1).counts
    assert_array_equal(quiet, noisy)


def test_precision_of_the_input_does_not_matter():
    settings = CameraSettings(read_noise=3.0, bias=100.0)
    single = record(flat(64.5), settings=settings, seed=1).counts
    assert_array_equal(
        single, record(flat(64.5, kind=np.float64), settings=settings, seed=1).counts
    )


def test_full_well_saturates_at_its_level():
    settings = CameraSettings(gain=2.0, bias=100.0, full_well=1000.0)
    light = flat(500.0)
    light[10, 20] = 5000.0
    result = record(light, settings=settings, seed=1)
    assert result.counts[10, 20] == 600
    assert result.mask[10, 20] == SATURATED
    assert np.count_nonzero(result.mask) == 1


def test_top_of_the_converter_saturates():
    light = flat(500.0)
    light[0, 0] = 1e5
    result = record(light, settings=CameraSettings(bit_depth=12), seed=1)
    assert result.counts[0, 0] == 4095
    assert result.mask[0, 0] == SATURATED
    assert np.count_nonzero(result.mask) == 1


def test_counts_are_cut_at_zero_and_not_flagged():
    result = record(flat(0.0), settings=CameraSettings(read_noise=10.0), seed=1)
    assert result.counts.min() == 0
    # Half of the draws are below zero and land there, besides those that round to zero.
    assert_allclose((result.counts == 0).mean(), 0.52, atol=5.0 * 0.5 / np.sqrt(result.counts.size))
    assert not result.mask.any()


@pytest.mark.parametrize(("bit_depth", "top"), [(1, 1), (16, 65535), (17, 131071), (31, 2**31 - 1)])
def test_the_brightest_light_does_not_fail(bit_depth, top):
    light = flat(1e30, (3, 3))
    settings = CameraSettings(bit_depth=bit_depth, gain=1e-30, read_noise=1.0)
    result = record(light, settings=settings, seed=1)
    assert (result.counts == top).all()
    assert (result.mask == SATURATED).all()


def test_means_beyond_a_thousand_million():
    result = record(
        flat(2e9, (64, 64), np.float64), settings=CameraSettings(bit_depth=31, gain=1.0), seed=1
    )
    counts = result.counts.astype(float)
    # Five standard errors of the mean and of the standard deviation.
    assert_allclose(counts.mean(), 2e9, atol=5.0 * np.sqrt(2e9) / 64)
    assert_allclose(counts.std(), np.sqrt(2e9), rtol=5.0 / np.sqrt(2 * 64 * 64))


def test_the_input_and_the_output_stay_as_they_are():
    light = flat(100.0)
    result = record(light, settings=CameraSettings(full_well=50.0), seed=1)
    assert (light == 100.0).all()
    with pytest.raises(ValueError, match="read-only"):
        result.counts[0, 0] = 1
    with pytest.raises(ValueError, match="read-only"):
        result.mask[0, 0] = 1


@pytest.mark.parametrize("value", [-1e-9, np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("threads", [1, 2])
def test_refuses_what_is_no_expectation(value, threads):
    light = flat(1.0)
    light[150, 7] = value
    with pytest.raises(ValueError, match="finite and not negative: 1 pixel"):
        record(light, settings=CameraSettings(), seed=1, threads=threads)


@pytest.mark.parametrize(
    ("light", "options"),
    [
        (np.ones(3), {}),
        (np.ones((0, 3)), {}),
        (np.ones((2, 2)), {"threads": 0}),
        (np.ones((2, 2)), {"seed": -1}),
        (np.ones((2, 2)), {"frame": -1}),
    ],
)
def test_refuses_arguments(light, options):
    with pytest.raises(ValueError, match="must"):
        record(light, settings=CameraSettings(), **{"seed": 0, **options})


@pytest.mark.parametrize(
    "settings",
    [
        {"time": -1.0},
        {"time": np.inf},
        {"gain": 0.0},
        {"gain": np.nan},
        {"read_noise": -1.0},
        {"read_noise": np.nan},
        {"dark_current": -1.0},
        {"bias": np.inf},
        {"full_well": 0.0},
        {"full_well": np.nan},
        {"bit_depth": 0},
        {"bit_depth": 32},
        {"serial": -1},
    ],
)
def test_settings_refuse(settings):
    with pytest.raises(ValueError, match=f"{next(iter(settings))} must"):
        CameraSettings(**settings)
