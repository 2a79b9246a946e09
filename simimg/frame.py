"""Frame: what a detector recorded, with its coordinates, the truth and the scene that made it.

A value without behaviour of its own: `simimg.exposure` makes it, `simimg.resolving` measures it.
It goes to a FITS file and comes back; the same frame gives the same bytes. Frames that simimg did
not make are read too, for measuring: the first two-dimensional image of a file, and what
coordinates it has.
"""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.fits.cards import check_header as check_header
from simimg.fits.choosing import COUNT_TYPES as COUNT_TYPES
from simimg.fits.reader import read_parts
from simimg.fits.writer import write_frame

if TYPE_CHECKING:
    from astropy.table import Table
    from astropy.wcs import WCS


@dataclass(frozen=True, eq=False)
class PsfImage:
    """The effective PSF (optics, air and pixel), sampled finer than the detector.

    Attributes
    ----------
    image : (2 h n + 1, 2 h n + 1) array
        Fraction of a star's light that falls on a detector pixel centred there; the star is at the
        centre of the middle sample.
    oversampling : int
        Samples in the width of a detector pixel, n.
    """

    image: FloatArray
    oversampling: int

    def __post_init__(self) -> None:
        if self.image.ndim != 2 or self.image.size == 0:
            raise ValueError(f"a PSF is a two-dimensional image, got shape {self.image.shape}")
        if self.oversampling < 1:
            raise ValueError(f"oversampling must be 1 or more, got {self.oversampling}")
        object.__setattr__(self, "image", _kept(np.asarray(self.image, dtype=np.float64)))


@dataclass(frozen=True, eq=False, kw_only=True)
class Frame:
    """One exposure.

    Attributes
    ----------
    counts : (rows, columns) array
        ADU: uint16, int32 above 16 bits, or floating point for a master frame or an image from
        elsewhere. Read only.
    header : mapping
        FITS keyword to value or ``(value, comment)``; without the layout and the coordinates.
    wcs : astropy.wcs.WCS or None
        Celestial coordinates, None when there are none.
    truth : astropy.table.Table or None
        Every object of the scene, one row each; x and y in pixels from 0 at the centre of the
        first pixel.
    expected : (rows, columns) array or None
        Photo-electrons of objects and sky without noise, float32.
    psf : PsfImage or None
    mask : (rows, columns) array or None
        Bits of `simimg.camera.masks`.
    scene_files : tuple of (name, sha256, content)
        The scene as run, first, and every file that it read; empty content for a file that was too
        large to keep.
    simulated : bool
        False only for an image read from a file that does not say ``SIMULATE = T``.
    directory : str
        Folder in which files are that the scene keeps only by their hash: that of the frame's own
        file where it was read from one.
    """

    counts: AnyArray
    header: Mapping[str, object] = field(default_factory=dict)
    wcs: WCS | None = None
    truth: Table | None = None
    expected: AnyArray | None = None
    psf: PsfImage | None = None
    mask: AnyArray | None = None
    scene_files: Sequence[tuple[str, str, bytes]] = ()
    simulated: bool = True
    directory: str = "."

    def __post_init__(self) -> None:
        counts = np.asarray(self.counts)
        if counts.ndim != 2 or counts.size == 0:
            raise ValueError(f"counts must be a two-dimensional image, got shape {counts.shape}")
        if counts.dtype.str[1:] not in COUNT_TYPES:
            raise ValueError(f"counts of type {counts.dtype} cannot be written to FITS")
        object.__setattr__(self, "counts", _kept(counts))
        for name, types in (("expected", ("f4",)), ("mask", ("u1", "u2"))):
            image = getattr(self, name)
            if image is None:
                continue
            if image.shape != counts.shape:
                raise ValueError(f"{name} has shape {image.shape}, the frame {counts.shape}")
            fitting = image if image.dtype.str[1:] in types else image.astype(types[0])
            object.__setattr__(self, name, _kept(fitting))
        object.__setattr__(self, "header", MappingProxyType(dict(self.header)))
        object.__setattr__(self, "scene_files", tuple(self.scene_files))

    def value(self, keyword: str, default: object = None) -> object:
        """The value of a header keyword, without its comment.

        Parameters
        ----------
        keyword : str
        default : object
            Returned when the header has no such keyword.

        Returns
        -------
        object
            Text, a number, a flag, or `default`.
        """
        card = self.header.get(keyword, default)
        return card[0] if isinstance(card, tuple) else card

    @property
    def scene_id(self) -> str | None:
        """The sha256 of the scene that made the frame; None when it does not say."""
        value = self.value("SCENEID")
        return value if isinstance(value, str) else None

    def write(
        self, path: str | os.PathLike[str], *, overwrite: bool = False, compress: bool = False
    ) -> None:
        """Write the frame as FITS: whole, or not at all.

        The primary HDU holds the counts; the extensions TRUTH, SCENE, EXPECTED, PSF and MASK
        follow, each when the frame has it. No clock enters the file.

        Parameters
        ----------
        path : path
        overwrite : bool
            Whether a file of that name may be replaced.
        compress : bool, optional
            Whether counts and mask are compressed, without loss: by tiles, with Rice's code. The
            counts are then the extension COUNTS. Counts of floating point stay as they are.

        Raises
        ------
        InputError
            The name cannot be used, or the file exists and `overwrite` is false.
        RunError
            The system refused, for instance because the disk is full; no part is left behind.
        """
        from simimg.camera.masks import MASK_BITS

        write_frame(
            path,
            overwrite=overwrite,
            simulated=self.simulated,
            counts=self.counts,
            header=self.header,
            wcs=self.wcs,
            truth=self.truth,
            scene_files=self.scene_files,
            expected=self.expected,
            psf=None if self.psf is None else (self.psf.image, self.psf.oversampling),
            mask=self.mask,
            mask_says=tuple(f"{value}: {meaning}" for value, meaning in MASK_BITS.items()),
            compress=compress,
        )

    @classmethod
    def read(cls, path: str | os.PathLike[str], *, hdu: int | str | None = None) -> Frame:
        """Read a frame of simimg with all its parts, or a 2-D image of any FITS file.

        Parameters
        ----------
        path : path
            A FITS file, gzipped or not.
        hdu : int or str, optional
            Number (from 0) or name of the HDU that holds the image; the first by default.

        Returns
        -------
        Frame

        Raises
        ------
        InputError
            No such file; not FITS, damaged, without a usable image, or larger than simimg reads.
        """
        from simimg.camera.masks import DEAD

        parts = read_parts(path, hdu=hdu)
        if "mask" in parts and parts["mask"].dtype == bool:
            parts["mask"] = np.where(parts["mask"], DEAD, 0).astype(np.uint8)
        if "psf" in parts:
            parts["psf"] = PsfImage(*parts["psf"])
        return cls(**parts, directory=os.path.dirname(os.path.abspath(os.fspath(path))))


def _kept(array: AnyArray) -> AnyArray:
    """The array itself where nothing else can write to it, else a read-only copy."""
    if array.base is None and not array.flags.writeable:
        return array
    return frozen(array)
