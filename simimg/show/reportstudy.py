"""The report of a study: what changes as a key is varied, as a picture, a table and in words.

One HTML file like the report of a scene (`simimg.show.report`), with the scene and the command that
make it again.
"""

from __future__ import annotations

import os
import shlex
from collections.abc import Mapping
from math import isfinite

import numpy as np

from simimg.assembly.report import cautions
from simimg.newfile import new_file
from simimg.scene.file import scene_id
from simimg.show.canvas import look
from simimg.show.reportagain import again
from simimg.show.reportfacts import UNTITLED
from simimg.show.reportpage import (
    Files,
    Page,
    Picture,
    Pictures,
    Section,
    Tables,
    Words,
    csv_file,
    file_name,
    items,
    page_html,
    section,
)
from simimg.show.reportpictures import picture
from simimg.show.reporttable import Cell, Column, Table, figures, number, percentage, table, word
from simimg.show.studycurves import draw_curves
from simimg.show.studymap import column_words, draw_map
from simimg.show.studysheet import column_of
from simimg.study.sweep import Sweep, Varied

_WIDTH = 100.0  # of the picture, mm: legible on a phone
_SHOWN = {
    "delivered_fwhm": "FWHM",
    "delivered_rayleigh": "Rayleigh, equal pair",
    "delivered_sparrow": "Sparrow, equal pair",
    "diffraction_rayleigh": "dark ring of the pupil",
    "pixels_per_fwhm": "pixels to the FWHM",
    "snr": "S/N",
    "bound_separation": "bound on the separation",
    "fraction_rayleigh": "share resolved by Rayleigh",
    "fraction_rayleigh_low": "Rayleigh, at least",
    "fraction_rayleigh_high": "Rayleigh, at most",
    "fraction_sparrow": "share resolved by Sparrow",
    "fraction_sparrow_low": "Sparrow, at least",
    "fraction_sparrow_high": "Sparrow, at most",
}
"""Columns on the page, and their headings; the file of every column has those of the study."""


def study_page(made: Sweep, *, pair: str | None = None) -> str:
    """The report of a study as HTML.

    Parameters
    ----------
    made : Sweep
        Of one key or two.
    pair : str, optional
        Label of the pair that was asked for.
    """
    scene = made.scene
    stem = file_name(scene.name).rsplit(".", 1)[0] + "-study"
    shown = {name: words for name, words in _SHOWN.items() if name in made.columns}
    every = csv_file(stem, _table("all-columns", made, {name: name for name in made.columns}))
    keys = " and ".join(one.key for one in made.varied)
    sections = (
        _in_brief(made),
        Section(
            "picture",
            "The curves" if len(made.varied) == 1 else "The map",
            (Pictures((_picture(made),)),),
        ),
        section(
            "points",
            "Point by point",
            Tables(_table("points", made, shown)),
            Words("The file below holds every column of every point."),
            Files((every,)),
        ),
        again(scene, _command(made, stem, pair)),
    )
    return page_html(
        Page(
            title=scene.title or UNTITLED,
            kind=f"Study of {keys}",
            stem=stem,
            cautions=cautions(scene),
            sections=sections,
            identity=scene_id(scene),
        )
    )


def write_study_page(
    made: Sweep,
    path: str | os.PathLike[str],
    *,
    pair: str | None = None,
    overwrite: bool = False,
) -> None:
    """Write the report of a study: whole, or not at all.

    Parameters
    ----------
    made : Sweep
    path : path
    pair : str, optional
        Label of the pair that was asked for.
    overwrite : bool, optional
        Whether a file of that name may be replaced.

    Raises
    ------
    InputError
        The name cannot be used, or the file exists and `overwrite` is false.
    RunError
        The system refused; no part of the file is left behind.
    """
    content = study_page(made, pair=pair).encode("utf-8")
    with new_file(path, overwrite=overwrite) as handle:
        handle.write(content)


def _in_brief(made: Sweep) -> Section:
    ranges = [f"{one.key} goes over {_range(one)}" for one in made.varied]
    count = len(made.points)
    points = "1 point" if count == 1 else f"{count} points"
    said = [Words(f"{points.capitalize()}, as {' and '.join(ranges)}.")]
    if made.trials:
        said.append(Words(f"At each point {made.trials} noise draws were exposed and measured."))
    # Where the scene lies on this machine is nobody's business.
    known = [one.replace(made.scene.where, made.scene.name) for one in made.problems if one]
    problems = list(dict.fromkeys(known))
    return section(
        "in-brief",
        "In brief",
        *(Words(text, lead=True) for text in _findings(made)),
        *said,
        items([f"Not every point could be worked out: {one}" for one in problems]),
    )


