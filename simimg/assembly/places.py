"""Where things are: between offsets on the sky, right ascension and declination, and pixels.

The field is a tangent plane (gnomonic projection, TAN of Calabretta & Greisen 2002, A&A 395, 1077)
touching the sphere at the pointing, which falls on the middle of the detector. East and north are
the standard coordinates of that plane, in radians. The detector's +y has the position angle rho,
north through east, and an odd number of reflections turns east to the right (p = -1):
``x - xc = p (-E cos rho + N sin rho) / s`` and ``y - yc = (E sin rho + N cos rho) / s``.
Pixels count from 0 at the centre of the first pixel; only the WCS keywords count from 1.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import atan2, cos, degrees, pi, sin
from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import FloatArray
from simimg.scene.model import Scene

if TYPE_CHECKING:
    from astropy.wcs import WCS


@dataclass(frozen=True)
class FieldGeometry:
    """The detector on the sky.

    Attributes
    ----------
    columns, rows : int
        Size of the detector in pixels.
    pixel_scale : float
        Side of a pixel (rad).
    rotation : float
        Position angle of the detector's +y (rad).
    mirrored : bool
        True for an odd number of reflections.
    ra, dec : float
        Pointing (rad): the sky at the middle of the detector.
    """

    columns: int
    rows: int
    pixel_scale: float
    rotation: float = 0.0
    mirrored: bool = False
    ra: float = 0.0
    dec: float = 0.0

    @property
    def centre(self) -> tuple[float, float]:
        """Middle of the detector (x, y) in pixels."""
        return (self.columns - 1) / 2, (self.rows - 1) / 2

    @property
    def parity(self) -> int:
        """+1, or -1 for a mirrored field."""
        return -1 if self.mirrored else 1

    def to_pixels(self, east: FloatArray, north: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Pixels of offsets `east`, `north` (rad) from the field centre."""
        c, s = cos(self.rotation), sin(self.rotation)
        xc, yc = self.centre
        x = xc + self.parity * (north * s - east * c) / self.pixel_scale
        y = yc + (east * s + north * c) / self.pixel_scale
        return x, y

    def to_offsets(self, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Offsets east and north (rad) of pixels."""
        c, s = cos(self.rotation), sin(self.rotation)
        xc, yc = self.centre
        dx, dy = (x - xc) * self.parity * self.pixel_scale, (y - yc) * self.pixel_scale
        return dy * s - dx * c, dx * s + dy * c

    def to_sky(self, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Right ascension, in [0, 2 pi), and declination (rad) of pixels."""
        east, north = self.to_offsets(np.asarray(x, float), np.asarray(y, float))
        denominator = cos(self.dec) - north * sin(self.dec)
        ra = self.ra + np.arctan2(east, denominator)
        dec = np.arctan2(north * cos(self.dec) + sin(self.dec), np.hypot(east, denominator))
        return ra % (2.0 * pi), dec

    def from_sky(self, ra: FloatArray, dec: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Pixels of right ascensions and declinations (rad) within 90 degrees of the pointing.

        Raises
        ------
        ValueError
            For a place on the far half of the sky, which the tangent plane does not show.
        """
        delta = np.asarray(ra, float) - self.ra
        sine, cosine = np.sin(dec), np.cos(dec)
        below = sin(self.dec) * sine + cos(self.dec) * cosine * np.cos(delta)
        if np.any(below <= 0.0):
            raise ValueError("a place lies 90 degrees or more from the pointing")
        east = cosine * np.sin(delta) / below
        north = (cos(self.dec) * sine - sin(self.dec) * cosine * np.cos(delta)) / below
        return self.to_pixels(east, north)

    def direction(self, position_angle: float) -> float:
        """Angle from the detector's +x towards its +y (rad) of a position angle (rad)."""
        turned = position_angle - self.rotation
        return atan2(cos(turned), -self.parity * sin(turned))

    def position_angle(self, dx: float, dy: float) -> float:
        """Position angle, in [0, 2 pi), of a step ``(dx, dy)`` on the detector."""
        return (self.rotation + atan2(-self.parity * dx, dy)) % (2.0 * pi)

    def wcs(self) -> WCS:
        """The same as an astropy WCS (TAN, degrees)."""
        from astropy.wcs import WCS

        xc, yc = self.centre
        step = degrees(self.pixel_scale)
        c, s, p = cos(self.rotation), sin(self.rotation), self.parity
        wcs = WCS(naxis=2)
        wcs.wcs.ctype = ["RA---TAN", "DEC--TAN"]
        wcs.wcs.cunit = ["deg", "deg"]
        wcs.wcs.crpix = [xc + 1.0, yc + 1.0]
        wcs.wcs.crval = [degrees(self.ra) % 360.0, degrees(self.dec)]
        # Adding 0 turns a negative zero, which would show in the header, into a plain one.
        wcs.wcs.cd = np.array([[-p * c, s], [p * s, c]]) * step + 0.0
        wcs.wcs.radesys = "ICRS"
        wcs.wcs.set()
        return wcs


def field_geometry(scene: Scene) -> FieldGeometry:
    """The detector of a scene on the sky.

    Without a camera the geometry is that of one pixel of unit angle with north up and east left:
    directions and offsets hold, sizes do not.
    """
    camera, pointing = scene.camera, scene.pointing
    columns, rows = camera.pixels if camera is not None and camera.pixels is not None else (1, 1)
    return FieldGeometry(
        columns=columns,
        rows=rows,
        pixel_scale=scene.pixel_scale or 1.0,
        rotation=camera.rotation if camera is not None else 0.0,
        mirrored=camera.mirrored if camera is not None else False,
        ra=pointing.ra if pointing is not None else 0.0,
        dec=pointing.dec if pointing is not None else 0.0,
    )
