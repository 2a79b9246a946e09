"""What happens to charge between the pixels and the amplifier, on the whole frame.

Cosmic rays, the full well, trailing, binning, multiplication, coupling, and the columns that are
read without charge, in the order of a real device. Electrons; the frame may change its shape.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray
from simimg.camera.binning import binned, binned_mask
from simimg.camera.bleeding import bleed
from simimg.camera.cosmicrays import cosmic_hits
from simimg.camera.coupling import couple
from simimg.camera.gathering import Exposure
from simimg.camera.masks import BLEEDING, COSMIC_RAY, SATURATED, MaskArray
from simimg.camera.multiplication import multiply
from simimg.camera.streams import Stage
from simimg.camera.trailing import trail
from simimg.camera.well import fill_well


def shift_out(exposure: Exposure, signal: AnyArray, mask: MaskArray) -> tuple[AnyArray, MaskArray]:
    """Bring the charge of an exposure to the amplifier.

    Parameters
    ----------
    exposure : Exposure
    signal : ndarray of float, shape (rows, columns)
        Electrons that gathered; changed.
    mask : ndarray of uint8, same shape
        Bits of `simimg.camera.masks`; changed.

    Returns
    -------
    signal, mask : ndarray
        As they are read: binned, and with the columns without charge.
    """
    settings, readout = exposure.settings, exposure.settings.readout
    if settings.cosmic_rays is not None:
        shape = (int(signal.shape[0]), int(signal.shape[1]))
        rng = exposure.stream(Stage.COSMIC_RAYS)
        charge, hit = cosmic_hits(shape, settings.cosmic_rays, time=settings.time, rng=rng)
        signal += charge
        mask[hit] |= COSMIC_RAY
    if settings.full_well is not None:
        if settings.bleeding:
            full, taken = bleed(signal, settings.full_well)
            mask[taken] |= BLEEDING
        else:
            full = fill_well(signal, settings.full_well)
        mask[full] |= SATURATED
    if readout.inefficiency:
        _trail(exposure, signal)
    if readout.binning > 1:
        signal, mask = binned(signal, readout.binning), binned_mask(mask, readout.binning)
    if readout.em_gain > 1.0:
        rng = exposure.stream(Stage.MULTIPLICATION)
        mask[multiply(signal, readout.em_gain, rng, well=readout.em_well)] |= SATURATED
    if readout.coupling:
        couple(signal, readout.coupling)
    if readout.prescan or readout.overscan:
        around = ((0, 0), (readout.prescan, readout.overscan))
        signal, mask = np.pad(signal, around), np.pad(mask, around)
    return signal, mask


def _trail(exposure: Exposure, signal: AnyArray) -> None:
    """Let charge lag on its way to the first row, or with four amplifiers to either end."""
    readout, rng = exposure.settings.readout, exposure.stream(Stage.TRAILING)
    half = signal.shape[0] // 2 if readout.amplifiers == 4 else signal.shape[0]
    window = exposure.settings.window
    for part in (signal[:half], signal[half:][::-1]):
        if part.size:
            trail(
                part,
                inefficiency=readout.inefficiency,
                length=readout.trail_length,
                rng=rng,
                before=0 if window is None else window.rows.start,
            )
