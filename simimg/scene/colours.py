"""Keys that give an object its colour, and those that say where its magnitude is known.

An object has one colour at most: a temperature, a spectrum from a table, or a power law. Without
one its spectrum is flat in f_nu. A magnitude that is known in another band than the scene's is
carried over by the colour.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any, Literal

from simimg.scene.band import STANDARD_NAMES, VEGA_NAMES
from simimg.scene.keys import Choice, FileName, Quantity
from simimg.scene.table import Fault

COLOURS = ("temperature", "spectrum", "spectral_index")
"""The keys of a colour, of which an object may have one."""

PAIR_COLOURS = ("temperatures", "spectra")
"""The same for the two stars of a pair."""

ABROAD = ("magnitude_band", "magnitude_system")
"""The keys that say where a magnitude is known."""

System = Literal["Vega", "AB"]

Temperature = Quantity("temperature", at_least="1 K", at_most="1000000000 K", sample="5800 K")
SpectrumFile = FileName("spectrum.ecsv")
SpectralIndex = Quantity("number", at_least=-20.0, at_most=20.0, sample="-2")
MagnitudeBand = Choice(STANDARD_NAMES)
MagnitudeSystem = Choice(("Vega", "AB"))

BAND_WORDS = (
    "Standard band in which the magnitude is known, where that is not the scene's; the colour "
    "carries it over."
)
SYSTEM_WORDS = (
    "System of the magnitude: else that usual for magnitude_band, or the scene's without one."
)


def colour_faults(given: Mapping[str, Any], names: tuple[str, ...] = COLOURS) -> Iterator[Fault]:
    """Mistakes in which keys of a colour are given."""
    first, *others = [name for name in names if name in given] or [""]
    for other in others:
        yield Fault((other,), f"gives the colour a second time, beside {first}", "keep one of them")


def abroad_faults(
    given: Mapping[str, Any], brightness: Mapping[str, Any], prefix: tuple[str, ...] = ()
) -> Iterator[Fault]:
    """Mistakes in saying where a magnitude is known: there must be one.

    `brightness` holds the keys ``magnitude`` and ``electrons``, of the object or of the columns.
    """
    if "electrons" in brightness and not {"magnitude", "magnitudes"} & set(brightness):
        for name in ABROAD:
            if name in given:
                yield Fault(
                    (*prefix, name),
                    "belongs to a magnitude, but the brightness is in electrons",
                    f"leave out {name}, or give a magnitude",
                )


def vega_fault(band: str | None, system: str | None) -> tuple[str, str] | None:
    """What is wrong with a band in a system and its mend; None where nothing is."""
    if system != "Vega" or band is None or band in VEGA_NAMES:
        return None
    return (
        f"has no Vega zero point in the band {band}",
        'write "AB" (and AB magnitudes)',
    )
