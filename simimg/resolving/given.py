"""What a user says of a frame where its header is silent or wrong.

Electrons to the count, electrons, arcseconds, counts, as the names say.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from math import inf, isfinite

from simimg.errors import InputError, mistake

_RANGES = {  # least, most, whether the least itself will do, example
    "gain": (1e-6, 1e6, True, "1.4"),
    "read_noise": (0.0, 1e6, True, "5"),
    "pixel_scale_arcsec": (1e-7, 3.6e4, True, "0.12"),
    "saturation": (-inf, inf, False, "60000"),
    "bias": (-inf, inf, False, "300"),
}


@dataclass(frozen=True, kw_only=True)
class Given:
    """What goes before a frame's own header; None for what is left to it.

    Attributes
    ----------
    gain : float or None
        Electrons to the count.
    read_noise : float or None
        Electrons.
    pixel_scale_arcsec : float or None
        Side of a pixel.
    saturation : float or None
        Counts from which a pixel is full.
    bias : float or None
        Counts of a pixel without electrons.
    """

    gain: float | None = None
    read_noise: float | None = None
    pixel_scale_arcsec: float | None = None
    saturation: float | None = None
    bias: float | None = None

    def __post_init__(self) -> None:
        lines = []
        for one in fields(self):
            value = getattr(self, one.name)
            if value is None:
                continue
            least, most, _, example = _RANGES[one.name]
            number = not isinstance(value, bool) and isinstance(value, int | float)
            if not (number and isfinite(value) and least <= value <= most):
                bounds = "" if least == -inf else f" from {least:g} to {most:g}"
                what = f"must be a number{bounds}, got {value!r}"
                lines.append(mistake("frame", one.name, what, f"write for example {example}"))
        if lines:
            raise InputError(*lines)
