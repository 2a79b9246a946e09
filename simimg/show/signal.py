"""A frame's counts as the light to be shown: electrons above the background, and their noise.

A frame that says its bias, gain and background (simimg's own do) is taken at its word; of any
other the background is the clipped median, the noise the scatter about it, and the unit stays that
of the counts.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.camera.noise import pixel_variance
from simimg.frame import Frame

_SAMPLED = 1_000_000  # pixels that a background is estimated from, at most


@dataclass(frozen=True, eq=False)
class Light:
    """A frame's pixels as light.

    Attributes
    ----------
    values : (rows, columns) array
        Above the background; NaN where the frame has no number.
    variance : (rows, columns) array
        Of each pixel's noise, in the unit squared.
    unit : str
        "electron", or "adu" where the gain is not known.
    background : float
        What was taken off, above the bias.
    noise : float
        Standard deviation of a pixel without an object, above 0.
    """

    values: FloatArray
    variance: FloatArray
    unit: str
    background: float
    noise: float


def frame_light(frame: Frame) -> Light:
    """The light of a frame.

    Parameters
    ----------
    frame : Frame
    """
    gain = header_number(frame, "GAIN")
    known = frame.simulated and gain is not None and gain > 0.0
    factor = gain if known and gain is not None else 1.0
    bias = header_number(frame, "BIASLVL") or 0.0
    read_noise = header_number(frame, "RDNOISE") or 0.0
    values = (frame.counts.astype(np.float64) - bias) * factor
    values[~np.isfinite(values)] = np.nan
    sky, dark = header_number(frame, "SKYLVL"), header_number(frame, "DARKSIG")
    if known and sky is not None and dark is not None:
        background = sky + dark
        variance = pixel_variance(np.maximum(values, 0.0), read_noise=read_noise, gain=factor)
        noise = float(np.sqrt(pixel_variance(background, read_noise=read_noise, gain=factor)))
    else:
        background, noise = clipped_background(values)
        # Without a gain the light's own noise is unknown: that of the background stands for all.
        variance = np.full(values.shape, noise**2)
    return Light(
        values=frozen(values - background),
        variance=frozen(variance),
        unit="electron" if known else "adu",
        background=background,
        noise=noise,
    )


def header_number(frame: Frame, keyword: str) -> float | None:
    """A finite number of the header; None where there is none."""
    value = frame.value(keyword)
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    return float(value) if np.isfinite(value) else None


def header_text(frame: Frame, keyword: str) -> str:
    """A text of the header without the blanks about it; empty where there is none."""
    value = frame.value(keyword)
    return value.strip() if isinstance(value, str) else ""


def clipped_background(values: AnyArray) -> tuple[float, float]:
    """Median of the pixels without objects, and the standard deviation of their noise.

    Parameters
    ----------
    values : array
        NaN is left out.

    Returns
    -------
    background, noise : float
        The noise is above 0 even for an even image.
    """
    finite = values[np.isfinite(values)]
    finite = finite[:: max(1, finite.size // _SAMPLED)]
    if finite.size == 0:
        return 0.0, 1.0
    kept = finite
    for _ in range(10):
        middle = float(np.median(kept))
        scatter = 1.4826 * float(np.median(np.abs(kept - middle)))
        inside = kept[np.abs(kept - middle) <= 3.0 * scatter]
        if scatter == 0.0 or inside.size == kept.size:
            break
        kept = inside
    noise = 1.4826 * float(np.median(np.abs(kept - middle)))
    if noise == 0.0:
        noise = float(np.std(finite)) or max(abs(middle) * 1e-6, 1e-6)
    return middle, noise
