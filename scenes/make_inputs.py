"""Make the files that the demo scenes read: star-field.ecsv and spiral.fits, all invented.

``python scenes/make_inputs.py [FOLDER]`` writes both into the folder, or beside this file. The
seed is fixed and only the generator's plain uniform numbers are used, so that the bytes are the
same each time.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

SEED = 20260412

STARS = 2000
CLUSTER = 600  # of them
FIELD_SIDE = 122.0  # arcsec: a little more than the detector sees
CLUSTER_RADIUS = 14.0  # arcsec: half of the cluster's stars lie within, in projection
CLUSTER_CENTRE = (11.0, -7.0)  # arcsec east and north
BRIGHTEST, FAINTEST = 13.2, 23.2
SLOPE = 0.26  # of the logarithm of the number per magnitude

PICTURE_SIDE = 256  # pixels
CLUMPS = 60
TILT = np.radians(58.0)


def star_field() -> bytes:
    """2,000 stars: an even field and a cluster, as ECSV.

    The numbers per magnitude grow as ``10^(0.26 m)``, about as in the plane of a galaxy. The
    cluster's surface density is that of Plummer 1911, its half-number radius the scale length.
    """
    rng = np.random.default_rng([SEED, 1])
    share = rng.random(STARS)
    low, high = 10.0 ** (SLOPE * BRIGHTEST), 10.0 ** (SLOPE * FAINTEST)
    magnitude = np.log10(low + share * (high - low)) / SLOPE
    east, north = FIELD_SIDE * (rng.random((2, STARS)) - 0.5)
    # Within R lies the share R^2 / (R^2 + a^2): half of it within a. The last 3 % are left out.
    inside = 0.97 * rng.random(CLUSTER)
    radius = CLUSTER_RADIUS * np.sqrt(inside / (1.0 - inside))
    angle = 2.0 * np.pi * rng.random(CLUSTER)
    east[:CLUSTER] = CLUSTER_CENTRE[0] + radius * np.sin(angle)
    north[:CLUSTER] = CLUSTER_CENTRE[1] + radius * np.cos(angle)
    lines = [
        "# %ECSV 1.0",
        "# ---",
        "# datatype:",
        "# - {name: name, datatype: string}",
        "# - {name: d_east, unit: arcsec, datatype: float64, description: from the field centre}",
        "# - {name: d_north, unit: arcsec, datatype: float64, description: from the field centre}",
        "# - {name: V, unit: mag, datatype: float64, description: Vega magnitude above the air}",
        "# meta: {title: 2000 invented stars}",
        "# schema: astropy-2.0",
        "name d_east d_north V",
    ]
    for number, row in enumerate(np.argsort(magnitude, kind="stable"), start=1):
        place = f"{east[row]:.4f} {north[row]:.4f}"
        lines.append(f"SF-{number:04d} {place} {magnitude[row]:.3f}")
    return ("\n".join(lines) + "\n").encode("ascii")


def spiral() -> bytes:
    """A spiral of two arms, its disc tilted about the picture's horizontal, as a FITS image.

    A bulge, an exponential disc, two logarithmic arms of a 17 deg pitch with dust on their inner
    edges, and clumps of young stars in them; a surface-brightness map without units.
    """
    rng = np.random.default_rng([SEED, 2])
    half = PICTURE_SIDE / 2.0
    y, x = (np.indices((PICTURE_SIDE, PICTURE_SIDE)) + 0.5 - half) / half
    across = y / np.cos(TILT)
    radius, angle = np.hypot(x, across), np.arctan2(across, x)
    # Phase of the arms' crests: it turns by 2 pi from one crest to the next.
    phase = 2.0 * (angle - _crest(np.maximum(radius, 1e-3)))
    strength = np.clip((radius - 0.08) / 0.15, 0.0, 1.0)
    arms = 0.65 + strength * 2.6 * np.exp(2.6 * (np.cos(phase) - 1.0))
    dust = 1.0 - 0.6 * strength * np.exp(6.0 * (np.cos(phase + 1.1) - 1.0))
    edge = np.clip((0.97 - radius) / 0.2, 0.0, 1.0)
    light = np.exp(-radius / 0.30) * arms * dust * edge
    # The bulge is rounder than the disc, and less tilted.
    light += 3.0 * np.exp(-np.hypot(x, y / 0.75) / 0.05)
    for _ in range(CLUMPS):
        r, turn, spread, bright = rng.random(4)
        r = 0.22 + 0.62 * r
        arm = np.floor(2.0 * turn)
        turn = _crest(r) + np.pi * arm + 0.3 * (2.0 * turn - arm - 0.5)
        size = 0.008 + 0.008 * spread
        offset = np.hypot(x - r * np.cos(turn), (across - r * np.sin(turn)) * np.cos(TILT))
        light += 7.0 * bright**4 * np.exp(-r / 0.45) * np.exp(-((offset / size) ** 2) / 2.0)
    return _fits(np.rint(light / light.max() * 32000.0).astype(">i2"))


def _crest(radius: np.ndarray) -> np.ndarray:
    """Angle at which an arm of a 17 deg pitch stands at a radius."""
    return np.log(radius / 0.1) / np.tan(np.radians(17.0))


def _fits(values: np.ndarray) -> bytes:
    """The plainest FITS file of a 16-bit image (FITS standard 4.0, sections 3 and 4)."""
    rows, columns = values.shape
    cards = [
        f"{keyword:8}= {value:>20}"
        for keyword, value in (
            ("SIMPLE", "T"),
            ("BITPIX", "16"),
            ("NAXIS", "2"),
            ("NAXIS1", str(columns)),
            ("NAXIS2", str(rows)),
        )
    ]
    cards.append(f"{'OBJECT':8}= 'invented spiral'")
    header = "".join(card.ljust(80) for card in [*cards, "END"]).encode("ascii")
    data = values.tobytes()
    return header.ljust(-(-len(header) // 2880) * 2880) + data.ljust(
        -(-len(data) // 2880) * 2880, b"\0"
    )


INPUTS = {"star-field.ecsv": star_field, "spiral.fits": spiral}

if __name__ == "__main__":
    folder = Path(sys.argv[1] if len(sys.argv) > 1 else Path(__file__).parent)
    for name, make in INPUTS.items():
        (folder / name).write_bytes(make())
