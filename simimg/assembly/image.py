"""The image that a scene casts on its detector, without noise: in the frame's pixels, or finer.

Where pixels are read in squares (binning), what happens to each of them must be known before they
are added: the image is then computed in the detector's own pixels, and the frame's is its sum over
squares. Electrons an exposure.
"""

from __future__ import annotations

from dataclasses import replace as changed

from simimg.arrays import AnyArray
from simimg.assembly.brightness import sky_electrons
from simimg.assembly.objects import Inventory
from simimg.assembly.train import Train, assemble_train
from simimg.imaging.render import expected_image
from simimg.imaging.sources import Points, Sources
from simimg.scene.file import replace
from simimg.scene.model import Scene


def scene_image(
    scene: Scene, train: Train, objects: Inventory, *, memory_bytes: int | None, threads: int
) -> AnyArray:
    """Electrons of objects and sky in each pixel of the detector.

    Parameters
    ----------
    scene : Scene
    train : Train
        Of the scene.
    objects : Inventory
        Of the scene, or of its objects as one of its exposures sees them.
    memory_bytes : int or None
        Most memory that the image may take.
    threads : int

    Returns
    -------
    ndarray, shape (rows, columns)
        Of the detector's own pixels; those are the frame's unless the scene bins them.

    Raises
    ------
    InputError
        The image cannot fit into the memory.
    """
    geometry, side = objects.geometry, _side(scene)
    sources, columns, rows = objects.sources, geometry.columns, geometry.rows
    if side > 1:
        assert scene.camera is not None
        assert scene.camera.read_pixels is not None
        train = assemble_train(_unbinned(scene, side))
        sources = _finer(sources, side)
        columns, rows = scene.camera.read_pixels
    expected = expected_image(
        train.basis,
        sources,
        columns=columns,
        rows=rows,
        pixel_scale=geometry.pixel_scale / side,
        memory_bytes=memory_bytes,
        threads=threads,
    )
    sky = sky_electrons(scene, area=train.pupil.area) / side**2
    expected += expected.dtype.type(sky)
    return expected


def _side(scene: Scene) -> int:
    return 1 if scene.camera is None else scene.camera.binning


def _unbinned(scene: Scene, side: int) -> Scene:
    """The same scene, every pixel read by itself."""
    changes: dict[str, object] = {"camera.binning": None}
    if scene.camera is not None and scene.camera.field_centre is not None:
        changes["camera.field_centre"] = [_fine(one, side) for one in scene.camera.field_centre]
    return replace(scene, changes)


def _fine(place: float, side: int) -> float:
    """A place among binned pixels as one among those of the detector."""
    return (place + 0.5) * side - 0.5


def _finer(sources: Sources, side: int) -> Sources:
    points = sources.points
    return Sources(
        Points(
            (points.x + 0.5) * side - 0.5,
            (points.y + 0.5) * side - 0.5,
            points.electrons,
            points.kind,
        ),
        tuple(changed(one, x=_fine(one.x, side), y=_fine(one.y, side)) for one in sources.shapes),
    )
