"""From light to shades: an asinh stretch, linear about zero and logarithmic far above it.

After Lupton, Gunn & Szalay 1999, Astron. J. 118, 1406: ``asinh(value / softening)``. The softening
is chosen so that neither the noise nor the brightest source takes up the scale. Values are above
the background, in electrons (or counts).
"""

from __future__ import annotations

from dataclasses import dataclass
from math import asinh, floor, log10

import numpy as np

from simimg.arrays import AnyArray, FloatArray

_MIDDLE = 0.45  # shade of the median of what stands out from the noise
_BRIGHT = 0.03  # softening of a bright source, as a share of its peak
_APART = 0.085  # least distance of two ticks, as a share of the scale


@dataclass(frozen=True)
class Stretch:
    """An asinh stretch.

    Attributes
    ----------
    low, high : float
        Values shown as the darkest and the brightest shade; ``low < 0 < high``.
    softening : float
        Value up to which the stretch is about linear, above 0.
    """

    low: float
    high: float
    softening: float

    def shades(self, values: AnyArray) -> FloatArray:
        """Shades from 0 to 1, clipped; NaN becomes 0."""
        bottom, top = asinh(self.low / self.softening), asinh(self.high / self.softening)
        shade = (np.arcsinh(np.nan_to_num(values) / self.softening) - bottom) / (top - bottom)
        return np.asarray(np.clip(np.where(np.isnan(values), 0.0, shade), 0.0, 1.0))

    def ticks(self, *, apart: float = _APART) -> list[float]:
        """Round values that stand apart on the scale: 0, powers of ten, and 5 and 2 times them.

        Parameters
        ----------
        apart : float, optional
            Least distance of two, as a share of the scale.
        """
        chosen: list[tuple[float, float]] = []
        least = floor(log10(max(self.softening * 0.05, 1e-300)))
        powers = range(floor(log10(self.high)), least - 1, -1)
        candidates = [0.0, *(factor * 10.0**power for factor in (1, 5, 2) for power in powers)]
        for value in candidates:
            if not self.low <= value <= self.high:
                continue
            shade = float(self.shades(np.array(value)))
            if all(abs(shade - other) >= apart for _, other in chosen):
                chosen.append((value, shade))
        return sorted(value for value, _ in chosen)


def choose_stretch(values: AnyArray, *, noise: float, field: bool = True) -> Stretch:
    """A stretch that shows the faint and the bright of an image.

    Parameters
    ----------
    values : array
        Above the background.
    noise : float
        Standard deviation of a pixel without an object, above 0.
    field : bool, optional
        True for many sources, of which the faint matter as much as the bright; False for a bright
        one whose shape is to be seen.
    """
    finite = values[np.isfinite(values)]
    high = max(float(finite.max(initial=0.0)), 5.0 * noise)
    low = -2.0 * noise
    if not field:
        return Stretch(low, high, max(2.0 * noise, _BRIGHT * high))
    seen = finite[finite > 5.0 * noise]
    if seen.size < 20:
        return Stretch(low, high, 3.0 * noise)
    return Stretch(low, high, _softening(float(np.median(seen)), high, noise))


def _softening(middle: float, high: float, noise: float) -> float:
    """The softening that gives `middle` its shade, within a noise and half of the range."""
    least, most = 1.5 * noise, max(0.5 * high, 2.0 * noise)

    def shade(softening: float) -> float:
        return asinh(middle / softening) / asinh(high / softening)

    # The larger the softening, the darker the middle.
    if shade(least) <= _MIDDLE:
        return least
    if shade(most) >= _MIDDLE:
        return most
    for _ in range(60):
        half = (least * most) ** 0.5
        least, most = (half, most) if shade(half) > _MIDDLE else (least, half)
    return least
