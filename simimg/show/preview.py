"""A quick picture of a frame: grey PNG, asinh stretch, y up, the word "simulated" in a corner.

One pixel of the frame is one of the picture; small frames are enlarged by a whole number.
"""

from __future__ import annotations

import io
import os
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import AnyArray
from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.newfile import check_new_file, new_file
from simimg.show.signal import frame_light, header_text
from simimg.show.stretch import choose_stretch
from simimg.show.subject import shows_field

if TYPE_CHECKING:
    from PIL import Image

WORD = "simulated"
_SMALL = 384  # pixels: a picture whose longer side is shorter is enlarged towards it
_ROOM = (72, 20)  # width and height that the word needs; a narrower picture gets a margin
_WORD_SIZE = 13  # pixels; more in a large picture, which is looked at from afar


def write_preview(frame: Frame, path: str | os.PathLike[str], *, overwrite: bool = False) -> None:
    """Write a picture of a frame.

    Parameters
    ----------
    frame : Frame
        Pixels that are not finite are black.
    path : path
        Ends in .png.
    overwrite : bool, optional
        Whether a file of that name may be replaced.

    Raises
    ------
    InputError
        Another ending, or a file that exists or cannot be written.
    RunError
        The system refused; no part of the file is left behind.
    """
    shown = os.fspath(path)
    lines = check_new_file(path, overwrite=overwrite)
    if Path(shown).suffix.lower() != ".png" and "\0" not in shown:
        lines.append(mistake(shown, "", "a preview is a PNG picture", "end its name in .png"))
    if lines:
        raise InputError(*lines)
    content = preview_png(frame)
    with new_file(path, overwrite=overwrite) as handle:
        handle.write(content)


def preview_png(frame: Frame) -> bytes:
    """The picture as a PNG file in memory."""
    from PIL import Image, PngImagePlugin

    shades = preview_shades(frame)
    image = Image.fromarray(np.ascontiguousarray(shades[::-1]))
    about = PngImagePlugin.PngInfo()
    about.add_itxt("Title", header_text(frame, "OBJECT") or "frame")
    about.add_text("Software", "simimg")
    if frame.simulated:
        about.add_text("Comment", "A simulated frame.")
        image = _with_word(image)
    held = io.BytesIO()
    image.save(held, format="PNG", pnginfo=about)
    return held.getvalue()


def preview_shades(frame: Frame) -> AnyArray:
    """The frame in shades of grey from 0 to 255, enlarged where it is small, row 0 at the bottom.

    Returns
    -------
    ndarray of uint8, shape (rows * n, columns * n)
    """
    light = frame_light(frame)
    # A fraction of the pixels settles the stretch of a large frame, but for its brightest.
    step = max(1, light.values.size // 4_000_000)
    sample = np.append(light.values.ravel()[::step], np.fmax.reduce(light.values, axis=None))
    stretch = choose_stretch(sample, noise=light.noise, field=shows_field(frame))
    shades = np.rint(255.0 * stretch.shades(light.values)).astype(np.uint8)
    factor = max(1, _SMALL // max(shades.shape))
    return np.asarray(shades.repeat(factor, axis=0).repeat(factor, axis=1))


def _with_word(image: Image.Image) -> Image.Image:
    """The image with the word in its lower left corner, white on a dark rim."""
    from PIL import Image as Images
    from PIL import ImageDraw, ImageFont

    width, height = max(image.width, _ROOM[0]), max(image.height, _ROOM[1])
    if (width, height) != image.size:
        wider = Images.new("L", (width, height), 0)
        wider.paste(image, (0, 0))
        image = wider
    size = max(_WORD_SIZE, min(width, height) // 45)
    ImageDraw.Draw(image).text(
        (4, height - 3),
        WORD,
        fill=255,
        font=ImageFont.load_default(size),
        anchor="ld",
        stroke_width=1 + size // 20,
        stroke_fill=0,
    )
    return image
