"""FITS files that are wrong, each in its own way.

`MALFORMED` maps a name to a function that writes such a file at a path, and to a word that the
message must have.
"""

import gzip

import numpy as np
from astropy.io import fits
from astropy.table import Table

from tests.fits_checks import examples


def _bytes(content):
    return lambda path: path.write_bytes(content)


def _hdus(*hdus):
    return lambda path: fits.HDUList(list(hdus)).writeto(path)


def _card(text):
    return text.ljust(80).encode()


def _claims(*cards, data=b""):
    """A primary HDU of the cards given, whatever its data."""
    head = b"".join(_card(card) for card in ("SIMPLE  =                    T", *cards, "END"))
    return _bytes(head.ljust(2880) + data.ljust((len(data) + 2879) // 2880 * 2880, b"\0"))


def _cut(length):
    def write(path):
        examples.frame().write(path)
        path.write_bytes(path.read_bytes()[:length])

    return write


def _edited(edit):
    """A frame of simimg with its HDUs changed."""

    def write(path):
        whole = path.with_suffix(".whole")
        examples.frame().write(whole)
        with fits.open(whole) as hdus:
            edit(hdus)
            hdus.writeto(path, output_verify="ignore")
        whole.unlink()

    return write


def _without_column(hdus):
    hdus["TRUTH"].columns.del_col("separation")


def _text_for_numbers(hdus):
    table = Table(hdus["TRUTH"].data)
    table["x"] = ["left", "right", "off"]
    hdus["TRUTH"] = fits.BinTableHDU(table, name="TRUTH")


def _image_for_truth(hdus):
    hdus["TRUTH"] = fits.ImageHDU(np.zeros((3, 3)), name="TRUTH")


def _changed_scene(hdus):
    hdus["SCENE"].data["sha256"][0] = "f" * 64


def _scene_of_other_columns(hdus):
    hdus["SCENE"] = fits.BinTableHDU(Table({"a": [1]}), name="SCENE")


def _other_expected(hdus):
    hdus["EXPECTED"].data = np.zeros((2, 2), dtype=np.float32)


def _psf_without_sampling(hdus):
    del hdus["PSF"].header["OVERSAMP"]


def _psf_of_nan(hdus):
    hdus["PSF"].data[:] = np.nan


def _singular(hdus):
    for i in (1, 2):
        for j in (1, 2):
            hdus[0].header[f"CD{i}_{j}"] = 1e-5


def _flat_projection(hdus):
    hdus[0].header["CTYPE1"] = "RA---XYZ"


def _text_for_place(hdus):
    hdus[0].header["CRVAL1"] = "over there"


def _beyond_the_pole(hdus):
    hdus[0].header["CRVAL2"] = 200.0


_TALL = np.zeros((2, 5, 6), dtype=np.int16)
_PLAIN = np.zeros((5, 6), dtype=np.int16)
_AXES = ("BITPIX  = 16", "NAXIS   = 2")

MALFORMED = {
    "empty file": (_bytes(b""), "empty"),
    "text": (_bytes(b"not a FITS file\n" * 400), "not a FITS file"),
    "an image of another format": (_bytes(b"\x89PNG\r\n\x1a\n" + bytes(5000)), "not a FITS"),
    "one card": (_bytes(_card("SIMPLE  =                    T")), "no END"),
    "header without END": (_bytes(_card("SIMPLE  =                    T").ljust(5760)), "no END"),
    "cut in the header": (_cut(1000), "no END"),
    "cut in the image": (_cut(2880 * 2 + 100), "cut short"),
    "cut in an extension": (_cut(2880 * 4 + 1), "no END"),
    "gzip cut short": (
        _bytes(gzip.compress(np.random.default_rng(1).bytes(9000))[:5000]),
        "gzip",
    ),
    "gzip of text": (_bytes(gzip.compress(b"hello " * 1000)), "not a FITS"),
    "no image": (_hdus(fits.PrimaryHDU()), "no image"),
    "only a table": (_hdus(fits.PrimaryHDU(), fits.BinTableHDU(Table({"a": [1]}))), "no image"),
    "one axis": (_hdus(fits.PrimaryHDU(np.zeros(40))), "2-D"),
    "a cube": (_hdus(fits.PrimaryHDU(_TALL)), "3 axes"),
    "no columns": (_claims(*_AXES, "NAXIS1  = 0", "NAXIS2  = 10"), "no pixels"),
    "NaN alone": (_hdus(fits.PrimaryHDU(np.full((5, 6), np.nan))), "finite"),
    "infinity alone": (_hdus(fits.PrimaryHDU(np.full((5, 6), np.inf))), "finite"),
    "claims more than it holds": (
        _claims(*_AXES, "NAXIS1  = 9000", "NAXIS2  = 9000", data=bytes(2880)),
        "cut short",
    ),
    "claims more than anything holds": (
        _claims(*_AXES, "NAXIS1  = 9000000000", "NAXIS2  = 9000000000"),
        "pixels",
    ),
    "negative axis": (_claims(*_AXES, "NAXIS1  = -5", "NAXIS2  = 10"), "NAXIS1"),
    "axis that is no number": (_claims(*_AXES, "NAXIS1  = 'wide'", "NAXIS2  = 4"), "NAXIS1"),
    "axis missing": (_claims(*_AXES, "NAXIS1  = 5"), "NAXIS2"),
    "no BITPIX": (_claims("NAXIS   = 0"), "BITPIX"),
    "a thousand axes and more": (_claims("BITPIX  = 8", "NAXIS   = 5000"), "NAXIS"),
    "odd BITPIX": (_claims("BITPIX  = 17", "NAXIS   = 0"), "BITPIX"),
    "compressed image of huge claims": (
        _hdus(
            fits.PrimaryHDU(),
            fits.BinTableHDU(
                Table({"COMPRESSED_DATA": [1]}),
                header=fits.Header(
                    {"ZIMAGE": True, "ZNAXIS": 2, "ZNAXIS1": 10**9, "ZNAXIS2": 10**9}
                ),
            ),
        ),
        "pixels",
    ),
    "TRUTH without a column": (_edited(_without_column), "separation"),
    "TRUTH with text for numbers": (_edited(_text_for_numbers), "TRUTH: x"),
    "TRUTH an image": (_edited(_image_for_truth), "TRUTH"),
    "SCENE of other bytes": (_edited(_changed_scene), "sha256"),
    "SCENE of other columns": (_edited(_scene_of_other_columns), "SCENE"),
    "EXPECTED of another size": (_edited(_other_expected), "EXPECTED"),
    "PSF without its sampling": (_edited(_psf_without_sampling), "OVERSAMP"),
    "PSF of NaN": (_edited(_psf_of_nan), "PSF"),
    "coordinates of no extent": (_edited(_singular), "coordinates"),
    "coordinates of no projection": (_edited(_flat_projection), "coordinates"),
    "coordinates in words": (_edited(_text_for_place), "coordinates"),
    "coordinates beyond the pole": (_edited(_beyond_the_pole), "coordinates"),
}
