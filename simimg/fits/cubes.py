"""Cubes of frames on disk: one image of three axes (x, y, frame), written and read frame by frame.

The primary HDU is empty; the counts are the extension CUBE, and TRUTH and SCENE follow as in the
file of a single frame. Neither way holds more than a frame in memory.
"""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from math import prod
from typing import TYPE_CHECKING, Any

import numpy as np

from simimg.arrays import AnyArray
from simimg.errors import InputError, mistake
from simimg.fits.hdus import image_blocks, image_cards, write_hdu
from simimg.fits.reader import open_hdus, plain_header, read_scene_files, read_truth, read_wcs
from simimg.fits.writer import coordinate_cards, hdu_header, write_scene, write_truth
from simimg.newfile import new_file

if TYPE_CHECKING:
    from astropy.table import Table
    from astropy.wcs import WCS

CUBE = "CUBE"
"""Name of the extension that holds the frames."""

_NO_IMAGE: dict[str, object] = {"BITPIX": (8, "no image"), "NAXIS": (0, "no image")}
_SAYS = ("Axes: columns, rows, and the number of the frame in the order of time.",)
_AGAIN = "fetch or make the file again"
_KINDS = {8: ">u1", 16: ">i2", 32: ">i4", -32: ">f4", -64: ">f8"}


def write_cube_file(
    path: str | os.PathLike[str],
    frames: Iterable[AnyArray],
    *,
    shape: tuple[int, int, int],
    dtype: np.dtype[Any],
    header: Mapping[str, object],
    wcs: WCS | None,
    truth: Table | None,
    scene_files: Sequence[tuple[str, str, bytes]],
    simulated: bool,
    overwrite: bool,
) -> None:
    """Write a cube as its frames come.

    Parameters
    ----------
    path : path
    frames : iterable of ndarray, shape (rows, columns)
        As many as `shape` says, of `dtype`.
    shape : (frames, rows, columns)
    dtype : numpy.dtype
        uint16, int32 or floating point.
    header, wcs, truth, scene_files, simulated
        As the attributes of `simimg.cube.Cube`.
    overwrite : bool
        Whether a file of that name may be replaced.

    Raises
    ------
    InputError, RunError
        As `simimg.newfile.new_file`.
    ValueError
        Other frames than said.
    """
    own = {key: value for key, value in header.items() if key not in ("SIMULATE", "CREATOR")}
    layout: dict[str, object] = image_cards(np.broadcast_to(np.zeros((), dtype=dtype), shape))
    layout["NAXIS3"] = (shape[0], "frames")
    scaling: dict[str, object] = {
        key: layout.pop(key) for key in ("BSCALE", "BZERO") if key in layout
    }
    heap: dict[str, object] = {"PCOUNT": (0, "no heap"), "GCOUNT": (1, "one group")}
    layout |= heap
    coordinates = {} if wcs is None else coordinate_cards(wcs)

    with new_file(path, overwrite=overwrite) as handle:
        write_hdu(handle, hdu_header("IMAGE", _NO_IMAGE, simulated, "", own, ()), ())
        cards = {**scaling, **coordinates, **own}
        head = hdu_header("IMAGE", layout, simulated, CUBE, cards, _SAYS)
        write_hdu(handle, head, _blocks(frames, shape, dtype))
        if truth is not None:
            write_truth(handle, truth, simulated=simulated)
        if scene_files:
            write_scene(handle, scene_files, simulated=simulated)


def _blocks(
    frames: Iterable[AnyArray], shape: tuple[int, int, int], dtype: np.dtype[Any]
) -> Iterator[tuple[memoryview, int]]:
    """Bytes of the frames, as many at a time as make whole words."""
    together = next(k for k in (1, 2, 4) if k * prod(shape[1:]) * dtype.itemsize % 4 == 0)
    waiting: list[AnyArray] = []
    count = 0
    for frame in frames:
        if frame.shape != shape[1:] or frame.dtype != dtype:
            raise ValueError(f"a frame of {frame.shape} {frame.dtype} in a cube of {shape} {dtype}")
        waiting.append(frame)
        count += 1
        if len(waiting) == together or count == shape[0]:
            yield from image_blocks(np.stack(waiting))
            waiting = []
    if count != shape[0]:
        raise ValueError(f"{count} frames for a cube of {shape[0]}")


