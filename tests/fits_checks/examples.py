"""A frame with every part, for tests."""

import hashlib

import astropy.units as u
import numpy as np
from astropy.table import Table
from astropy.wcs import WCS

from simimg.frame import Frame, PsfImage

EVERY_BYTE = bytes(range(256)) * 3
SCENE_TEXT = 'title = "Sc\u00e8ne \u03b1"\n'.encode()


def files():
    given = [
        ("sc\u00e8ne \u03b1.toml", SCENE_TEXT),
        ("maps/100% grey .fits ", EVERY_BYTE),
        ("empty.csv", b""),
    ]
    kept = [(name, hashlib.sha256(content).hexdigest(), content) for name, content in given]
    too_large = ("large.fits", hashlib.sha256(b"far too large").hexdigest(), b"")
    return (*kept, too_large)


def truth():
    nan = np.nan
    table = Table(
        {
            "label": ["SR-014", "SR-014", "\u03b2 \u00e9toile"],
            "kind": ["pair", "pair", "galaxy"],
            "x": [12.25, 13.5, -3.0] * u.pix,
            "y": [8.5, 8.75, 40.0] * u.pix,
            "ra": [0.0, 359.9999, 12.0] * u.deg,
            "dec": [0.0, 0.0001, -5.0] * u.deg,
            "inside": [True, True, False],
            "electrons": [5e5, 2e5, 1e4] * u.electron,
            "electrons_in_frame": [4.9e5, 1.9e5, 3.0] * u.electron,
            "magnitude": [11.2, 12.0, nan] * u.mag,
            "separation": [0.35, 0.35, nan] * u.arcsec,
            "position_angle": [62.0, 62.0, 10.0] * u.deg,
            "partner": [1, 0, -1],
            "sersic_index": [nan, nan, 4.0],
        }
    )
    table["x"].description = "from 0 at the centre of the first pixel"
    return table


def wcs(columns=31, rows=23, turn=33.3):
    made = WCS(naxis=2)
    made.wcs.ctype = ["RA---TAN", "DEC--TAN"]
    made.wcs.cunit = ["deg", "deg"]
    made.wcs.crval = [83.633123456789, -22 / 7]
    made.wcs.crpix = [(columns + 1) / 2, (rows + 1) / 2]
    scale, angle = 0.12 / 3600, np.radians(turn)
    made.wcs.cd = scale * np.array(
        [[-np.cos(angle), np.sin(angle)], [np.sin(angle), np.cos(angle)]]
    )
    return made


def frame(counts=None, **changes):
    rng = np.random.default_rng(1)
    if counts is None:
        counts = rng.integers(0, 65536, (23, 31), dtype=np.uint16)
    rows, columns = counts.shape
    header = {
        "OBJECT": ("\u03b2 Invent\u00e9e\n2", "title of the scene"),
        "EXPTIME": (30.0, "[s] exposure"),
        "BUNIT": "adu",
        "SEED": 20260412,
        "SCENEID": "0" * 64,
        "NOTE": "it's " * 60 + "the end",
        "LIMIT": ("y" * 67 + "&", "a text that fills its card"),
        "AMPER": "ends with &",
        "FLAG": False,
        "TINY": (-1.2345678901234567e-123, "a comment that is far too long for what is left of it"),
        "UNKNOWN": float("nan"),
        "COMMENT": ["first " * 20, "second"],
        "HISTORY": "one line",
    }
    given = {
        "header": header,
        "wcs": wcs(columns, rows),
        "truth": truth(),
        "expected": rng.random(counts.shape, dtype=np.float32),
        "psf": PsfImage(rng.random((9, 9)), 3),
        "mask": rng.integers(0, 64, counts.shape).astype(np.uint8),
        "scene_files": files(),
    }
    return Frame(counts=counts, **(given | changes))
