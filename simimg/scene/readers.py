"""Readers of keys that may be written in more than one way: a number or a file, one or several.

A value of text that is no ratio names a file; one value for both axes stands for two of them.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from simimg.quantities import QuantityError, parse_quantity, shown
from simimg.scene.keys import FileName, Quantity, Reader, fault

_RATIO = Quantity("ratio", above=0.0, at_most=1.0, sample="0.88")


def names_a_file(value: object) -> bool:
    """True for text that can only be the path of a file, not a ratio such as ``"88 %"``."""
    if not isinstance(value, str):
        return False
    try:
        parse_quantity(value, "ratio")
    except QuantityError:
        return bool(value.strip())
    return False


@dataclass(frozen=True)
class RatioOrFile(Reader):
    """A ratio above 0, or the path of a table of it over wavelength."""

    ratio: Quantity = _RATIO
    file: FileName = field(default_factory=lambda: FileName("efficiency.ecsv"))

    def read(self, value: Any) -> float | str:
        """The ratio, or the path as given."""
        return str(self.file.read(value)) if names_a_file(value) else self.ratio.read(value)

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return self.ratio.example

    @property
    def range(self) -> str:
        """Both ways of giving it."""
        return f"{self.ratio.range}, or the {self.file.range}"


@dataclass(frozen=True)
class EachAxis(Reader):
    """One value for both axes, or an array of two."""

    item: Reader

    def read(self, value: Any) -> tuple[Any, Any]:
        """A value for x and one for y."""
        if not isinstance(value, list | tuple):
            both = self.item.read(value)
            return both, both
        if len(value) != 2:
            raise fault(
                f"must be one value or an array of 2, got {shown(value)}",
                f"write {self.example}, or [{self.example}, {self.example}]",
            )
        return self.item.read(value[0]), self.item.read(value[1])

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return self.item.example

    @property
    def range(self) -> str:
        """What each axis may have."""
        return f"{self.item.range}, one for both axes or an array of 2"


@dataclass(frozen=True)
class UpTo(Reader):
    """An array of one or more values of one reader, up to a number."""

    item: Reader
    most: int

    def read(self, value: Any) -> tuple[Any, ...]:
        """The values, as a tuple."""
        if not isinstance(value, list | tuple) or not value:
            raise fault(f"must be an array of values, got {shown(value)}", f"write {self.example}")
        if len(value) > self.most:
            raise fault(f"holds {len(value)} values", f"write at most {self.most}")
        return tuple(self.item.read(one) for one in value)

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return f"[{self.item.example}]"

    @property
    def range(self) -> str:
        """The number of values, and what each may be."""
        return f"1 to {self.most} values, each {self.item.range}"
