"""Which keys may give a place or a brightness, alone or together."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from simimg.scene.table import Fault

ROUTES = (("east", "north"), ("ra", "dec"), ("x", "y"))
"""The three ways to give a place."""


def routes_of(given: Mapping[str, Any]) -> list[tuple[str, str]]:
    """The ways to a place of which at least one key is given."""
    return [route for route in ROUTES if route[0] in given or route[1] in given]


def place_faults(given: Mapping[str, Any], prefix: tuple[str, ...] = ()) -> Iterator[Fault]:
    """Mistakes in which keys of a place are given."""
    routes = routes_of(given)
    if len(routes) > 1:
        first, second = (next(k for k in route if k in given) for route in routes[:2])
        yield Fault(
            (*prefix, second),
            f"gives the place a second time, beside {first}",
            "keep one of east and north, ra and dec, or x and y",
        )
        return
    for one, other in routes:
        if one == "east" and not prefix:
            continue
        for missing, present in ((one, other), (other, one)):
            if missing not in given:
                yield Fault(
                    (*prefix, missing),
                    f"is required beside {present} and missing",
                    f"add {missing}",
                )


def brightness_faults(
    given: Mapping[str, Any], magnitude: str, samples: tuple[str, str], prefix: tuple[str, ...] = ()
) -> Iterator[Fault]:
    """Mistakes in which keys of a brightness are given."""
    if magnitude in given and "electrons" in given:
        yield Fault(
            (*prefix, "electrons"),
            f"gives the brightness a second time, beside {magnitude}",
            f"leave out {magnitude} or electrons",
        )
    elif magnitude not in given and "electrons" not in given:
        yield Fault(
            (*prefix, magnitude),
            "is required and missing",
            f"add {magnitude} = {samples[0]}, or electrons = {samples[1]}",
        )
