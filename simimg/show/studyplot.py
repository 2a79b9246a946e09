"""A study as a picture in a file: curves along one varied key, or a map of two with its boundary.

Sized for one column of a page (88 mm) unless another width is asked for.
"""

from __future__ import annotations

import os
from math import isfinite

import numpy as np

from simimg.show.canvas import COLUMN, check_width, drawable, figure_format, look, save
from simimg.show.studycurves import draw_curves
from simimg.show.studymap import column_words, draw_map
from simimg.show.studysheet import PLANNING, column_of
from simimg.study.sweep import Sweep, Varied


def write_study_plot(
    made: Sweep,
    path: str | os.PathLike[str],
    *,
    column: str | None = None,
    level: float | None = None,
    overwrite: bool = False,
    width: float = COLUMN,
) -> str:
    """Draw a study and write it to a file.

    Parameters
    ----------
    made : Sweep
        Of one key or two.
    path : path
        Ends in .png, .pdf or .svg.
    column : str, optional
        What a map shows; the share resolved by Sparrow, or without trials the bound on the
        separation, unless given.
    level : float, optional
        Value of the boundary in a map; 0.5 of a share unless given.
    overwrite : bool, optional
        Whether a file of that name may be replaced.
    width : float, optional
        Of the figure, 80 to 400 mm; one column of a page unless given.

    Returns
    -------
    str
        The caption.

    Raises
    ------
    InputError
        Another ending, or a file that exists or cannot be written.
    RunError
        The system refused; no part of the file is left behind.
    ValueError
        A width that is out of range.
    """
    check_width(width)
    file_format = figure_format(path, overwrite=overwrite)
    if len(made.varied) == 1:
        caption = _curves_caption(made)
    else:
        column = column or ("fraction_sparrow" if made.trials else "bound_separation")
        if level is None and column.startswith("fraction"):
            level = 0.5
        caption = _map_caption(made, column, level)
    with look():
        if len(made.varied) == 1:
            figure = draw_curves(made, width=width)
        else:
            figure = draw_map(made, column or "", level, width=width)
        save(
            figure,
            path,
            format=file_format,
            title=drawable(f"Simulated study: {made.scene.title or 'untitled'}", longest=200),
            description=caption,
            overwrite=overwrite,
        )
    return caption


def _curves_caption(made: Sweep) -> str:
    one = made.varied[0]
    start = drawable(made.scene.title or "A study", longest=200).rstrip(".")
    words = [f"Simulated: {start}, as {one.key} goes over {_range(one)}."]
    words.append("Above: the delivered limits of an equal pair, and that of diffraction.")
    if made.trials:
        words.append(
            f"Below: share of {made.trials} noise draws in which the pair is resolved, with its "
            "95 % interval."
        )
    elif np.isfinite(column_of(made, "bound_separation")).any():
        words.append("Below: the Cramer-Rao bound on the pair's separation.")
    words.append(PLANNING)
    return " ".join(words)


def _map_caption(made: Sweep, column: str, level: float | None) -> str:
    first, second = made.varied
    start = drawable(made.scene.title or "A study", longest=200).rstrip(".")
    words = [
        f"Simulated: {start}. {column_words(column).capitalize()}, as {first.key} goes over "
        f"{_range(first)} and {second.key} over {_range(second)}."
    ]
    if made.trials and column.startswith("fraction"):
        words.append(f"Each cell is {made.trials} noise draws.")
    if level is not None and isfinite(level):
        words.append(f"The white line is where it is {level:g}.")
    words.append(PLANNING)
    return " ".join(words)


def _range(one: Varied) -> str:
    steps = one.steps
    if steps.spacing == "list":
        return drawable(", ".join(str(value) for value in steps.values), longest=120)
    return f"{steps.values[0]} to {steps.values[-1]}"
