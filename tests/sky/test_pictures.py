import io
import struct
import zlib
from contextlib import suppress

import numpy as np
import pytest
from numpy.testing import assert_allclose
from PIL import Image

from simimg.errors import InputError
from simimg.sky.pictures import LARGEST_PICTURE, read_picture

RAMP = np.arange(12).reshape(3, 4)
FLIPPED = RAMP[::-1]


def saved(image, kind="PNG"):
    stream = io.BytesIO()
    if not isinstance(image, Image.Image):
        image = Image.fromarray(image)
    image.save(stream, format=kind)
    return stream.getvalue()


def fits_file(*hdus):
    from astropy.io import fits

    stream = io.BytesIO()
    fits.HDUList(list(hdus)).writeto(stream)
    return stream.getvalue()


def fits_image(values):
    from astropy.io import fits

    return fits_file(fits.PrimaryHDU(np.asarray(values)))


def png_header(columns, rows):
    """A PNG that promises so many pixels and holds none."""

    def chunk(kind, content):
        body = kind + content
        return struct.pack(">I", len(content)) + body + struct.pack(">I", zlib.crc32(body))

    head = struct.pack(">IIBBBBB", columns, rows, 8, 0, 0, 0, 0)
    parts = ((b"IHDR", head), (b"IDAT", zlib.compress(b"0")), (b"IEND", b""))
    return b"\x89PNG\r\n\x1a\n" + b"".join(chunk(*part) for part in parts)


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (saved(RAMP.astype(np.uint8)), FLIPPED),
        (saved((RAMP * 5000).astype(np.uint16)), FLIPPED * 5000),
        (saved(RAMP > 5), (FLIPPED > 5) * 255),
        (saved((RAMP * 5000).astype(np.uint16), "TIFF"), FLIPPED * 5000),
        (saved((RAMP * 100000).astype(np.int32), "TIFF"), FLIPPED * 100000),
        (saved((RAMP / 4).astype(np.float32), "TIFF"), FLIPPED / 4),
    ],
    ids=["png-8", "png-16", "png-1", "tiff-16", "tiff-32", "tiff-float"],
)
def test_grey_pictures_are_turned_bottom_up(content, expected):
    picture = read_picture(content, "a")
    assert picture.dtype == np.float64
    assert np.array_equal(picture, expected)


def test_big_endian_tiff():
    image = Image.frombytes("I;16B", (4, 3), (RAMP * 300).astype(">u2").tobytes())
    assert np.array_equal(read_picture(saved(image, "TIFF"), "a"), FLIPPED * 300)


def test_colours_become_their_plain_mean():
    colours = np.stack([RAMP, 2 * RAMP, 6 * RAMP], axis=-1).astype(np.uint8)
    assert_allclose(read_picture(saved(colours), "a"), 3 * FLIPPED, rtol=1e-15)


def test_what_is_transparent_is_dark_in_proportion():
    opacity = np.full_like(RAMP, 51)
    colours = np.stack([RAMP, 2 * RAMP, 6 * RAMP, opacity], axis=-1).astype(np.uint8)
    assert_allclose(read_picture(saved(colours), "a"), 3 * FLIPPED * 0.2, rtol=1e-15)
    grey = Image.merge("LA", [Image.fromarray(one.astype(np.uint8)) for one in (RAMP, opacity)])
    assert_allclose(read_picture(saved(grey), "a"), FLIPPED * 0.2, rtol=1e-15)


def test_palette():
    image = Image.new("P", (2, 1))
    image.putpalette([0, 0, 0, 30, 60, 90])
    image.putpixel((1, 0), 1)
    assert_allclose(read_picture(saved(image), "a"), [[0.0, 60.0]], rtol=1e-15)


def test_fits_is_taken_as_it_stands():
    assert np.array_equal(read_picture(fits_image(RAMP), "a"), RAMP)


def test_first_two_dimensional_image_of_a_fits_file():
    from astropy.io import fits

    content = fits_file(
        fits.PrimaryHDU(),
        fits.ImageHDU(np.ones((2, 2, 2))),
        fits.ImageHDU(RAMP),
        fits.ImageHDU(np.ones((2, 2))),
    )
    assert np.array_equal(read_picture(content, "a"), RAMP)


def test_compressed_fits():
    from astropy.io import fits

    values = np.arange(400, dtype=np.int32).reshape(20, 20)
    content = fits_file(fits.PrimaryHDU(), fits.CompImageHDU(values))
    assert np.array_equal(read_picture(content, "a"), values)


def test_some_negative_values_pass():
    assert read_picture(fits_image([[-1.0, 2.0]]), "a").min() == -1.0


def edited(old, new):
    content = fits_image([[1.0, 1.0]])
    assert old in content
    return content.replace(old, new)


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (b"", "empty"),
        (b"GIF89a", "not a FITS, PNG or TIFF"),
        (saved(RAMP.astype(np.uint8))[:8], "cannot be read"),
        (saved(RAMP.astype(np.uint8))[:-30], "cannot be read"),
        (saved(RAMP.astype(np.uint16), "TIFF")[:20], "cannot be read"),
        (saved(np.zeros((2, 2), np.uint8)), "no pixel is above 0"),
        (fits_image([[-1.0, 0.0]]), "no pixel is above 0"),
        (fits_image([[1.0, np.nan]]), "1 of 2 pixels are NaN"),
        (fits_image([[1.0, np.inf]]), "1 of 2 pixels are NaN or infinite"),
        (fits_image([1.0, 1.0]), "no 2-D image"),
        (fits_image([[1.0, 1.0]])[:2880], "ends before"),
        (fits_image([[1.0, 1.0]])[:100], "cannot be read"),
        (edited(b"NAXIS1  =                    2", b"NAXIS1  =                 2000"), "ends"),
        (edited(b"NAXIS1  =                    2", b"NAXIS1  =           2000000000"), "more than"),
        (edited(b"NAXIS1  =                    2", b"NAXIS1  =                 blub"), "cannot"),
        (png_header(8001, 8000), "8001 x 8000"),
        (png_header(12000, 8000), "more than"),
        (png_header(30000, 30000), "more than"),
    ],
)
def test_refuses_in_one_line(content, says):
    with pytest.raises(InputError) as caught:
        read_picture(content, "sky.img")
    (line,) = caught.value.lines
    assert line.startswith("sky.img: ")
    assert says in line
    # No address in memory, which would change from run to run.
    assert "0x" not in line


@pytest.mark.parametrize("kind", ["png", "tiff", "fits"])
def test_random_damage_gives_a_line_or_a_picture(kind):
    values = RAMP.astype(np.uint8)
    whole = fits_image(values) if kind == "fits" else saved(values, kind.upper())
    rng = np.random.default_rng(4)
    for _ in range(60):
        content = bytearray(whole)
        for _ in range(int(rng.integers(1, 5))):
            content[int(rng.integers(len(content)))] = int(rng.integers(256))
        # Nothing but an InputError may come out.
        with suppress(InputError):
            assert np.isfinite(read_picture(bytes(content), "a")).all()


def test_the_largest_picture_is_let_through_to_the_decoder():
    # Refused for its missing pixels, not for its size.
    with pytest.raises(InputError, match="cannot be read"):
        read_picture(png_header(8000, LARGEST_PICTURE // 8000), "a")
