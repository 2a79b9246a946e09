"""The smallest separation that is resolved, against the magnitude difference; and contrast.

For each difference: the delivered limits under either criterion, the separation from which so many
frames would be resolved (limit and noise together: `simimg.study.outlook`), and the separation from
which a second star shows at all, whatever a criterion says, which the Cramer-Rao bound and the
expected significance set (`simimg.resolving.bound`). Read the other way, the last gives the
faintest companion at each separation. Arcseconds and magnitudes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import hypot, nan
from typing import Final

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.errors import InputError, mistake
from simimg.fits.hdus import Column
from simimg.resolving.bound import pair_precision
from simimg.resolving.expectation import Expectation, pairs_of
from simimg.resolving.resolution import Directions, computable
from simimg.scene.file import replace, requirements_to_expose
from simimg.scene.model import Scene
from simimg.scene.steps import split_value
from simimg.study.outlook import blurred_limit, share_resolved
from simimg.study.point import Question, question
from simimg.study.workforce import Jobs

SHOWS: Final = 5.0
"""Expected significance at which a second star is certain in about nineteen frames of twenty."""

_SEPARATIONS = np.geomspace(0.02, 4.0, 20)  # of the delivered FWHM
_FINE = 400
_COLUMNS = (
    ("magnitude_difference", "mag", "second minus first"),
    ("rayleigh_limit", "arcsec", "delivered, along the pair"),
    ("sparrow_limit", "arcsec", "delivered, for the difference"),
    ("resolved_rayleigh", "arcsec", "from which the share of frames is resolved by Rayleigh"),
    ("resolved_sparrow", "arcsec", "from which the share of frames is resolved by Sparrow"),
    ("shows", "arcsec", "from which a second star is certain"),
)


@dataclass(frozen=True, eq=False)
class SeparationMap:
    """What separations a set-up resolves.

    Attributes
    ----------
    label : str
        Of the pair whose first star, place and angle stand for all.
    share : float
        Of the frames that are to be resolved.
    magnitude_difference : ndarray, shape (n,)
    rayleigh_limit, sparrow_limit : ndarray, shape (n,)
        Delivered; infinite where no separation resolves.
    resolved_rayleigh, resolved_sparrow : ndarray, shape (n,)
        Smallest separation from which that share is resolved, noise and all; NaN if none within
        four FWHM.
    shows : ndarray, shape (n,)
        Smallest separation at which the second star has a significance of 5; NaN if none.
    separation : ndarray, shape (m,)
    contrast : ndarray, shape (m,)
        Largest magnitude difference at which a second star shows at each separation; NaN if none.
    """

    label: str
    share: float
    magnitude_difference: FloatArray
    rayleigh_limit: FloatArray
    sparrow_limit: FloatArray
    resolved_rayleigh: FloatArray
    resolved_sparrow: FloatArray
    shows: FloatArray
    separation: FloatArray
    contrast: FloatArray

    def columns(self) -> list[Column]:
        """The map as the columns of a table."""
        return [Column(name, getattr(self, name), unit, says) for name, unit, says in _COLUMNS]


def separation_map(
    scene: Scene,
    *,
    share: float = 0.95,
    largest: float = 6.0,
    steps: int = 13,
    pair: str | None = None,
    workers: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> SeparationMap:
    """Work out the smallest separations that a scene's set-up resolves.

    Parameters
    ----------
    scene : Scene
        With a pair, whose first star stays as it is.
    share : float, optional
        Of the frames that are to be resolved, from 0.02 to 0.98.
    largest : float, optional
        Magnitude difference, up to 10.
    steps : int, optional
        Differences from 0 to it, 2 or more.
    pair : str, optional
        Label of the pair; the first unless given.
    workers : int, optional
        Processes, of no effect on the result.
    progress : callable, optional
        Called with the differences done and their number.

    Raises
    ------
    InputError
        No pair, or a scene that lacks what an exposure needs.
    ValueError
        A share, a difference or a number of steps out of range.
    """
    if not (0.02 <= share <= 0.98 and 0.0 < largest <= 10.0 and steps >= 2):
        raise ValueError(f"share, largest, steps out of range: {share}, {largest}, {steps}")
    asked = question(scene, trials=0, label=pair)
    if asked.pair is None:
        raise InputError(mistake(scene.where, "pair", "there is none", "add a [[pair]]"))
    missing = requirements_to_expose(scene)
    if missing:
        raise InputError(*missing)
    differences = np.linspace(0.0, largest, steps)
    tasks = [(scene, asked, float(one), share) for one in differences]
    rows: dict[int, tuple[FloatArray, FloatArray, FloatArray]] = {}
    for number, row in Jobs(workers=workers).run(_one, tasks):
        rows[number] = row
        if progress is not None:
            progress(len(rows), steps)
    figures = np.array([rows[number][0] for number in range(steps)])
    separations = rows[0][1]
    significance = np.array([rows[number][2] for number in range(steps)])
    label = scene.pair[asked.pair].label or ""
    contrast = np.array([_faintest(differences, column) for column in significance.T])
    held = dict(zip([name for name, _, _ in _COLUMNS[1:]], figures.T, strict=True))
    return SeparationMap(
        label=label,
        share=share,
        magnitude_difference=frozen(differences),
        **{name: frozen(column) for name, column in held.items()},
        separation=frozen(separations),
        contrast=frozen(contrast),
    )


def _one(task: tuple[Scene, Question, float, float]) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Limits and separations of one difference; the separations tried, and the significance."""
    scene, asked, difference, share = task
    index = asked.pair or 0
    unequal = replace(scene, _second(scene, index, difference))
    train = assemble_train(unequal)
    delivered = Directions(computable(train.effective))
    found = inventory(unequal, train=train)
    first = [one for one in found.entries if one.partner >= 0][2 * index]
    angle = found.geometry.direction(first.position_angle)
    limits = delivered.resolution(angle, difference)
    tried = _SEPARATIONS * limits.fwhm_arcsec
    errors: list[float] = []
    spreads: list[float] = []
    seen: list[float] = []
    view = None
    # The widest first: the view made for it holds all the others.
    for separation in tried[::-1]:
        there = replace(
            unequal,
            {
                f"pair.{index}.separation": f"{separation:.12g} arcsec",
                f"pair.{index}.position_angle": f"{np.degrees(first.position_angle):.12g} deg",
            },
        )
        objects = inventory(there, train=train)
        view = Expectation.of(there, train, objects) if view is None else view.showing(objects)
        assert view is not None  # a scene that can be exposed has a camera
        bound = pair_precision(view, pairs_of(objects)[index])
        errors.insert(0, bound.separation_arcsec)
        spreads.insert(0, bound.magnitude_difference)
        seen.insert(0, bound.expected_significance)
    equal = delivered.resolution(angle).sparrow_arcsec
    aside = limits if difference > 0.1 else delivered.resolution(angle, 0.5)
    rayleigh = [limits.rayleigh_arcsec] * len(tried)
    sparrow, both = [], []
    for error, spread in zip(errors, spreads, strict=True):
        mean, lean = blurred_limit(
            equal,
            aside.sparrow_arcsec,
            difference=max(difference, 0.5) if aside is not limits else difference,
            spread=spread,
            about=difference,
        )
        sparrow.append(mean)
        both.append(hypot(error, lean))
    by_name = [
        _closest(tried, rayleigh, errors, seen, share),
        _closest(tried, sparrow, both, seen, share),
    ]
    shows = _first_above(tried, np.array(seen), SHOWS)
    figures = [limits.rayleigh_arcsec, limits.sparrow_arcsec, *by_name, shows]
    return np.array(figures), tried, np.array(seen)


