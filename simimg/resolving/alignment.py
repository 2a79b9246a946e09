"""Where the places of one frame lie in another: by both frames' coordinates, or by pixels alone.

With coordinates a place goes to the sky and back, whatever the frames' scales, turns and
distortions. Without them in either frame the pixels are taken to be the same, but for the small
shift that a fit finds. Pixels count from 0 at the centre of the first.
"""

from __future__ import annotations

import warnings
from math import degrees

import numpy as np

from simimg.arrays import frozen
from simimg.frame import Frame
from simimg.resolving.layout import View
from simimg.resolving.skyplane import equatorial, sky_places

Place = tuple[float, float]


def transferred(place: Place, origin: Frame, target: Frame) -> Place | None:
    """A place of one frame in the pixels of another; None where the coordinates fail.

    Parameters
    ----------
    place : (x, y)
    origin, target : Frame
    """
    if origin is target or origin.wcs is None or target.wcs is None:
        return place
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        try:
            ra, dec = (degrees(float(v)) for v in sky_places(origin.wcs, np.array([place]))[0])
            if equatorial(target.wcs):
                wcs = target.wcs
                sky = [[dec, ra]] if wcs.wcs.lng == 1 else [[ra, dec]]
                found = wcs.all_world2pix(sky, 0, quiet=True)[0]
            else:
                from astropy.coordinates import SkyCoord

                found = target.wcs.world_to_pixel(SkyCoord(ra, dec, unit="deg"))
            x, y = (float(value) for value in found)
        except Exception:  # coordinates come with strangers' files
            return None
    return (x, y) if np.isfinite([x, y]).all() else None


def frame_view(number: int, place: Place, first: Frame, frame: Frame) -> View | None:
    """How a frame sees the surroundings of a place of the first frame, by coordinates.

    Parameters
    ----------
    number : int
        Of the frame, above 0.
    place : (x, y)
        In the first frame.
    first, frame : Frame

    Returns
    -------
    View or None
        None where the coordinates fail.
    """
    x, y = place
    step = 2.0
    around = [place, (x + step, y), (x - step, y), (x, y + step), (x, y - step)]
    seen = [transferred(one, first, frame) for one in around]
    if any(one is None for one in seen):
        return None
    middle, *sides = (np.array(one) for one in seen)
    turn = np.column_stack([sides[0] - sides[1], sides[2] - sides[3]]) / (2.0 * step)
    if not abs(np.linalg.det(turn)) > 1e-6:
        return None
    return View(number, frozen(turn), frozen(middle - turn @ np.array(place)))
