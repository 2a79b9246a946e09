"""Which pixel scale: what a telescope, air and camera gain and lose with it.

For each scale: sampling, the share of the image's power that a pixel grid folds back onto lower
frequencies (aliased power), the field, the signal to noise, the Cramer-Rao bound on the pair's
separation, and the share of frames in which the pair would be resolved. Recommended is the range in
which the bound is within a tenth of its best, and trials at both of its ends say whether the fit
keeps to the bound there. Arcseconds, as the names say.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import degrees, exp, log, nan, sqrt
from typing import Final

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.assembly.train import assemble_train
from simimg.errors import InputError, mistake
from simimg.fits.hdus import Column
from simimg.imaging.basis import Transfer
from simimg.scene.file import replace, requirements_to_expose
from simimg.scene.model import Scene
from simimg.study.outlook import outlook_of
from simimg.study.point import Question, question, work_out
from simimg.study.tally import Tally
from simimg.study.trials import trials
from simimg.study.workforce import Jobs

WITHIN: Final = 1.1
"""The bound may be so many times its best in the recommended range."""

_FINEST, _COARSEST = 1.0 / 12.0, 1.6  # of the FWHM without a pixel
_LATTICE = 97  # frequencies to a side for the aliased power
_COLUMNS = (
    ("pixel_scale", "arcsec", "varied"),
    ("pixels_per_fwhm", "", "pixels across the delivered FWHM"),
    ("pixels_per_lambda_over_d", "", "pixels across lambda/D"),
    ("aliased_power", "", "share of the image's power beyond the pixels' Nyquist frequency"),
    ("field", "arcsec", "the detector's shorter side"),
    ("snr_loss", "", "of a fit, relative to the best pixel"),
    ("bound_separation", "arcsec", "Cramer-Rao bound on the pair's separation"),
    ("share_resolved", "", "of frames, by limit and bound"),
    ("saturated", "", "1 where the brightest pixel is full"),
)


@dataclass(frozen=True, eq=False)
class Confirmed:
    """Trials at one end of the recommended range.

    Attributes
    ----------
    pixel_scale : float
    scatter, bound : float
        Of the separation: as found and as bounded.
    share : float
        Of the trials resolved.
    trials : int
    """

    pixel_scale: float
    scatter: float
    bound: float
    share: float
    trials: int

    @property
    def holds(self) -> bool:
        """Whether the scatter keeps to the bound, within a tenth and three of its own errors."""
        allowed = 1.1 + 3.0 / sqrt(2.0 * self.trials)
        return self.scatter <= self.bound * allowed


@dataclass(frozen=True, eq=False)
class PixelAdvice:
    """What pixel scales do.

    Attributes
    ----------
    figures : mapping of str to ndarray, shape (n,)
        By the names of the table's columns.
    finest, coarsest : float
        The recommended range.
    best : float
        The scale of the least bound.
    own : float
        The scene's scale; NaN where it says none.
    confirmed : tuple of Confirmed
        At both ends; empty without trials.
    reasons : tuple of str
        In words.
    """

    figures: dict[str, FloatArray]
    finest: float
    coarsest: float
    best: float
    own: float
    confirmed: tuple[Confirmed, ...]
    reasons: tuple[str, ...]

    def columns(self) -> list[Column]:
        """The figures as the columns of a table."""
        return [Column(name, self.figures[name], unit, says) for name, unit, says in _COLUMNS]


def pixel_advice(
    scene: Scene,
    *,
    criterion: str = "sparrow",
    steps: int = 15,
    count: int = 400,
    pair: str | None = None,
    workers: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> PixelAdvice:
    """Work out what pixel scale suits a scene's pair.

    Parameters
    ----------
    scene : Scene
        With a pair, a camera and an exposure; the camera keeps its pixels, their noise and their
        number, whatever angle they span.
    criterion : {"sparrow", "rayleigh"}, optional
        Under which the pair is resolved.
    steps : int, optional
        Scales from a twelfth of the FWHM to 1.6 of it, 5 or more.
    count : int, optional
        Trials at each end of the recommended range; 0 for none.
    pair : str, optional
        Label of the pair; the first unless given.
    workers : int, optional
        Processes, of no effect on the result.
    progress : callable, optional
        Called with the scales done and their number.

    Raises
    ------
    InputError
        No pair, or a scene that lacks what an exposure needs.
    ValueError
        Too few steps, or a negative count.
    """
    if steps < 5 or count < 0:
        raise ValueError(f"steps must be 5 or more and count 0 or more, got {steps}, {count}")
    asked = question(scene, trials=0, label=pair)
    if asked.pair is None:
        raise InputError(mistake(scene.where, "pair", "there is none", "add a [[pair]]"))
    missing = requirements_to_expose(scene)
    if missing:
        raise InputError(*missing)
    width = work_out(replace(scene, {"camera": None, "sky": None, "exposure": None}), asked)
    scales = np.geomspace(_FINEST, _COARSEST, steps) * width["delivered_fwhm"]
    rows: dict[int, dict[str, float]] = {}
    tasks = [(_with_scale(scene, float(one)), asked, criterion) for one in scales]
    for number, row in Jobs(workers=workers).run(_one, tasks):
        rows[number] = row
        if progress is not None:
            progress(len(rows), steps)
    found = {name: np.array([rows[i][name] for i in range(steps)]) for name in rows[0]}
    figures = _figures(scene, scales, found)
    finest, coarsest, best = _range(scales, figures["bound_separation"])
    ends = _confirm(scene, asked, criterion, (finest, coarsest), count, workers)
    own = nan if scene.pixel_scale is None else degrees(scene.pixel_scale) * 3600.0
    reasons = _reasons(figures, finest, coarsest, own, ends)
    return PixelAdvice(figures, finest, coarsest, best, own, ends, tuple(reasons))


def _with_scale(scene: Scene, arcsec: float) -> Scene:
    return replace(scene, {"camera.pixel_scale": f"{arcsec:.12g} arcsec"})


def _one(task: tuple[Scene, Question, str]) -> dict[str, float]:
    scene, asked, criterion = task
    row = work_out(scene, asked)
    row["aliased_power"] = aliased_power(assemble_train(scene).effective)
    row["share_resolved"] = outlook_of(row, criterion).figure
    return row


def aliased_power(transfer: Transfer) -> float:
    """Share of a PSF's power beyond the Nyquist frequencies of its own pixels.

    Parameters
    ----------
    transfer : Transfer
        With a pixel.

    Returns
    -------
    float
        The integral of the squared modulus outside the square of half-width ``1 / (2 pixel)`` over
        that in all the plane, right to about 1e-3; 0 where the band ends inside.
    """
    nyquist = 0.5 / transfer.box
    if transfer.band_limit <= nyquist:
        return 0.0
    # Beyond a dozen Nyquist frequencies the pixel's own response has left nothing.
    end = min(transfer.band_limit, 12.0 * nyquist)
    nodes, weights = np.polynomial.legendre.leggauss(_LATTICE)
    inner = 0.5 * (nodes + 1.0)

    def power(parts: list[tuple[float, float]]) -> float:
        """Integral over a square of pieces, of the upper half plane."""
        u = np.concatenate([low + (high - low) * inner for low, high in parts])
        w = np.concatenate([0.5 * (high - low) * weights for low, high in parts])
        both, double = np.concatenate([-u, u]), np.concatenate([w, w])
        squared = np.abs(transfer(both[np.newaxis, :], u[:, np.newaxis])) ** 2
        return float(w @ squared @ double)

    within = power([(0.0, nyquist)])
    every = power([(0.0, nyquist), (nyquist, end)])
    return max(0.0, 1.0 - within / every)


def _figures(
    scene: Scene, scales: FloatArray, found: dict[str, FloatArray]
) -> dict[str, FloatArray]:
    pixels = scene.camera.read_pixels if scene.camera is not None else None
    names = ("pixels_per_fwhm", "pixels_per_lambda_over_d", "aliased_power", "bound_separation",
             "share_resolved", "saturated")  # fmt: skip
    figures = {name: frozen(found[name]) for name in names}
    figures["pixel_scale"] = frozen(scales)
    figures["field"] = frozen(scales * min(pixels or (1, 1)))
    figures["snr_loss"] = frozen(1.0 - found["snr_fit"] / np.nanmax(found["snr_fit"]))
    return figures


def _range(scales: FloatArray, bound: FloatArray) -> tuple[float, float, float]:
    """Ends of the range about the least bound in which it stays within a tenth; its place."""
    known = np.where(np.isfinite(bound), bound, np.inf)
    best = int(known.argmin())
    least = float(known[best])
    if not np.isfinite(least):
        raise InputError(mistake("study", "pair", "is not measurable at any pixel scale",
                                 "give it more light, or place it inside the frame"))  # fmt: skip
    ends = []
    for step in (-1, 1):
        i = best
        while 0 <= i + step < len(scales) and known[i + step] <= WITHIN * least:
            i += step
        beyond = i + step
        if not 0 <= beyond < len(scales) or not np.isfinite(known[beyond]):
            ends.append(float(scales[i]))
            continue
        # Where the bound, as a power of the scale between two of them, passes the tenth.
        part = log(WITHIN * least / known[i]) / log(known[beyond] / known[i])
        ends.append(exp(log(scales[i]) * (1.0 - part) + log(scales[beyond]) * part))
    return ends[0], ends[1], float(scales[best])


def _confirm(
    scene: Scene,
    asked: Question,
    criterion: str,
    ends: tuple[float, float],
    count: int,
    workers: int,
) -> tuple[Confirmed, ...]:
    if count == 0:
        return ()
    tasks = [(_with_scale(scene, one), asked.pair or 0, count) for one in ends]
    told = dict(Jobs(workers=workers).run(_try, tasks))
    made = []
    for number, scale in enumerate(ends):
        one = told[number]
        if one is not None:
            share = getattr(one, criterion).fraction_resolved
            made.append(
                Confirmed(
                    scale,
                    one.scatter.separation_arcsec,
                    one.bound.separation_arcsec,
                    share,
                    count,
                )
            )
    return tuple(made)


def _try(task: tuple[Scene, int, int]) -> Tally | None:
    scene, index, count = task
    label = scene.pair[index].label or ""
    told = trials(scene, count=count)
    chosen = [one for one in told if one.label == label] or told
    return chosen[0] if chosen else None


def _reasons(
    figures: dict[str, FloatArray],
    finest: float,
    coarsest: float,
    own: float,
    ends: tuple[Confirmed, ...],
) -> list[str]:
    scales = figures["pixel_scale"]

    def at(name: str, scale: float) -> float:
        return float(np.interp(log(scale), np.log(scales), figures[name]))

    words = []
    if finest <= scales[0] * 1.001:
        words.append(
            f'finer than {finest:.3g}" was not tried: there the pixels cost nothing but field'
        )
    else:
        words.append(
            f'finer than {finest:.3g}" ({at("pixels_per_fwhm", finest):.1f} pixels to the FWHM) '
            "the read noise and dark signal of more pixels cost precision, and the field is smaller"
        )
    if coarsest >= scales[-1] * 0.999:
        words.append(f'coarser than {coarsest:.3g}" was not tried')
    elif _fills(figures, coarsest):
        words.append(f'coarser than {coarsest:.3g}" the brightest pixel is full in this exposure')
    else:
        words.append(
            f'coarser than {coarsest:.3g}" ({at("pixels_per_fwhm", coarsest):.1f} pixels to the '
            f"FWHM) the stars fall between too few pixels: {at('aliased_power', coarsest):.1%} of "
            "the image's power is aliased there"
        )
    for one in ends:
        verb = "keeps to" if one.holds else "exceeds"
        words.append(
            f'{one.trials} trials at {one.pixel_scale:.3g}": the scatter of the separation, '
            f'{one.scatter:.2g}", {verb} the bound of {one.bound:.2g}"; resolved in {one.share:.0%}'
        )
    if own == own:
        inside = finest <= own <= coarsest
        words.append(f"the scene's own {own:.3g}\" lies {'inside' if inside else 'outside'}")
    return words


def _fills(figures: dict[str, FloatArray], coarsest: float) -> bool:
    """Whether the next coarser scale that was tried saturates."""
    coarser = np.flatnonzero(figures["pixel_scale"] > coarsest)
    return coarser.size > 0 and bool(figures["saturated"][coarser[0]] == 1.0)
