"""The parts of a frame as FITS HDUs: which extension holds what, and what its header says."""

from __future__ import annotations

import os
import warnings
from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING, BinaryIO
from urllib.parse import quote

import numpy as np

from simimg.arrays import AnyArray
from simimg.fits.cards import add_card, add_cards, add_commentary, is_coordinate
from simimg.fits.hdus import (
    Column,
    image_blocks,
    image_cards,
    table_parts,
    word_sum,
    write_hdu,
)
from simimg.fits.packing import COUNTS, can_be_packed, packed_parts
from simimg.newfile import new_file
from simimg.version import __version__

if TYPE_CHECKING:
    from astropy.io.fits import Header
    from astropy.table import Table
    from astropy.wcs import WCS

_TRUTH_SAYS = (
    "Every object of the scene, one row each, also those outside the frame.",
    "x and y are pixels counted from 0 at the centre of the first pixel; FITS counts from 1.",
    "Position angles are measured from north through east, 0 to 360 deg: of a pair, that of the "
    "second star about the first; of a disc, of its lit limb; of any other shape, of its major "
    "axis.",
    "electrons: what the detector would collect in this exposure over the whole PSF, before flat "
    "response and full well. partner: the row of the other star of a pair, from 0; -1 for none.",
)
_SCENE_SAYS = (
    "The scene as run (first row) and every file that it read; simimg expose FILE makes the same "
    "frame again. A file with a sha256 but no content was too large to keep.",
    "name: characters outside printable ASCII, and the per cent sign, stand as %XX of their UTF-8.",
)
_EXPECTED_SAYS = (
    "Photo-electrons of objects and sky without noise, before flat response and full well; no "
    "dark signal, no bias.",
)
_PSF_SAYS = (
    "Effective PSF (optics, air and pixel): the fraction of a star's light that falls on a "
    "detector pixel centred at the sample. The star is at the centre of the middle sample.",
)
_NO_IMAGE: dict[str, object] = {"BITPIX": (8, "no image"), "NAXIS": (0, "no image")}
_NAME_LETTERS = "".join(chr(code) for code in range(32, 127) if chr(code) != "%")


def write_frame(
    path: str | os.PathLike[str],
    *,
    overwrite: bool,
    simulated: bool,
    counts: AnyArray,
    header: Mapping[str, object],
    wcs: WCS | None,
    truth: Table | None,
    scene_files: Sequence[tuple[str, str, bytes]],
    expected: AnyArray | None,
    psf: tuple[AnyArray, int] | None,
    mask: AnyArray | None,
    mask_says: Sequence[str] = (),
    compress: bool = False,
) -> None:
    """Write the parts of a frame; see `simimg.frame.Frame` for what they are.

    Parameters
    ----------
    path : path
    overwrite : bool
        Whether a file of that name may be replaced.
    simulated : bool
        Whether every header says ``SIMULATE = T``.
    counts, header, wcs, truth, scene_files, expected, mask
        As the attributes of `simimg.frame.Frame`.
    psf : (image, oversampling) or None
    mask_says : sequence of str
        What the bits of the mask mean, a line each.
    compress : bool
        Whether counts and mask are compressed; the primary HDU is empty then, and the counts are
        the extension COUNTS.

    Raises
    ------
    InputError, RunError
        As `simimg.newfile.new_file`.
    """
    coordinates = {} if wcs is None else coordinate_cards(wcs)
    own = {key: value for key, value in header.items() if key not in ("SIMULATE", "CREATOR")}
    with new_file(path, overwrite=overwrite) as handle:
        compress = compress and can_be_packed(counts)
        name = ""
        if compress:
            name = COUNTS
            write_hdu(handle, hdu_header("IMAGE", _NO_IMAGE, simulated, "", {}, ()), ())
        _write_image(handle, counts, simulated, name, {**coordinates, **own}, (), pack=compress)
        if truth is not None:
            write_truth(handle, truth, simulated=simulated)
        if scene_files:
            write_scene(handle, scene_files, simulated=simulated)
        if expected is not None:
            cards = {"BUNIT": "electron", **coordinates}
            _write_image(handle, expected, simulated, "EXPECTED", cards, _EXPECTED_SAYS)
        if psf is not None:
            image, oversampling = psf
            finer = {"OVERSAMP": (oversampling, "samples in the width of a detector pixel")}
            _write_image(handle, image, simulated, "PSF", finer, _PSF_SAYS)
        if mask is not None:
            _write_image(handle, mask, simulated, "MASK", coordinates, mask_says, pack=compress)


