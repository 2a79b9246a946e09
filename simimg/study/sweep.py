"""sweep: the limits, bounds and trials of a scene at every point of one or two varied keys.

Points are independent: each is worked out by one process on one thread from the scene with its keys
set, so that the result depends neither on the number of processes nor on which points were done
before an interrupt.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from math import nan

from simimg.errors import InputError, mistake
from simimg.scene.file import replace
from simimg.scene.model import Scene
from simimg.scene.paths import MisplacedKeyError, dotted, parse_path
from simimg.scene.steps import Steps
from simimg.study.point import COLUMNS, TRIAL_COLUMNS, Question, question, work_out
from simimg.study.workforce import Jobs

MOST_POINTS = 10_000
"""Most points of one study."""

Row = dict[str, float]
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Varied:
    """A key and its values.

    Attributes
    ----------
    key : str
        Dotted, as ``camera.pixel_scale`` or ``pair.0.separation``.
    steps : Steps
    """

    key: str
    steps: Steps

    @property
    def column(self) -> str:
        """The key as the name of a column, ``camera_pixel_scale``."""
        return "_".join(str(step) for step in parse_path(self.key))


@dataclass(frozen=True)
class Sweep:
    """A study that has been made.

    Attributes
    ----------
    scene : Scene
        Without the varied keys set.
    varied : tuple of Varied
        One or two; the last changes fastest.
    trials : int
    points : tuple of tuple
        The values at each point, one for each varied key.
    rows : tuple of dict
        What was found at each point, by the names of `columns`.
    problems : tuple of str
        What kept a point from being worked out; empty where nothing did.
    """

    scene: Scene
    varied: tuple[Varied, ...]
    trials: int
    points: tuple[tuple[str | float | int | bool, ...], ...]
    rows: tuple[Row, ...]
    problems: tuple[str, ...]

    @property
    def columns(self) -> dict[str, tuple[str, str]]:
        """Name, unit and meaning of what is found at a point."""
        return dict(COLUMNS) | (dict(TRIAL_COLUMNS) if self.trials else {})


@dataclass(frozen=True)
class Plan:
    """The points of a study, each checked and none worked out.

    Attributes
    ----------
    scene : Scene
    varied : tuple of Varied
    asked : Question
    points : tuple of tuple
    scenes : tuple of Scene
        One a point.
    """

    scene: Scene
    varied: tuple[Varied, ...]
    asked: Question
    points: tuple[tuple[str | float | int | bool, ...], ...]
    scenes: tuple[Scene, ...]


def plan(
    scene: Scene, *, vary: Sequence[Varied] = (), trials: int | None = None, pair: str | None = None
) -> Plan:
    """Check every point of a study before any is worked out.

    Parameters
    ----------
    scene : Scene
    vary : sequence of Varied
        One or two keys; those of the scene's ``[study]`` unless given.
    trials : int, optional
        Noise draws at each point; as in ``[study]`` unless given, else 0.
    pair : str, optional
        Label of the pair; the first unless given here or in ``[study]``.

    Raises
    ------
    InputError
        One line for each key or value that the scene cannot take.
    """
    own = scene.study
    if not vary and own is not None:
        vary = [Varied(name, steps) for name, steps in own.vary.items()]
    if not vary:
        mend = "give --vary KEY=START:STOP:COUNT, or write a [study] table"
        raise InputError(mistake(scene.where, "study", "nothing is to be varied", mend))
    _check_keys(vary)
    count = 1
    for one in vary:
        count *= len(one.steps.values)
    if count > MOST_POINTS:
        what = f"{count} points are more than {MOST_POINTS}"
        raise InputError(mistake(scene.where, "study", what, "vary in fewer steps"))
    still = scene if own is None else replace(scene, {"study": None})
    asked = question(
        still,
        trials=trials if trials is not None else (own.trials if own is not None else 0),
        label=pair if pair is not None else (own.pair if own is not None else None),
    )
    points = tuple(itertools.product(*(one.steps.values for one in vary)))
    scenes, lines = [], []
    for point in points:
        try:
            scenes.append(
                replace(still, {one.key: value for one, value in zip(vary, point, strict=True)})
            )
        except InputError as error:
            lines += [line for line in error.lines if line not in lines]
    if lines:
        raise InputError(*lines)
    return Plan(still, tuple(vary), asked, points, tuple(scenes))


def _check_keys(vary: Sequence[Varied]) -> None:
    lines = []
    if len(vary) > 2:
        lines.append(mistake("--vary", "", f"{len(vary)} keys", "vary one or two at a time"))
    seen = set()
    for one in vary:
        try:
            path = parse_path(one.key)
        except MisplacedKeyError as error:
            lines.append(mistake("--vary", one.key, error.what, error.mend))
            continue
        if dotted(path) in seen:
            lines.append(mistake("--vary", one.key, "is varied twice", "name it once"))
        seen.add(dotted(path))
        if path[0] in ("study", "draw", "header", "title", "base"):
            lines.append(
                mistake("--vary", one.key, "changes nothing that is studied", "vary another key")
            )
    if lines:
        raise InputError(*lines)


def sweep(
    scene: Scene,
    *,
    vary: Sequence[Varied] = (),
    trials: int | None = None,
    pair: str | None = None,
    workers: int = 1,
    cluster: str | None = None,
    done: Mapping[int, Row] | None = None,
    keep: Callable[[int, Row], None] | None = None,
    progress: Progress | None = None,
) -> Sweep:
    """Make a study.

    Parameters
    ----------
    scene : Scene
    vary, trials, pair : optional
        As for `plan`.
    workers : int, optional
        Processes, of no effect on the result. A script that asks for more than 1 must guard its
        main part by ``if __name__ == "__main__":``.
    cluster : str, optional
        Address of a scheduler that hands the points to its workers instead.
    done : mapping of int to dict, optional
        Points worked out before, by their number.
    keep : callable, optional
        Called with the number and the row of each point as it is done.
    progress : callable, optional
        Called with the points done and their whole number.

    Returns
    -------
    Sweep

    Raises
    ------
    InputError
        A key or a value that the scene cannot take.
    RunError
        A process was stopped from outside.
    """
    planned = plan(scene, vary=vary, trials=trials, pair=pair)
    return make(planned, workers=workers, cluster=cluster, done=done, keep=keep, progress=progress)


def make(
    planned: Plan,
    *,
    workers: int = 1,
    cluster: str | None = None,
    done: Mapping[int, Row] | None = None,
    keep: Callable[[int, Row], None] | None = None,
    progress: Progress | None = None,
) -> Sweep:
    """Work out the points of a plan; arguments as for `sweep`."""
    rows: dict[int, Row] = dict(done or {})
    problems: dict[int, str] = {}
    total = len(planned.points)
    waiting = [number for number in range(total) if number not in rows]
    jobs = Jobs(workers=workers, cluster=cluster)
    tasks = [(planned.scenes[number], planned.asked) for number in waiting]
    for index, (row, problem) in jobs.run(_one, tasks):
        number = waiting[index]
        rows[number] = row
        if problem:
            problems[number] = problem
        elif keep is not None:
            keep(number, row)
        if progress is not None:
            progress(len(rows), total)
    return Sweep(
        scene=planned.scene,
        varied=planned.varied,
        trials=planned.asked.trials,
        points=planned.points,
        rows=tuple(rows[number] for number in range(total)),
        problems=tuple(problems.get(number, "") for number in range(total)),
    )


def _one(task: tuple[Scene, Question]) -> tuple[Row, str]:
    """One point; a set-up that has no answer is said, and does not stop the others."""
    scene, asked = task
    try:
        return work_out(scene, asked), ""
    except InputError as error:
        names = [*COLUMNS, *(TRIAL_COLUMNS if asked.trials else ())]
        return dict.fromkeys(names, nan), " ".join(error.lines)
