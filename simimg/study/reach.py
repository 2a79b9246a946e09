"""Where the value of a key is sought: between two ends, by factors or evenly.

A place is a number along the search: the logarithm of a positive quantity, or the bare number
itself (a magnitude, a ratio). Values are in the key's own unit, as the scene writes it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import exp, log

from simimg.errors import InputError, mistake
from simimg.quantities import shown
from simimg.scene.file import replace
from simimg.scene.model import Scene
from simimg.scene.paths import MisplacedKeyError, parse_path
from simimg.scene.steps import split_value, written

_FACTOR, _STEP = 100.0, 5.0
_SHRINK = 0.8  # of the way to an end of the search that the key's own range does not allow
_TIMES = 24


@dataclass(frozen=True)
class Reach:
    """The search for one key.

    Attributes
    ----------
    key, unit : str
    low, high : float
        Ends, as places.
    start : float
        What the scene says, as a place.
    by_factors : bool
        Whether places are logarithms.
    """

    key: str
    unit: str
    low: float
    high: float
    start: float
    by_factors: bool

    @classmethod
    def of(cls, scene: Scene, key: str, between: tuple[str, str] | None) -> Reach:
        """Where to seek a key.

        Parameters
        ----------
        scene : Scene
        key : str
        between : tuple of str or None
            The ends, with their unit.

        Raises
        ------
        InputError
            A key that holds no number, or ends that are none.
        """
        given = _given(scene, key)
        found = split_value(given)
        ends = None if between is None else [split_value(one) for one in between]
        if ends is not None and (None in ends or ends[0] == ends[1]):
            wrong = "the ends must be two different numbers with a unit"
            raise InputError(mistake("--between", key, wrong, 'write "1 s:1000 s"'))
        if found is None and ends is None:
            what = "is not in the scene" if given is None else f"is no number: {shown(given)}"
            mend = "give --between START:STOP, or write the key into the scene"
            raise InputError(mistake(scene.where, key, what, mend))
        unit = found[1] if found is not None else ""
        if ends is not None:
            units = {one[1] for one in ends if one is not None and one[1]}
            if len(units) > 1:
                raise InputError(
                    mistake("--between", key, "two units", "write both in the same unit")
                )
            own = units.pop() if units else unit
            if found is not None and own != unit:
                found = None
            unit = own
        numbers = [one[0] for one in ends if one is not None] if ends is not None else []
        by_factors = bool(unit) and min([*numbers, *([found[0]] if found else [])]) > 0.0
        return cls._checked(scene, key, unit, found, sorted(numbers), by_factors=by_factors)

    @classmethod
    def _checked(
        cls,
        scene: Scene,
        key: str,
        unit: str,
        found: tuple[float, str] | None,
        numbers: Sequence[float],
        *,
        by_factors: bool,
    ) -> Reach:
        """With ends that the scene can take."""
        place = log if by_factors else float
        if numbers:
            low, high = place(numbers[0]), place(numbers[1])
            start = place(found[0]) if found is not None else 0.5 * (low + high)
            made = cls(key, unit, low, high, min(max(start, low), high), by_factors)
            for end in (low, high):
                replace(scene, {key: made.value(end)})
            return made
        assert found is not None
        start = place(found[0])
        half = log(_FACTOR) if by_factors else _STEP
        made = cls(key, unit, start - half, start + half, start, by_factors)
        low = _allowed(scene, made, start, made.low)
        high = _allowed(scene, made, start, made.high)
        if low >= high:
            replace(scene, {key: made.value(made.low)})
        return cls(key, unit, low, high, start, by_factors)

    def number(self, place: float) -> float:
        """The value at a place, without its unit."""
        return exp(place) if self.by_factors else place

    def place(self, number: float) -> float:
        """The place of a value."""
        return log(number) if self.by_factors else number

    def value(self, place: float) -> str | float | int:
        """The value at a place, as a scene would have it."""
        return written(self.number(place), self.unit)

    def words(self, place: float) -> str:
        """The value at a place, for a sentence."""
        number = f"{self.number(place):.4g}"
        return f"{number} {self.unit}" if self.unit else number

    def size(self, place: float) -> float:
        """How far one would have to go for a change of the whole value."""
        return 1.0 if self.by_factors else max(abs(place), 1.0)

    def nearest_first(self, places: Sequence[float]) -> list[float]:
        """Places in the order of their distance from what the scene says."""
        return sorted(places, key=lambda place: abs(place - self.start))


def _given(scene: Scene, key: str) -> object:
    """What the scene says of a key; None where it says nothing."""
    try:
        path = parse_path(key)
    except MisplacedKeyError as error:
        raise InputError(mistake("--for", key[:60], error.what, error.mend)) from None
    here: object = scene.document
    for step in path:
        try:
            here = here[step]  # type: ignore[index]
        except (KeyError, IndexError, TypeError):
            return None
    return here


def _allowed(scene: Scene, reach: Reach, start: float, end: float) -> float:
    """The farthest place towards an end that the scene can take."""
    for _ in range(_TIMES):
        try:
            replace(scene, {reach.key: reach.value(end)})
        except InputError:
            end = start + _SHRINK * (end - start)
        else:
            return end
    return start
