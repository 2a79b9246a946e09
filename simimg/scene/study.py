"""A study written into a scene: which keys to vary, and how many trials at each point."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from simimg.quantities import shown
from simimg.scene.keys import Reader, Text, Whole, fault
from simimg.scene.steps import Steps, StepsError, steps_from_value
from simimg.scene.table import Table, key

MOST_VARIED = 2
"""Most keys varied at once."""

MOST_TRIALS = 1_000_000


@dataclass(frozen=True)
class VariedKeys(Reader):
    """Keys of the scene, each with its values."""

    def read(self, value: Any) -> dict[str, Steps]:
        """The keys in their order."""
        if not isinstance(value, Mapping) or not 1 <= len(value) <= MOST_VARIED:
            raise fault(
                f"must be a table of one or two keys, got {shown(value)}", f"write {self.example}"
            )
        steps = {}
        for name, given in value.items():
            try:
                steps[name] = steps_from_value(given)
            except StepsError as error:
                raise fault(f"{name}: {error.what}", error.mend) from None
        return steps

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return '{ "air.seeing" = { from = "0.4 arcsec", to = "1.6 arcsec", count = 7 } }'

    @property
    def range(self) -> str:
        """The form of keys and values."""
        return (
            f"one or {MOST_VARIED} dotted keys, each with a list of values or a table with from, "
            'to, count and spacing ("linear" or "log")'
        )


class Study(Table):
    """What `simimg study` varies when the command line does not say."""

    heading: ClassVar[str] = "[study]"

    vary: Annotated[dict[str, Steps], VariedKeys()] = key("The keys to vary, with their values.")
    trials: Annotated[int, Whole(0, MOST_TRIALS, 400)] = key(
        "Noise draws that are exposed and measured at each point.",
        0,
        absent="0",
        meaning="no trials: limits and bounds only",
    )
    pair: Annotated[str | None, Text(sample="SR-014")] = key(
        "Label of the pair that is studied.", None, absent="none", meaning="the first pair"
    )
