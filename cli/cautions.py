"""The cautions that go with a scene: on standard error, or within JSON."""

from __future__ import annotations

from typing import TYPE_CHECKING

from simimg_cli.output import note

if TYPE_CHECKING:
    from simimg.scene.model import Scene


def print_cautions(scene: Scene, *, quiet: bool = False) -> None:
    """Print what must be said beside a product of a scene.

    `quiet` leaves out that all is simulated, which the products themselves say; what could hurt
    someone is always said.
    """
    from simimg.assembly.report import SIMULATION_NOTE, cautions

    for text in cautions(scene):
        if not (quiet and text == SIMULATION_NOTE):
            note(f"caution: {text}" if text != SIMULATION_NOTE else f"note: {text}")
