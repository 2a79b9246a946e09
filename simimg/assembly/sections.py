"""Frames with columns before those that see the sky: places and coordinates move over by as many.

Pixels of a frame count from 0 at the centre of its first pixel, whether that sees the sky or not.
"""

from __future__ import annotations

from typing import Any


def shifted_wcs(wcs: Any, columns: int) -> Any:
    """World coordinates of a frame with so many columns before the first.

    Parameters
    ----------
    wcs : astropy.wcs.WCS
    columns : int
    """
    moved = wcs.deepcopy()
    moved.wcs.crpix = [moved.wcs.crpix[0] + columns, moved.wcs.crpix[1]]
    if moved.sip is not None:
        from astropy.wcs import Sip

        sip = moved.sip
        moved.sip = Sip(sip.a, sip.b, sip.ap, sip.bp, moved.wcs.crpix)
    return moved


def shifted_truth(truth: Any, columns: int) -> Any:
    """A table of truth whose places are those of such a frame.

    Parameters
    ----------
    truth : astropy.table.Table
    columns : int
    """
    moved = truth.copy()
    moved["x"] = moved["x"] + columns
    return moved
