"""What moves during a scene's exposure: the aim of the telescope, the field, objects among stars.

Tremble and drift of the aim blur every star alike and are factors of the transfer function. While
the telescope follows an object the stars trail, the object does not. A moving object and the arcs
of a turning field are drawn as points along the trail, weighted by Gauss and Legendre, close enough
for the finest detail that the image holds. Radians, seconds; detector axes.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from simimg.arrays import FloatArray
from simimg.assembly.brightness import exposure_time
from simimg.assembly.places import FieldGeometry, field_geometry
from simimg.errors import InputError, mistake
from simimg.imaging.basis import Transfer
from simimg.imaging.grid import band_edge
from simimg.imaging.sources import Points
from simimg.optics.motion import arc_count, arc_points, drift_transfer, jitter_transfer
from simimg.scene.model import Scene
from simimg.scene.motion import Motion

Trail = tuple[float, float]
"""From its first to its last point, along the detector's +x and +y (rad)."""


def trembling(scene: Scene, transfer: Transfer) -> Transfer:
    """A transfer function with the tremble and the drift of the aim, and the spread of charge."""
    pointing, transfer = scene.pointing, _diffused(scene, transfer)
    if pointing is None:
        return transfer
    across, along = pointing.jitter
    if across or along:

        def jitter(u: FloatArray, v: FloatArray) -> FloatArray:
            return jitter_transfer(u, v, rms=across, rms_across=along)

        def round_jitter(f: FloatArray) -> FloatArray:
            return jitter_transfer(f, np.zeros(()), rms=across)

        wings = replace(transfer.wings, core=transfer.wings.core + 4.0 * max(across, along))
        if across == along:
            transfer = replace(transfer, radial=(*transfer.radial, round_jitter), wings=wings)
        else:
            transfer = replace(transfer, planar=(*transfer.planar, jitter), wings=wings)
    if pointing.drift is not None:
        drift = pointing.drift
        # The aim goes one way and the stars the other; the even trail is the same.
        trail = _trail(scene, drift.rate, drift.position_angle)
        transfer = drawn_out(transfer, trail)
    return transfer


def _diffused(scene: Scene, transfer: Transfer) -> Transfer:
    """A transfer function with the Gaussian spread of charge before it gathers in a pixel."""
    camera, scale = scene.camera, scene.pixel_scale
    if camera is None or scale is None or not camera.charge_diffusion:
        return transfer
    spread = camera.charge_diffusion * scale / camera.binning

    def diffusion(f: FloatArray) -> FloatArray:
        return jitter_transfer(f, np.zeros(()), rms=spread)

    wings = replace(transfer.wings, core=transfer.wings.core + 4.0 * spread)
    return replace(transfer, radial=(*transfer.radial, diffusion), wings=wings)


def drawn_out(transfer: Transfer, trail: Trail) -> Transfer:
    """A transfer function with a straight, even trail."""
    dx, dy = trail
    if dx == 0.0 and dy == 0.0:
        return transfer

    def drift(u: FloatArray, v: FloatArray) -> FloatArray:
        return drift_transfer(u, v, dx=dx, dy=dy)

    wings = replace(transfer.wings, core=transfer.wings.core + 0.5 * float(np.hypot(dx, dy)))
    return replace(transfer, planar=(*transfer.planar, drift), wings=wings)


def _trail(scene: Scene, rate: float, position_angle: float) -> Trail:
    length = rate * exposure_time(scene)
    angle = field_geometry(scene).direction(position_angle)
    return float(length * np.cos(angle)), float(length * np.sin(angle))


def object_trail(scene: Scene, motion: Motion | None) -> Trail:
    """Trail of an object that moves among the stars, the telescope following the stars."""
    if motion is None:
        return (0.0, 0.0)
    return _trail(scene, motion.rate, motion.position_angle)


def followed_trail(scene: Scene) -> Trail:
    """Trail of the stars while the telescope follows an object; none where it follows the stars."""
    label = scene.pointing.track if scene.pointing is not None else None
    for one in scene.objects:
        if label is not None and one.label == label:
            dx, dy = object_trail(scene, one.motion)
            return -dx, -dy
    return (0.0, 0.0)


def field_turn(scene: Scene) -> float:
    """Turn of the field during the exposure (rad), from the detector's +x towards +y."""
    if scene.pointing is None or scene.pointing.rotation_rate == 0.0:
        return 0.0
    # North through east runs from +y towards -x, unless the field is mirrored.
    mirrored = scene.camera is not None and scene.camera.mirrored
    return scene.pointing.rotation_rate * exposure_time(scene) * (-1.0 if mirrored else 1.0)


def moved_points(
    points: Points,
    *,
    trails: FloatArray,
    turn: float,
    finest: Transfer,
    geometry: FieldGeometry,
    where: str,
) -> Points:
    """Points drawn out along straight trails and arcs about the field's centre.

    Parameters
    ----------
    points : Points
    trails : ndarray, shape (N, 2)
        Straight trail of each (rad).
    turn : float
        Turn of the field (rad).
    finest : Transfer
        What the image holds at most.
    geometry : FieldGeometry
    where : str
        Name of the scene, for messages.

    Raises
    ------
    InputError
        A trail so long against the finest detail that it takes too many points.
    """
    scale = geometry.pixel_scale
    x = (points.x - geometry.centre[0]) * scale
    y = (points.y - geometry.centre[1]) * scale
    length = np.hypot(trails[:, 0], trails[:, 1]) + np.abs(turn) * np.hypot(x, y)
    moving = length > 1e-3 * scale
    if not moving.any():
        return points
    edge = min(band_edge(finest), 4.0 / scale)
    parts: list[tuple[FloatArray, FloatArray, FloatArray, FloatArray]] = []
    for row in np.flatnonzero(moving):
        try:
            count = arc_count(float(length[row]), edge)
            dx, dy, weight = arc_points(float(x[row]), float(y[row]), angle=turn, count=count)
        except ValueError as error:
            line = mistake(
                where, "exposure.time", f"a trail is too long: {error}", "expose for less time"
            )
            raise InputError(line) from error
        nodes = np.polynomial.legendre.leggauss(count)[0] * 0.5
        parts.append(
            (
                points.x[row] + (dx + nodes * trails[row, 0]) / scale,
                points.y[row] + (dy + nodes * trails[row, 1]) / scale,
                points.electrons[row] * weight,
                np.full(count, points.kind[row]),
            )
        )
    still = points.chosen(~moving)
    joined = [np.concatenate(columns) for columns in zip(*parts, strict=True)]
    return Points(
        np.concatenate([still.x, joined[0]]),
        np.concatenate([still.y, joined[1]]),
        np.concatenate([still.electrons, joined[2]]),
        np.concatenate([still.kind, joined[3]]),
    )
