"""What a frame says of itself after objects were put into it: its truth, EXPECTED and MASK.

The truth is what it held, then what is new. Columns that only one of the two has
are filled with what says nothing: NaN, no text, false, -1. Electrons; bits of the mask.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.masks import SATURATED
from simimg.fits.rewriting import Original
from simimg.frame import Frame

if TYPE_CHECKING:
    from astropy.table import Table


def grown_truth(old: Table | None, new: Table, detector: str) -> Table:
    """The truth of a frame with the rows of what was put in."""
    from astropy.table import Table

    new["injected"] = np.ones(len(new), dtype=bool)
    new["injected"].description = "put into a frame that existed"
    if old is None:
        return new
    if "detector" in old.colnames:
        new["detector"] = np.full(len(new), detector or "")
    new["partner"] = np.where(new["partner"] >= 0, new["partner"] + len(old), -1).astype(np.int32)
    grown = Table()
    for name in dict.fromkeys([*old.colnames, *new.colnames]):
        kind = (old if name in old.colnames else new)[name]
        parts = [
            np.asarray(table[name]) if name in table.colnames else _nothing(kind.dtype, len(table))
            for table in (old, new)
        ]
        grown[name] = np.concatenate(parts)
        grown[name].unit = kind.unit
        grown[name].description = kind.description
    return grown


def _nothing(kind: np.dtype[np.generic], count: int) -> AnyArray:
    """What a table says in a column that has no value: NaN, no text, false, -1."""
    fill = {"f": np.nan, "U": "", "S": "", "b": False}.get(kind.kind, -1)
    return np.full(count, fill, dtype=kind)


def grown_images(
    original: Original, frame: Frame, expected: FloatArray, full: AnyArray
) -> dict[str, AnyArray]:
    """What a frame of ours says of its pixels, with the light of what was put in."""
    images: dict[str, AnyArray] = {}
    if frame.expected is not None:
        images["EXPECTED"] = frame.expected + expected
    if frame.mask is not None:
        images["MASK"] = frame.mask | np.where(full, SATURATED, 0).astype(frame.mask.dtype)
    return {
        name: original.as_stored(name, image)
        for name, image in images.items()
        if name in original.beside
    }
