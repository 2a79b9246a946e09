"""What a measurement of a pair says: plain, frozen records with the names that JSON uses.

Arcseconds, degrees and magnitudes, as the names say; pixels count from 0 at the centre of the
first; NaN where the data do not tell.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, is_dataclass
from math import isfinite, nan
from typing import Any


@dataclass(frozen=True, kw_only=True)
class CriterionVerdict:
    """One criterion's answer.

    Attributes
    ----------
    limit_arcsec : float
        The delivered limit: Sparrow's for the pair's own magnitude difference.
    probability : float
        That the pair's separation lies beyond the limit, taking for granted that it is a pair.
    verdict : str
        ``"resolved"`` (above 0.95, and surely no single star), ``"borderline"``, or
        ``"unresolved"`` (below 0.05, or perhaps a single star).
    """

    limit_arcsec: float
    probability: float
    verdict: str


@dataclass(frozen=True, kw_only=True)
class PairTruth:
    """What was put into a simulated frame; of the second star about the first."""

    separation_arcsec: float
    position_angle_deg: float
    magnitude_difference: float


@dataclass(frozen=True, kw_only=True)
class PairMeasurement:
    """What a frame says of a pair, or of what might be one.

    Attributes
    ----------
    label : str
        Of the first star in TRUTH; empty for a place or a find.
    x, y : float
        Place of the first star, pixels. First is the star that TRUTH names first, otherwise the
        brighter.
    ra_deg, dec_deg : float
        The same on the sky.
    separation_arcsec, separation_error_arcsec : float
    separation_low_arcsec, separation_high_arcsec : float
        Ends of the separation's 68.27 % interval, where its likelihood is lopsided and the error,
        which is symmetric, would mislead (`simimg.resolving.interval`); NaN elsewhere.
    position_angle_deg, position_angle_error_deg : float
        Of the second star about the first, north through east, 0 to 360.
    magnitude_difference, magnitude_difference_error : float
        Second minus first.
    probability_single : float
        That a single star would look this double somewhere within the search radius (two delivered
        FWHM; farther for pairs known to be wider).
    elongated : bool
        There is a second star, and neither criterion calls the pair resolved.
    ambiguous_180 : bool
        Which of the two is the brighter is not certain, so that the position angle may be half a
        turn off. False where TRUTH names the stars.
    saddle_ratio, saddle_ratio_error : float
        Lowest point between the stars over the lower of their peaks, as the pixels show it.
    rayleigh, sparrow : CriterionVerdict
    truth : PairTruth or None
    advice : str
        One sentence: what the answer means and what would change it.
    """

    label: str
    x: float
    y: float
    ra_deg: float
    dec_deg: float
    separation_arcsec: float
    separation_error_arcsec: float
    position_angle_deg: float
    position_angle_error_deg: float
    magnitude_difference: float
    magnitude_difference_error: float
    probability_single: float
    elongated: bool
    ambiguous_180: bool
    saddle_ratio: float
    saddle_ratio_error: float
    rayleigh: CriterionVerdict
    sparrow: CriterionVerdict
    separation_low_arcsec: float = nan
    separation_high_arcsec: float = nan
    truth: PairTruth | None = None
    advice: str = ""

    def to_dict(self) -> dict[str, Any]:
        """For JSON: nested dictionaries; None for what is not finite."""
        result: dict[str, Any] = _plain(self)
        return result


@dataclass(frozen=True, kw_only=True)
class SingleMeasurement:
    """What a frame says of a single object that was found in it.

    Attributes
    ----------
    x, y : float
        Pixels.
    electrons, electrons_error : float
        Of several frames measured together: of the first, from all of them.
    verdict : str
        ``"extended"`` where a point source would look so wide with a chance below 0.01, what the
        PSF's own misfit may feign allowed for, else ``"point"``.
    width_arcsec, width_error_arcsec : float
        Intrinsic standard deviation of a round Gaussian, 0 where it is no wider than the PSF, and
        how far it rises for one standard error of its square.
    label : str
        Of the object that TRUTH has there; empty without.
    """

    x: float
    y: float
    electrons: float
    electrons_error: float
    verdict: str
    width_arcsec: float
    width_error_arcsec: float
    label: str = ""

    def to_dict(self) -> dict[str, Any]:
        """For JSON; None for what is not finite."""
        result: dict[str, Any] = _plain(self)
        return result


def _plain(value: Any) -> Any:
    if isinstance(value, float):
        return value if isfinite(value) else None
    if is_dataclass(value):
        return {one.name: _plain(getattr(value, one.name)) for one in fields(value)}
    return value
