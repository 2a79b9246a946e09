"""Cube: the frames of one run of short exposures, with what they share.

Coordinates, truth and scene are those of every frame. The frames come one by one, from the camera
as they are made or from a file as they are asked for, so that a cube of any length fits; `counts`
has them all at once where they are few.
"""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np

from simimg.arrays import AnyArray
from simimg.fits.cubes import holds_cube as holds_cube
from simimg.fits.cubes import read_cube_parts, write_cube_file

if TYPE_CHECKING:
    from astropy.table import Table
    from astropy.wcs import WCS


class Planes(Protocol):
    """The frames, each of shape (rows, columns), ADU."""

    @property
    def shape(self) -> tuple[int, int, int]:
        """Frames, rows, columns."""
        ...

    def __len__(self) -> int: ...

    def __getitem__(self, index: int) -> AnyArray: ...

    def __iter__(self) -> Iterator[AnyArray]: ...


@dataclass(frozen=True, eq=False, kw_only=True)
class Cube:
    """The frames of one run.

    Attributes
    ----------
    planes : sequence of ndarray
        The frames one by one: ``planes[3]`` is the fourth; iterating goes through all.
    dtype : numpy.dtype
        Of their counts.
    header : mapping
        FITS keyword to value or ``(value, comment)``; EXPTIME is that of one frame.
    wcs : astropy.wcs.WCS or None
    truth : astropy.table.Table or None
        As of `simimg.Frame`; electrons are those of one frame.
    scene_files : tuple of (name, sha256, content)
        As of `simimg.Frame`.
    simulated : bool
    directory : str
        As of `simimg.Frame`.
    """

    planes: Planes
    dtype: np.dtype[Any] = field(default_factory=lambda: np.dtype(np.uint16))
    header: Mapping[str, object] = field(default_factory=dict)
    wcs: WCS | None = None
    truth: Table | None = None
    scene_files: Sequence[tuple[str, str, bytes]] = ()
    simulated: bool = True
    directory: str = "."

    def __len__(self) -> int:
        return len(self.planes)

    @property
    def shape(self) -> tuple[int, int, int]:
        """Frames, rows, columns."""
        return self.planes.shape

    @property
    def counts(self) -> AnyArray:
        """All frames at once, ADU, shape (frames, rows, columns)."""
        return np.stack([self.planes[index] for index in range(len(self))])

    def __iter__(self) -> Iterator[AnyArray]:
        return iter(self.planes)

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

    def write(self, path: str | os.PathLike[str], *, overwrite: bool = False) -> None:
        """Write the cube as FITS, frame by frame: whole, or not at all.

        Parameters
        ----------
        path : path
        overwrite : bool
            Whether a file of that name may be replaced.

        Raises
        ------
        InputError
            The name cannot be used, or the file exists and `overwrite` is false.
        RunError
            The system refused, for instance because the disk is full; no part is left behind.
        """
        write_cube_file(
            path,
            iter(self.planes),
            shape=self.shape,
            dtype=self.dtype,
            header=self.header,
            wcs=self.wcs,
            truth=self.truth,
            scene_files=self.scene_files,
            simulated=self.simulated,
            overwrite=overwrite,
        )

    @classmethod
    def read(cls, path: str | os.PathLike[str]) -> Cube:
        """Open a cube; its frames are read from the file as they are asked for.

        Parameters
        ----------
        path : path
            A FITS file.

        Returns
        -------
        Cube

        Raises
        ------
        InputError
            No such file; not FITS, damaged, or without a cube.
        """
        parts = read_cube_parts(path)
        directory = os.path.dirname(os.path.abspath(os.fspath(path)))
        return cls(dtype=parts["planes"][0].dtype, directory=directory, **parts)
