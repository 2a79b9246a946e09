"""Each detector of a mosaic as a scene of its own, and where it lies on the sky.

A detector is the scene's camera with its own size, gain and patterns, moved in the focal plane and
turned: its field centre falls on a pixel that is not its middle, and may lie outside. Distortion
and the aberrations of the field go by the distance from the field centre. Pixels, radians.
"""

from __future__ import annotations

from dataclasses import replace
from math import degrees

import numpy as np

from simimg.assembly.places import field_geometry
from simimg.scene.file import replace as changed
from simimg.scene.model import Scene
from simimg.scene.mosaic import OWN, FocalLength


def detector_scene(scene: Scene, number: int) -> Scene:
    """The scene as one detector of its mosaic sees it.

    Parameters
    ----------
    scene : Scene
        With [[detector]] tables and a pixel scale.
    number : int
        Of the detector, from 0.

    Returns
    -------
    Scene
        Without [[detector]]; its camera has ``field_centre``.
    """
    one, camera = scene.detector[number], scene.camera
    assert camera is not None
    written = scene.document["detector"][number]
    changes: dict[str, object] = {
        f"camera.{name}": written[name] for name in OWN if name in written
    }
    serial = camera.serial + number if one.serial is None else one.serial
    rotation = camera.rotation + one.rotation
    columns, rows = (length // camera.binning for length in one.pixels or camera.pixels or (1, 1))
    dx, dy = (_pixels(scene, way) for way in one.offset)
    whole = replace(field_geometry(scene), distortion=0.0)
    east, north = whole.to_offsets(np.array(whole.centre[0] + dx), np.array(whole.centre[1] + dy))
    own = replace(whole, columns=columns, rows=rows, rotation=rotation, axis=(0.0, 0.0))
    x, y = own.to_pixels(east, north)
    centre = [own.middle[0] - float(x), own.middle[1] - float(y)]
    changes |= {
        "detector": None,
        "camera.serial": serial % 2**63,
        "camera.rotation": f"{degrees(rotation)!r} deg",
        "camera.field_centre": centre,
    }
    return changed(scene, changes)


def _pixels(scene: Scene, way: FocalLength) -> float:
    """A way in the focal plane in pixels of the frame."""
    assert scene.camera is not None
    if way.kind == "angle":
        assert scene.pixel_scale is not None
        return way.value / scene.pixel_scale
    if way.kind == "length":
        assert scene.camera.pixel_size is not None
        return way.value / scene.camera.pixel_size / scene.camera.binning
    return way.value / scene.camera.binning
