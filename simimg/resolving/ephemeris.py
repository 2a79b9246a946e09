"""When the pairs of a scene come apart: separation and angle at given dates, against the limits.

The limits are the delivered ones of the pair's own PSF along its direction at each date:
Rayleigh's, and Sparrow's for the pair's own magnitude difference as the detector sees it. Dates in
Julian years; arcseconds and degrees.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from math import degrees, isfinite, radians
from typing import Any

import numpy as np

from simimg.assembly.basis import FOLLOWED
from simimg.assembly.brightness import photometry
from simimg.assembly.colours import colour_keys
from simimg.assembly.motion import drawn_out, object_trail
from simimg.assembly.orbits import places_at
from simimg.assembly.places import field_geometry, object_place
from simimg.assembly.train import Train, assemble_train
from simimg.imaging.basis import Transfer
from simimg.resolving.resolution import Directions, computable, to_arcsec
from simimg.resolving.starpsfs import pair_psf
from simimg.scene.model import Scene
from simimg.scene.objects import Pair

MOST_DATES = 10_000
"""Most dates of a table."""

_SHARED = radians(2.0)


@dataclass(frozen=True)
class DatedPair:
    """A pair at a date.

    Attributes
    ----------
    label : str
    date : float
        Julian year.
    separation_arcsec, position_angle_deg : float
        Of the second star about the first.
    rayleigh, sparrow : bool
        Whether the separation is beyond the delivered limit.
    """

    label: str
    date: float
    separation_arcsec: float
    position_angle_deg: float
    rayleigh: bool
    sparrow: bool

    def to_dict(self) -> dict[str, Any]:
        """The same for JSON."""
        return asdict(self)


def ephemeris(scene: Scene, dates: Sequence[float]) -> tuple[DatedPair, ...]:
    """Tabulate when the pairs of a scene can be resolved with its set-up.

    Parameters
    ----------
    scene : Scene
        Its pairs on orbits; those at rest where none is on an orbit.
    dates : sequence of float
        Julian years, at most `MOST_DATES`.

    Returns
    -------
    tuple of DatedPair
        Pair after pair, each in the order of the dates.

    Raises
    ------
    ValueError
        Dates that are not finite, or too many.
    """
    years = np.asarray(dates, dtype=np.float64)
    if years.ndim != 1 or years.size > MOST_DATES or not np.isfinite(years).all():
        raise ValueError(f"dates must be at most {MOST_DATES} finite Julian years")
    train = assemble_train(scene)
    geometry = field_geometry(scene)
    light = photometry(scene, area=train.pupil.area, airmass=train.airmass, palette=train.palette)
    rows = []
    orbiting = any(pair.orbit is not None for pair in scene.pair)
    for number, pair in enumerate(scene.pair):
        if orbiting and pair.orbit is None:
            continue
        fainter = light.difference(pair)
        separations, angles = places_at(pair, years)
        delivered = Directions(computable(_pair_transfer(scene, train, pair, fainter)))
        limits: dict[float, tuple[float, float]] = {}
        for year, separation, angle in zip(years, separations, angles, strict=True):
            direction = geometry.direction(float(angle))
            # Directions two degrees apart share their limits, which change far less.
            key = round(direction / _SHARED) * _SHARED if years.size > 12 else direction
            if key not in limits:
                found = delivered.resolution(key, fainter)
                limits[key] = (found.rayleigh_arcsec, found.sparrow_arcsec)
            arcsec = to_arcsec(float(separation))
            rayleigh, sparrow = limits[key]
            rows.append(
                DatedPair(
                    label=pair.label or f"pair-{number + 1}",
                    date=float(year),
                    separation_arcsec=arcsec,
                    position_angle_deg=degrees(float(angle)) % 360.0,
                    rayleigh=bool(arcsec > rayleigh),
                    sparrow=bool(isfinite(sparrow) and arcsec > sparrow),
                )
            )
    return tuple(rows)


def _pair_transfer(scene: Scene, train: Train, pair: Pair, difference: float) -> Transfer:
    """The PSF that stands for both stars, both at the first one's place."""
    geometry = field_geometry(scene)
    place = object_place(pair, geometry)
    followed = scene.pointing is not None and pair.label == scene.pointing.track is not None
    trail = (0.0, 0.0) if followed else object_trail(scene, pair.motion)
    first, second = (
        drawn_out(train.star(train.palette.kinds[key] + FOLLOWED * followed, *place), trail)
        for key in colour_keys(pair)
    )
    light = np.array([1.0, 10.0 ** (-0.4 * difference)])
    return pair_psf(first, second, light, geometry.pixel_scale).mean


def julian_years(start: float, stop: float, step: float) -> list[float]:
    """Dates from start to stop, the end included where a step falls on it.

    Raises
    ------
    ValueError
        A step that is not above 0, an end before the start, or too many dates.
    """
    if not (isfinite(start) and isfinite(stop) and isfinite(step) and step > 0.0):
        raise ValueError("START, STOP and STEP must be Julian years, STEP above 0")
    if stop < start:
        raise ValueError("STOP must not lie before START")
    count = int((stop - start) / step * (1.0 + 1e-12) + 1e-9) + 1
    if count > MOST_DATES:
        raise ValueError(f"{count} dates are more than {MOST_DATES}")
    return [start + step * number for number in range(count)]
