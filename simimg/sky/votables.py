"""VOTables from strangers: what a reader must be spared before it opens one.

A VOTable may name a far-away stream (``<STREAM href="...">``, any address or local file) that the
reader would fetch, declare more rows than it holds, or swell by XML entities. None of these is
needed for a catalogue; each is refused before the table is read.
"""

from __future__ import annotations

import io
import math
import re
from contextlib import suppress
from typing import Any
from xml.parsers import expat

from simimg.errors import InputError, mistake

_LARGEST = 1 << 32


class _Enough(Exception):  # noqa: N818 (ends the scan; not an error)
    """The part of the file that matters has been seen."""


def parse_votable(content: bytes, name: str) -> Any:
    """First table of a VOTable.

    Parameters
    ----------
    content : bytes
        The file.
    name : str
        Its name, for messages.

    Returns
    -------
    astropy.table.Table

    Raises
    ------
    InputError
        The file points outside itself, declares entities or more than 4 GiB.
    Exception
        Whatever the reader makes of a damaged file.
    """
    _refuse_dangers(content, name)
    from astropy.io.votable import parse_single_table

    table = parse_single_table(io.BytesIO(content), verify="ignore")
    return table.to_table(use_names_over_ids=True)


def _refuse_dangers(content: bytes, name: str) -> None:
    if b"\0" in content or re.search(rb"<!(DOCTYPE|ENTITY)", content):
        what = "a VOTable with a document type, entities or a wide encoding is not read"
        raise InputError(mistake(name, "", what, "save it as plain UTF-8, or as ECSV or FITS"))
    rows, width = 1, 0

    def start(tag: str, attributes: dict[str, str]) -> None:
        nonlocal rows, width
        element = tag.rsplit(":", 1)[-1].upper()
        if element == "STREAM" and "href" in {key.lower() for key in attributes}:
            what = "its data are elsewhere (STREAM with href), and only the file itself is read"
            raise InputError(mistake(name, "", what, "save the table with its data in the file"))
        if element == "TABLE":
            rows, width = max(1, int(attributes.get("nrows", "1"))), 0
        elif element == "FIELD":
            sizes = re.findall(r"\d+", attributes.get("arraysize", "1"))
            width += 8 * math.prod(int(size) for size in sizes)
        elif element == "DATA" and rows * width > _LARGEST:
            what = f"declares {rows} rows of {width} bytes"
            raise InputError(mistake(name, "", what, "give a catalogue of less than 4 GiB"))
        # Only the first table is read, and rows within the XML can hold no stream.
        elif element == "TABLEDATA":
            raise _Enough

    parser = expat.ParserCreate()
    parser.StartElementHandler = start
    with suppress(_Enough):
        parser.Parse(content, True)
