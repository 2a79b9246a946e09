"""A scene fitted to a frame that exists: seen by its detector, its objects at their places in it.

The detector's scale, orientation and handedness are those in the middle of the frame; places go
through the frame's own coordinates, with whatever distortion these have. Radians; pixels from 0 at
the centre of the first.
"""

from __future__ import annotations

import warnings
from dataclasses import replace as changed_fields
from math import atan2, degrees, pi

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.objects import Inventory
from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.resolving.headers import header_time
from simimg.resolving.skyplane import CoordinateSky, Sky, equatorial, sky_places
from simimg.scene.file import replace
from simimg.scene.model import Scene

_KEPT = ("name", "quantum_efficiency", "charge_diffusion")  # what light meets before it is counted
_FAR = 1e9  # pixels: out of every frame
_SQUARE = 0.01  # relative difference of a pixel's sides that is worth a line


def matched_scene(scene: Scene, frame: Frame, sky: Sky, notes: list[str]) -> Scene:
    """The scene seen by the frame's detector: its pixels, scale, orientation and exposure time."""
    rows, columns = frame.counts.shape
    x, y = 0.5 * (columns - 1), 0.5 * (rows - 1)
    axes = sky.axes(x, y)
    sides = np.hypot(axes[0], axes[1])
    if abs(sides[0] / sides[1] - 1.0) > _SQUARE:
        notes.append("the frame's pixels are not square: the PSF is that of square ones")
    changes: dict[str, object] = {
        f"camera.{key}": None for key in scene.document.get("camera", {}) if key not in _KEPT
    }
    changes |= {
        "camera.pixels": [columns, rows],
        "camera.pixel_scale": f"{degrees(sky.pixel_scale) * 3600.0!r} arcsec",
        "camera.rotation": f"{degrees(atan2(axes[0, 1], axes[1, 1])) % 360.0!r} deg",
        "camera.mirrored": bool(np.linalg.det(axes) > 0.0),
        "exposure.dither": None,
        "detector": None,
        "sky": None,
    }
    ra, dec = sky.to_sky(x, y)
    if isinstance(sky, CoordinateSky) and not says(scene, "pointing.ra"):
        changes["pointing.ra"] = f"{degrees(ra) % 360.0!r} deg"
        changes["pointing.dec"] = f"{degrees(dec)!r} deg"
    time = header_time(frame)
    own = scene.exposure.time if scene.exposure is not None else None
    if time is not None:
        changes["exposure.time"] = f"{time!r} s"
        if own is not None and abs(own / time - 1.0) > 1e-6:
            notes.append(f"exposed for {time:g} s, as the frame says, not {own:g} s")
    absent = [key for key in changes if changes[key] is None and not says(scene, key)]
    return replace(scene, {key: value for key, value in changes.items() if key not in absent})


def says(scene: Scene, key: str) -> bool:
    """Whether a scene as written has a key."""
    table: object = scene.document
    for part in key.split("."):
        if not isinstance(table, dict) or part not in table:
            return False
        table = table[part]
    return True


def placed_objects(
    scene: Scene, objects: Inventory, frame: Frame, sky: Sky, where: str
) -> tuple[Inventory, FloatArray, FloatArray]:
    """The objects at their places in the frame, with right ascension and declination (rad)."""
    geometry = objects.geometry
    ra, dec = geometry.to_sky(objects.x, objects.y)
    if not isinstance(sky, CoordinateSky) or frame.wcs is None:
        if scene.pointing is None:
            ra, dec = np.full(len(objects), np.nan), np.full(len(objects), np.nan)
        return objects, np.asarray(ra), np.asarray(dec)
    by_pixel = _by_pixel(scene, objects)
    x, y = np.array(objects.x), np.array(objects.y)
    ra, dec = np.array(ra), np.array(dec)
    try:
        x[~by_pixel], y[~by_pixel] = _pixels(frame, ra[~by_pixel], dec[~by_pixel])
        places = sky_places(frame.wcs, np.column_stack([x[by_pixel], y[by_pixel]]))
    except Exception as error:  # strangers' coordinates fail in any way they like
        what = "its coordinates do not reach the objects' places"
        raise InputError(mistake(where, "coordinates", what, "place them nearer")) from error
    ra[by_pixel], dec[by_pixel] = places.T
    return changed_fields(objects, x=x, y=y), ra % (2.0 * pi), dec


def _pixels(frame: Frame, ra: FloatArray, dec: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Pixels of ICRS places (rad) in a frame's coordinates; far off where these do not reach."""
    from astropy.coordinates import SkyCoord
    from astropy.wcs.utils import wcs_to_celestial_frame

    assert frame.wcs is not None
    wcs = frame.wcs if frame.wcs.naxis == 2 else frame.wcs.celestial
    first, second = np.degrees(ra), np.degrees(dec)
    if not equatorial(wcs):
        there = SkyCoord(ra, dec, unit="rad").transform_to(wcs_to_celestial_frame(wcs))
        first, second = there.spherical.lon.deg, there.spherical.lat.deg
    if wcs.wcs.lng == 1:
        first, second = second, first
    if first.size == 0:
        return first, second
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        places = wcs.all_world2pix(np.column_stack([first, second]), 0, tolerance=1e-6, quiet=True)
    places = np.where(np.isfinite(places).all(axis=1, keepdims=True), places, _FAR)
    return places[:, 0], places[:, 1]


def _by_pixel(scene: Scene, objects: Inventory) -> AnyArray:
    """Which rows of the inventory were placed by pixels."""
    from simimg.sky.catalogues import read_catalogue

    flags: list[AnyArray] = []
    for kind in ("star", "pair", "galaxy", "disc", "ring", "picture"):
        for one in getattr(scene, kind):
            flags.append(np.full(2 if kind == "pair" else 1, one.x is not None))
    for catalogue in scene.catalogue:
        source = scene.inputs[catalogue.file]
        table = read_catalogue(
            source.read(), source.name, columns=catalogue.columns, units=catalogue.units
        )
        size = next(iter(table.values())).size
        flags.append(np.full(size, "x" in table))
    joined = np.concatenate(flags) if flags else np.zeros(0, dtype=bool)
    assert joined.size == len(objects)
    return joined
