"""Images compressed by tiles, without loss: Rice's code for the integers of counts and masks.

After the FITS standard 4.0 (2018), section 10; the coding itself is astropy's. A tile is a row. The
image becomes a binary table, so that it cannot be the primary HDU. Images of floating point stay as
they are: Rice's code would round them.
"""

from __future__ import annotations

import io

from simimg.arrays import AnyArray

COUNTS = "COUNTS"
"""Name of the extension that holds a compressed frame."""
_OWN = ("XTENSION", "EXTNAME")
_SAYS = {
    "ZNAXIS1": "columns",
    "ZNAXIS2": "rows",
    "BZERO": "unsigned integers are stored so",
    "BSCALE": "value = BSCALE * stored + BZERO",
    "TTYPE1": "the tiles",
    "TFORM1": "bytes of varying number",
    "PCOUNT": "bytes of the tiles",
    "ZPCOUNT": "no heap",
    "ZGCOUNT": "one group",
    "ZVAL1": "pixels of a block",
    "ZVAL2": "bytes of a pixel",
}


def can_be_packed(image: AnyArray) -> bool:
    """Whether an image holds integers that Rice's code keeps."""
    return image.dtype.kind in "iu" and image.dtype.itemsize <= 4


def packed_parts(image: AnyArray) -> tuple[dict[str, object], bytes]:
    """Compress an image: the cards of the table that holds it, and the table's bytes.

    Parameters
    ----------
    image : ndarray of integers of at most 32 bits, two axes

    Returns
    -------
    cards : dict
        Keyword to ``(value, comment)``, in the order that the standard wants.
    data : bytes
        Rows and heap, without padding.
    """
    from astropy.io import fits

    packed = fits.CompImageHDU(image, compression_type="RICE_1")
    file = io.BytesIO()
    fits.HDUList([fits.PrimaryHDU(), packed]).writeto(file)
    content = file.getvalue()
    with fits.open(io.BytesIO(content), disable_image_compression=True, memmap=False) as hdus:
        header = hdus[1].header
        cards: dict[str, object] = {
            card.keyword: (card.value, _SAYS.get(card.keyword, card.comment))
            for card in header.cards
            if card.keyword not in _OWN
        }
        place = hdus[1].fileinfo()["datLoc"]
    length = int(header["NAXIS1"]) * int(header["NAXIS2"]) + int(header["PCOUNT"])
    return cards, content[place : place + length]
