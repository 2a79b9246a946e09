"""What stands under and over a figure: the set-up, what is drawn, the verdict, in words."""

from __future__ import annotations

from math import degrees, isfinite
from typing import TYPE_CHECKING

from simimg.assembly.report import SIMULATION_NOTE, cautions
from simimg.frame import Frame
from simimg.show.canvas import drawable
from simimg.show.profile import Profile
from simimg.show.setup import Setup
from simimg.show.signal import header_number, header_text
from simimg.show.subject import Subject

if TYPE_CHECKING:
    from simimg.resolving.records import CriterionVerdict, PairMeasurement
    from simimg.study.tally import Fraction, Tally

_ARCSEC, _DEG, _PLUS_MINUS = "\N{DOUBLE PRIME}", "\N{DEGREE SIGN}", "\N{PLUS-MINUS SIGN}"
_LEAST_CHANCE = 1e-6
_THROUGH = {"pair": "the pair", "source": "the brightest pixel"}


def panel_titles(frame: Frame, subject: Subject) -> tuple[str, str]:
    """Titles of the two panels: the frame's set-up in brief, and what the profile is of."""
    time = header_number(frame, "EXPTIME")
    parts = [
        drawable(header_text(frame, "TELESCOP"), ems=12.0),
        drawable(header_text(frame, "FILTER"), ems=6.0),
        "" if time is None else f"{time:.6g} s",
    ]
    left = ", ".join(part for part in parts if part)
    label = drawable(subject.label, ems=10.0)
    measured = subject.measurement
    if measured is None or subject.second is None:
        return left, label
    separation = _separation(measured)
    verdicts = {"Rayleigh": measured.rayleigh.verdict, "Sparrow": measured.sparrow.verdict}
    if len(set(verdicts.values())) == 1:
        words = f"{measured.rayleigh.verdict} (Rayleigh, Sparrow)"
    else:
        words = ", ".join(f"{name} {verdict}" for name, verdict in verdicts.items())
    return left, f"{label}: {separation}{_ARCSEC}\n{words}"


def figure_caption(
    frame: Frame,
    subject: Subject,
    profile: Profile,
    setup: Setup | None,
    *,
    iterations: int | None = None,
    remark: str = "",
    over: bool = False,
    trials: Tally | None = None,
) -> str:
    """The caption of a figure, one paragraph.

    Parameters
    ----------
    frame : Frame
    subject : Subject
    profile : Profile
    setup : Setup or None
        None where the frame carries no scene.
    iterations : int, optional
        Of the restored view that stands to the right of the frame, the profile below.
    remark : str, optional
        What is to be said of that view.
    over : bool, optional
        Whether the panels stand over one another.
    trials : Tally, optional
        Of many noise draws, for the probability of a split.
    """
    places = _places(over=over, restored=iterations is not None)
    sentences = [
        _of_what(frame),
        *_setup_sentences(frame, setup),
        *_panel_sentences(frame, subject, profile, iterations, remark, places),
    ]
    if subject.measurement is not None:
        sentences += _verdict_sentences(subject.measurement, drawable(subject.label), trials)
    if setup is not None:
        sentences += cautions(setup.scene)
    elif frame.simulated:
        sentences.append(SIMULATION_NOTE)
    return " ".join(sentences)


def _of_what(frame: Frame) -> str:
    title = drawable(header_text(frame, "OBJECT"), longest=200)
    kind = "Simulated frame" if frame.simulated else "Frame"
    return f"{kind}: {title}." if title else f"{kind}."


def _setup_sentences(frame: Frame, setup: Setup | None) -> list[str]:
    time, scale = header_number(frame, "EXPTIME"), header_number(frame, "PIXSCALE")
    parts = [
        drawable(header_text(frame, "TELESCOP")),
        drawable(header_text(frame, "INSTRUME")),
        drawable(header_text(frame, "FILTER")),
    ]
    if time is not None:
        parts.append(f"{time:.6g} s")
    if scale:
        parts.append(f"pixels of {scale:.3g}{_ARCSEC}")
    if setup is not None:
        scene, train = setup.scene, setup.train
        telescope = scene.telescope
        parts.insert(1, f"aperture {telescope.aperture:.4g} m")
        if telescope.obstruction:
            parts.insert(2, f"obstruction {telescope.obstruction:.3g}")
        if train.seeing is None:
            parts.append("above the atmosphere")
        else:
            seeing = degrees(train.seeing) * 3600.0
            parts.append(f"seeing {seeing:.3g}{_ARCSEC} (500 nm, zenith)")
            parts.append(f"airmass {train.airmass:.3g}")
    stated = [part for part in parts if part]
    words = ", ".join(stated)
    return [f"{words[0].upper()}{words[1:]}."] if words else []


def _places(*, over: bool, restored: bool) -> tuple[str, str, str]:
    """Where frame, restored view and profile stand."""
    if over:
        return "Above", "In the middle", "Below"
    return ("Upper left", "Upper right", "Below") if restored else ("Left", "", "Right")


