"""Tables as text that people and programs read: ECSV, with units and a word on every column.

The format is astropy's (Astropy Proposal for Enhancement 6); the same table gives the same bytes.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from io import StringIO
from typing import Any

from simimg.fits.hdus import Column
from simimg.version import __version__


def ecsv_text(
    columns: Sequence[Column], *, simulated: bool = True, meta: Mapping[str, Any] | None = None
) -> str:
    """A table as ECSV.

    Parameters
    ----------
    columns : sequence of Column
        Of one length. A unit that astropy does not know is kept as it is written.
    simulated : bool, optional
        Whether the table says so.
    meta : mapping, optional
        What else it says of itself.
    """
    from astropy import units as u
    from astropy.table import Column as TableColumn
    from astropy.table import Table

    table = Table()
    for column in columns:
        unit = u.Unit(column.unit, parse_strict="silent") if column.unit else None
        table[column.name] = TableColumn(column.values, unit=unit, description=column.comment)
    table.meta["CREATOR"] = f"simimg {__version__}"
    table.meta["SIMULATE"] = simulated
    table.meta.update(meta or {})
    stream = StringIO()
    table.write(stream, format="ascii.ecsv")
    return stream.getvalue()
