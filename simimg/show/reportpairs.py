"""The tables of pairs: verdicts, how often they are resolved, how well measured, what limits it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from math import isfinite

from simimg.resolving.records import PairMeasurement
from simimg.show.reportbudget import NoiseShares, Without
from simimg.show.reportfacts import Facts, Told
from simimg.show.reportsetup import NO_LABEL
from simimg.show.reporttable import (
    Cell,
    Column,
    Table,
    count,
    figures,
    number,
    percent,
    percentage,
    table,
    word,
)
from simimg.study.tally import Fraction, Tally

_CRITERIA = (("Rayleigh", "rayleigh"), ("Sparrow", "sparrow"))
_LEAST_CHANCE = 1e-6
_GEOMETRY = (
    ("separation", "separation_arcsec", "arcsec"),
    ("position angle", "position_angle_deg", "deg"),
    ("magnitude difference", "magnitude_difference", "mag"),
)


def answer(told: Told) -> str:
    """What a hurried reader takes away of a pair: verdicts and the probability of a split."""
    measured, name = told.measured, told.name
    words = {label: getattr(measured, key).verdict for label, key in _CRITERIA}
    if len(set(words.values())) == 1:
        text = f"{name} is {words['Rayleigh']} under both Rayleigh's and Sparrow's criterion"
    else:
        text = (
            f"{name} is {words['Rayleigh']} under Rayleigh's criterion and {words['Sparrow']} "
            "under Sparrow's"
        )
    text += " in the frame shown here."
    if told.trials is None:
        return f"{text} No trials were made, so that the probability of a split is not known."
    text += (
        f" The probability that one exposure splits it, from {told.trials.trials} trials: "
        f"{_shares(told.trials)} (with 95 % intervals)."
    )
    together = told.trials.together
    if together is not None:
        text += f" Of {told.trials.exposures} exposures fitted together: {_shares(together)}."
    return text


def _shares(one: Tally) -> str:
    return ", ".join(f"{_share(getattr(one, key))} under {label}'s" for label, key in _CRITERIA)


def _share(one: Fraction) -> str:
    low, high = percentage(one.low), percentage(one.high)
    return f"{percentage(one.fraction_resolved)} ({low} to {high})"


def verdict_table(facts: Facts) -> Table | None:
    """For each pair and criterion: the limit, the frame's verdict, the probability of a split."""
    if not facts.pairs:
        return None
    rows = []
    for told in facts.pairs:
        for label, key in _CRITERIA:
            one = getattr(told.measured, key)
            share = None if told.trials is None else getattr(told.trials, key)
            rows.append(
                [
                    word(told.name),
                    word(label),
                    number(one.limit_arcsec, 3),
                    number(told.measured.separation_arcsec, 3),
                    word(one.verdict, mark=one.verdict),
                    _probability(one.probability),
                    *_with_interval(share),
                ]
            )
    return table(
        "verdicts",
        "Resolved or not: the verdict of this frame, and the share of trials that are resolved",
        (
            Column("pair"),
            Column("criterion"),
            Column("delivered limit", "arcsec", numbers=True),
            Column("measured separation", "arcsec", numbers=True),
            Column("this frame"),
            Column("probability beyond the limit", numbers=True),
            Column("trials resolved", "%", numbers=True),
            Column("at least", "%", numbers=True),
            Column("at most", "%", numbers=True),
        ),
        rows,
    )


def measured_table(facts: Facts) -> Table | None:
    """What the frame says of each pair, beside what was put into it."""
    if not facts.pairs:
        return None
    rows = []
    for told in facts.pairs:
        for words, key, unit in _GEOMETRY:
            error = getattr(told.measured, _error_of(key))
            value = getattr(told.measured, key)
            truth = None if told.measured.truth is None else getattr(told.measured.truth, key)
            rows.append(
                [
                    word(told.name),
                    word(words),
                    word(unit),
                    Cell(_to_error(value, error), value if isfinite(value) else None),
                    number(error, 2),
                    number(truth),
                ]
            )
    return table(
        "measured",
        "Measured in this frame, and what the scene has there",
        (
            Column("pair"),
            Column("figure"),
            Column("unit"),
            Column("measured", numbers=True),
            Column("error", numbers=True),
            Column("true", numbers=True),
        ),
        rows,
    )


def measured_words(measured: PairMeasurement) -> list[str]:
    """What a frame says of a pair besides its geometry."""
    chance = measured.probability_single
    shown = "below one in a million" if chance < _LEAST_CHANCE else figures(chance, 2)
    texts = [f"Chance that a single star would look this double: {shown}."]
    if isfinite(measured.saddle_ratio):
        saddle = (
            f"{measured.saddle_ratio:.3f} \N{PLUS-MINUS SIGN} {measured.saddle_ratio_error:.3f}"
        )
        texts.append(f"Saddle between the stars over the lower of their peaks: {saddle}.")
    if measured.elongated:
        texts.append("Elongated: a second star is certain, and neither criterion is met.")
    if measured.ambiguous_180:
        texts.append("Which star is the brighter is not certain: the angle may be half a turn off.")
    low, high = measured.separation_low_arcsec, measured.separation_high_arcsec
    if isfinite(high):
        texts.append(
            "The likelihood of the separation is lopsided: with 68 % confidence it lies from "
            f"{figures(low, 3)} to {figures(high, 3)} arcsec."
        )
    return texts


