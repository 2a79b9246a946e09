"""Numbers as the commands print them."""

from __future__ import annotations

import math

NONE = "-"


def arcsec(value: float | None, digits: int = 4) -> str:
    """An angle in arcseconds with its sign, or a dash where there is none."""
    if value is None or not math.isfinite(value):
        return NONE
    return f'{figures(value, digits)}"'


def figures(value: float | None, digits: int = 4) -> str:
    """A number to so many figures, without an exponent where it stays short."""
    if value is None or not math.isfinite(value):
        return NONE
    if value == 0.0 or 1e-4 <= abs(value) < 1e6:
        places = digits - 1 - (math.floor(math.log10(abs(value))) if value else 0)
        return f"{value:.{max(places, 0)}f}"
    return f"{value:.{digits - 1}e}"


def short(value: float | None) -> str:
    """A number as a person would have written it, to four figures at most."""
    return NONE if value is None or not math.isfinite(value) else f"{value:.4g}"


def with_error(value: float | None, error: float | None) -> str:
    """A value and its error, both to two figures of the error."""
    if value is None or not math.isfinite(value):
        return NONE
    if error is None or not math.isfinite(error) or error <= 0.0:
        return f"{figures(value)} +/- ?"
    places = max(1 - math.floor(math.log10(error)), 0)
    return f"{value:.{places}f} +/- {error:.{places}f}"


def with_interval(value: float | None, low: float, high: float) -> str:
    """A value and the ends of its interval, to two figures of the interval."""
    if value is None or not math.isfinite(value):
        return NONE
    width = high - low
    places = max(1 - math.floor(math.log10(width)), 0) if width > 0.0 else 3
    least = "0" if low == 0.0 else f"{low:.{places}f}"
    return f"{value:.{places}f} ({least} to {high:.{places}f})"


def probability(value: float | None) -> str:
    """A probability; a small one as a bound."""
    if value is None or not math.isfinite(value):
        return NONE
    if value < 1e-6:
        return "< 1e-6"
    return f"{value:.2g}" if value < 0.01 else f"{value:.2f}"
