"""What frames say, for printing, for JSON and for a table file."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from simimg.errors import InputError
from simimg_cli.foreign import Wanted
from simimg_cli.output import document, plain
from simimg_cli.scenes import named

if TYPE_CHECKING:
    from simimg.frame import Frame
    from simimg.resolving.measure import FrameMeasurement
    from simimg.resolving.recordtable import Row

Place = tuple[float, float]


class Answers:
    """The answers of several frames, each by itself or all together.

    Parameters
    ----------
    near : sequence of (x, y)
        Places to measure.
    wanted : Wanted
        What the user says of frames and PSF.
    workers : int
        Processes for a field of many stars.
    """

    def __init__(self, near: Sequence[Place], wanted: Wanted, *, workers: int = 1) -> None:
        self._workers = workers
        self._near = list(near) or None
        self._wanted = wanted
        self._given = wanted.given()
        self._choice = wanted.choice()
        self.rows: list[Row] = []
        self._alone: list[Row] = []
        self.warnings: list[str] = []
        self.simulated: list[bool] = []

    def one(self, path: str) -> dict[str, Any]:
        """Measure one frame."""
        frame = self._read(path)

        from simimg.resolving.measure import measure_frame

        with named(path):
            found = measure_frame(
                frame,
                near=self._near,
                given=self._given,
                psf=self._choice,
                workers=self._workers,
            )
        self.warnings += found.warnings
        return {
            "frame": path,
            "scene_id": frame.scene_id,
            "simulated": frame.simulated,
            "warnings": list(found.warnings),
            "psf": plain(found.psf.to_dict()),
            "pairs": self._pairs(path, found),
            "singles": self._singles(path, found),
        }

    def together(self, paths: Sequence[str]) -> dict[str, Any]:
        """Measure frames of one field together; what is wrong with any is said at once."""
        frames: list[Frame] = []
        lines: list[str] = []
        for path in paths:
            try:
                frames.append(self._read(path))
            except InputError as error:
                lines += error.lines
        if lines:
            raise InputError(*lines)

        from simimg.resolving.together import measure_together

        try:
            found = measure_together(
                frames, near=self._near, given=self._given, psf=self._choice, names=paths
            )
        except InputError as error:
            # Places are those of the first frame; all else comes with its frame's name.
            own = f"{paths[0]}: "
            raise InputError(
                *(
                    own + text.removeprefix("frame: ") if text.startswith("frame: ") else text
                    for text in error.lines
                )
            ) from error
        self.warnings += found.answer.warnings
        ids = {frame.scene_id for frame in frames}
        return {
            "frame": paths[0],
            "together": list(paths),
            "scene_id": ids.pop() if len(ids) == 1 else None,
            "simulated": all(frame.simulated for frame in frames),
            "warnings": list(found.answer.warnings),
            "psf": plain(found.answer.psf.to_dict()),
            "psfs": [
                {"frame": path, **plain(psf.to_dict())} for path, psf in zip(paths, found.psfs)
            ],
            "pairs": self._pairs(paths[0], found.answer),
            "singles": self._singles(paths[0], found.answer),
        }

    def _read(self, path: str) -> Frame:
        from simimg.frame import Frame

        # Nothing slow is loaded for a frame that cannot be read.
        frame = Frame.read(path, hdu=self._wanted.hdu)
        self.simulated.append(frame.simulated)
        return frame

    def _pairs(self, path: str, found: FrameMeasurement) -> list[dict[str, Any]]:
        from simimg.resolving.recordtable import Row

        self.rows += [Row(path, pair, found.psf) for pair in found.pairs]
        return [{"file": path, **plain(pair.to_dict())} for pair in found.pairs]

    def _singles(self, path: str, found: FrameMeasurement) -> list[dict[str, Any]]:
        from simimg.resolving.recordtable import Row

        self._alone += [Row(path, single, found.psf) for single in found.singles]
        return [plain(single.to_dict()) for single in found.singles]

    def write(self, path: str, *, overwrite: bool) -> None:
        """Write all that was measured as a table."""
        from simimg.resolving.recordtable import write_records

        write_records(
            [*self.rows, *self._alone],
            path,
            simulated=bool(self.simulated) and all(self.simulated),
            overwrite=overwrite,
            warnings=self.warnings,
        )


def answers_document(answers: Sequence[dict[str, Any]]) -> str:
    """One frame's answer as it is; of several a list of them, and all their pairs in one."""
    if len(answers) == 1:
        own = ("scene_id", "simulated", "warnings")
        rest = {key: value for key, value in answers[0].items() if key not in own}
        return document(rest, **{key: answers[0][key] for key in own})
    ids = {answer.get("scene_id") for answer in answers}
    pairs = [pair for answer in answers for pair in answer.get("pairs", [])]
    return document(
        {"frames": answers, "pairs": pairs},
        scene_id=ids.pop() if len(ids) == 1 else None,
        simulated=all(answer.get("simulated", False) for answer in answers),
        warnings=[
            f"{answer['frame']}: {text}"
            for answer in answers
            for text in answer.get("warnings", [])
        ],
    )