def _findings(made: Sweep) -> list[str]:
    """Where the pair is best measured, and where it is most often split."""
    texts = []
    bounds = column_of(made, "bound_separation")
    if np.isfinite(bounds).any():
        best = int(np.nanargmin(np.where(np.isfinite(bounds), bounds, np.nan)))
        texts.append(
            "The separation can be measured best, to "
            f"{figures(float(bounds[best]), 2)} arcsec, at {_place(made, best)}."
        )
    for name in ("rayleigh", "sparrow") if made.trials else ():
        shares = column_of(made, f"fraction_{name}")
        if not np.isfinite(shares).any():
            continue
        most = float(np.nanmax(shares))
        if most == 0.0:
            texts.append(f"{name.capitalize()}'s criterion is met in no trial of any point.")
            continue
        first = int(np.flatnonzero(shares == most)[0])
        low = percentage(made.rows[first][f"fraction_{name}_low"])
        high = percentage(made.rows[first][f"fraction_{name}_high"])
        where = "first at" if np.count_nonzero(shares == most) > 1 else "at"
        texts.append(
            f"{name.capitalize()}'s criterion is met most often, in {percentage(most)} of the "
            f"trials ({low} to {high} with 95 % confidence), {where} {_place(made, first)}."
        )
    return texts


def _place(made: Sweep, row: int) -> str:
    values = zip(made.varied, made.points[row], strict=True)
    return " and ".join(f"{one.key} {_short(one, value)}" for one, value in values)


def _short(one: Varied, value: str | float | int | bool) -> str:
    """A value of a key to four figures, with its unit."""
    steps = one.steps
    if not steps.numbers:
        return str(value)
    held = steps.numbers[steps.values.index(value)]
    return f"{held:.4g} {steps.unit}".strip()


def _range(one: Varied) -> str:
    values = [_short(one, value) for value in one.steps.values]
    if one.steps.spacing == "list" and len(values) <= 12:
        return ", ".join(values)
    return f"{values[0]} to {values[-1]}"


def _picture(made: Sweep) -> Picture:
    keys = " and ".join(f"{one.key} from {_range(one)}" for one in made.varied)
    with look():
        if len(made.varied) == 1:
            low = (
                "the share of the trials in which the pair is resolved, with its 95 % interval"
                if made.trials
                else "the bound on the pair's separation, where there is one"
            )
            caption = f"Above, the limits of an equal pair; below, {low}."
            alt = f"Simulated. Curves along {keys}: limits of an equal pair, and {low}."
            figure = draw_curves(made, width=_WIDTH)
        else:
            column = _mapped(made)
            level = 0.5 if column.startswith("fraction") else None
            caption = f"{column_words(column).capitalize()}."
            if level is not None:
                caption += " The white line is where it is one half."
            alt = f"Simulated. Map of the {column_words(column)} over {keys}."
            figure = draw_map(made, column, level, width=_WIDTH)
        return picture(figure, "study", alt=alt, caption=caption)


def _mapped(made: Sweep) -> str:
    """The column that a map shows: the first that there is of what one would ask for."""
    wanted = ("fraction_sparrow", "bound_separation", "delivered_sparrow", "delivered_fwhm")
    known = [name for name in wanted if name in made.columns]
    finite = [name for name in known if np.isfinite(column_of(made, name)).any()]
    return (finite or known)[0]


def _table(key: str, made: Sweep, headings: Mapping[str, str]) -> Table:
    """The points with some of their columns, under these headings."""
    columns = [
        Column(one.key, one.steps.unit, numbers=bool(one.steps.numbers)) for one in made.varied
    ]
    columns += [
        Column(words, made.columns[name][0], numbers=True) for name, words in headings.items()
    ]
    rows = [
        [
            *(_value(one, value) for one, value in zip(made.varied, point, strict=True)),
            *(number(row[name] if isfinite(row[name]) else None) for name in headings),
        ]
        for point, row in zip(made.points, made.rows, strict=True)
    ]
    return table(key, "What is delivered and measured at each point", columns, rows)


def _value(one: Varied, value: str | float | int | bool) -> Cell:
    steps = one.steps
    if not steps.numbers:
        return word(str(value))
    held = steps.numbers[steps.values.index(value)]
    return Cell(f"{held:.6g}", held)


def _command(made: Sweep, stem: str, pair: str | None) -> str:
    """The command that makes the page, for the scene as the page holds it."""
    words = ["simimg", "study", file_name(made.scene.name)]
    for one in made.varied:
        words += ["--vary", f"{one.key}={_written(one)}"]
    words += ["--trials", str(made.trials)]
    if pair is not None:
        words += ["--pair", pair]
    return shlex.join([*words, "--report", f"{stem}.html"])


def _written(one: Varied) -> str:
    """The values of a key as the command line takes them."""
    steps = one.steps
    if steps.spacing == "list" or not steps.numbers:
        return ",".join(str(value) for value in steps.values)
    ends = f"{steps.values[0]}:{steps.values[-1]}:{len(steps.values)}"
    return f"{ends}:log" if steps.spacing == "log" else ends
