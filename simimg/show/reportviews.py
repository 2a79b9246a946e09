"""Views of one scene side by side: the same sky, camera and noise, seen in other ways.

Each view is a frame of the same detector with a few words on what is different about it. All are
drawn on one stretch, so that what changes from one to the next is what the difference does.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from simimg.camera.masks import SATURATED
from simimg.exposure import expose
from simimg.frame import Frame
from simimg.scene.file import replace
from simimg.scene.model import Scene


@dataclass(frozen=True, eq=False)
class View:
    """One way of seeing a scene.

    Attributes
    ----------
    key : str
        A word that names it in the page.
    title : str
        Over the picture.
    remark : str
        What is different about it, a sentence.
    frame : Frame
    """

    key: str
    title: str
    remark: str
    frame: Frame

    def full_pixels(self, window: tuple[int, int, int, int]) -> int:
        """Pixels in which charge reached the full well or counts the converter's end.

        Parameters
        ----------
        window : (int, int, int, int)
            First and past-the-last column and row of the piece that counts.
        """
        if self.frame.mask is None:
            return 0
        left, right, bottom, top = window
        return int(((self.frame.mask[bottom:top, left:right] & SATURATED) != 0).sum())


def _above_the_air(scene: Scene, frame: Frame) -> View | None:  # noqa: ARG001
    """The same telescope lifted above its air, where nothing is to be corrected."""
    if scene.air is None or scene.psf is not None:
        return None
    remark = "The same telescope, camera, exposure and noise without the air: no turbulence, no "
    remark += "refraction, no extinction."
    above = replace(scene, {"air": None, "correction": None})
    return View("above", "Above the air", remark, expose(above))


def _uncorrected(scene: Scene, frame: Frame) -> View | None:  # noqa: ARG001
    """The air as it comes, where the scene corrects it."""
    if scene.air is None or scene.psf is not None or scene.correction is None:
        return None
    remark = "The same with the adaptive optics switched off."
    blurred = replace(scene, {"correction": None})
    return View("uncorrected", "In the air, uncorrected", remark, expose(blurred))


def _in_the_air(scene: Scene, frame: Frame) -> View | None:
    """The scene as it is, where it has air."""
    if scene.air is None or scene.psf is not None:
        return None
    title = "In the air" if scene.correction is None else "In the air, corrected"
    return View("in-air", title, "The scene as it stands: the frame of this report.", frame)


_WAYS: tuple[Callable[[Scene, Frame], View | None], ...] = (
    _above_the_air,
    _uncorrected,
    _in_the_air,
)
"""In the order in which they are shown; each says None of a scene that it does not fit."""


def views(scene: Scene, frame: Frame) -> tuple[View, ...]:
    """The views of a scene; empty where there is only one way of seeing it.

    Parameters
    ----------
    scene : Scene
    frame : Frame
        Its first exposure.

    Raises
    ------
    InputError
        A view that cannot be computed.
    """
    found = [view for way in _WAYS if (view := way(scene, frame)) is not None]
    return tuple(found) if len(found) > 1 else ()
