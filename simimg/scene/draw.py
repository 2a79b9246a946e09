"""Keys of a scene that are drawn anew for every frame of a batch, and from which distribution.

``[draw]`` gives dotted keys a distribution, as ``"pair[0].separation" = { uniform = ["0.1 arcsec",
"0.9 arcsec"] }``. Numbers are drawn in the unit that the distribution is written in; what the key
may hold is checked when the drawn scene is made.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from simimg.quantities import shown
from simimg.scene.keys import Reader, fault
from simimg.scene.paths import MisplacedKeyError, parse_path
from simimg.scene.steps import split_value, written

FORMS: Final = {
    "uniform": '{ uniform = ["0.1 arcsec", "0.9 arcsec"] }',
    "normal": '{ normal = ["0.9 arcsec", "0.1 arcsec"] }',
    "loguniform": '{ loguniform = ["1 s", "100 s"] }',
    "choice": '{ choice = ["V", "R", "I"] }',
    "powerlaw": '{ powerlaw = ["0.1 arcsec", "10 arcsec", -1.5] }',
    "isotropic": "{ isotropic = true }",
    "table": '{ table = "pairs.ecsv", column = "m" }',
}
"""How each distribution is written."""

_MOST = 100


@dataclass(frozen=True)
class Draw:
    """The distribution of one key.

    Attributes
    ----------
    kind : str
        One of `FORMS`.
    numbers : tuple of float
        Its parameters, without their unit.
    unit : str
        Of what is drawn; empty for none.
    values : tuple
        Of a choice.
    table, column : str
        Of a table.
    """

    kind: str
    numbers: tuple[float, ...] = ()
    unit: str = ""
    values: tuple[Any, ...] = ()
    table: str = ""
    column: str = ""

    def value(self, rng: np.random.Generator, key: str) -> Any:
        """Draw a value, as a scene would have it; not of a table.

        Parameters
        ----------
        rng : numpy.random.Generator
        key : str
            Whose value it is: an isotropic inclination is not even in angle.
        """
        if self.kind == "choice":
            return self.values[int(rng.integers(len(self.values)))]
        if self.kind == "isotropic":
            return written(_isotropic(rng, key), "deg")
        return written(self._number(rng), self.unit)

    def _number(self, rng: np.random.Generator) -> float:
        first, second = self.numbers[:2]
        if self.kind == "normal":
            return float(rng.normal(first, second))
        part = float(rng.random())
        if self.kind == "uniform":
            return first + (second - first) * part
        if self.kind == "loguniform":
            return float(np.exp(math.log(first) + math.log(second / first) * part))
        power = self.numbers[2] + 1.0
        if abs(power) < 1e-9:
            return float(np.exp(math.log(first) + math.log(second / first) * part))
        low, high = first**power, second**power
        return float((low + (high - low) * part) ** (1.0 / power))


def _isotropic(rng: np.random.Generator, key: str) -> float:
    """Degrees: of an inclination, a declination, or an angle about a point."""
    part, name = float(rng.random()), str(parse_path(key)[-1])
    if name == "inclination":
        return math.degrees(math.acos(part))
    if name == "dec":
        return math.degrees(math.asin(2.0 * part - 1.0))
    return 360.0 * part


@dataclass(frozen=True)
class DrawnKeys(Reader):
    """Dotted keys of the scene, each with its distribution."""

    def read(self, value: Any) -> dict[str, Draw]:
        """The keys in their order."""
        if not isinstance(value, Mapping) or len(value) > _MOST:
            raise fault(f"must be a table of keys, got {shown(value)}", f"write {self.example}")
        return {name: _draw(name, given) for name, given in value.items()}

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return f'{{ "pair[0].separation" = {FORMS["uniform"]} }}'

    @property
    def range(self) -> str:
        """The distributions."""
        return "dotted keys, each with one of " + ", ".join(FORMS.values())


def _draw(name: str, given: Any) -> Draw:
    try:
        path = parse_path(name)
    except MisplacedKeyError as error:
        raise fault(f"{name}: {error.what}", error.mend) from None
    if path[0] in ("draw", "study", "base", "header") or name == "exposure.seed":
        raise fault(f"{name}: cannot be drawn", "draw another key")
    if not isinstance(given, Mapping):
        raise fault(f"{name}: must be a table, got {shown(given)}", f"write {FORMS['uniform']}")
    kinds = [kind for kind in FORMS if kind in given]
    extra = set(given) - set(kinds) - ({"column"} if "table" in given else set())
    if len(kinds) != 1 or extra:
        wrong = f"{shown(min(extra))} is not known" if extra else "needs one distribution"
        raise fault(f"{name}: {wrong}", f"write one of {', '.join(FORMS)}")
    kind = kinds[0]
    value = given[kind]
    if kind == "table":
        column = given.get("column")
        if not isinstance(value, str) or not isinstance(column, str) or not value or not column:
            raise fault(f"{name}: needs the names of a table and a column", f"write {FORMS[kind]}")
        return Draw(kind, table=value, column=column)
    if kind == "isotropic":
        if value is not True:
            raise fault(f"{name}: isotropic is true, got {shown(value)}", f"write {FORMS[kind]}")
        return Draw(kind, unit="deg")
    count = {"uniform": 2, "normal": 2, "loguniform": 2, "powerlaw": 3}.get(kind, 0)
    if not isinstance(value, list | tuple) or not value or (count and len(value) != count):
        raise fault(f"{name}: {kind} is {shown(value)}", f"write {FORMS[kind]}")
    if kind == "choice":
        return Draw(kind, values=tuple(value))
    return _numeric(name, kind, list(value))


def _numeric(name: str, kind: str, value: list[Any]) -> Draw:
    """A distribution of numbers: one unit, and ends in their order."""
    split = [split_value(one) for one in value]
    if None in split:
        raise fault(f"{name}: {kind} is of numbers with units", f"write {FORMS[kind]}")
    found = [one for one in split if one is not None]
    numbers = tuple(one[0] for one in found)
    units = {one[1] for one in found[:2]}
    if len(units) > 1 or (kind == "powerlaw" and found[2][1]):
        raise fault(f"{name}: two units", f"write both in the same unit, as {FORMS[kind]}")
    first, second = numbers[:2]
    if kind == "normal" and second < 0.0:
        raise fault(f"{name}: a scatter below 0", f"write {FORMS[kind]}")
    if kind != "normal" and not first < second:
        raise fault(f"{name}: the first end must be below the second", f"write {FORMS[kind]}")
    if kind in ("loguniform", "powerlaw") and first <= 0.0:
        raise fault(f"{name}: the ends must be above 0", f"write {FORMS[kind]}")
    return Draw(kind, numbers=numbers, unit=units.pop())
