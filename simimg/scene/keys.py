"""What the value of one key may be: readers that turn a value of a scene file into a checked one.

Each key of the scene models carries one reader as its annotation. A reader knows the kind of the
value, its range in the trade's units, and a good example, so that messages and the reference of
keys are made from the same words. Readers refuse in simimg's own words, as `fault` shapes them.
"""

from __future__ import annotations

import difflib
import math
import operator
from abc import ABC, abstractmethod
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from pydantic import GetCoreSchemaHandler
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from simimg.quantities import KINDS, QuantityError, parse_quantity, shown

FAULT = "simimg_fault"
"""Type of every error that the readers and tables of a scene raise."""


def fault(what: str, mend: str) -> PydanticCustomError:
    """A mistake in one value: what is wrong, and what to write instead."""
    return PydanticCustomError(FAULT, "{what}; {mend}", {"what": what, "mend": mend})


def nearest(word: str, known: list[str]) -> str:
    """The known word most like the given one, quoted; the known words where none is like it."""
    near = difflib.get_close_matches(word[:100], known, n=1, cutoff=0.6)
    if not near:
        lower = {name.lower(): name for name in known}
        near = [lower[word.lower()]] if word.lower() in lower else []
    if near:
        return f'did you mean "{near[0]}"?'
    return "write one of " + ", ".join(known)


class Reader(ABC):
    """Turns one value of a scene file into a checked one."""

    @abstractmethod
    def read(self, value: Any) -> Any:
        """The checked value.

        Raises
        ------
        PydanticCustomError
            A `fault`.
        """

    @property
    @abstractmethod
    def example(self) -> str:
        """A good value, as TOML."""

    @property
    @abstractmethod
    def range(self) -> str:
        """What is accepted, in words."""

    def __get_pydantic_core_schema__(
        self, source: Any, handler: GetCoreSchemaHandler
    ) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)


@dataclass(frozen=True)
class Quantity(Reader):
    """A number of a kind of `simimg.quantities`, between bounds written as in a scene."""

    kind: str
    at_least: str | float | None = None
    at_most: str | float | None = None
    above: str | float | None = None
    below: str | float | None = None
    sample: str = ""

    def read(self, value: Any) -> float:
        """Value in SI units, inside the bounds."""
        try:
            number = parse_quantity(value, self.kind)
        except QuantityError as error:
            raise fault(error.what, error.mend) from None
        self.check(number, value)
        return number

    def check(self, number: float, value: Any) -> None:
        """Refuse a number outside the bounds; `value` is what was written."""
        for bound, words, holds in (
            (self.at_least, "at least", operator.ge),
            (self.above, "above", operator.gt),
            (self.at_most, "at most", operator.le),
            (self.below, "below", operator.lt),
        ):
            if bound is not None and not holds(number, parse_quantity(bound, self.kind)):
                raise fault(
                    f"must be {words} {_bound(bound)}, got {shown(value)}",
                    f"write {self.range}, such as {self.example}",
                )

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        form = KINDS[self.kind]
        sample = self.sample or form.example
        return f'"{sample}"' if form.usual else sample

    @property
    def range(self) -> str:
        """The kind and its bounds, in words."""
        noun = KINDS[self.kind].noun
        if self.at_least is not None and self.at_most is not None:
            return f"{noun} from {_bound(self.at_least)} to {_bound(self.at_most)}"
        parts = (
            ("above", self.above),
            ("of at least", self.at_least),
            ("below", self.below),
            ("of at most", self.at_most),
        )
        bounds = [f"{words} {_bound(bound)}" for words, bound in parts if bound is not None]
        return f"{noun} {' and '.join(bounds)}".strip()


def _bound(bound: str | float) -> str:
    return bound if isinstance(bound, str) else f"{bound:g}"


@dataclass(frozen=True)
class Whole(Reader):
    """A whole number between two bounds, both allowed."""

    at_least: int
    at_most: int
    sample: int

    def read(self, value: Any) -> int:
        """The whole number; a float without a fraction counts as one."""
        if isinstance(value, float) and math.isfinite(value) and value == round(value):
            value = int(value)
        if isinstance(value, bool) or not isinstance(value, int):
            raise fault(f"must be a whole number, got {shown(value)}", f"write {self.example}, say")
        if not self.at_least <= value <= self.at_most:
            raise fault(
                f"must be from {self.at_least} to {self.at_most}, got {shown(value)}",
                f"write {self.example}, say",
            )
        return value

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return str(self.sample)

    @property
    def range(self) -> str:
        """The bounds, in words."""
        return f"a whole number from {self.at_least} to {self.at_most}"


