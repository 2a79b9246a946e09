"""The truth of a frame, as a table: what was put in, where, and how much of it the frame holds.

One row an object, also those off the frame; a pair has two, each with the row of its partner.
Places in pixels from 0 at the centre of the first pixel; sky coordinates in degrees; sizes and
separations in arcseconds; position angles in degrees, north through east, of a pair's second star
about its first.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simimg.arrays import FloatArray
from simimg.assembly.objects import SHAPE_KEYS, Inventory
from simimg.assembly.train import Train
from simimg.imaging.capture import share_in_frame
from simimg.imaging.sources import PlacedShape, Points
from simimg.imaging.spread import shape_stamp

if TYPE_CHECKING:
    from astropy.table import Table

ARCSEC = np.pi / 180.0 / 3600.0
_ANGLES_DEG = ("phase_angle", "inclination")
_ANGLES_ARCSEC = ("effective_radius", "diameter", "inner_diameter", "outer_diameter", "width")


def truth_table(objects: Inventory, train: Train) -> Table:
    """The TRUTH of a frame.

    Parameters
    ----------
    objects : Inventory
    train : Train
        With a pixel scale.

    Returns
    -------
    astropy.table.Table
        label, kind, x, y, ra, dec, inside, electrons, electrons_in_frame, magnitude, separation,
        position_angle, partner (row, -1 for none), and the keys of shapes where there are any.
    """
    from astropy.table import Table

    geometry = objects.geometry
    ra, dec = geometry.to_sky(objects.x, objects.y)
    inside = (np.abs(objects.x - geometry.middle[0]) <= geometry.columns / 2) & (
        np.abs(objects.y - geometry.middle[1]) <= geometry.rows / 2
    )
    position_angle = np.degrees(objects.position_angle)
    for row, keys in enumerate(objects.keys):
        if "position_angle" in keys:
            position_angle[row] = np.degrees(keys["position_angle"]) % 360.0
    table = Table()
    table["label"] = objects.label.astype(str) if len(objects) else np.empty(0, "U1")
    table["kind"] = objects.kind.astype(str) if len(objects) else np.empty(0, "U1")
    table["x"], table["y"] = objects.x, objects.y
    table["ra"], table["dec"] = np.degrees(ra), np.degrees(dec)
    table["inside"] = inside
    table["electrons"] = objects.electrons
    table["electrons_in_frame"] = objects.electrons * _shares(objects, train)
    table["magnitude"] = objects.magnitude
    table["separation"] = objects.separation / ARCSEC
    table["position_angle"] = position_angle
    table["partner"] = objects.partner.astype(np.int32)
    for name in SHAPE_KEYS:
        if name == "position_angle" or not any(name in keys for keys in objects.keys):
            continue
        unit = ARCSEC if name in _ANGLES_ARCSEC else 1.0
        column = np.full(len(objects), np.nan)
        for row, keys in enumerate(objects.keys):
            column[row] = keys.get(name, np.nan) / unit
        table[name] = np.degrees(column) if name in _ANGLES_DEG else column
    units = {"x": "pix", "y": "pix", "ra": "deg", "dec": "deg", "position_angle": "deg"}
    units |= {"electrons": "electron", "electrons_in_frame": "electron", "magnitude": "mag"}
    units |= dict.fromkeys(("separation", *_ANGLES_ARCSEC), "arcsec")
    units |= dict.fromkeys(_ANGLES_DEG, "deg")
    for name, unit_name in units.items():
        if name in table.colnames:
            table[name].unit = unit_name
    return table


def _shares(objects: Inventory, train: Train) -> FloatArray:
    """Share of each object's light that the frame holds."""
    geometry = objects.geometry

    def held(points: Points) -> FloatArray:
        return share_in_frame(
            train.basis,
            points,
            columns=geometry.columns,
            rows=geometry.rows,
            pixel_scale=geometry.pixel_scale,
        )

    if not len(objects):
        return np.empty(0)
    share = held(objects.points)
    for row, shape in enumerate(objects.shapes):
        if shape is None:
            continue
        # The shape's own light, on cells of at most a pixel, each as a star of its own.
        radius = min(shape.radius, shape.radius_below(1e-4 / shape.radius**2))
        cell = max(geometry.pixel_scale, radius / 200.0)
        unit = PlacedShape(0.0, 0.0, 1.0, shape)
        stamp, left, bottom = shape_stamp(unit, x=0.0, y=0.0, cell=cell, radius=radius)
        y, x = np.indices(stamp.shape)
        step = cell / geometry.pixel_scale
        cells = Points(
            objects.x[row] + (x.ravel() + left) * step,
            objects.y[row] + (y.ravel() + bottom) * step,
            np.ones(stamp.size),
            np.full(stamp.size, objects.colour[row]),
        )
        light = stamp.ravel() / stamp.sum()
        share[row] = np.clip(light @ held(cells), 0.0, 1.0)
    return share
