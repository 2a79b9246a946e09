"""A study as a table: one row a point, the varied keys first, units and a word on every column."""

from __future__ import annotations

import os

import numpy as np

from simimg.errors import InputError, mistake
from simimg.fits.ecsv import ecsv_text
from simimg.fits.hdus import Column
from simimg.newfile import check_new_file, new_file
from simimg.scene.file import scene_id
from simimg.study.sweep import Sweep


def sweep_columns(made: Sweep) -> list[Column]:
    """The columns of a study's table.

    Parameters
    ----------
    made : Sweep

    Returns
    -------
    list of Column
        A varied key in its own unit (its dots as underscores), then what was found.
    """
    columns = []
    for place, one in enumerate(made.varied):
        values = [point[place] for point in made.points]
        if one.steps.numbers:
            number = dict(zip(one.steps.values, one.steps.numbers, strict=True))
            held = np.array([number[value] for value in values], dtype=np.float64)
        else:
            held = np.array([str(value) for value in values], dtype=str)
        columns.append(Column(one.column, held, _unit(one.steps.unit), f"{one.key}, varied"))
    for name, (unit, says) in made.columns.items():
        numbers = np.array([row[name] for row in made.rows], dtype=np.float64)
        columns.append(Column(name, numbers, unit, says))
    return columns


def _unit(written: str) -> str:
    """A unit of scene files as tables write it."""
    return {"e-": "electron", "px": "pix", "inch": "imperial_inch", "degC": "deg_C"}.get(
        written, written
    )


def check_sweep_file(path: str | os.PathLike[str], *, overwrite: bool = False) -> list[str]:
    """What forbids writing a study to this file; empty when nothing does."""
    lines = check_new_file(path, overwrite=overwrite)
    shown = os.fspath(path)
    if not shown.lower().endswith(".ecsv") and "\0" not in shown:
        lines.append(mistake(shown, "", "a study is written as ECSV", "end the name in .ecsv"))
    return lines


def write_sweep(made: Sweep, path: str | os.PathLike[str], *, overwrite: bool = False) -> None:
    """Write a study as an ECSV table, which astropy reads with units.

    Parameters
    ----------
    made : Sweep
    path : path
        Ends in .ecsv.
    overwrite : bool, optional
        Whether a file of that name may be replaced.

    Raises
    ------
    InputError
        Another ending, or a file that exists or cannot be written.
    RunError
        The system refused; no part of the file is left behind.
    """
    lines = check_sweep_file(path, overwrite=overwrite)
    if lines:
        raise InputError(*lines)
    meta: dict[str, object] = {"SCENEID": scene_id(made.scene), "trials": made.trials}
    problems = list(dict.fromkeys(one for one in made.problems if one))
    if problems:
        meta["problems"] = problems
    text = ecsv_text(sweep_columns(made), meta=meta)
    with new_file(path, overwrite=overwrite) as handle:
        handle.write(text.encode("utf-8"))
