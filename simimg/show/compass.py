"""Which way north and east lie on a frame, and how long an arcsecond is.

Taken from the frame's world coordinates at the very place, so that any rotation, mirroring,
projection and place on the sky comes out right. Pixels count from 0.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import atan2, cos, degrees, floor, hypot, log10, sin

import numpy as np

from simimg.arrays import FloatArray
from simimg.frame import Frame
from simimg.resolving.skyplane import local_axes
from simimg.show.signal import header_number


@dataclass(frozen=True)
class Compass:
    """Directions and scale at a place of a frame.

    Attributes
    ----------
    north, east : (float, float)
        Unit vectors (dx, dy) on the detector.
    scale : float or None
        Arcseconds to a pixel; None where the frame does not say.
    known : bool
        False where the frame has no coordinates: north is then taken as up and east as left.
    """

    north: tuple[float, float]
    east: tuple[float, float]
    scale: float | None
    known: bool

    def direction(self, position_angle: float) -> float:
        """Angle from the detector's +x towards its +y (rad) of a position angle (rad)."""
        c, s = cos(position_angle), sin(position_angle)
        dx = c * self.north[0] + s * self.east[0]
        dy = c * self.north[1] + s * self.east[1]
        return atan2(dy, dx)


def frame_compass(frame: Frame, x: float, y: float) -> Compass:
    """Directions and scale at (x, y) of a frame."""
    axes = None if frame.wcs is None else local_axes(frame.wcs, x, y)
    if axes is None:
        return Compass((0.0, 1.0), (-1.0, 0.0), header_number(frame, "PIXSCALE"), known=False)
    # Columns: steps on the sky (east, north; rad) of a step of one pixel along x and along y.
    steps = np.linalg.inv(axes)
    east, north = steps[:, 0], steps[:, 1]
    scale = degrees(float(np.sqrt(abs(np.linalg.det(axes))))) * 3600.0
    return Compass(_unit(north), _unit(east), scale, known=True)


def _unit(vector: FloatArray) -> tuple[float, float]:
    length = hypot(float(vector[0]), float(vector[1]))
    return float(vector[0]) / length, float(vector[1]) / length


def round_length(longest: float) -> float:
    """A length for a scale bar: 1, 2 or 5 times a power of ten, at most `longest`, above 0.

    Both in arcseconds; from an arcminute on the number is round in arcminutes, then in degrees.
    """
    unit = 3600.0 if longest >= 3600.0 else 60.0 if longest >= 60.0 else 1.0
    return unit * round_number(longest / unit)


def round_number(most: float) -> float:
    """The greatest of 1, 2 and 5 times a power of ten that is at most `most`, above 0."""
    most *= 1.000001  # what is round but for its rounding counts as round
    power = 10.0 ** floor(log10(most))
    return max(factor * power for factor in (1.0, 2.0, 5.0) if factor * power <= most)


def shown_length(arcsec: float) -> str:
    """A round length with its unit: degrees, arcminutes or arcseconds."""
    for unit, sign in ((3600.0, "\N{DEGREE SIGN}"), (60.0, "\N{PRIME}")):
        if arcsec >= unit * 0.999999:
            return f"{arcsec / unit:.6g}{sign}"
    return f"{arcsec:.6g}\N{DOUBLE PRIME}"
