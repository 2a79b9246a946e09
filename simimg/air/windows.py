"""Where the air lets light through and where it does not, from gamma rays to long radio waves.

A table of the atmosphere's windows as the trade knows them (common practice: the edges are round
numbers for a good site at some 2 to 4 km, and vary with water vapour, height and solar activity).
"Shut" means that hardly anything arrives; within an open window narrow lines and weak bands still
absorb. Wavelengths in metres.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Window:
    """A stretch of wavelengths through which the air lets light, or does not.

    Attributes
    ----------
    lower, upper : float
        Its ends (m); the lower one belongs to it.
    clear : bool
        Whether light arrives at the ground.
    sentence : str
        What happens there, for a reader.
    """

    lower: float
    upper: float
    clear: bool
    sentence: str


def _table() -> tuple[Window, ...]:
    """From the upper end of each stretch, in micrometres."""
    rows = (
        (0.300, False, "ozone and oxygen absorb everything shortward of 300 nm"),
        (1.11, True, "the visual window is open"),
        (1.16, False, "water vapour absorbs most light from 1.11 to 1.16 um"),
        (1.35, True, "the J window is open"),
        (1.45, False, "water vapour absorbs nearly all light from 1.35 to 1.45 um"),
        (1.80, True, "the H window is open"),
        (1.95, False, "water vapour absorbs nearly all light from 1.80 to 1.95 um"),
        (2.50, True, "the K window is open"),
        (2.90, False, "water vapour and carbon dioxide absorb nearly all light from 2.5 to 2.9 um"),
        (4.17, True, "the L window is open"),
        (4.45, False, "carbon dioxide absorbs all light from 4.17 to 4.45 um"),
        (5.20, True, "the M window is open from dry sites"),
        (7.70, False, "water vapour absorbs nearly all light from 5.2 to 7.7 um"),
        (14.0, True, "the N window is open, with ozone's band from 9.4 to 9.9 um in it"),
        (16.5, False, "carbon dioxide absorbs all light from 14 to 16.5 um"),
        (27.0, True, "the Q window is partly open from high, dry sites"),
        (320.0, False, "water vapour absorbs nearly all the far infrared, from 27 to 320 um"),
        (370.0, True, "the window at 350 um is partly open from the highest, driest sites"),
        (420.0, False, "water vapour absorbs nearly all light from 370 to 420 um"),
        (500.0, True, "the window at 450 um is partly open from the highest, driest sites"),
        (580.0, False, "water vapour absorbs nearly all light from 500 to 580 um"),
        (4600.0, True, "the millimetre windows are open from dry sites, between lines"),
        (5600.0, False, "oxygen absorbs nearly all radiation from 4.6 to 5.6 mm, about 60 GHz"),
        (30e6, True, "the radio window is open"),
        (np.inf, False, "the ionosphere turns back radio waves below about 10 MHz"),
    )
    windows, lower = [], 0.0
    for upper, clear, sentence in rows:
        windows.append(Window(lower * 1e-6, upper * 1e-6, clear, sentence))
        lower = upper
    return tuple(windows)


WINDOWS = _table()
"""Every stretch, from short to long, without gaps."""


def window_at(wavelength: float) -> Window:
    """The stretch that a wavelength lies in.

    Parameters
    ----------
    wavelength : float
        In metres, above 0.

    Raises
    ------
    ValueError
        If it is not finite and above 0.
    """
    if not (np.isfinite(wavelength) and wavelength > 0.0):
        raise ValueError(f"wavelength must be finite and above 0 m, got {wavelength}")
    return next(window for window in WINDOWS if window.lower <= wavelength < window.upper)


def shut_share(lower: float, upper: float) -> float:
    """Part of a band, by width in wavelength, in which the air is shut.

    Parameters
    ----------
    lower, upper : float
        Edges of the band (m), rising, above 0.

    Returns
    -------
    float
        0 to 1.

    Raises
    ------
    ValueError
        If the edges are not finite, above 0 and rising.
    """
    return float(sum(width for _, width in shut_parts(lower, upper)) / (upper - lower))


def shut_parts(lower: float, upper: float) -> list[tuple[Window, float]]:
    """The shut stretches that a band reaches into, each with the width they share (m).

    Raises
    ------
    ValueError
        If the edges are not finite, above 0 and rising.
    """
    if not (np.isfinite(upper) and 0.0 < lower < upper):
        raise ValueError(f"a band's edges must rise from above 0 m, got {lower} to {upper} m")
    parts = []
    for window in WINDOWS:
        width = min(upper, window.upper) - max(lower, window.lower)
        if not window.clear and width > 0.0:
            parts.append((window, width))
    return parts
