"""Frames with columns that see no sky: places and coordinates move over by those before the data.

Pixels of a frame count from 0 at the centre of its first pixel, whether that sees the sky or not;
places in a scene count from the first that does.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from simimg.assembly.places import FieldGeometry


def written_geometry(geometry: FieldGeometry, *, prescan: int, overscan: int) -> FieldGeometry:
    """The geometry of a frame as it is written.

    Parameters
    ----------
    geometry : FieldGeometry
        Of the pixels that see the sky.
    prescan, overscan : int
        Columns without charge before and after them.
    """
    if not prescan and not overscan:
        return geometry
    x, y = geometry.centre
    columns = geometry.columns + prescan + overscan
    return replace(geometry, columns=columns, axis=(x + prescan, y))


def written_truth(truth: Any, *, prescan: int) -> Any:
    """A table of truth with the places of a frame as it is written.

    Parameters
    ----------
    truth : astropy.table.Table
    prescan : int
    """
    if not prescan:
        return truth
    moved = truth.copy()
    moved["x"] = moved["x"] + prescan
    return moved