@dataclass(frozen=True)
class Planes:
    """The frames of a cube in a file, read one by one.

    Attributes
    ----------
    path : str
    offset : int
        Of the first byte of the first frame.
    stored : str
        Type of a value in the file.
    zero, scale : float
        What is added to the stored values, and what they are multiplied by before.
    shape : (frames, rows, columns)
    """

    path: str
    offset: int
    stored: str
    zero: float
    scale: float
    shape: tuple[int, int, int]

    def __len__(self) -> int:
        return self.shape[0]

    def __iter__(self) -> Iterator[AnyArray]:
        return (self[index] for index in range(len(self)))

    def __getitem__(self, index: int) -> AnyArray:
        """One frame, uint16 where that is what is stored, else float64 or int32."""
        if not 0 <= index < self.shape[0]:
            raise IndexError(f"frame {index} of {self.shape[0]}")
        size = prod(self.shape[1:])
        width = np.dtype(self.stored).itemsize
        start = self.offset + index * size * width
        with open(self.path, "rb") as handle:
            handle.seek(start)
            values = np.fromfile(handle, dtype=self.stored, count=size)
        if values.size != size:
            raise InputError(mistake(self.path, CUBE, "ends too early", _AGAIN))
        plane = values.reshape(self.shape[1:])
        if self.stored == ">i2" and (self.zero, self.scale) == (32768.0, 1.0):
            return np.asarray(plane.astype(np.int32) + 32768, dtype=np.uint16)
        if (self.zero, self.scale) == (0.0, 1.0):
            return np.asarray(plane.astype(plane.dtype.newbyteorder("=")))
        return np.asarray(plane * self.scale + self.zero, dtype=np.float64)


def holds_cube(path: str | os.PathLike[str]) -> bool:
    """Whether a FITS file has an image of three axes that are all longer than one, and no plane.

    Raises
    ------
    InputError
        No such file, or it is damaged.
    """
    with open_hdus(os.fspath(path)) as hdus:
        return _cube_of(hdus) is not None


def _cube_of(hdus: Any) -> Any:
    for hdu in hdus:
        if not hdu.is_image or hdu.header.get("NAXIS", 0) == 0:
            continue
        shape = tuple(hdu.shape)
        named = hdu.name == CUBE and len(shape) == 3
        return hdu if named or (len(shape) == 3 and min(shape) > 1) else None
    return None


def read_cube_parts(path: str | os.PathLike[str]) -> dict[str, Any]:
    """The parts of a cube, as named in `simimg.cube.Cube`.

    Raises
    ------
    InputError
        No such file; not FITS, damaged, packed, or without a cube.
    """
    where = os.fspath(path)
    with open_hdus(where) as hdus:
        chosen = _cube_of(hdus)
        if chosen is None:
            what = "has no image of three axes"
            raise InputError(mistake(where, "", what, "give a cube of frames"))
        header = chosen.header
        shape = tuple(int(length) for length in chosen.shape)
        with open(where, "rb") as handle:
            packed = handle.read(6) != b"SIMPLE"
        if packed or int(header["BITPIX"]) not in _KINDS:
            what = "is a cube that cannot be read frame by frame"
            raise InputError(mistake(where, "", what, "unpack it, or write it as plain FITS"))
        planes = Planes(
            where,
            int(chosen.fileinfo()["datLoc"]),
            _KINDS[int(header["BITPIX"])],
            float(chosen._orig_bzero or 0.0),
            float(chosen._orig_bscale or 1.0),
            (shape[0], shape[1], shape[2]),
        )
        parts: dict[str, Any] = {
            "planes": planes,
            "header": plain_header(header),
            "wcs": read_wcs(header, (shape[1], shape[2]), where),
            "simulated": header.get("SIMULATE") is True,
            "truth": None,
        }
        if parts["simulated"] and "TRUTH" in [one.name for one in hdus[1:]]:
            parts["truth"] = read_truth(hdus["TRUTH"], where)
    parts["scene_files"] = read_scene_files(where)
    return parts
