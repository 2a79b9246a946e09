"""Small frames for the tests of figures, made quickly."""

from __future__ import annotations

import hashlib

import simimg
from simimg.resolving.records import CriterionVerdict, PairMeasurement
from simimg.scene.file import scene_from_record

STATION = """
title = "A pair for tests"
[telescope]
name = "Tester 1 m"
aperture = "1 m"
obstruction = 0.3
[air]
seeing = "0.8 arcsec"
[band]
name = "V"
[camera]
name = "Tester camera"
pixels = [64, 56]
pixel_scale = "0.2 arcsec"
gain = "2 electron/adu"
read_noise = "4 electron"
bias = "300 adu"
full_well = "90000 electron"
rotation = "{rotation} deg"
mirrored = {mirrored}
[sky]
electrons = 30.0
[exposure]
time = "10 s"
seed = 7
[pointing]
ra = "{ra} deg"
dec = "{dec} deg"
"""

PAIR = """
[[pair]]
label = "T-1"
electrons = [3e5, 1.5e5]
separation = "0.6 arcsec"
position_angle = "40 deg"
"""

STARS = """
[[star]]
label = "bright"
electrons = 4e5
[[star]]
label = "faint"
east = "2.5 arcsec"
north = "-1.5 arcsec"
electrons = 3e4
"""


def scene(objects=PAIR, *, rotation=0.0, mirrored=False, ra=150.0, dec=20.0, overrides=()):
    text = STATION.format(rotation=rotation, mirrored=str(mirrored).lower(), ra=ra, dec=dec)
    content = (text + objects).encode()
    record = [("test.toml", hashlib.sha256(content).hexdigest(), content)]
    return scene_from_record(record, name="test.toml", directory=".", overrides=overrides)


def frame(objects=PAIR, *, keep=(), **choices):
    return simimg.expose(scene(objects, **choices), keep=keep)


def measurement(of, **changes):
    """What a measurement of the pair of `frame` could say."""
    first = of.truth[0]
    values = {
        "label": "T-1",
        "x": float(first["x"]),
        "y": float(first["y"]),
        "ra_deg": float(first["ra"]),
        "dec_deg": float(first["dec"]),
        "separation_arcsec": 0.6012,
        "separation_error_arcsec": 0.0042,
        "position_angle_deg": 40.3,
        "position_angle_error_deg": 0.51,
        "magnitude_difference": 0.752,
        "magnitude_difference_error": 0.03,
        "probability_single": 1e-30,
        "elongated": True,
        "ambiguous_180": False,
        "saddle_ratio": 1.0,
        "saddle_ratio_error": 0.01,
        "rayleigh": CriterionVerdict(limit_arcsec=0.95, probability=0.0, verdict="unresolved"),
        "sparrow": CriterionVerdict(limit_arcsec=0.61, probability=0.41, verdict="borderline"),
        "advice": "A sentence of advice.",
    }
    return PairMeasurement(**(values | changes))
