"""What limit and bound promise before any trial, and why a pair cannot be resolved.

A verdict is `resolved` where the measured separation lies some 1.645 errors beyond the limit and a
single star is ruled out; both follow from the delivered limit and the Cramer-Rao bound alone, to
within a few percent in the share. That tells trials where to begin. Arcseconds.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import hypot, inf, isfinite, nan, sqrt

import numpy as np
from scipy.special import ndtr

from simimg.scene.file import replace
from simimg.scene.model import Scene
from simimg.study.point import Question, work_out

_BEYOND = 1.6448536269514722  # errors that hold 95 % to one side
_SINGLE = 14.0  # fall of the deviance at which a single star has a chance of 1 %
_CUSP = 2.0 / 3.0
_MEANT = 0.05  # power of a difference above which the limit's own rise is known from it
_USUAL_RISE = 0.43  # of Kolmogorov's PSF, over the limit of an equal pair; 0.27 of a clear aperture
_MORE = 3.0  # by which two stars follow the noise better than one


@dataclass(frozen=True)
class Outlook:
    """What is to be expected of a set-up.

    Attributes
    ----------
    figure : float
        Share of frames in which the pair is resolved, or the column that is asked for.
    separation, limit, error : float
        Of the pair: its separation, its delivered limit, the error of their difference.
    significance : float
        Standard deviations of the second star.
    saturated : bool
    """

    figure: float
    separation: float = nan
    limit: float = nan
    error: float = nan
    significance: float = nan
    saturated: bool = False


def outlook(scene: Scene, asked: Question, criterion: str) -> Outlook:
    """What limit and bound promise.

    Parameters
    ----------
    scene : Scene
    asked : Question
    criterion : {"rayleigh", "sparrow"}

    Raises
    ------
    InputError
        A set-up that cannot be computed.
    """
    return outlook_of(work_out(scene, asked), criterion)


def outlook_of(row: Mapping[str, float], criterion: str) -> Outlook:
    """The same from a point of a study.

    Parameters
    ----------
    row : mapping
        By the names of `simimg.study.point.COLUMNS`.
    criterion : {"rayleigh", "sparrow"}
    """
    separation, limit = row["separation"], row[f"pair_{criterion}"]
    error, significance = row["bound_separation"], row["expected_significance"]
    if criterion == "sparrow" and isfinite(limit):
        limit, lean = blurred_limit(
            row["delivered_sparrow"],
            limit,
            difference=row["magnitude_difference"],
            spread=row["bound_magnitude_difference"],
        )
        error = hypot(error, lean)
    share = share_resolved(
        separation=separation, limit=limit, error=error, significance=significance
    )
    return Outlook(
        figure=share,
        separation=separation,
        limit=limit,
        error=error,
        significance=significance,
        saturated=row["saturated"] == 1.0,
    )


def blurred_limit(
    equal: float, limit: float, *, difference: float, spread: float, about: float | None = None
) -> tuple[float, float]:
    """Sparrow's limit as an uncertain magnitude difference leaves it: its mean and its scatter.

    About equal stars the limit has a cusp, rising as the difference to the power of 2/3 (the cusp
    catastrophe of two maxima that merge), so that an error of the difference always raises it.

    Parameters
    ----------
    equal, limit : float
        For an equal pair, and for this difference.
    difference, spread : float
        Magnitude difference and its error.
    about : float, optional
        Difference that is asked for, where `limit` is that of another.
    """
    power = abs(difference) ** _CUSP
    rise = (limit - equal) / power if power > _MEANT else _USUAL_RISE * equal
    centre = difference if about is None else about
    steps = np.linspace(-3.0, 3.0, 61)
    weights = np.exp(-0.5 * steps**2)
    blurred = equal + rise * np.abs(centre + min(spread, 1.0) * steps) ** _CUSP
    mean = float(np.average(blurred, weights=weights))
    scatter = float(np.sqrt(np.average((blurred - mean) ** 2, weights=weights)))
    return mean, scatter


def share_resolved(*, separation: float, limit: float, error: float, significance: float) -> float:
    """Share of the frames whose verdict would be `resolved`, about; NaN where nothing is known.

    Parameters
    ----------
    separation, limit, error : float
        Of the pair, of its criterion, and of their difference, in one unit.
    significance : float
        Standard deviations of the second star.
    """
    if not (isfinite(separation) and isfinite(limit)):
        return 0.0 if limit == inf else nan
    if not isfinite(error):
        return 0.0
    beyond = (separation - limit) / error if error > 0.0 else inf * (separation - limit)
    seen = (significance**2 + _MORE - _SINGLE) / (2.0 * sqrt(significance**2 + 1.0))
    return float(ndtr(beyond - _BEYOND) * ndtr(seen))


def why_not(scene: Scene, asked: Question, criterion: str, *, place: str) -> str:
    """Why a pair is not resolved even at the best place of a search, in words.

    Parameters
    ----------
    scene : Scene
        At that place.
    asked : Question
    criterion : {"rayleigh", "sparrow"}
    place : str
        The place in words.
    """
    best = outlook(scene, asked, criterion)
    name = criterion.capitalize()
    if not isfinite(best.limit):
        return f"resolution: no separation resolves a pair so unequal under {name}'s criterion"
    if best.saturated:
        return f"saturation: the brightest pixel is full at {place}"
    if best.separation <= best.limit:
        gap = (
            f'at {place} the delivered {name} limit is {best.limit:.3g}", the pair is '
            f'{best.separation:.3g}"'
        )
        return f"{_culprit(scene, asked, criterion, best.separation)}: {gap}"
    return (
        f'photons: at {place} the pair lies {best.separation - best.limit:.2g}" beyond its limit, '
        f'with an error of {best.error:.2g}"'
    )


def _culprit(scene: Scene, asked: Question, criterion: str, separation: float) -> str:
    """What sets the limit: the pixel, the air, or the telescope itself."""
    bare = {"camera": None, "sky": None, "exposure": None}
    focal = work_out(replace(scene, bare), asked)[f"pair_{criterion}"]
    if focal < separation:
        return "sampling"
    if scene.air is not None:
        above = work_out(replace(scene, {**bare, "air": None}), asked)[f"pair_{criterion}"]
        if above < separation:
            return "resolution (the air)"
    return "resolution (the telescope)"