def trials_table(facts: Facts) -> Table | None:
    """How often each pair is resolved; None without trials."""
    rows = [
        [
            word(told.name),
            word(kind),
            word(words),
            count(one.trials),
            *_with_interval(getattr(one, key)),
        ]
        for told, kind, one in _tallies(facts)
        for words, key in (
            ("second star certain", "double"),
            ("resolved by Rayleigh", "rayleigh"),
            ("resolved by Sparrow", "sparrow"),
        )
    ]
    if not rows:
        return None
    return table(
        "trials",
        "Share of the trials, with the 95 % interval (Wilson) of the probability behind it",
        (
            Column("pair"),
            Column("fitted"),
            Column("what"),
            Column("trials", numbers=True),
            Column("share", "%", numbers=True),
            Column("at least", "%", numbers=True),
            Column("at most", "%", numbers=True),
        ),
        rows,
    )


def accuracy_table(facts: Facts) -> Table | None:
    """How well the trials measure each pair; None without trials."""
    rows = [
        [
            word(told.name),
            word(kind),
            word(words),
            word(unit),
            *(
                number(getattr(getattr(one, part), key), 2)
                for part in ("bias", "scatter", "error", "bound")
            ),
        ]
        for told, kind, one in _tallies(facts)
        for words, key, unit in _GEOMETRY
    ]
    if not rows:
        return None
    return table(
        "accuracy",
        "How well the trials measure it: bias and scatter about the truth, the error quoted",
        (
            Column("pair"),
            Column("fitted"),
            Column("figure"),
            Column("unit"),
            Column("bias", numbers=True),
            Column("scatter", numbers=True),
            Column("error quoted", numbers=True),
            Column("Cramér-Rao bound", numbers=True),
        ),
        rows,
    )


def width_table(rows: Sequence[Without], name: str | None) -> Table:
    """What would be delivered, and how well the pair be measured, without each part."""
    pair = [
        Column("Sparrow, this pair" if name else "Sparrow, equal pair", "arcsec", numbers=True),
    ]
    if name:
        pair += [
            Column("bound on separation", "arcsec", numbers=True),
            Column("on position angle", "deg", numbers=True),
            Column("on magnitude difference", "mag", numbers=True),
        ]
    return table(
        "budget",
        "What each part costs: delivered width and bounds with one part taken away at a time",
        (Column("without"), Column("what that is"), Column("FWHM", "arcsec", numbers=True), *pair),
        [
            [
                word(one.part or "nothing"),
                word(one.remark),
                number(one.fwhm_arcsec),
                number(one.sparrow_arcsec),
                *(
                    [
                        number(one.separation_arcsec, 3, missing="not defined"),
                        number(one.position_angle_deg, 3, missing="not defined"),
                        number(one.magnitude_difference, 3, missing="not defined"),
                    ]
                    if name
                    else []
                ),
            ]
            for one in rows
        ],
    )


def noise_table(rows: Sequence[NoiseShares]) -> Table | None:
    """Whose noise limits each object; None without any."""
    if not rows:
        return None
    return table(
        "noise",
        "Whose noise counts: shares of the variance behind the signal to noise",
        (
            Column("object"),
            Column("kind"),
            Column("S/N", numbers=True),
            *(
                Column(name, "%", numbers=True)
                for name in ("its own photons", "sky", "dark signal", "read noise")
            ),
        ),
        [
            [
                word(one.label or NO_LABEL),
                word(one.kind),
                number(one.snr),
                *(percent(share) for share in (one.photons, one.sky, one.dark, one.read)),
            ]
            for one in rows
        ],
    )


def _tallies(facts: Facts) -> Iterator[tuple[Told, str, Tally]]:
    """Each pair's trials: of one exposure, then of all fitted together."""
    for told in facts.pairs:
        if told.trials is not None:
            yield told, "one exposure", told.trials
            if told.trials.together is not None:
                yield told, f"{told.trials.exposures} exposures together", told.trials.together


def _with_interval(share: Fraction | None) -> list[Cell]:
    if share is None:
        return [Cell("not tried", None)] * 3
    return [percent(part) for part in (share.fraction_resolved, share.low, share.high)]


def _error_of(key: str) -> str:
    """The name of a figure's error in a record."""
    stem, _, unit = key.rpartition("_")
    return f"{stem}_error_{unit}" if unit in ("arcsec", "deg") else f"{key}_error"


def _to_error(value: float, error: float) -> str:
    """A value to two figures of its error."""
    if not isfinite(value):
        return "none"
    if not isfinite(error) or error <= 0.0:
        return figures(value)
    places = min(max(1 - int(f"{error:.1e}".split("e")[1]), 0), 12)
    return f"{value:.{places}f}".replace("-", "\N{MINUS SIGN}")


def _probability(value: float) -> Cell:
    """A probability: two decimals, or what keeps it from looking certain."""
    if not isfinite(value):
        return Cell("none", None)
    text = "< 0.01" if 0.0 <= value < 0.005 else "> 0.99" if value > 0.995 else f"{value:.2f}"
    return Cell(text, value)
