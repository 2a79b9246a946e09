"""Where the second star of a pair stands: as written, or on its orbit at the exposure's date."""

from __future__ import annotations

from datetime import datetime

import numpy as np

from simimg.arrays import FloatArray
from simimg.errors import InputError, mistake
from simimg.scene.model import Scene
from simimg.scene.objects import Pair
from simimg.sky.orbit import Orbit, apparent_place

_JULIAN_YEAR = 365.25 * 86400.0


def scene_year(scene: Scene) -> float | None:
    """Julian year of the start of a scene's exposure; None where it has none."""
    start = scene.exposure.start if scene.exposure is not None else None
    if start is None:
        return None
    began = datetime.fromisoformat(start.rstrip("Z"))
    days = (began - datetime(2000, 1, 1, 12)).total_seconds() / 86400.0
    return 2000.0 + days / 365.25


def pair_orbit(pair: Pair) -> Orbit | None:
    """A pair's orbit; None where it is at rest."""
    if pair.orbit is None:
        return None
    orbit = pair.orbit
    return Orbit(
        period=orbit.period / _JULIAN_YEAR,
        periastron=orbit.periastron,
        eccentricity=orbit.eccentricity,
        semi_major_axis=orbit.semi_major_axis,
        inclination=orbit.inclination,
        node=orbit.node,
        argument=orbit.argument,
    )


def places_at(pair: Pair, years: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Separations and position angles (rad) of a pair's second star at Julian years."""
    orbit = pair_orbit(pair)
    if orbit is not None:
        return apparent_place(orbit, years)
    assert pair.separation is not None
    return np.full(years.shape, pair.separation), np.full(years.shape, pair.position_angle)


def pair_place(scene: Scene, pair: Pair) -> tuple[float, float]:
    """Separation and position angle (rad) of a pair's second star in the scene's exposure.

    Raises
    ------
    InputError
        An orbit in a scene without a date, or one that brings both stars to one place.
    """
    if pair.orbit is None:
        assert pair.separation is not None
        return pair.separation, pair.position_angle
    year = scene_year(scene)
    if year is None:
        raise InputError(
            mistake(
                scene.name,
                "exposure.start",
                "is needed to place a pair on its orbit and missing",
                'add start = "2026-04-12T03:00:00" to [exposure]',
            )
        )
    separation, angle = places_at(pair, np.array([year]))
    return float(separation[0]), float(angle[0])