def _second(scene: Scene, index: int, difference: float) -> dict[str, object]:
    """The change that makes the second star so much fainter."""
    pair = scene.document["pair"][index]
    if "electrons" in pair:
        first = split_value(pair["electrons"][0])
        assert first is not None
        number, unit = first
        fainter = f"{number * 10.0 ** (-0.4 * difference):.12g} {unit or 'electron'}"
        return {f"pair.{index}.electrons": [pair["electrons"][0], fainter]}
    bright = float(pair["magnitudes"][0])
    return {f"pair.{index}.magnitudes": [bright, bright + difference]}


def _closest(
    tried: FloatArray,
    limits: list[float],
    errors: list[float],
    seen: list[float],
    share: float,
) -> float:
    """Smallest separation from which a share of the frames is resolved at every wider one."""
    usable = np.isfinite(errors) & (np.array(errors) > 0.0) & np.isfinite(limits)
    if usable.sum() < 2:
        return nan
    fine = np.geomspace(tried[0], tried[-1], _FINE)
    # Interpolated as powers: errors and significance go as powers of the separation.
    log_fine, log_tried = np.log(fine), np.log(tried)
    limit = np.interp(log_fine, log_tried[usable], np.array(limits)[usable])
    error = np.exp(np.interp(log_fine, log_tried[usable], np.log(np.array(errors)[usable])))
    significance = np.interp(log_fine, log_tried, seen)
    enough = np.array(
        [
            share_resolved(separation=a, limit=b, error=c, significance=d) >= share
            for a, b, c, d in zip(fine, limit, error, significance, strict=True)
        ]
    )
    if not enough[-1]:
        return nan
    below = np.flatnonzero(~enough)
    return float(fine[0] if below.size == 0 else fine[below[-1] + 1])


def _first_above(x: FloatArray, y: FloatArray, level: float) -> float:
    """Smallest `x` from which `y` reaches a level, by interpolation in both logarithms."""
    above = np.flatnonzero(y >= level)
    if above.size == 0:
        return nan
    number = int(above[0])
    if number == 0 or y[number - 1] <= 0.0:
        return float(x[number])
    low, high = np.log(y[number - 1]), np.log(y[number])
    part = (np.log(level) - low) / (high - low)
    return float(np.exp(np.log(x[number - 1]) * (1.0 - part) + np.log(x[number]) * part))


def _faintest(differences: FloatArray, significance: FloatArray) -> float:
    """Largest difference at which a second star shows; NaN where none does."""
    above = np.flatnonzero(significance >= SHOWS)
    if above.size == 0:
        return nan
    number = int(above[-1])
    if number == len(differences) - 1:
        return float(differences[-1])
    high, low = significance[number], significance[number + 1]
    part = (high - SHOWS) / (high - low)
    return float(differences[number] + part * (differences[number + 1] - differences[number]))
