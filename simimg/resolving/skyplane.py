"""Which way and how far things are on the sky: of a scene, of a header's coordinates, of neither.

A step on the detector becomes a step east and north by a 2 x 2 matrix, which for foreign
coordinates is worked out at the very place, so that any projection, rotation, distortion and shape
of pixel comes out right. Right ascension and declination are ICRS where the header's system can be
turned into it. Radians; pixels count from 0 at the centre of the first.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from math import atan2, cos, degrees, hypot, nan, pi, sin
from typing import TYPE_CHECKING, Protocol

import numpy as np

from simimg.arrays import FloatArray
from simimg.assembly.places import FieldGeometry

if TYPE_CHECKING:
    from astropy.wcs import WCS


class Sky(Protocol):
    """The detector on the sky."""

    @property
    def pixel_scale(self) -> float:
        """Side of a pixel (rad) in the middle of the frame, the root of its area."""

    def to_sky(self, x: float, y: float) -> tuple[float, float]:
        """Right ascension and declination (rad) of a place; NaN where they are not known."""

    def axes(self, x: float, y: float) -> FloatArray:
        """East and north (rows; rad) of a step of one pixel along x and along y (columns)."""


@dataclass(frozen=True)
class FieldSky:
    """The tangent plane of a scene."""

    field: FieldGeometry

    @property
    def pixel_scale(self) -> float:
        """Side of a pixel (rad)."""
        return self.field.pixel_scale

    def to_sky(self, x: float, y: float) -> tuple[float, float]:
        """Right ascension and declination (rad)."""
        ra, dec = self.field.to_sky(np.array(x), np.array(y))
        return float(ra), float(dec)

    def axes(self, x: float, y: float) -> FloatArray:  # noqa: ARG002 (the same everywhere)
        """East and north of a step along x and y, in the tangent plane."""
        c, s = cos(self.field.rotation), sin(self.field.rotation)
        p = self.field.parity
        return self.field.pixel_scale * np.array([[-p * c, s], [p * s, c]])


@dataclass(frozen=True)
class BareSky:
    """A frame without coordinates: north is taken as up and east as left."""

    pixel_scale: float

    def to_sky(self, x: float, y: float) -> tuple[float, float]:  # noqa: ARG002
        """Not known."""
        return nan, nan

    def axes(self, x: float, y: float) -> FloatArray:  # noqa: ARG002
        """East and north of a step along x and y."""
        return self.pixel_scale * np.array([[-1.0, 0.0], [0.0, 1.0]])


@dataclass(frozen=True, eq=False)
class CoordinateSky:
    """The coordinates of a header.

    Attributes
    ----------
    wcs : astropy.wcs.WCS
        Celestial.
    pixel_scale : float
    stretch : float
        By which lengths differ from those of the coordinates: 1 unless the user gave a scale.
    """

    wcs: WCS
    pixel_scale: float
    stretch: float = 1.0

    def to_sky(self, x: float, y: float) -> tuple[float, float]:
        """Right ascension and declination (rad)."""
        ra, dec = sky_places(self.wcs, np.array([[x, y]]))[0]
        return float(ra) % (2.0 * pi), float(dec)

    def axes(self, x: float, y: float) -> FloatArray:
        """East and north of a step along x and y at this very place."""
        here = local_axes(self.wcs, x, y)
        if here is None:
            return BareSky(self.pixel_scale).axes(x, y)
        return here * self.stretch


def coordinate_sky(
    wcs: WCS, shape: tuple[int, int], *, pixel_scale: float | None = None
) -> CoordinateSky | None:
    """The sky of a header's coordinates; None where they do not hold in the middle of the frame.

    Parameters
    ----------
    wcs : astropy.wcs.WCS
    shape : (rows, columns)
    pixel_scale : float, optional
        Side of a pixel (rad) where it is known better.
    """
    rows, columns = shape
    axes = local_axes(wcs, 0.5 * (columns - 1), 0.5 * (rows - 1))
    if axes is None:
        return None
    scale = float(np.sqrt(abs(np.linalg.det(axes))))
    if pixel_scale is None:
        return CoordinateSky(wcs, scale)
    return CoordinateSky(wcs, pixel_scale, pixel_scale / scale)


def sky_places(wcs: WCS, places: FloatArray) -> FloatArray:
    """Right ascension and declination (rad) of places, shape (n, 2): ICRS where it can be had."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        if wcs.naxis == 2:
            sky = np.asarray(wcs.all_pix2world(places, 0), dtype=np.float64)
            if wcs.wcs.lng == 1:
                sky = sky[:, ::-1]
        else:
            sky = np.asarray(wcs.celestial.all_pix2world(places, 0), dtype=np.float64)
        if not equatorial(wcs):
            try:
                from astropy.coordinates import SkyCoord
                from astropy.wcs.utils import wcs_to_celestial_frame

                there = SkyCoord(sky, unit="deg", frame=wcs_to_celestial_frame(wcs)).icrs
                sky = np.column_stack([there.ra.deg, there.dec.deg])
            except Exception:  # strangers' systems of coordinates: as they stand, then
                pass
    return np.radians(sky)


