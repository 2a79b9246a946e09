import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.camera.noise import pixel_variance, snr_aperture
from tests.reference import noise


def test_signal_to_noise_of_the_textbook():
    assert_allclose(snr_aperture(**noise.SNR_CASE), noise.SNR_VALUE, atol=noise.SNR_ATOL)


@pytest.mark.parametrize(
    "case",
    [
        noise.SNR_CASE,
        {"source": 3.0, "sky": 0.0, "dark": 0.2, "read_noise": 0.0, "pixels": 9.0, "time": 900.0},
        {"source": 1e5, "sky": 9.0, "dark": 0.0, "read_noise": 12.0, "pixels": 30.0, "time": 0.1},
    ],
)
def test_signal_to_noise_agrees_with_astropy(case):
    from astropy.stats import signal_to_noise_oir_ccd

    outside = signal_to_noise_oir_ccd(
        case["time"],
        case["source"],
        case["sky"],
        case["dark"],
        case["read_noise"],
        case["pixels"],
    )
    assert_allclose(snr_aperture(**case), outside, rtol=1e-13)


def test_without_a_source_there_is_no_signal():
    case = {"sky": 0.0, "dark": 0.0, "read_noise": 0.0, "pixels": 1.0, "time": 1.0}
    assert snr_aperture(0.0, **case) == 0.0


@pytest.mark.parametrize("gain", [0.7, 2.0])
def test_pixel_variance_is_the_photon_transfer(gain):
    electrons = np.array([0.0, 10.0, 5e4])
    expected = [noise.photon_transfer_variance(e / gain, gain, 5.0) for e in electrons]
    assert_allclose(pixel_variance(electrons, 5.0, gain=gain) / gain**2, expected, rtol=1e-13)
    assert_allclose(pixel_variance(electrons, 5.0), electrons + 25.0, rtol=1e-15)
