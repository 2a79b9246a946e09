"""Places of the field at which PSFs are worked out, and how those between are mixed from them.

Errors of the optics that grow with the field follow polynomials over the whole of it. Behind a
correction a PSF hangs on the distance from the guide star, steeply near it: stars that are written
in a scene each have a PSF of their own place; where there are many, PSFs on rings about the guide
star are mixed, linearly in distance and in direction. Detector places in a unit that `field_unit`
says, about the field centre.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import cos, hypot, sin

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.aperture import Aperture
from simimg.assembly.correction import Corrector
from simimg.assembly.orbits import pair_place
from simimg.assembly.places import FieldGeometry, field_geometry, object_place
from simimg.imaging.sources import Points
from simimg.optics.fieldaberration import field_nodes
from simimg.scene.model import Scene
from simimg.scene.objects import Pair

FIELD_NODES = 5
"""Places a side of the field whose PSFs are mixed for the others."""

MOST_OWN = 24
"""Places of stars that each have a PSF of their own behind a correction."""

RINGS = (0.2, 0.4, 0.7, 1.0, 1.4, 1.9, 2.4, 2.9, 3.4, 4.0, 5.0, 7.0, 10.0)
"""Radii about the guide star, in isoplanatic angles, whose PSFs are mixed for the others."""

DIRECTIONS = 8
"""Places on each ring."""

Place = tuple[float, float]
Mix = Callable[[Points], FloatArray]
"""Shares (N, places) of the places' PSFs in those of points, each row of sum 1."""


def field_unit(scene: Scene, aperture: Aperture) -> float | None:
    """Pixels to the unit of places; None where all places are alike.

    It is the radius at which the field's errors are stated, or else a radian.
    """
    errors = scene.telescope.field
    if aperture.field is not None and errors is not None and scene.pixel_scale is not None:
        return errors.radius / scene.pixel_scale
    if scene.correction is not None and scene.air is not None and scene.air.layer:
        return 1.0 / field_geometry(scene).pixel_scale
    return None


def sky_offset(scene: Scene, place: Place, unit: float) -> Place:
    """Offset on the sky (east, north; rad) of a place of the field."""
    geometry = field_geometry(scene)
    x, y = (c + one * unit for c, one in zip(geometry.centre, place, strict=True))
    east, north = geometry.to_offsets(np.array(x), np.array(y))
    return float(east), float(north)


def field_places(
    scene: Scene, aperture: Aperture, corrector: Corrector | None
) -> tuple[list[Place | None], Mix]:
    """Places of the field whose PSFs are mixed, and each source's shares in them.

    Parameters
    ----------
    scene : Scene
    aperture : Aperture
    corrector : Corrector or None
        The corrected air.
    """
    unit, geometry = field_unit(scene, aperture), field_geometry(scene)
    guided = corrector is not None and corrector.varies
    if unit is None or (aperture.field is None and not guided):
        return [None], lambda points: np.ones((len(points), 1))
    if corrector is None or not guided:
        return _lattice(geometry, unit)
    own = _own_places(scene, geometry)
    if own is not None:
        return [_in_unit(one, geometry, unit) for one in own], _Nearest(own)
    rings = _rings(corrector, geometry)
    return [_in_unit(one, geometry, unit) for one in rings.pixels], rings


def _in_unit(pixel: Place, geometry: FieldGeometry, unit: float) -> Place:
    centre = geometry.centre
    return (pixel[0] - centre[0]) / unit, (pixel[1] - centre[1]) / unit


def _lattice(geometry: FieldGeometry, unit: float) -> tuple[list[Place | None], Mix]:
    """A lattice over the detector, between whose places images follow polynomials."""
    half_x, half_y = geometry.columns / 2.0 / unit, geometry.rows / 2.0 / unit
    nodes = field_nodes(half_x, half_y, count=FIELD_NODES)
    # The lattice spans the detector, which the field centre may lie aside of.
    aside_x = (geometry.middle[0] - geometry.centre[0]) / unit
    aside_y = (geometry.middle[1] - geometry.centre[1]) / unit

    def mix(points: Points) -> FloatArray:
        x = (points.x - geometry.middle[0]) / unit
        y = (points.y - geometry.middle[1]) / unit
        return nodes.weights(x, y)

    return [(x + aside_x, y + aside_y) for x, y in nodes.places], mix


