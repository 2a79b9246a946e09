"""Where things are: between offsets on the sky, right ascension and declination, and pixels.

The field is a tangent plane (gnomonic projection, TAN of Calabretta & Greisen 2002, A&A 395, 1077)
touching the sphere at the pointing, which falls on the middle of the detector unless the scene
puts it on another pixel. East and north are
the standard coordinates of that plane, in radians. The detector's +y has the position angle rho,
north through east, and an odd number of reflections turns east to the right (p = -1):
``x - xc = p (-E cos rho + N sin rho) / s`` and ``y - yc = (E sin rho + N cos rho) / s``; a radial
distortion moves places outwards from the middle (pincushion) or inwards, and is in the WCS as SIP.
Pixels count from 0 at the centre of the first pixel; only the WCS keywords count from 1.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import atan2, comb, cos, degrees, pi, sin
from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import FloatArray
from simimg.scene.camera import Camera
from simimg.scene.model import Scene
from simimg.scene.objects import Placed

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
        Pointing (rad): the sky at the field centre.
    distortion : float
        Radial distortion in units of 1 over pixels squared: a place r pixels from the middle is
        moved outwards by ``distortion r^3``.
    axis : (x, y) or None
        Pixel on which the pointing falls; the middle of the detector unless given.
    """

    columns: int
    rows: int
    pixel_scale: float
    rotation: float = 0.0
    mirrored: bool = False
    ra: float = 0.0
    dec: float = 0.0
    distortion: float = 0.0
    axis: tuple[float, float] | None = None

    @property
    def centre(self) -> tuple[float, float]:
        """Where the pointing falls (x, y) in pixels: the field centre."""
        return self.middle if self.axis is None else self.axis

    @property
    def middle(self) -> tuple[float, float]:
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
        dx = self.parity * (north * s - east * c) / self.pixel_scale
        dy = (east * s + north * c) / self.pixel_scale
        if self.distortion:
            r_squared = dx * dx + dy * dy
            # A barrel folds the far field back into the frame: there is nothing to be seen there.
            stretch = np.where(
                -3.0 * self.distortion * r_squared < 1.0, 1.0 + self.distortion * r_squared, 1e9
            )
            dx, dy = dx * stretch, dy * stretch
        return xc + dx, yc + dy

    def to_offsets(self, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Offsets east and north (rad) of pixels."""
        c, s = cos(self.rotation), sin(self.rotation)
        xc, yc = self.centre
        dx, dy = x - xc, y - yc
        if self.distortion:
            shrink = self._undistorted(dx * dx + dy * dy)
            dx, dy = dx * shrink, dy * shrink
        dx, dy = dx * self.parity * self.pixel_scale, dy * self.pixel_scale
        return dy * s - dx * c, dx * s + dy * c

    def _undistorted(self, r_squared: FloatArray) -> FloatArray:
        """What shrinks a distorted place to the undistorted one: q with q (1 + k r^2 q^2) = 1."""
        k = self.distortion * np.asarray(r_squared, dtype=np.float64)
        q = np.ones_like(k)
        for _ in range(30):
            q = q - (q * (1.0 + k * q * q) - 1.0) / np.maximum(1.0 + 3.0 * k * q * q, 1e-3)
        return np.asarray(q)

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
        if self.distortion:
            from astropy.wcs import Sip

            wcs.wcs.ctype = ["RA---TAN-SIP", "DEC--TAN-SIP"]
            forward, back = self._sip_terms()
            wcs.sip = Sip(forward, forward.T, back, back.T, wcs.wcs.crpix)
        wcs.wcs.set()
        return wcs

    def _sip_terms(self) -> tuple[FloatArray, FloatArray]:
        """SIP polynomials along x, from pixels to the plane and back (Shupe et al. 2005).

        Back is the distortion itself, of third order; forward its inverse, by the polynomial to the
        ninth that misses it least over the detector.
        """
        k = self.distortion
        forward, back = np.zeros((10, 10)), np.zeros((4, 4))
        aside = (abs(c - m) for c, m in zip(self.centre, self.middle, strict=True))
        sides = (self.columns / 2.0, self.rows / 2.0)
        farthest = sum((a + side) ** 2 for a, side in zip(aside, sides, strict=True))
        # Chebyshev's points of the squared radius, where a fit is nearly the best there is.
        t = 0.5 - 0.5 * np.cos(np.pi * (np.arange(200) + 0.5) / 200)
        powers = t[:, None] ** np.arange(1, 5)
        terms = np.linalg.lstsq(powers, self._undistorted(t * farthest) - 1.0, rcond=None)[0]
        for power, factor in zip(range(1, 5), terms, strict=True):
            # x (x^2 + y^2)^power, term by term.
            for j in range(power + 1):
                forward[1 + 2 * (power - j), 2 * j] = factor / farthest**power * comb(power, j)
        back[3, 0] = back[1, 2] = k
        return forward, back


def field_geometry(scene: Scene) -> FieldGeometry:
    """The detector of a scene on the sky.

    Without a camera the geometry is that of one pixel of unit angle with north up and east left:
    directions and offsets hold, sizes do not.
    """
    camera, pointing = scene.camera, scene.pointing
    columns, rows = scene.image_size or (1, 1)
    return FieldGeometry(
        columns=columns,
        rows=rows,
        pixel_scale=scene.pixel_scale or 1.0,
        rotation=camera.rotation if camera is not None else 0.0,
        mirrored=camera.mirrored if camera is not None else False,
        ra=pointing.ra if pointing is not None else 0.0,
        dec=pointing.dec if pointing is not None else 0.0,
        distortion=_distortion(scene),
        axis=_axis(camera) if camera is not None else None,
    )


def _axis(camera: Camera) -> tuple[float, float] | None:
    """Where the field centre falls, pixels of the frame; None for its middle."""
    if camera.sub_frame is None or camera.pixels is None:
        return camera.field_centre
    side = camera.binning
    x, y = camera.field_centre or tuple(0.5 * (one // side - 1) for one in camera.pixels)
    return x - camera.sub_frame[0] // side, y - camera.sub_frame[1] // side


def _distortion(scene: Scene) -> float:
    """Radial distortion of a scene's field, per square pixel."""
    field, scale = scene.telescope.field, scene.pixel_scale
    if field is None or scale is None:
        return 0.0
    return field.distortion * (scale / field.radius) ** 2


def object_place(one: Placed, geometry: FieldGeometry) -> tuple[float, float]:
    """Where an object is on the detector (pixels); of a pair the first star."""
    if one.x is not None and one.y is not None:
        return one.x, one.y
    if one.ra is not None and one.dec is not None:
        x, y = geometry.from_sky(np.array(one.ra), np.array(one.dec))
    else:
        x, y = geometry.to_pixels(np.array(one.east or 0.0), np.array(one.north or 0.0))
    return float(x), float(y)
