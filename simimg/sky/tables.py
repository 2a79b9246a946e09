"""Tables from files, as columns with their units: FITS, VOTable, ECSV and CSV.

What the columns mean is no matter here. Files come from strangers: nothing outside the file is
read, and sizes are checked in the headers before memory is taken.
"""

from __future__ import annotations

import io
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from simimg.arrays import AnyArray
from simimg.errors import InputError, mistake
from simimg.sky.votables import parse_votable

_USE = "give an ECSV, CSV, FITS or VOTable file"


@dataclass(frozen=True)
class Column:
    """One column as it stands in the file.

    Attributes
    ----------
    values : ndarray, shape (rows, ...)
        Numbers or text.
    unit : str or None
        Unit that the file gives.
    missing : ndarray of bool or None
        True where the file has no value.
    """

    values: AnyArray
    unit: str | None
    missing: NDArray[np.bool_] | None


@dataclass(frozen=True)
class RawTable:
    """Names of the columns, number of rows, and the way to a column (InputError if damaged)."""

    names: tuple[str, ...]
    rows: int
    column: Callable[[str], Column]


def read_table(content: bytes, name: str) -> RawTable:
    """First table of a file.

    Parameters
    ----------
    content : bytes
        The file. Its format is told from the content; what is neither FITS, XML nor ECSV is CSV.
    name : str
        Its name, for messages.

    Raises
    ------
    InputError
        No table in a known format, or a damaged file.
    """
    head = content[:4096].lstrip(b"\xef\xbb\xbf \t\r\n")
    if not head:
        raise InputError(mistake(name, "", "the file is empty", _USE))
    if content.startswith(b"SIMPLE"):
        kind, reader = "FITS", _from_fits
    elif head.startswith(b"<"):
        kind, reader = "VOTable", _from_votable
    else:
        kind, reader = "text", _from_text
    with _blamed_on_the_file(name, "", f"the {kind} table"):
        table = reader(content, name)

    def column(wanted: str) -> Column:
        with _blamed_on_the_file(name, wanted, "the column"):
            return table.column(wanted)

    return RawTable(table.names, table.rows, column)


@contextmanager
def _blamed_on_the_file(name: str, key: str, part: str) -> Iterator[None]:
    """Turn whatever a reader makes of a damaged file into one line about the file."""
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            yield
    except InputError:
        raise
    # There is no end of the ways in which readers fail; each of them is the file's fault.
    except Exception as error:
        reason = " ".join(str(error).split())[:120] or type(error).__name__
        raise InputError(mistake(name, key, f"{part} cannot be read ({reason})", _USE)) from error


def _from_fits(content: bytes, name: str) -> RawTable:
    """First table extension of a FITS file; columns are taken out one by one, on demand."""
    from astropy.io import fits

    with fits.open(io.BytesIO(content), memmap=False, lazy_load_hdus=True) as hdus:
        for hdu in hdus:
            if isinstance(hdu, (fits.BinTableHDU, fits.TableHDU)):
                header: Any = hdu.header
                end = hdu.fileinfo()["datLoc"] + int(header["NAXIS1"]) * int(header["NAXIS2"])
                if end > len(content):
                    what = "the file ends before its table does"
                    raise InputError(mistake(name, "", what, "get the whole file"))
                data = hdu.data
                columns = {column.name: column for column in hdu.columns}
                break
        else:
            raise InputError(mistake(name, "", "no table in the FITS file", _USE))

    def column(wanted: str) -> Column:
        definition = columns[wanted]
        values = np.asarray(data.field(wanted))
        missing = None
        if definition.null is not None and values.dtype.kind in "iu":
            missing = np.asarray(values == definition.null)
        return Column(values, definition.unit, missing)

    return RawTable(tuple(columns), int(header["NAXIS2"]), column)


def _from_votable(content: bytes, name: str) -> RawTable:
    return _from_astropy(parse_votable(content, name))


def _from_text(content: bytes, name: str) -> RawTable:
    """ECSV by its first line, else CSV with the names in its first row and # for comments."""
    from astropy.io import ascii as text_tables

    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        what = f"neither FITS nor text in UTF-8 (byte {error.start})"
        raise InputError(mistake(name, "", what, _USE)) from error
    # A list of lines, as a single text might be taken for the name of a file or an address.
    lines = text.replace("\r\n", "\n").strip().split("\n")
    if lines[0].startswith("# %ECSV"):
        return _from_astropy(text_tables.read(lines, format="ecsv", guess=False))
    table = text_tables.read(lines, format="csv", guess=False, comment="#")
    return _from_astropy(table)


def _from_astropy(table: Any) -> RawTable:
    """Plain columns of an astropy table; composed ones (coordinates, times) are left out."""
    from astropy.table import Column as TableColumn

    names = tuple(key for key in table.colnames if isinstance(table[key], TableColumn))

    def column(wanted: str) -> Column:
        found = table[wanted]
        unit = None if found.unit is None else str(found.unit)
        mask = getattr(found, "mask", None)
        missing = np.asarray(mask) if mask is not None and np.any(mask) else None
        return Column(np.asarray(getattr(found, "data", found)), unit, missing)

    return RawTable(names, len(table), column)