@dataclass(frozen=True)
class Text(Reader):
    """One line of printable text of bounded length.

    FITS holds plain ASCII only: what writes a frame takes the accents off.
    """

    longest: int = 68
    sample: str = "Saltmarsh 2 m"

    def read(self, value: Any) -> str:
        """The text, without spaces around it."""
        if not isinstance(value, str):
            raise fault(f"must be text, got {shown(value)}", f"write {self.example}, say")
        text = value.strip()
        if not text:
            raise fault("is empty text", f"write {self.example}, say, or leave the key out")
        if len(text) > self.longest:
            raise fault(
                f"is {len(text)} characters long", f"write at most {self.longest} characters"
            )
        if not text.isprintable():
            bad = next(c for c in text if not c.isprintable())
            raise fault(f"holds {bad!a}, which cannot be printed", "write one line of plain text")
        return text

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return f'"{self.sample}"'

    @property
    def range(self) -> str:
        """The length, in words."""
        return f"text of 1 to {self.longest} printable characters"


@dataclass(frozen=True)
class Choice(Reader):
    """One of a few words."""

    words: tuple[str, ...]

    def read(self, value: Any) -> str:
        """The word as given."""
        if not isinstance(value, str):
            raise fault(f"must be text, got {shown(value)}", f"write {self.range}")
        if value not in self.words:
            raise fault(f"unknown word {shown(value)}", nearest(value, list(self.words)))
        return value

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return f'"{self.words[0]}"'

    @property
    def range(self) -> str:
        """The words."""
        return "one of " + ", ".join(f'"{word}"' for word in self.words)


@dataclass(frozen=True)
class Flag(Reader):
    """True or false."""

    def read(self, value: Any) -> bool:
        """The value itself."""
        if not isinstance(value, bool):
            raise fault(f"must be true or false, got {shown(value)}", "write true or false")
        return value

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return "true"

    @property
    def range(self) -> str:
        """Both words."""
        return "true or false"


@dataclass(frozen=True)
class FileName(Reader):
    """Path of a data file, relative to the scene file."""

    sample: str = "map.fits"

    def read(self, value: Any) -> str:
        """The path as given."""
        if not isinstance(value, str):
            raise fault(f"must be the path of a file, got {shown(value)}", f"write {self.example}")
        if not value.strip() or len(value) > 1000 or not value.isprintable():
            raise fault(f"is not the path of a file: {shown(value)}", f"write {self.example}, say")
        return value

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return f'"{self.sample}"'

    @property
    def range(self) -> str:
        """What the path is relative to."""
        return "path of a file, relative to the scene file"


@dataclass(frozen=True)
class Several(Reader):
    """An array of a fixed number of values of one reader."""

    item: Reader
    count: int

    def read(self, value: Any) -> tuple[Any, ...]:
        """The values, as a tuple."""
        if not isinstance(value, list | tuple) or len(value) != self.count:
            raise fault(
                f"must be an array of {self.count} values, got {shown(value)}",
                f"write {self.example}, say",
            )
        return tuple(self.item.read(one) for one in value)

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return "[" + ", ".join([self.item.example] * self.count) + "]"

    @property
    def range(self) -> str:
        """The number of values, and what each may be."""
        return f"{self.count} values, each {self.item.range}"


@dataclass(frozen=True)
class Instant(Reader):
    """A date and time in UTC."""

    sample: str = "2026-04-12T03:00:00"

    def read(self, value: Any) -> str:
        """ISO 8601 text in UTC without a zone, in whole seconds or with a fraction."""
        good = f"write {self.example} (UTC)"
        if isinstance(value, str) and len(value) <= 40:
            try:
                moment = datetime.fromisoformat(value.strip())
            except ValueError:
                raise fault(f"is not a date and time: {shown(value)}", good) from None
        elif isinstance(value, datetime):
            moment = value
        else:
            raise fault(f"must be a date and time, got {shown(value)}", good)
        if moment.tzinfo is not None and 1 < moment.year < 9999:
            moment = moment.astimezone(UTC).replace(tzinfo=None)
        if not 1900 <= moment.year <= 2100:
            raise fault(f"must be in the years 1900 to 2100, got {moment.isoformat()}", good)
        return moment.isoformat()

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return f'"{self.sample}"'

    @property
    def range(self) -> str:
        """The years."""
        return "date and time in UTC, years 1900 to 2100"