def _panel_sentences(
    frame: Frame,
    subject: Subject,
    profile: Profile,
    iterations: int | None,
    remark: str,
    places: tuple[str, str, str],
) -> list[str]:
    left_edge, right_edge, bottom, top = subject.window
    whole = (top - bottom, right_edge - left_edge) == frame.counts.shape
    part = "the frame" if whole else "part of the frame"
    left = f"{places[0]}: {part}, asinh stretch"
    if profile.fit is not None:
        left += ", crosses at the fitted stars"
    left += "." if subject.compass.known else "; it carries no directions."
    if iterations is not None:
        left += (
            f" {places[1]}: the same, restored by {iterations} iterations of Richardson and Lucy "
            f"with the effective PSF; {remark}."
        )
    if profile.offsets.size == 0:
        return [left]
    scale = subject.compass.scale
    width = f"{profile.width * (scale or 1.0):.2g}" + (_ARCSEC if scale else " pixels")
    along = (
        "along x"
        if subject.position_angle is None
        else f"along position angle {subject.position_angle:.1f}{_DEG}"
    )
    through = _THROUGH.get(subject.kind) or drawable(subject.label)
    right = f"{places[2]}: mean over a strip {width} wide through {through} {along}"
    right += ", with 1-sigma errors"
    if profile.fit is not None:
        stars = "two stars" if len(profile.fit.places) > 1 else "one star"
        right += f"; {stars} of the frame's own PSF fitted to the pixels"
    elif profile.curves:
        right += "; the curve is the scene without noise"
    if profile.fwhm is not None:
        fwhm = f"{profile.fwhm * (scale or 1.0):.3g}" + (_ARCSEC if scale else " pixels")
        right += f"; the PSF's FWHM is {fwhm}"
    return [left, right + "."]


def _verdict_sentences(measured: PairMeasurement, name: str, trials: Tally | None) -> list[str]:
    chance = f"chance of a single star {_chance(measured.probability_single)}"
    split = _split_sentences(trials)
    if not isfinite(measured.separation_arcsec):
        return [f"{name}: no second star found, {chance}.", *split]
    separation = _separation(measured)
    angle = with_error(measured.position_angle_deg, measured.position_angle_error_deg)
    difference = with_error(measured.magnitude_difference, measured.magnitude_difference_error)
    turned = " or half a turn from it" if measured.ambiguous_180 else ""
    found = (
        f"{name}: separation {separation}{_ARCSEC}, position angle {angle}{_DEG}{turned}, "
        f"magnitude difference {difference}, {chance}."
    )
    criteria = [_criterion("Rayleigh", measured.rayleigh), _criterion("Sparrow", measured.sparrow)]
    verdict = f"In this one exposure: {'; '.join(criteria)}."
    return [one for one in (found, verdict, measured.advice, *split) if one]


def _separation(measured: PairMeasurement) -> str:
    """With its error, or with its interval where the error would mislead."""
    low, high = measured.separation_low_arcsec, measured.separation_high_arcsec
    if not isfinite(high):
        return with_error(measured.separation_arcsec, measured.separation_error_arcsec)
    return f"{measured.separation_arcsec:.2g} ({low:.2g} to {high:.2g})"


def _criterion(name: str, outcome: CriterionVerdict) -> str:
    limit = f"{outcome.limit_arcsec:.3g}{_ARCSEC}" if isfinite(outcome.limit_arcsec) else "none"
    words = f"{name} (limit {limit}): {outcome.verdict}"
    if not isfinite(outcome.probability):
        return words
    return f"{words}, with a chance of {outcome.probability:.2f} beyond it as measured"


def _split_sentences(trials: Tally | None) -> list[str]:
    """The probability of a split over many noise draws, or that one does not tell it."""
    if trials is None:
        return ["How often such a pair would be split, a single noise draw does not tell."]
    shares = [
        f"{one.fraction_resolved:.3g} by {name} (95 % interval {_interval(one)})"
        for name, one in (("Rayleigh", trials.rayleigh), ("Sparrow", trials.sparrow))
    ]
    return [f"Probability of a split, from {trials.trials} noise draws: {', '.join(shares)}."]


def _interval(share: Fraction) -> str:
    return f"{share.low:.2g} to {share.high:.2g}"


def _chance(value: float) -> str:
    if not isfinite(value):
        return "unknown"
    return "below 1e-6" if value < _LEAST_CHANCE else f"{value:.2g}"


def with_error(value: float, error: float) -> str:
    """A number and its error to two digits of the error: ``0.352 +/- 0.011``."""
    if not isfinite(value):
        return "unknown"
    if not isfinite(error) or error <= 0.0:
        return f"{value:.4g}"
    digits = min(max(-int(f"{error:.1e}".split("e")[1]) + 1, 0), 12)
    return f"{value:.{digits}f} {_PLUS_MINUS} {error:.{digits}f}"