def equatorial(wcs: WCS) -> bool:
    """Whether coordinates are right ascension and declination of our day (ICRS, FK5 J2000)."""
    kind = str(wcs.wcs.lngtyp).strip()
    system = str(wcs.wcs.radesys).strip()
    equinox = float(wcs.wcs.equinox)
    modern = system in ("", "ICRS") or (system == "FK5" and not abs(equinox - 2000.0) > 1e-6)
    return kind == "RA" and modern and not abs(equinox - 2000.0) > 1e-6


def local_axes(wcs: WCS, x: float, y: float) -> FloatArray | None:
    """East and north (rows; rad) of a step along x and along y; None where coordinates fail.

    By finite differences of unit vectors, over one pixel.
    """
    half = 0.5
    places = np.array([[x, y], [x + half, y], [x - half, y], [x, y + half], [x, y - half]])
    try:
        ra, dec = sky_places(wcs, places).T
    # Coordinates come with strangers' files; whatever is wrong in them, there are none to use.
    except Exception:
        return None
    vectors = np.array([np.cos(dec) * np.cos(ra), np.cos(dec) * np.sin(ra), np.sin(dec)]).T
    along = np.array([vectors[1] - vectors[2], vectors[3] - vectors[4]])
    east = np.array([-sin(ra[0]), cos(ra[0]), 0.0])
    north = np.array([-sin(dec[0]) * cos(ra[0]), -sin(dec[0]) * sin(ra[0]), cos(dec[0])])
    axes = np.array([along @ east, along @ north])
    area = abs(float(np.linalg.det(axes)))
    if not np.isfinite(axes).all() or area < 1e-4 * float(np.abs(axes).max()) ** 2 or area == 0.0:
        return None
    return axes


@dataclass(frozen=True)
class SkyStep:
    """A step on the sky and how it follows the step on the detector.

    Attributes
    ----------
    length_arcsec : float
    position_angle_deg : float
        North through east, 0 to 360.
    scale_arcsec : float
        Arcseconds to a pixel in this direction.
    slopes : ((float, float), (float, float))
        Of length (arcsec) and position angle (deg) by length (pixels) and angle (rad) on the
        detector.
    """

    length_arcsec: float
    position_angle_deg: float
    scale_arcsec: float
    slopes: tuple[tuple[float, float], tuple[float, float]]


def sky_step(axes: FloatArray, *, length: float, angle: float) -> SkyStep:
    """Turn a step on the detector into one on the sky.

    Parameters
    ----------
    axes : ndarray, shape (2, 2)
        East and north (rad) of a step along x and along y.
    length : float
        Pixels.
    angle : float
        From the detector's +x towards its +y (rad).
    """
    east, north = (float(v) for v in axes @ np.array([cos(angle), sin(angle)]))
    by_east, by_north = (float(v) for v in axes @ np.array([-sin(angle), cos(angle)]))
    scale = degrees(hypot(east, north)) * 3600.0
    stretch = (east * by_east + north * by_north) / (east * east + north * north)
    turn = (north * by_east - east * by_north) / (east * east + north * north)
    return SkyStep(
        length_arcsec=scale * length,
        position_angle_deg=degrees(atan2(east, north) % (2.0 * pi)),
        scale_arcsec=scale,
        slopes=((scale, scale * length * stretch), (0.0, degrees(turn))),
    )