def write_mosaic_file(
    path: str | os.PathLike[str],
    *,
    overwrite: bool,
    header: Mapping[str, object],
    detectors: Sequence[tuple[str, Mapping[str, object], WCS | None, Mapping[str, AnyArray]]],
    truth: Table | None,
    scene_files: Sequence[tuple[str, str, bytes]],
    mask_says: Sequence[str] = (),
    truth_says: Sequence[str] = (),
    compress: bool = False,
) -> None:
    """Write the frames of a mosaic's detectors as one file, an image extension each.

    Parameters
    ----------
    path : path
    overwrite : bool
        Whether a file of that name may be replaced.
    header : mapping
        Of the primary HDU, which holds no image.
    detectors : sequence of (name, header, wcs, images)
        Images by name: ``counts``, then of what there is MASK and EXPECTED, which follow it with
        the detector's number, from 1, as EXTVER.
    truth, scene_files
        As the attributes of `simimg.frame.Frame`; a truth of None is left out.
    mask_says, truth_says : sequence of str
        What the bits of the masks mean, and further words on the truth.
    compress : bool
        Whether counts and masks are compressed.

    Raises
    ------
    InputError, RunError
        As `simimg.newfile.new_file`.
    """
    with new_file(path, overwrite=overwrite) as handle:
        write_hdu(handle, hdu_header("IMAGE", _NO_IMAGE, True, "", header, ()), ())
        for number, (name, own, wcs, images) in enumerate(detectors, start=1):
            coordinates = {} if wcs is None else coordinate_cards(wcs)
            cards = {"INHERIT": (True, "keywords of the primary header hold, too"), **own}
            counts, pack = images["counts"], compress and can_be_packed(images["counts"])
            _write_image(handle, counts, True, name, {**coordinates, **cards}, (), pack=pack)
            version = {"EXTVER": (number, f"of the detector {name}")}
            if "MASK" in images:
                cards = {**version, **coordinates}
                mask = images["MASK"]
                _write_image(handle, mask, True, "MASK", cards, mask_says, pack=compress)
            if "EXPECTED" in images:
                cards = {**version, "BUNIT": "electron", **coordinates}
                _write_image(handle, images["EXPECTED"], True, "EXPECTED", cards, _EXPECTED_SAYS)
        if truth is not None:
            write_truth(handle, truth, simulated=True, says=truth_says)
        if scene_files:
            write_scene(handle, scene_files, simulated=True)


def write_truth(
    handle: BinaryIO, truth: Table, *, simulated: bool, says: Iterable[str] = ()
) -> None:
    """Write the TRUTH of a frame as an extension.

    Parameters
    ----------
    handle : binary file
        Open for writing at the place of the HDU.
    truth : astropy.table.Table
    simulated : bool
        Whether its header says ``SIMULATE = T``.
    says : iterable of str
        Further comments.
    """
    columns = _truth_columns(truth)
    _write_table(handle, columns, len(truth), simulated, "TRUTH", (*_TRUTH_SAYS, *says))


def write_scene(
    handle: BinaryIO, files: Sequence[tuple[str, str, bytes]], *, simulated: bool
) -> None:
    """Write the SCENE of a frame as an extension; arguments as for `write_truth`."""
    _write_table(handle, _scene_columns(files), len(files), simulated, "SCENE", _SCENE_SAYS)


def write_table_file(
    path: str | os.PathLike[str],
    columns: Sequence[Column],
    *,
    name: str,
    simulated: bool,
    overwrite: bool = False,
    says: Iterable[str] = (),
) -> None:
    """Write one binary table as a FITS file of its own.

    Parameters
    ----------
    path : path
    columns : sequence of Column
        Of one length.
    name : str
        Of the extension.
    simulated : bool
        Whether the headers say ``SIMULATE = T``.
    overwrite : bool
        Whether a file of that name may be replaced.
    says : sequence of str
        Comments.

    Raises
    ------
    InputError, RunError
        As `simimg.newfile.new_file`.
    """
    rows = len(columns[0].values) if columns else 0
    with new_file(path, overwrite=overwrite) as handle:
        write_hdu(handle, hdu_header("IMAGE", _NO_IMAGE, simulated, "", {}, ()), ())
        _write_table(handle, columns, rows, simulated, name, says)


