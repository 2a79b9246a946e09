"""Where the telescope points in each exposure of a dithered scene.

Offsets are standard coordinates in the tangent plane of the scene's own pointing. The detector
keeps its position angle at wherever the telescope points, as behind a mount that follows hour
circles; what is in the sky stays there. Radians.
"""

from __future__ import annotations

from dataclasses import replace
from math import cos, pi, sin, sqrt, tau

import numpy as np

from simimg.assembly.places import FieldGeometry, field_geometry
from simimg.camera.streams import Stage, stream
from simimg.scene.dither import Dither
from simimg.scene.model import Scene


def dither_offset(scene: Scene, index: int) -> tuple[float, float]:
    """Offset of the aim towards east and north (rad) in an exposure; (0, 0) without a dither.

    Parameters
    ----------
    scene : Scene
    index : int
        Number of the exposure, from 0.
    """
    exposure = scene.exposure
    if exposure is None or exposure.dither is None:
        return (0.0, 0.0)
    return _offset(exposure.dither, index, exposure.seed)


def aimed_geometry(scene: Scene, index: int) -> FieldGeometry:
    """The detector on the sky in one exposure."""
    geometry = field_geometry(scene)
    east, north = dither_offset(scene, index)
    if east == 0.0 and north == 0.0:
        return geometry
    denominator = cos(geometry.dec) - north * sin(geometry.dec)
    ra = geometry.ra + np.arctan2(east, denominator)
    dec = np.arctan2(north * cos(geometry.dec) + sin(geometry.dec), np.hypot(east, denominator))
    return replace(geometry, ra=float(ra) % tau, dec=float(dec))


def _offset(dither: Dither, index: int, seed: int) -> tuple[float, float]:
    if dither.offsets is not None:
        return dither.offsets[index % len(dither.offsets)]
    assert dither.step is not None
    if index == 0:
        return (0.0, 0.0)
    if dither.pattern == "random":
        rng = stream(seed, frame=index, stage=Stage.DITHER, block=0)
        radius, angle = dither.step * sqrt(rng.random()), tau * rng.random()
        return radius * sin(angle), radius * cos(angle)
    across, along = (0, index) if dither.pattern == "line" else _spiral(index)
    turned = dither.position_angle
    c, s = cos(turned), sin(turned)
    # Across runs 90 degrees behind along: west where along runs north.
    return dither.step * (along * s - across * c), dither.step * (along * c + across * s)


def _spiral(index: int) -> tuple[int, int]:
    """Places of a square grid, ring by ring outwards from (0, 0), next to next."""
    ring = int((sqrt(index) + 1.0) / 2.0)
    side, place = 2 * ring, index - (2 * ring - 1) ** 2
    edge, step = divmod(place, side)
    corner = (
        (ring, 1 - ring + step),
        (ring - 1 - step, ring),
        (-ring, ring - 1 - step),
        (1 - ring + step, -ring),
    )
    return corner[edge]


def pointing_turn(base: FieldGeometry, geometry: FieldGeometry) -> FieldGeometry:
    """The geometry with the rotation by which directions at the base field show on the detector.

    Position angles of a scene are reckoned at its own field centre. Seen from another pointing the
    meridians run otherwise, which tells near the poles.

    Parameters
    ----------
    base : FieldGeometry
        In which the scene's position angles are given.
    geometry : FieldGeometry
        The detector in question.

    Returns
    -------
    FieldGeometry
        For directions only: its ``direction(position_angle)`` holds on the detector.
    """
    if (base.ra, base.dec, base.rotation) == (geometry.ra, geometry.dec, geometry.rotation):
        return geometry
    middle = np.array([v / 2.0 for v in (geometry.columns - 1, geometry.rows - 1)])
    x, y = base.from_sky(*geometry.to_sky(middle[:1], middle[1:]))
    angle, step = base.direction(0.0), 20.0
    there = base.to_sky(
        np.concatenate([x, x + step * cos(angle)]), np.concatenate([y, y + step * sin(angle)])
    )
    px, py = geometry.from_sky(*there)
    north = float(np.arctan2(py[1] - py[0], px[1] - px[0]))
    turned = pi / 2.0 - north if geometry.parity > 0 else north - pi / 2.0
    return replace(geometry, rotation=turned % tau)
