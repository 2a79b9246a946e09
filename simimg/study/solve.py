"""solve: the value of one key at which a set-up just does what is asked of it.

Asked may be a share of resolved frames, ``resolved=0.95``, or a column of a study, ``snr=100``. A
column is a number at each value of the key, and its boundary is found by bisection. A share is
known only by trials: where it should cross is reckoned from limit and bound alone
(`simimg.study.outlook`), and trials about that place are then fitted with a curve whose own
uncertainty is that of the answer (`simimg.study.crossing`).

The key's own unit throughout; positive keys are searched by factors, magnitudes and others evenly.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import isfinite, nan
from typing import Any

import numpy as np

from simimg.errors import InputError, mistake
from simimg.scene.file import replace, requirements_to_expose
from simimg.scene.model import Scene
from simimg.study.crossing import Crossing, Tried, fit_crossing
from simimg.study.outlook import Outlook, outlook, why_not
from simimg.study.point import COLUMNS, Question, question, work_out
from simimg.study.reach import Reach
from simimg.study.trials import trials
from simimg.study.workforce import Jobs

CRITERIA = ("sparrow", "rayleigh")
_COARSE = 17  # places at which a curve is looked at first
_FINE = 12  # halvings of the step in which it crosses
_ROUNDS, _MOST_ROUNDS = 4, 8  # of trials after the first: once they cross the goal, and at most
_SPREAD = 0.08  # widest first step of the trials to either side, as a share of the range
_OFF = 0.03  # relative error of a boundary that limit and bound promise
_TIGHT = 1e-3  # relative uncertainty with which the search of trials may end
_LAST = 2  # times so many trials again about the boundary, four times
_NEAR = 0.2  # of a share, over which its curve is about straight

Progress = Callable[[int, int], None]


@dataclass(frozen=True, kw_only=True)
class Solution:
    """The answer.

    Attributes
    ----------
    key, unit : str
        What was solved for, and the unit of the figures.
    value, low, high : float
        The boundary with its 95 % interval; NaN where it is not reached.
    target : str
        As asked, such as ``resolved=0.95``.
    criterion : str or None
        Of a share of resolved frames.
    trials : int
        Noise draws made in all; 0 where none were needed.
    reached : bool
    reason : str
        Why it cannot be reached, or what else should be known.
    others : tuple of float
        Further boundaries within what was searched, by limit and bound alone.
    """

    key: str
    unit: str
    value: float
    low: float
    high: float
    target: str
    criterion: str | None
    trials: int
    reached: bool
    reason: str
    others: tuple[float, ...]

    def to_dict(self) -> dict[str, Any]:
        """For JSON: None for what is not finite."""
        held = dict(self.__dict__)
        held["others"] = list(self.others)
        return {
            name: None if isinstance(value, float) and not isfinite(value) else value
            for name, value in held.items()
        }


def solve(
    scene: Scene,
    key: str,
    *,
    until: str,
    criterion: str = "sparrow",
    between: tuple[str, str] | None = None,
    trials: int = 400,
    pair: str | None = None,
    workers: int = 1,
    progress: Progress | None = None,
) -> Solution:
    """Find the value of a key at which a target is just reached.

    Parameters
    ----------
    scene : Scene
    key : str
        Dotted: ``exposure.time``, ``telescope.aperture``, ``pair.0.separation``,
        ``pair.0.magnitudes.1``, ...
    until : str
        ``resolved=P`` with P from 0.02 to 0.98, or ``COLUMN=VALUE`` of a study without trials.
    criterion : {"sparrow", "rayleigh"}, optional
        Under which a pair is resolved.
    between : tuple of str, optional
        Ends of the search, with their unit; a hundredth to a hundred times what the scene says, or
        five to either side of a bare number, unless given.
    trials : int, optional
        Noise draws at each value that is tried, 50 or more.
    pair : str, optional
        Label of the pair; the first unless given.
    workers : int, optional
        Processes, of no effect on the result.
    progress : callable, optional
        Called with the steps done and their number, now and then.

    Returns
    -------
    Solution
        The boundary nearest to what the scene says.

    Raises
    ------
    InputError
        A key that holds no number, a target that is none, a scene that lacks what it needs.
    """
    what, goal = _target(until)
    if criterion not in CRITERIA:
        raise ValueError(f"criterion must be one of {CRITERIA}, got {criterion!r}")
    if trials < 50:
        raise ValueError(f"trials must be 50 or more, got {trials}")
    reach = Reach.of(scene, key, between)
    of_frames = what == "resolved"
    asked = question(scene, trials=0, label=pair)
    if of_frames and asked.pair is None:
        raise InputError(
            mistake(scene.where, "pair", "there is none to be resolved", "add a [[pair]]")
        )
    if of_frames:
        missing = requirements_to_expose(scene)
        if missing:
            raise InputError(*missing)
    search = _Search(scene, reach, asked, what, criterion, Jobs(workers=workers), progress)
    roots, curve = search.roots(goal)
    blank = Solution(
        key=key,
        unit=reach.unit,
        value=nan,
        low=nan,
        high=nan,
        target=until,
        criterion=criterion if of_frames else None,
        trials=0,
        reached=False,
        reason="",
        others=(),
    )
    if not of_frames:
        return _of_column(blank, roots, reach, curve, what)
    return search.settle(blank, roots, curve, goal, count=trials)


def _target(until: str) -> tuple[str, float]:
    name, equals, value = until.partition("=")
    name = name.strip()
    try:
        goal = float(value)
    except ValueError:
        goal = nan
    columns = [one for one in COLUMNS if one != "saturated"]
    if not equals or not isfinite(goal) or name not in ("resolved", *columns):
        raise InputError(
            mistake(
                "--until",
                name[:60],
                "is no target",
                "write resolved=0.95, or a column of a study: " + ", ".join(columns),
            )
        )
    if name == "resolved" and not 0.02 <= goal <= 0.98:
        raise InputError(
            mistake("--until", name, f"{goal:g} is out of reach of trials", "write 0.02 to 0.98")
        )
    return name, goal


def _of_column(
    blank: Solution,
    roots: Sequence[float],
    reach: Reach,
    curve: Sequence[float],
    what: str,
) -> Solution:
    """The answer for a column, which needs no trials."""
    values = [reach.number(root) for root in reach.nearest_first(roots)]
    if not values:
        known = [one for one in curve if isfinite(one)]
        span = f"lies between {min(known):.4g} and {max(known):.4g}" if known else "is not defined"
        reason = f"{what} {span} from {reach.words(reach.low)} to {reach.words(reach.high)}"
        return _replaced(blank, reason=reason)
    close = 2.0**-_FINE * (reach.high - reach.low) / (_COARSE - 1)
    first = reach.place(values[0])
    return _replaced(
        blank,
        value=values[0],
        low=min(reach.number(first - close), reach.number(first + close)),
        high=max(reach.number(first - close), reach.number(first + close)),
        reached=True,
        others=tuple(values[1:]),
    )


def _replaced(one: Solution, **changes: Any) -> Solution:
    return Solution(**{**one.__dict__, **changes})


@dataclass(frozen=True, eq=False)
class _Search:
    """One search: a scene with a key at any place of its reach."""

    scene: Scene
    reach: Reach
    asked: Question
    what: str
    criterion: str
    jobs: Jobs
    progress: Progress | None

    def at(self, place: float) -> Scene:
        """The scene with the key there."""
        return replace(self.scene, {self.reach.key: self.reach.value(place)})

    def outlooks(self, places: Sequence[float]) -> list[Outlook]:
        """What limit and bound promise at each place."""
        tasks = [(self.at(place), self.asked, self.criterion, self.what) for place in places]
        found: list[Outlook | None] = [None] * len(tasks)
        for number, result in self.jobs.run(_look, tasks):
            found[number] = result
            if self.progress is not None and len(tasks) > 1:
                self.progress(sum(one is not None for one in found), len(tasks))
        return [one for one in found if one is not None]

    def roots(self, goal: float) -> tuple[list[float], list[float]]:
        """Where the reckoned curve crosses the goal, and the curve at the coarse places."""
        places = list(np.linspace(self.reach.low, self.reach.high, _COARSE))
        curve = [one.figure for one in self.outlooks(places)]
        roots = []
        for i in range(_COARSE - 1):
            low, high = curve[i] - goal, curve[i + 1] - goal
            if not (isfinite(low) and isfinite(high)) or (low < 0.0) == (high < 0.0):
                continue
            roots.append(self._halved(places[i], places[i + 1], goal, rising=low < 0.0))
        return roots, curve

    def _halved(self, left: float, right: float, goal: float, *, rising: bool) -> float:
        for _ in range(_FINE if self.what != "resolved" else 5):
            middle = 0.5 * (left + right)
            above = self.outlooks([middle])[0].figure >= goal
            left, right = (left, middle) if above == rising else (middle, right)
        return 0.5 * (left + right)

    def settle(
        self,
        blank: Solution,
        roots: Sequence[float],
        curve: Sequence[float],
        goal: float,
        *,
        count: int,
    ) -> Solution:
        """Let trials decide where the share of resolved frames crosses the goal."""
        places = np.linspace(self.reach.low, self.reach.high, _COARSE)
        known = [one if isfinite(one) else -1.0 for one in curve]
        if not roots:
            best = float(places[int(np.argmax(known))])
            tried = self.tried([best], count, first=0)
            share = tried[0].resolved / tried[0].count
            if share >= goal and min(known) >= goal:
                words = f"{self.reach.words(self.reach.low)} to {self.reach.words(self.reach.high)}"
                return _replaced(
                    blank, trials=count, reached=True, reason=f"reached everywhere from {words}"
                )
            reason = why_not(self.at(best), self.asked, self.criterion, place=self._said(best))
            return _replaced(
                blank,
                trials=count,
                reason=f"{reason} ({share:.0%} of {count} trials "
                f"resolved at {self._said(best)}, the best of the range)",
            )
        start, *others = self.reach.nearest_first(roots)
        step = max(_OFF * self.reach.size(start), self._width(start))
        step = min(_SPREAD * (self.reach.high - self.reach.low), step)
        tried = self.tried([start - step, start, start + step], count, first=0)
        crossing = fit_crossing(tried, goal)
        for number in range(_MOST_ROUNDS):
            tight = crossing.error <= _TIGHT * self.reach.size(crossing.place)
            if crossing.sure and (tight or number >= _ROUNDS):
                break
            # All on one side of the goal: reach farther out, more so each time.
            farther = step * 3.0 ** (number + 1)
            tried += self.tried(self._next(crossing, tried, farther), count, first=3 + 2 * number)
            crossing = fit_crossing(tried, goal)
        if crossing.sure:
            # To either side first, then there: the share is then known better than a user's own
            # trials will tell, and from near by, where the curve is straight.
            half = max(crossing.error, 1e-4 * self.reach.size(crossing.place))
            sides = [crossing.place - half, crossing.place + half]
            tried += self.tried(sides, _LAST * count, first=100)
            crossing = fit_crossing(_near(tried, goal), goal)
            tried += self.tried([crossing.place] * 2, _LAST * count, first=102)
            crossing = fit_crossing(_near(tried, goal), goal)
        made = sum(one.count for one in tried)
        if not crossing.sure:
            return _replaced(
                blank,
                trials=made,
                reason="limit and bound promise a boundary near "
                f"{self._said(start)}, but the trials cross {goal:g} nowhere about it",
            )
        ends = sorted(self.reach.number(one) for one in (crossing.low, crossing.high))
        return _replaced(
            blank,
            value=self.reach.number(crossing.place),
            low=ends[0],
            high=ends[1],
            trials=made,
            reached=True,
            others=tuple(self.reach.number(one) for one in others),
        )

    def _said(self, place: float) -> str:
        return self.reach.words(place)

    def _width(self, start: float) -> float:
        """Step over which the reckoned curve changes by much."""
        step = 1e-3 * (self.reach.high - self.reach.low)
        for _ in range(7):
            around = self.outlooks([start - step, start + step])
            if abs(around[0].figure - around[1].figure) > 0.25:
                return step
            step *= 2.0
        return step

    def _next(self, crossing: Crossing, tried: Sequence[Tried], farther: float) -> list[float]:
        """Two places at which more trials tell most."""
        if not crossing.sure:
            places = sorted(one.place for one in tried)
            return [places[0] - farther, places[-1] + farther]
        half = max(0.4 * crossing.error, 1e-4 * self.reach.size(crossing.place))
        return [crossing.place - half, crossing.place + half]

    def tried(self, places: Sequence[float], count: int, *, first: int) -> list[Tried]:
        """Trials at some places, each with noise of its own."""
        inside = [min(max(place, self.reach.low), self.reach.high) for place in places]
        seed = self.scene.exposure.seed if self.scene.exposure is not None else 0
        tasks = [
            (self.at(place), self.asked, self.criterion, count, _seed(seed, first + number))
            for number, place in enumerate(inside)
        ]
        resolved = dict(self.jobs.run(_try, tasks))
        return [Tried(place, count, resolved[number]) for number, place in enumerate(inside)]


def _near(tried: Sequence[Tried], goal: float) -> list[Tried]:
    """Trials whose share is near the goal; all where these lie on one side of it."""
    near = [one for one in tried if abs(one.resolved / one.count - goal) <= _NEAR]
    shares = [one.resolved / one.count for one in near]
    crossed = bool(shares) and min(shares) < goal < max(shares)
    return near if crossed else list(tried)


def _seed(seed: int, number: int) -> int:
    return int(np.random.SeedSequence([seed, number]).generate_state(1, np.uint64)[0] >> 1)


def _look(task: tuple[Scene, Question, str, str]) -> Outlook:
    scene, asked, criterion, what = task
    try:
        if what == "resolved":
            return outlook(scene, asked, criterion)
        return Outlook(figure=work_out(scene, asked)[what])
    except InputError:
        return Outlook(figure=nan)


def _try(task: tuple[Scene, Question, str, int, int]) -> int:
    """How many of so many trials are resolved."""
    scene, asked, criterion, count, seed = task
    label = scene.pair[asked.pair or 0].label
    told = trials(scene, count=count, seed=seed)
    chosen = [one for one in told if one.label == (label or "")] or told
    if not chosen:
        return 0
    share: float = getattr(chosen[0], criterion).fraction_resolved
    return round(share * count)