def _write_image(
    handle: BinaryIO,
    image: AnyArray,
    simulated: bool,
    name: str,
    cards: Mapping[str, object],
    says: Iterable[str],
    *,
    pack: bool = False,
) -> None:
    if pack:
        layout, data = packed_parts(image)
        header = hdu_header("BINTABLE", layout, simulated, name, cards, says)
        write_hdu(handle, header, [(memoryview(data), word_sum(data))])
        return
    layout = image_cards(image)
    scaling: dict[str, object] = {
        key: layout.pop(key) for key in ("BSCALE", "BZERO") if key in layout
    }
    if name:
        layout |= {"PCOUNT": (0, "no heap"), "GCOUNT": (1, "one group")}
    header = hdu_header("IMAGE", layout, simulated, name, {**scaling, **cards}, says)
    write_hdu(handle, header, image_blocks(image))


def _write_table(
    handle: BinaryIO,
    columns: Sequence[Column],
    rows: int,
    simulated: bool,
    name: str,
    says: Iterable[str],
) -> None:
    layout, table, heap = table_parts(columns, rows)
    data = table + heap if heap else table
    header = hdu_header("BINTABLE", layout, simulated, name, {}, says)
    write_hdu(handle, header, [(memoryview(data), word_sum(data))])


def hdu_header(
    kind: str,
    layout: Mapping[str, object],
    simulated: bool,
    name: str,
    cards: Mapping[str, object],
    says: Iterable[str],
) -> Header:
    """A header; one without a name is the primary."""
    from astropy.io.fits import Header

    header = Header()
    if name:
        add_card(header, "XTENSION", kind, "image" if kind == "IMAGE" else "binary table")
    else:
        add_card(header, "SIMPLE", True, "FITS standard")
    add_cards(header, layout)
    if name:
        add_card(header, "EXTNAME", name)
    else:
        add_card(header, "EXTEND", True, "extensions may follow")
    if simulated:
        add_card(header, "SIMULATE", True, "a simulation, not an observation")
    add_card(header, "CREATOR", f"simimg {__version__}", "program that wrote this file")
    add_cards(header, cards)
    for text in says:
        add_commentary(header, "COMMENT", text)
    return header


def coordinate_cards(wcs: WCS) -> dict[str, object]:
    """The cards of celestial coordinates, with every digit of their numbers.

    Parameters
    ----------
    wcs : astropy.wcs.WCS
        Two celestial axes.

    Returns
    -------
    dict
        Keyword to ``(value, comment)``.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        given = wcs.to_header(relax=True)
    cards = {
        card.keyword: (card.value, card.comment)
        for card in given.cards
        if is_coordinate(card.keyword) and not card.keyword.startswith("MJDREF")
    }
    ordered = {
        key: cards[key]
        for key in ("WCSAXES", "CTYPE1", "CTYPE2", "CUNIT1", "CUNIT2")
        if key in cards
    }
    # The library rounds these to twelve digits, and scales them to a CDELT of 1.
    matrix = wcs.pixel_scale_matrix
    for axis in (0, 1):
        number = axis + 1
        ordered[f"CRPIX{number}"] = (float(wcs.wcs.crpix[axis]), "[pixel] reference, from 1")
        ordered[f"CRVAL{number}"] = (float(wcs.wcs.crval[axis]), "[deg] at the reference pixel")
    for row in (0, 1):
        for column in (0, 1):
            ordered[f"CD{row + 1}_{column + 1}"] = (float(matrix[row, column]), "[deg/pixel]")
    replaced = ("PC", "CDELT", "CD", "CROTA")
    rest = {key: card for key, card in cards.items() if not key.startswith(replaced)}
    return {**ordered, **{key: card for key, card in rest.items() if key not in ordered}}


def _truth_columns(truth: Table) -> list[Column]:
    columns = []
    for name in truth.colnames:
        column = truth[name]
        if hasattr(column, "filled"):
            column = column.filled(np.nan) if column.dtype.kind == "f" else column.filled()
        # The standard's list of units has no electron, so not its format but the library's own.
        unit = "" if column.unit is None else column.unit.to_string()
        columns.append(Column(name, np.asarray(column), unit, column.description or ""))
    return columns


def _scene_columns(files: Sequence[tuple[str, str, bytes]]) -> list[Column]:
    names = []
    for name, _, _ in files:
        quoted = quote(name, safe=_NAME_LETTERS, errors="surrogateescape")
        # A table's text loses the blanks at its end.
        names.append(quoted[:-1] + "%20" if quoted.endswith(" ") else quoted)
    return [
        Column("name", np.array(names), comment="of the file, as the scene writes it"),
        Column("sha256", np.array([sha for _, sha, _ in files]), comment="of the file's bytes"),
        Column("content", [content for _, _, content in files], comment="the file's bytes"),
    ]
