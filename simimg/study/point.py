"""One point of a study: what a set-up resolves, how well it sees the object, what trials say.

Arcseconds, degrees, magnitudes and electrons, as the columns say; NaN where nothing is to be said.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import nan, pi
from typing import Final

from simimg.errors import InputError, mistake
from simimg.resolving.limits import Limits, limits
from simimg.resolving.listing import ObjectLimits
from simimg.scene.file import replace, requirements_to_expose
from simimg.scene.model import Scene
from simimg.study.trials import PairTrials, trials

COLUMNS: Final = {
    "wavelength": ("nm", "centre of the band"),
    "diffraction_rayleigh": ("arcsec", "first dark ring of the pupil"),
    "diffraction_sparrow": ("arcsec", "equal pair, pupil alone"),
    "delivered_fwhm": ("arcsec", "optics, air and pixel"),
    "delivered_rayleigh": ("arcsec", "equal pair, saddle of 0.735"),
    "delivered_sparrow": ("arcsec", "equal pair, no saddle"),
    "strehl": ("", "without the pixel"),
    "pixels_per_fwhm": ("", "pixels across the delivered FWHM"),
    "pixels_per_lambda_over_d": ("", "pixels across lambda/D"),
    "snr": ("", "signal to noise of the object, known sky"),
    "snr_fit": ("", "the same, weighted by the PSF"),
    "peak_electrons": ("electron", "brightest pixel of the object"),
    "saturated": ("", "1 where that pixel is full"),
    "separation": ("arcsec", "of the pair"),
    "magnitude_difference": ("mag", "of the pair, second minus first"),
    "pair_rayleigh": ("arcsec", "delivered, along the pair"),
    "pair_sparrow": ("arcsec", "delivered, along the pair, for its difference"),
    "bound_separation": ("arcsec", "Cramer-Rao bound"),
    "bound_position_angle": ("deg", "Cramer-Rao bound"),
    "bound_magnitude_difference": ("mag", "Cramer-Rao bound"),
    "expected_significance": ("", "standard deviations of the second star"),
}
"""What is said of every point: unit and meaning of each column."""

TRIAL_COLUMNS: Final = {
    "trials": ("", "noise draws"),
    **{
        f"fraction_{name}{part}": ("", f"share resolved by {words}{bound}")
        for name, words in (("rayleigh", "Rayleigh"), ("sparrow", "Sparrow"))
        for part, bound in (("", ""), ("_low", ", 95 % interval"), ("_high", ", 95 % interval"))
    },
    "bias_separation": ("arcsec", "mean of measured minus true"),
    "scatter_separation": ("arcsec", "standard deviation"),
    "bias_magnitude_difference": ("mag", "mean of measured minus true"),
    "scatter_magnitude_difference": ("mag", "standard deviation"),
}
"""What is said besides where trials are made."""


@dataclass(frozen=True)
class Question:
    """What is asked at every point.

    Attributes
    ----------
    trials : int
        Noise draws; 0 for none.
    pair : int or None
        Which pair of the scene, from 0; None where it has none: its first object then counts.
    """

    trials: int
    pair: int | None


def question(scene: Scene, *, trials: int, label: str | None) -> Question:
    """Which pair is studied.

    Parameters
    ----------
    scene : Scene
    trials : int
        0 or more.
    label : str or None
        Of the pair; None for the first.

    Raises
    ------
    InputError
        No pair of that label, or trials without a pair.
    """
    labels = [one.label for one in scene.pair]
    if label is not None and label not in labels:
        known = ", ".join(one for one in labels if one) or "a label of a [[pair]]"
        raise InputError(
            mistake(scene.where, "pair", f"no pair is labelled {label!r}", f"write {known}")
        )
    if trials and not labels:
        raise InputError(
            mistake(scene.where, "pair", "trials need a pair", "add a [[pair]], or ask for none")
        )
    if not labels:
        return Question(trials, None)
    return Question(trials, 0 if label is None else labels.index(label))


def work_out(scene: Scene, asked: Question) -> dict[str, float]:
    """Everything that is said of one point.

    Parameters
    ----------
    scene : Scene
        With the varied keys set.
    asked : Question

    Returns
    -------
    dict of str to float
        By the names of `COLUMNS`, and of `TRIAL_COLUMNS` where there are trials.

    Raises
    ------
    InputError
        A set-up that cannot be computed.
    """
    angle = None
    if asked.pair is not None:
        scene = _first(scene, asked.pair)
        angle = scene.pair[0].position_angle
    found = limits(scene, position_angle=0.5 * pi if angle is None else angle)
    kinds = [one for one in found.objects if asked.pair is None or one.kind == "pair"]
    row = _of_setup(found) | _of_object(kinds[0] if kinds else None)
    if asked.trials:
        missing = requirements_to_expose(scene)
        if missing:
            raise InputError(*missing)
        bound = kinds[0].bound if kinds else None
        told = [
            one
            for one in trials(scene, count=asked.trials)
            if bound is not None and (one.x, one.y) == (bound.x, bound.y)
        ]
        row |= _of_trials(told[0] if told else None, asked.trials)
    return row


def _first(scene: Scene, index: int) -> Scene:
    """The scene with this pair before the others, whose light stays."""
    if index == 0:
        return scene
    pairs = scene.document["pair"]
    return replace(scene, {"pair": [pairs[index], *pairs[:index], *pairs[index + 1 :]]})


def _of_setup(found: Limits) -> dict[str, float]:
    scale = nan if found.pixel_scale_arcsec is None else found.pixel_scale_arcsec
    return {
        "wavelength": found.wavelength_nm,
        "diffraction_rayleigh": found.diffraction.rayleigh_arcsec,
        "diffraction_sparrow": found.diffraction.sparrow_arcsec,
        "delivered_fwhm": found.delivered.fwhm_arcsec,
        "delivered_rayleigh": found.delivered.rayleigh_arcsec,
        "delivered_sparrow": found.delivered.sparrow_arcsec,
        "strehl": found.strehl,
        "pixels_per_fwhm": found.delivered.fwhm_arcsec / scale,
        "pixels_per_lambda_over_d": 2.0 * found.nyquist_pixel_arcsec / scale,
    }


def _of_object(one: ObjectLimits | None) -> dict[str, float]:
    row = dict.fromkeys(list(COLUMNS)[list(COLUMNS).index("snr") :], nan)
    if one is None:
        return row
    row["snr"], row["snr_fit"] = _number(one.snr), _number(one.snr_fit)
    row["peak_electrons"] = _number(one.peak_electrons)
    row["saturated"] = nan if one.saturated is None else float(one.saturated)
    row["separation"] = _number(one.separation_arcsec)
    row["magnitude_difference"] = _number(one.magnitude_difference)
    if one.delivered is not None:
        row["pair_rayleigh"] = one.delivered.rayleigh_arcsec
        row["pair_sparrow"] = one.delivered.sparrow_arcsec
    if one.bound is not None:
        row["bound_separation"] = one.bound.separation_arcsec
        row["bound_position_angle"] = one.bound.position_angle_deg
        row["bound_magnitude_difference"] = one.bound.magnitude_difference
        row["expected_significance"] = one.bound.expected_significance
    return row


def _of_trials(told: PairTrials | None, count: int) -> dict[str, float]:
    if told is None:
        return dict.fromkeys(TRIAL_COLUMNS, nan) | {"trials": float(count)}
    row = {"trials": float(told.trials)}
    for name in ("rayleigh", "sparrow"):
        share = getattr(told, name)
        row[f"fraction_{name}"] = share.fraction_resolved
        row[f"fraction_{name}_low"], row[f"fraction_{name}_high"] = share.low, share.high
    for name in ("bias", "scatter"):
        of = getattr(told, name)
        row[f"{name}_separation"] = of.separation_arcsec
        row[f"{name}_magnitude_difference"] = of.magnitude_difference
    return {column: row[column] for column in TRIAL_COLUMNS}


def _number(value: float | None) -> float:
    return nan if value is None else value
