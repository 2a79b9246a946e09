"""A measured PSF, in place of what optics and air would give."""

from __future__ import annotations

from typing import Annotated, ClassVar

from simimg.scene.keys import FileName, Quantity
from simimg.scene.table import Table, key


class Psf(Table):
    """The image of a star from a file; aperture and band still say how much light there is."""

    heading: ClassVar[str] = "[psf]"

    file: Annotated[str, FileName("psf.fits")] = key(
        "FITS image of a star without its sky, in place of optics and air, which then only takes "
        "its extinction."
    )
    oversampling: Annotated[
        float | None, Quantity("number", at_least=1.0, at_most=100.0, sample="4")
    ] = key(
        "Samples of the image in the width of a detector's pixel; else the file's OVERSAMP.",
        None,
        absent="OVERSAMP of the file, or 1",
        meaning="how fine the image of the PSF is sampled",
    )
