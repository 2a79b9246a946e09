"""Outside values for the noise of a detector, each with its source and tolerance."""

from typing import Final

# P. Howell, Handbook of CCD Astronomy; astropy.stats.signal_to_noise_oir_ccd gives the same.
# 60 s, 100 e/s, sky 2 and dark 0.01 e/s a pixel, read noise 5 e, 50 pixels.
SNR_CASE: Final = {
    "source": 100.0,
    "sky": 2.0,
    "dark": 0.01,
    "read_noise": 5.0,
    "pixels": 50.0,
    "time": 60.0,
}
SNR_VALUE: Final = 52.06576
SNR_ATOL: Final = 1e-5


def photon_transfer_variance(mean: float, gain: float, read_noise: float) -> float:
    """Variance in counts at a mean in counts above bias.

    P. Janesick 2001, Scientific Charge-Coupled Devices, ch. 2: mean / gain + (read noise in counts)
    squared; with the rounding of the converter, 1/12 (Widrow 1956).
    """
    return mean / gain + (read_noise / gain) ** 2 + 1.0 / 12.0
