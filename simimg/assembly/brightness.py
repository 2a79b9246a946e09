"""How many electrons: zero point, sources, sky and dark signal of a scene's set-up.

A magnitude is above the air, in the scene's band and system; the air's extinction, the telescope's
collecting area and throughput and the camera's quantum efficiency turn it into electrons at the
detector. The sky's surface brightness is as observed, so that no extinction is applied to it.
"""

from __future__ import annotations

from math import degrees

import numpy as np

from simimg.arrays import FloatArray
from simimg.light.bands import Band, custom_band, photon_zero_point, standard_band
from simimg.scene.model import Scene


def scene_band(scene: Scene) -> Band:
    """The band of a scene, a standard one or one by centre and width."""
    band = scene.band
    if band.centre is not None and band.width is not None:
        return custom_band(band.centre, band.width, name=band.name or "")
    return standard_band(str(band.name))


def _photons_per_second(scene: Scene, area: float) -> float:
    """Photons per second from magnitude 0 above the air, through area, optics and detector."""
    efficiency = 1.0 if scene.camera is None else scene.camera.quantum_efficiency
    rate = photon_zero_point(scene_band(scene), scene.band.resolved_system)
    return float(rate * area * scene.telescope.throughput * efficiency)


def zero_point(scene: Scene, *, area: float, airmass: float | None) -> float:
    """Electrons per second at the detector from a star of magnitude 0.

    Parameters
    ----------
    scene : Scene
    area : float
        Collecting area of the pupil (m2).
    airmass : float or None
        None above the air: no extinction.
    """
    extinction = scene.air.extinction if scene.air is not None else 0.0
    loss = 10.0 ** (-0.4 * extinction * (airmass or 0.0))
    return float(_photons_per_second(scene, area) * loss)


def exposure_time(scene: Scene) -> float:
    """Exposure time (s); 0 where every signal is in electrons and none is given."""
    if scene.exposure is None or scene.exposure.time is None:
        return 0.0
    return scene.exposure.time


def electrons_from_magnitude(
    magnitude: FloatArray | float, *, zero_point: float, time: float
) -> FloatArray:
    """Electrons that a star of this magnitude gives in an exposure."""
    return np.asarray(zero_point * time * 10.0 ** (-0.4 * np.asarray(magnitude, float)))


def sky_electrons(scene: Scene, *, area: float) -> float:
    """Electrons of the sky in a pixel and an exposure; 0 without [sky] or without a pixel."""
    sky, scale = scene.sky, scene.pixel_scale
    if sky is None:
        return 0.0
    if sky.electrons is not None:
        return sky.electrons
    if sky.surface_brightness is None or scale is None:
        return 0.0
    square_arcsec = (degrees(scale) * 3600.0) ** 2
    rate = _photons_per_second(scene, area) * 10.0 ** (-0.4 * sky.surface_brightness)
    return float(rate * square_arcsec * exposure_time(scene))


def dark_electrons(scene: Scene) -> float:
    """Electrons of the dark signal in a pixel and an exposure."""
    return 0.0 if scene.camera is None else scene.camera.dark_current * exposure_time(scene)
