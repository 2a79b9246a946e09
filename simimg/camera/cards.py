"""What a frame's header says of the detector: gains, noise, levels, sections.

Keywords of the standard, and those of long custom (GAIN, RDNOISE, DATASEC, BIASSEC, TRIMSEC);
pixels of a section count from 1, both ends included. With electron multiplication GAIN and RDNOISE
are of electrons as they enter the register.
"""

from __future__ import annotations

from math import inf

import numpy as np

from simimg.camera.converter import converter_top
from simimg.camera.linearity import bend, full_signal
from simimg.camera.multiplication import excess_noise
from simimg.camera.settings import CameraSettings


def detector_cards(settings: CameraSettings, columns: int, rows: int) -> dict[str, object]:
    """Header keywords of a detector, each with its value and comment.

    Parameters
    ----------
    settings : CameraSettings
    columns, rows : int
        Of the part that sees the sky.
    """
    readout = settings.readout
    gains = readout.gains or (settings.gain,) * readout.amplifiers
    biases = readout.biases or (settings.bias,) * readout.amplifiers
    gain, bias = sum(gains) / len(gains), sum(biases) / len(biases)
    entering = readout.em_gain
    cards: dict[str, object] = {
        "GAIN": (gain / entering, "[electron/adu] gain"),
        "RDNOISE": (settings.read_noise / entering, "[electron] read noise"),
        "BIASLVL": (bias, "[adu] bias level"),
        "SATURATE": (saturation(settings), "[adu] saturation level"),
    }
    if readout.amplifiers > 1:
        for number, (one, level) in enumerate(zip(gains, biases, strict=True), start=1):
            cards[f"GAIN{number}"] = (one / entering, f"[electron/adu] gain of amplifier {number}")
            cards[f"BIASLV{number}"] = (level, f"[adu] bias level of amplifier {number}")
            section = _amplifier_section(number, readout.amplifiers, readout.prescan, columns, rows)
            cards[f"AMPSEC{number}"] = (section, f"pixels that amplifier {number} reads")
    if readout.em_gain > 1.0:
        cards["EMGAIN"] = (readout.em_gain, "gain of the multiplying register")
        cards["EXCESS"] = (excess_noise(readout.em_gain), "square of the excess noise factor")
    if settings.window is not None:
        across, along = settings.window.columns, settings.window.rows
        part = f"[{across.start + 1}:{across.stop},{along.start + 1}:{along.stop}]"
        cards["DETSEC"] = (part, "pixels of the detector that were read")
    if readout.binning > 1:
        cards["BINNING"] = (readout.binning, "pixels to the side of a bin")
    if readout.prescan or readout.overscan:
        cards |= section_cards(readout.prescan, readout.overscan, columns, rows)
    return cards


def section_cards(prescan: int, overscan: int, columns: int, rows: int) -> dict[str, object]:
    """Where a frame holds light, and where only bias.

    Parameters
    ----------
    prescan, overscan : int
        Columns without charge before and after.
    columns, rows : int
        Of the part that sees the sky.
    """
    data = _section(prescan, columns, rows)
    cards: dict[str, object] = {
        "DATASEC": (data, "pixels that see the sky"),
        "TRIMSEC": (data, "pixels to keep"),
    }
    bias = (prescan + columns, overscan) if overscan else (0, prescan)
    cards["BIASSEC"] = (_section(*bias, rows), "pixels with bias alone")
    if prescan and overscan:
        cards["PRESEC"] = (_section(0, prescan, rows), "pixels with bias alone, before the data")
    return cards


def _amplifier_section(number: int, count: int, prescan: int, columns: int, rows: int) -> str:
    """The part of the data that one of 2 or 4 amplifiers reads."""
    right, upper = (number - 1) % 2, (number - 1) // 2
    middle, half = columns // 2, rows // 2
    left, end = (middle + 1, columns) if right else (1, middle)
    bottom, top = (1, rows) if count == 2 else ((half + 1, rows) if upper else (1, half))
    return f"[{prescan + left}:{prescan + end},{bottom}:{top}]"


def _section(before: int, columns: int, rows: int) -> str:
    return f"[{before + 1}:{before + columns},1:{rows}]"


def saturation(settings: CameraSettings) -> float:
    """Counts at which a pixel of the frame is full.

    Parameters
    ----------
    settings : CameraSettings
    """
    readout = settings.readout
    gain = min(readout.gains) if readout.gains else settings.gain
    bias = max(readout.biases) if readout.biases else settings.bias
    well = inf if settings.full_well is None else settings.full_well * readout.binning**2
    if readout.em_gain > 1.0:
        well = min(well * readout.em_gain, inf if readout.em_well is None else readout.em_well)
    if readout.nonlinearity and well < inf:
        level = np.array([well], dtype=np.float64)
        bend(level, share=readout.nonlinearity, full=full_signal(settings))
        well = float(level[0])
    return min(float(converter_top(settings.bit_depth)), well / gain + bias)


def full_electrons(settings: CameraSettings) -> float:
    """Electrons of a pixel of the frame, as they gathered, at which it is full.

    Parameters
    ----------
    settings : CameraSettings
    """
    readout = settings.readout
    gain = min(readout.gains) if readout.gains else settings.gain
    bias = max(readout.biases) if readout.biases else settings.bias
    top = (float(converter_top(settings.bit_depth)) - bias) * gain
    if readout.em_well is not None and readout.em_gain > 1.0:
        top = min(top, readout.em_well)
    well = inf if settings.full_well is None else settings.full_well * readout.binning**2
    return min(well, top / readout.em_gain)
