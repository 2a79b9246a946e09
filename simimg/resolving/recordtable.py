"""Measurements as a table file: ECSV for people and programs, or a FITS binary table.

One row a pair or a single object, with units and a word on every column, empty where a column does
not apply; the same measurements give the same bytes.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from math import nan
from pathlib import Path
from typing import Any

import numpy as np

from simimg.errors import InputError, mistake
from simimg.fits.ecsv import ecsv_text
from simimg.fits.hdus import Column
from simimg.fits.writer import write_table_file
from simimg.newfile import check_new_file, new_file
from simimg.resolving.psfquality import PsfReport
from simimg.resolving.records import PairMeasurement, SingleMeasurement

FORMATS = (".ecsv", ".fits")

_PLACE = "pixels from 0 at the centre of the first pixel"
# Attribute, unit, what it holds; a dot leads into a part of the record.
_COLUMNS = (
    ("kind", "", "pair, or a single object"),
    ("label", "", "of the first star in TRUTH; empty for a place or a find"),
    ("x", "pix", f"first star, {_PLACE}"),
    ("y", "pix", f"first star, {_PLACE}"),
    ("ra_deg", "deg", "first star, right ascension"),
    ("dec_deg", "deg", "first star, declination"),
    ("separation_arcsec", "arcsec", "of the two stars"),
    ("separation_error_arcsec", "arcsec", "standard error"),
    ("separation_low_arcsec", "arcsec", "68 % interval, where the error misleads"),
    ("separation_high_arcsec", "arcsec", "68 % interval, where the error misleads"),
    ("position_angle_deg", "deg", "of the second star, north through east"),
    ("position_angle_error_deg", "deg", "standard error"),
    ("magnitude_difference", "mag", "second minus first"),
    ("magnitude_difference_error", "mag", "standard error"),
    ("probability_single", "", "that a single star looks so double"),
    ("elongated", "", "two stars, not resolved"),
    ("ambiguous_180", "", "the angle may be half a turn off"),
    ("saddle_ratio", "", "lowest between the stars over the lower peak"),
    ("saddle_ratio_error", "", "standard error"),
    ("rayleigh.limit_arcsec", "arcsec", "delivered limit, equal pair"),
    ("rayleigh.probability", "", "that the pair lies beyond the limit"),
    ("rayleigh.verdict", "", "resolved, borderline or unresolved"),
    ("sparrow.limit_arcsec", "arcsec", "delivered limit, for the pair's difference"),
    ("sparrow.probability", "", "that the pair lies beyond the limit"),
    ("sparrow.verdict", "", "resolved, borderline or unresolved"),
    ("electrons", "", "electrons of a single object"),
    ("electrons_error", "", "standard error, electrons"),
    ("verdict", "", "of a single object: point or extended"),
    ("width_arcsec", "arcsec", "of a single object, beyond the PSF: standard deviation"),
    ("width_error_arcsec", "arcsec", "standard error"),
    ("truth.separation_arcsec", "arcsec", "as put into a simulated frame"),
    ("truth.position_angle_deg", "deg", "as put into a simulated frame"),
    ("truth.magnitude_difference", "mag", "as put into a simulated frame"),
)
_TEXT = ("kind", "label", "rayleigh.verdict", "sparrow.verdict", "verdict")


@dataclass(frozen=True)
class Row:
    """A measured pair or single object, the file it is in, and the PSF it was measured with."""

    file: str
    record: PairMeasurement | SingleMeasurement
    psf: PsfReport

    @property
    def kind(self) -> str:
        """What was measured: pair or single."""
        return "pair" if isinstance(self.record, PairMeasurement) else "single"


def check_table(path: str | os.PathLike[str], *, overwrite: bool = False) -> list[str]:
    """What forbids writing a table to this file; empty when nothing does."""
    lines = check_new_file(path, overwrite=overwrite)
    shown = os.fspath(path)
    suffix = Path(shown).suffix.lower()
    if suffix not in FORMATS and "\0" not in shown:
        what = f"{suffix!r} is no format of a table" if suffix else "the name has no ending"
        lines.append(mistake(shown, "", what, "end it in .ecsv or .fits"))
    return lines


def write_records(
    rows: Sequence[Row],
    path: str | os.PathLike[str],
    *,
    simulated: bool,
    overwrite: bool = False,
    warnings: Sequence[str] = (),
) -> None:
    """Write measurements as a table.

    Parameters
    ----------
    rows : sequence of Row
    path : path
        Ends in .ecsv or .fits.
    simulated : bool
        Whether the file says so.
    overwrite : bool, optional
        Whether a file of that name may be replaced.
    warnings : sequence of str, optional
        Kept in the file.

    Raises
    ------
    InputError
        Another ending, or a file that exists or cannot be written.
    RunError
        The system refused; no part of the file is left behind.
    """
    lines = check_table(path, overwrite=overwrite)
    if lines:
        raise InputError(*lines)
    columns = _columns(rows)
    if Path(os.fspath(path)).suffix.lower() == ".fits":
        write_table_file(
            path,
            columns,
            name="MEASURED",
            simulated=simulated,
            overwrite=overwrite,
            says=[f"warning: {text}" for text in warnings],
        )
        return
    meta = {"warnings": list(warnings)} if warnings else None
    text = ecsv_text(columns, simulated=simulated, meta=meta)
    with new_file(path, overwrite=overwrite) as handle:
        handle.write(text.encode("utf-8"))


def _columns(rows: Sequence[Row]) -> list[Column]:
    """The table's columns."""
    columns = [Column("file", _values([row.file for row in rows], text=True), "", "measured in")]
    for name, unit, says in _COLUMNS:
        text = name in _TEXT
        flag = name in ("elongated", "ambiguous_180")
        nothing: Any = False if flag else "" if text else nan
        values = [row.kind if name == "kind" else _part(row.record, name, nothing) for row in rows]
        held = np.array(values, dtype=bool) if flag else _values(values, text=text)
        columns.append(Column(name.replace(".", "_"), held, unit, says))
    columns.append(
        Column("psf_source", _values([row.psf.source for row in rows], text=True), "", "of the PSF")
    )
    columns.append(
        Column(
            "psf_reduced_chi_square",
            _values([row.psf.reduced_chi_square for row in rows]),
            "",
            "of the frame's single stars",
        )
    )
    advice = [_part(row.record, "advice", "") for row in rows]
    columns.append(Column("advice", _values(advice, text=True), "", "in words"))
    return columns


def _part(record: PairMeasurement | SingleMeasurement, name: str, nothing: Any) -> Any:
    """A value of a record, or what stands for one that the record does not have."""
    value: Any = record
    for part in name.split("."):
        value = getattr(value, part, None)
    return nothing if value is None else value


def _values(values: Sequence[Any], *, text: bool = False) -> Any:
    if text:
        return np.array([str(value) for value in values], dtype=str)
    return np.array(values, dtype=np.float64)
