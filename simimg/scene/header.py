"""Extra FITS keywords that a scene may add to the frame's header."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from simimg.quantities import shown
from simimg.scene.keys import Reader, fault

_KEYWORD = re.compile(r"[A-Z0-9_-]{1,8}")
_WRITTEN_BY_SIMIMG = re.compile(
    r"SIMPLE|XTENSION|BITPIX|NAXIS\d*|EXTEND|[PG]COUNT|GROUPS|END|T(FIELDS|HEAP)|BLOCKED|INHERIT"
    r"|B(ZERO|SCALE|LANK|UNIT)|DATA(SUM|MIN|MAX)|CHECKSUM|EXT(NAME|VER|LEVEL)|CONTINUE|HIERARCH"
    r"|COMMENT|HISTORY|LONGSTRN|DATE.*|MJD.*|TIMESYS|SIMULATE|CREATOR|SCENEID|SEED|OBJECT|FILTER"
    r"|EXPTIME|GAIN|RDNOISE|AIRMASS|SATURATE|TELESCOP|INSTRUME|OBSTYPE|EPOCH|EQUINOX|RADESYS|RADECSYS"
    r"|WCS.*|LONPOLE.?|LATPOLE.?|C(TYPE|RVAL|RPIX|DELT|ROTA|UNIT|NAME|RDER|SYER)\d+.?|TELAPSE"
    r"|T(FORM|TYPE|UNIT|BCOL|DIM|NULL|SCAL|ZERO|DISP)\d+|(CD|PC|PV|PS)\d+_\d+.?|SPEC.*|RESTFRQ.?"
    r"|RESTWAV.?|VEL.*|ZSOURCE.?|OBSGEO-.|SSYS.*|JEP.*|BEP.*|TREF.*|PLATEID|TIME(UNIT|PIXR|DEL)"
)
_TEXT_BY_STANDARD = ("OBSERVER", "AUTHOR", "REFERENC", "ORIGIN", "OBSERVAT")


@dataclass(frozen=True)
class Header(Reader):
    """Extra FITS keywords: whole numbers, numbers, true or false, or text."""

    most: int = 100

    def read(self, value: Any) -> dict[str, str | int | float | bool]:
        """The keywords, in their order."""
        if not isinstance(value, Mapping):
            raise fault(f"must be a table, got {shown(value)}", "write a [header] table")
        if len(value) > self.most:
            raise fault(f"holds {len(value)} keywords", f"write at most {self.most}")
        return dict(value)

    @staticmethod
    def check(keyword: str, value: Any) -> tuple[str, str] | None:
        """What is wrong with one keyword and its mend, or None."""
        reserved = _WRITTEN_BY_SIMIMG.fullmatch(keyword[:100].upper().strip()) is not None
        if not _KEYWORD.fullmatch(keyword) and not reserved:
            good = re.sub(r"[^A-Z0-9_-]", "", keyword.upper())[:8] or "OBSERVER"
            return "is not a FITS keyword", f"write {good}: at most 8 of A to Z, 0 to 9, _ and -"
        if reserved:
            return "is a keyword that simimg writes itself", "leave it out or choose another name"
        if isinstance(value, str):
            if not (value.isascii() and value.isprintable()):
                return "holds signs that FITS cannot store", "write plain ASCII text"
            if len(value.replace("'", "''")) > 68:
                return "is too long for a FITS keyword", "write at most 68 characters"
            return None
        if keyword in _TEXT_BY_STANDARD:
            return f"must be text, got {shown(value)}", 'write text in quotes, such as "example"'
        if isinstance(value, float) and not math.isfinite(value):
            return f"must be finite, got {shown(value)}", "write a finite number or text"
        if isinstance(value, int) and not isinstance(value, bool) and abs(value) >= 2**63:
            return "is too large", "write a smaller whole number or text"
        if not isinstance(value, bool | int | float):
            return f"must be text or a number, got {shown(value)}", 'write "text" or a number'
        return None

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return '{ OBSERVER = "example" }'

    @property
    def range(self) -> str:
        """The form of keywords and values."""
        return f"up to {self.most} FITS keywords with text, a number, true or false"
