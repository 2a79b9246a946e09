"""Pictures from files: FITS, PNG and TIFF as maps of surface brightness.

The values count as linear in surface brightness, as they are stored (no gamma is undone). A colour
picture becomes the plain mean of its red, green and blue; what is transparent is dark in
proportion; of a file with several pages the first counts, of a FITS file the first 2-D image. Row 0
of the result is the bottom row: as stored in FITS, the last row of a PNG or TIFF.
"""

from __future__ import annotations

import io
import warnings
from typing import Any, Final

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.errors import InputError, mistake

LARGEST_PICTURE: Final = 64_000_000
"""Most pixels of a picture; checked in the file's header, before memory is taken."""

_USE = "give a FITS, PNG or TIFF picture"


def read_picture(content: bytes, name: str) -> FloatArray:
    """Read a picture as a map of surface brightness.

    Parameters
    ----------
    content : bytes
        The file.
    name : str
        Its name, for messages. The format is told from the content.

    Returns
    -------
    ndarray, shape (rows, columns)
        Finite values, row 0 at the bottom; some are above 0, some may be below.

    Raises
    ------
    InputError
        No picture in a known format, damaged, of more than `LARGEST_PICTURE` pixels, NaN or
        infinity in it, or no light.
    """
    if content.startswith(b"SIMPLE"):
        picture = _from_fits(content, name)
    elif content.startswith((b"\x89PNG", b"II*\0", b"MM\0*")):
        picture = _from_pillow(content, name)
    elif not content:
        raise InputError(mistake(name, "", "the file is empty", _USE))
    else:
        raise InputError(mistake(name, "", "not a FITS, PNG or TIFF file", _USE))
    not_finite = picture.size - int(np.count_nonzero(np.isfinite(picture)))
    if not_finite:
        what = f"{not_finite} of {picture.size} pixels are NaN or infinite"
        raise InputError(mistake(name, "", what, "set them to 0 where there is no light"))
    if not picture.max() > 0.0:
        raise InputError(
            mistake(name, "", "no pixel is above 0", "give a picture with light in it")
        )
    return picture


def read_map(content: bytes, name: str) -> FloatArray:
    """First 2-D image of a FITS file as it stands: any values, also NaN.

    Parameters
    ----------
    content : bytes
        The file.
    name : str
        Its name, for messages.

    Returns
    -------
    ndarray, shape (rows, columns)
        Row 0 is the file's first.

    Raises
    ------
    InputError
        No FITS image, a damaged one, or more than `LARGEST_PICTURE` pixels.
    """
    return _from_fits(content, name)


def _check_size(columns: int, rows: int, name: str) -> None:
    if columns < 1 or rows < 1:
        raise InputError(mistake(name, "", f"a picture of {columns} x {rows} pixels", _USE))
    if columns * rows > LARGEST_PICTURE:
        what = (
            f"{columns} x {rows} pixels are more than the {LARGEST_PICTURE} that a picture may have"
        )
        raise InputError(mistake(name, "", what, "bin the picture down"))


def _from_fits(content: bytes, name: str) -> FloatArray:
    """First 2-D image of a FITS file, compressed by tiles or not."""
    from astropy.io import fits

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            with fits.open(io.BytesIO(content), memmap=False, lazy_load_hdus=True) as hdus:
                for hdu in hdus:
                    if isinstance(hdu, (fits.PrimaryHDU, fits.ImageHDU, fits.CompImageHDU)):
                        header: Any = hdu.header
                        if header.get("NAXIS", 0) != 2:
                            continue
                        columns, rows = int(header["NAXIS1"]), int(header["NAXIS2"])
                        _check_size(columns, rows, name)
                        end = columns * rows * abs(int(header["BITPIX"])) // 8
                        end += hdu.fileinfo()["datLoc"]
                        if not isinstance(hdu, fits.CompImageHDU) and end > len(content):
                            what = "the file ends before its picture does"
                            raise InputError(mistake(name, "", what, "get the whole file"))
                        return np.array(hdu.data, dtype=np.float64)
    except InputError:
        raise
    # A damaged file can make the reader fail in any way; each of them is the file's fault.
    except Exception as error:
        what = f"the FITS file cannot be read ({_first_line(error)})"
        raise InputError(mistake(name, "", what, "get the whole file")) from error
    raise InputError(mistake(name, "", "no 2-D image in the FITS file", "give one with NAXIS = 2"))


def _from_pillow(content: bytes, name: str) -> FloatArray:
    """First page of a PNG or TIFF file, turned so that row 0 is at the bottom."""
    from PIL import Image

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            warnings.simplefilter("error", Image.DecompressionBombWarning)
            with Image.open(io.BytesIO(content), formats=("PNG", "TIFF")) as image:
                _check_size(*image.size, name)
                values = _luminance(image)
    except InputError:
        raise
    except (Image.DecompressionBombError, Image.DecompressionBombWarning) as error:
        what = f"more than the {LARGEST_PICTURE} pixels that a picture may have"
        raise InputError(mistake(name, "", what, "bin the picture down")) from error
    # As above: whatever the decoder makes of a damaged file, the file is at fault.
    except Exception as error:
        what = f"the picture cannot be read ({_first_line(error)})"
        raise InputError(mistake(name, "", what, "save it anew as PNG, TIFF or FITS")) from error
    return np.ascontiguousarray(values[::-1])


def _luminance(image: Any) -> FloatArray:
    """Plain mean of the colours, times the opacity."""
    if image.mode in ("1", "LA", "La") or image.mode.startswith(("L", "I", "F")):
        mode = {"1": "L", "La": "LA"}.get(image.mode, image.mode)
    else:
        clear = "A" in image.mode or "a" in image.mode or "transparency" in image.info
        mode = "RGBA" if clear else "RGB"
    values: AnyArray = np.asarray(image if mode == image.mode else image.convert(mode))
    if values.ndim == 2:
        return values.astype(np.float64)
    colours = 1 if values.shape[2] == 2 else 3
    mean = values[..., :colours].mean(axis=2, dtype=np.float64)
    if values.shape[2] in (2, 4):
        mean *= values[..., -1] / 255.0
    return np.asarray(mean)


def _first_line(error: Exception) -> str:
    text = " ".join(str(error).split())
    if not text or "object at 0x" in text:
        return "damaged or cut short"
    return text[:120]
