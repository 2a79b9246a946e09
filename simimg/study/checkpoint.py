"""What an interrupted study leaves behind, so that it can go on.

Beside the table that is to be written stands ``TABLE.unfinished``: a line that says which study it
is, then a line of JSON for each point that is done. A line that was cut short is not read. When the
table is written the file goes.
"""

from __future__ import annotations

import hashlib
import json
import os
from contextlib import suppress
from pathlib import Path

from simimg.errors import InputError, RunError, mistake
from simimg.scene.file import scene_id
from simimg.study.sweep import Plan, Row
from simimg.version import __version__

SUFFIX = ".unfinished"


class Checkpoint:
    """The points of one study that are done.

    Parameters
    ----------
    table : path
        Where the study's table will be written.
    planned : Plan
    fresh : bool, optional
        Begin anew, whatever was done before.

    Attributes
    ----------
    path : Path
    done : dict of int to dict
        Rows worked out before, by the number of their point.

    Raises
    ------
    InputError
        The file belongs to another study.
    """

    def __init__(
        self, table: str | os.PathLike[str], planned: Plan, *, fresh: bool = False
    ) -> None:
        self.path = Path(f"{os.fspath(table)}{SUFFIX}")
        self._identity = identity(planned)
        self.done: dict[int, Row] = {}
        if fresh:
            self.remove()
        elif self.path.exists():
            self.done = self._read(len(planned.points))

    def _read(self, points: int) -> dict[int, Row]:
        try:
            lines = self.path.read_bytes().split(b"\n")
        except OSError as error:
            raise RunError(
                mistake(str(self.path), "", error.strerror or "cannot be read")
            ) from None
        if lines[0].decode("ascii", "replace") != self._identity:
            mend = "finish that study with its own command, or allow a new one with --overwrite"
            raise InputError(mistake(str(self.path), "", "was left by another study", mend))
        done = {}
        # What stands behind the last line's end was cut short.
        for line in lines[1:-1]:
            with suppress(ValueError, KeyError, TypeError):
                kept = json.loads(line)
                if 0 <= kept["number"] < points:
                    done[int(kept["number"])] = {
                        str(name): float(value) for name, value in kept["row"].items()
                    }
        return done

    def keep(self, number: int, row: Row) -> None:
        """Add a point.

        Raises
        ------
        RunError
            The system refused.
        """
        line = json.dumps({"number": number, "row": row})
        try:
            begun = self.path.exists()
            with self.path.open("ab") as handle:
                if not begun:
                    handle.write(f"{self._identity}\n".encode("ascii"))
                elif not self._whole():
                    handle.write(b"\n")
                handle.write(f"{line}\n".encode("ascii"))
        except OSError as error:
            raise RunError(
                mistake(str(self.path), "", error.strerror or "cannot be written")
            ) from None

    def _whole(self) -> bool:
        """Whether the last line has its end."""
        with self.path.open("rb") as handle:
            handle.seek(-1, os.SEEK_END)
            return handle.read(1) == b"\n"

    def remove(self) -> None:
        """Forget what was done."""
        self.path.unlink(missing_ok=True)


def identity(planned: Plan) -> str:
    """Which study this is: scene, keys, values, trials, pair and version, as a hash."""
    what = [
        __version__,
        scene_id(planned.scene),
        [[one.key, list(one.steps.values)] for one in planned.varied],
        planned.asked.trials,
        planned.asked.pair,
    ]
    return "study " + hashlib.sha256(json.dumps(what).encode()).hexdigest()
