"""How much light a camera's calibration frames get: flats, linearity ramps, photon-transfer pairs.

What a pixel can record ends at its full well or at the top of the converter, whichever comes first.
Flats are exposed to half of it, where the response is still straight and the photon noise small
against the signal: common practice of the trade. Photon transfer is read from pairs of flats of one
level (Janesick 2001, Scientific Charge-Coupled Devices, ch. 2): the variance of their difference
over two is ``mean / gain + read_noise**2``, in counts. Electrons, counts.
"""

from __future__ import annotations

from math import inf

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.chain import CameraSettings
from simimg.camera.converter import converter_top

FLAT_SHARE = 0.5
"""Of what a pixel can record, the light of a flat."""

RAMP_SHARE = 1.0
"""Of what a pixel can record, the light of a ramp's last frame: where it bends."""

TRANSFER_SHARE = 0.8
"""Of what a pixel can record, the light of the brightest photon-transfer pair."""


def recordable_electrons(settings: CameraSettings) -> float:
    """Electrons that a pixel of the detector can record: its full well or the converter's range.

    Where pixels are binned the converter counts them together, after multiplication.
    """
    readout = settings.readout
    gain = min(readout.gains) if readout.gains else settings.gain
    bias = max(readout.biases) if readout.biases else settings.bias
    range_ = (converter_top(settings.bit_depth) - bias) * gain
    if readout.em_gain > 1.0 and readout.em_well is not None:
        range_ = min(range_, readout.em_well)
    well = inf if settings.full_well is None else settings.full_well
    return float(min(well, range_ / readout.em_gain / readout.binning**2))


def flat_electrons(settings: CameraSettings) -> float:
    """Electrons of light in a pixel of a flat."""
    return FLAT_SHARE * recordable_electrons(settings)


def ramp_electrons(settings: CameraSettings, count: int) -> FloatArray:
    """Electrons of light in the frames of a linearity ramp: even steps up to all it can record."""
    return RAMP_SHARE * recordable_electrons(settings) * np.arange(1, count + 1) / count


def transfer_electrons(settings: CameraSettings, count: int) -> FloatArray:
    """Electrons of light in photon-transfer pairs: even steps of the root of the light.

    The noise of light grows with the root, so that each step adds as much noise.
    """
    steps = np.arange(1, count + 1) / count
    return np.asarray(TRANSFER_SHARE * recordable_electrons(settings) * steps**2)


def photon_transfer(
    first: AnyArray, second: AnyArray, *, bias: AnyArray, other_bias: AnyArray
) -> tuple[float, float]:
    """Gain and read noise from two flats of one level and two bias frames.

    Parameters
    ----------
    first, second : ndarray
        Flats of the same light, counts.
    bias, other_bias : ndarray
        Bias frames, counts.

    Returns
    -------
    (gain, read_noise)
        Electrons to the count; electrons. The differences of pairs are free of what is fixed in the
        detector; a flat's scatter from pixel to pixel biases neither.

    Raises
    ------
    ValueError
        Flats no brighter than the bias, or without noise.
    """
    flats = [np.asarray(one, dtype=np.float64) for one in (first, second)]
    biases = [np.asarray(one, dtype=np.float64) for one in (bias, other_bias)]
    signal = sum(float(one.mean()) for one in flats) - sum(float(one.mean()) for one in biases)
    quiet = float(np.var(biases[0] - biases[1]))
    noise = float(np.var(flats[0] - flats[1])) - quiet
    if signal <= 0.0 or noise <= 0.0:
        raise ValueError("photon transfer needs flats with light and noise")
    gain = signal / noise
    return gain, gain * float(np.sqrt(quiet / 2.0))
