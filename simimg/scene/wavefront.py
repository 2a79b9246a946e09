"""How a telescope's wavefront and field differ from ideal ones. Metres of optical path, radians."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from simimg.quantities import shown
from simimg.scene.keys import FileName, Quantity, Reader, Whole, fault
from simimg.scene.table import Table, key

LARGEST_TERM = 100
"""Largest index of Noll's that a scene may give."""

Path = Quantity("length", at_least="-1 m", at_most="1 m", sample="60 nm")
"""Reader of an optical path with its sign."""

PathError = Quantity("length", at_least="0 nm", at_most="1 m", sample="20 nm")
"""Reader of the rms of an optical path."""

Seed = Whole(0, 2**63 - 1, 7)
"""Reader of a seed."""


@dataclass(frozen=True)
class Terms(Reader):
    """A small table from Noll's indices to the rms of each Zernike term."""

    path: Quantity = Path

    def read(self, value: Any) -> dict[int, float]:
        """The terms by rising index, in metres."""
        if not isinstance(value, Mapping):
            raise fault(f"must be a table, got {shown(value)}", f"write {self.example}")
        terms: dict[int, float] = {}
        for name, text in value.items():
            plain = name.isascii() and name.isdigit() and len(name) < 5 and name[0] != "0"
            if not plain or not 2 <= int(name) <= LARGEST_TERM:
                raise fault(
                    f"{shown(name)} is not an index of Noll's from 2 to {LARGEST_TERM}",
                    f"write {self.example}, where 4 is defocus and 7 and 8 are coma",
                )
            terms[int(name)] = self.path.read(text)
        return dict(sorted(terms.items()))

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return '{ 4 = "60 nm", 7 = "30 nm" }'

    @property
    def range(self) -> str:
        """The indices, and what each term may be."""
        return f"for Noll's indices 2 to {LARGEST_TERM}, {self.path.range}"


class Polishing(Table):
    """Random errors of the optical surfaces."""

    heading: ClassVar[str] = "[telescope.wavefront.polishing]"
    written: ClassVar[str] = 'polishing = { rms = "20 nm", slope = 2.5 }'

    rms: Annotated[float, PathError] = key("Root mean square over the pupil, of optical path.")
    slope: Annotated[float, Quantity("number", at_least=0.0, at_most=6.0, sample="2.5")] = key(
        "The power falls as spatial frequency to the minus this.",
        2.5,
        absent="2.5",
        meaning="the errors are as smooth as common polishing leaves them",
    )
    seed: Annotated[int, Seed] = key(
        "Seed from which the errors are drawn.",
        0,
        absent="0",
        meaning="the mirror with the errors of seed 0",
    )


class Wavefront(Table):
    """Errors of the wavefront in the pupil, which add up."""

    heading: ClassVar[str] = "[telescope.wavefront]"

    zernike: Annotated[dict[int, float], Terms()] = key(
        "Zernike terms by Noll's index, the rms of each with its sign, of optical path.", {}
    )
    defocus: Annotated[
        float, Quantity("length", at_least="-10 m", at_most="10 m", sample="0.1 mm")
    ] = key(
        "How far the focus lies behind the detector, negative before it; needs "
        "telescope.focal_length.",
        0.0,
        absent="0 mm",
        meaning="the detector is in focus",
    )
    polishing: Polishing | None = key(
        "Random errors of the optical surfaces.",
        None,
        absent="none",
        meaning="the surfaces are smooth",
    )
    file: Annotated[str | None, FileName("wavefront.fits")] = key(
        "FITS file with a map of the optical path in nm, one aperture wide.", None
    )


class FieldErrors(Table):
    """What grows from the middle of the field outwards."""

    heading: ClassVar[str] = "[telescope.field]"

    radius: Annotated[
        float, Quantity("angle", at_least="0.001 arcsec", at_most="30 deg", sample="10 arcmin")
    ] = key("Distance from the field centre at which the other values hold.")
    coma: Annotated[float, Path] = key(
        "Coma at the radius, rms of optical path with its sign; it grows with the distance.",
        0.0,
        absent="0 nm",
        meaning="no coma off the axis",
    )
    curvature: Annotated[float, Path] = key(
        "Defocus of a curved field at the radius, rms of optical path with its sign; it grows "
        "with the square of the distance.",
        0.0,
        absent="0 nm",
        meaning="the field is flat",
    )
    distortion: Annotated[float, Quantity("number", at_least=-0.3, at_most=0.3, sample="0.001")] = (
        key(
            "Relative displacement outwards at the radius, growing with the square of the "
            "distance: positive a pincushion, negative a barrel.",
            0.0,
            absent="0",
            meaning="no distortion",
        )
    )