def _own_places(scene: Scene, geometry: FieldGeometry) -> list[Place] | None:
    """Pixels of a scene's objects, each once; None for more than can each have a PSF."""
    if scene.catalogue or scene.picture or len(scene.objects) > MOST_OWN:
        return None
    found: list[Place] = []
    for one in scene.objects:
        first = object_place(one, geometry)
        found.append(first)
        if isinstance(one, Pair):
            separation, angle = pair_place(scene, one)
            east, north = geometry.to_offsets(*(np.array(v) for v in first))
            x, y = geometry.to_pixels(
                east + separation * np.sin(angle), north + separation * np.cos(angle)
            )
            found.append((float(x), float(y)))
    places = list(dict.fromkeys(found)) or [geometry.centre]
    return places if len(places) <= MOST_OWN else None


@dataclass(frozen=True, eq=False)
class _Nearest:
    """Each source has the PSF of the nearest place (pixels)."""

    pixels: list[Place]

    def __call__(self, points: Points) -> FloatArray:
        away = np.stack([np.hypot(points.x - x, points.y - y) for x, y in self.pixels], axis=1)
        shares = np.zeros(away.shape)
        shares[np.arange(len(points)), away.argmin(axis=1)] = 1.0
        return shares


@dataclass(frozen=True, eq=False)
class _Rings:
    """Places on rings about the guide star (pixels).

    Attributes
    ----------
    guide : (float, float)
        Where the guide star falls.
    radii : ndarray
        From 0 outwards.
    used : ndarray of int
        Those places, of all on all rings, that the detector asks for.
    """

    guide: Place
    radii: FloatArray
    used: AnyArray

    @property
    def pixels(self) -> list[Place]:
        made = [self.guide]
        for radius in self.radii[1:]:
            for k in range(DIRECTIONS):
                angle = 2.0 * np.pi * k / DIRECTIONS
                made.append(
                    (self.guide[0] + radius * cos(angle), self.guide[1] + radius * sin(angle))
                )
        return [made[int(one)] for one in self.used]

    def all_shares(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """Shares of every place of every ring."""
        dx, dy = x - self.guide[0], y - self.guide[1]
        radius = np.minimum(np.hypot(dx, dy), self.radii[-1])
        ring = np.clip(
            np.searchsorted(self.radii, radius, side="right") - 1, 0, self.radii.size - 2
        )
        out = (radius - self.radii[ring]) / (self.radii[ring + 1] - self.radii[ring])
        turn = np.arctan2(dy, dx) / (2.0 * np.pi) * DIRECTIONS % DIRECTIONS
        low = np.floor(turn).astype(int) % DIRECTIONS
        on = turn - np.floor(turn)
        shares = np.zeros((x.size, 1 + DIRECTIONS * (self.radii.size - 1)))
        row = np.arange(x.size)
        for step, part in ((0, 1.0 - out), (1, out)):
            for k, share in ((low, 1.0 - on), ((low + 1) % DIRECTIONS, on)):
                column = np.where(ring + step == 0, 0, 1 + (ring + step - 1) * DIRECTIONS + k)
                np.add.at(shares, (row, column), part * share)
        return shares

    def __call__(self, points: Points) -> FloatArray:
        shares = self.all_shares(points.x, points.y)[:, self.used]
        # A star off the detector may ask for a place that none on it does.
        total = shares.sum(axis=1, keepdims=True)
        even = np.full_like(shares, 1.0 / shares.shape[1])
        return np.where(total > 0.0, shares / np.where(total > 0.0, total, 1.0), even)


def _rings(corrector: Corrector, geometry: FieldGeometry) -> _Rings:
    east, north = (np.array(one) for one in corrector.guide)
    x, y = (float(one) for one in geometry.to_pixels(east, north))
    corners = [(a, b) for a in (0, geometry.columns - 1) for b in (0, geometry.rows - 1)]
    farthest = max(hypot(a - x, b - y) for a, b in corners)
    angle = corrector.isoplanatic_angle / geometry.pixel_scale
    radii = np.array([0.0, *(one * angle for one in RINGS if one * angle < farthest), farthest])
    rings = _Rings((x, y), radii, np.arange(1 + DIRECTIONS * (radii.size - 1)))
    side_x, side_y = (np.linspace(-0.5, n - 0.5, 65) for n in (geometry.columns, geometry.rows))
    at_x, at_y = (one.ravel() for one in np.meshgrid(side_x, side_y))
    used = np.flatnonzero(rings.all_shares(at_x, at_y).any(axis=0))
    return _Rings((x, y), radii, used)
