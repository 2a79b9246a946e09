"""Cosmic rays: tracks of charge through the sensitive layer.

Hits are Poisson in number and even over the detector. Particles come from all sides of the half
space, so that those which cross a plane have ``cos(theta)`` distributed as its own value; a track
crosses the layer in a straight line, ``thickness * tan(theta)`` long in projection. A particle that
just ionises frees about 80 electrons a micrometre of silicon at the most probable (common
practice), with straggling after Landau in Moyal's form (Moyal 1955, Phil. Mag. 46, 263). One in
fifty hits a nucleus instead: a star of several short, dense tracks from one point (common
practice). The charge is added to the pixels' own: their mean grows by the charge, in rare pixels;
what other noise they have is unchanged. Metres and electrons; pixels count from 0.
"""

from __future__ import annotations

from math import pi
from typing import Final

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.camera.settings import CosmicRays

PER_METRE: Final = 80e6
"""Most probable electrons freed for each metre of track in silicon."""

STARS: Final = 0.02
"""Share of hits that break a nucleus."""

_STRAGGLING = 0.18  # Moyal's scale over the most probable charge, for a layer of some 10 um
_LONGEST = 400.0  # layers: a grazing track leaves the detector before
_STEPS = 4.0  # points of charge along a pixel of track
_PRONGS = 3, 8  # tracks of a star, the last not included
_DENSE = 8.0  # their charge for each metre, over that of a crossing particle
_SHORT = 20e-6  # their mean length, m


def cosmic_hits(
    shape: tuple[int, int], rays: CosmicRays, *, time: float, rng: np.random.Generator
) -> tuple[FloatArray, AnyArray]:
    """Charge that cosmic rays leave in an exposure.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns.
    rays : CosmicRays
    time : float
        Seconds.
    rng : numpy.random.Generator

    Returns
    -------
    charge : ndarray of float32, shape (rows, columns)
        Whole electrons.
    hit : ndarray of bool, same shape
        Where there is some.
    """
    rows, columns = shape
    charge = np.zeros(shape, dtype=np.float32)
    area = rows * columns * rays.pixel_size**2
    for _ in range(int(rng.poisson(rays.rate * area * time))):
        x, y = rng.uniform(-0.5, columns - 0.5), rng.uniform(-0.5, rows - 0.5)
        if rng.random() < STARS:
            for _ in range(int(rng.integers(*_PRONGS))):
                length = rng.exponential(_SHORT)
                dx, dy = _direction(rng, rng.uniform(0.0, length))
                _deposit(charge, x, y, dx, dy, _DENSE * PER_METRE * length, rays, rng)
        else:
            cosine = np.sqrt(rng.random())
            slant = min(1.0 / max(cosine, 1e-12), _LONGEST)
            across = rays.thickness * np.sqrt(max(slant**2 - 1.0, 0.0))
            dx, dy = _direction(rng, across)
            probable = PER_METRE * rays.thickness * slant
            freed = probable * max(1.0 + _STRAGGLING * _moyal(rng), 0.1)
            _deposit(charge, x, y, dx, dy, freed, rays, rng)
    return charge, charge > 0.0


def _moyal(rng: np.random.Generator) -> float:
    """A deviate of Moyal's distribution, its mode at 0: minus the logarithm of a squared normal."""
    return -float(np.log(max(rng.standard_normal() ** 2, 1e-300)))


def _direction(rng: np.random.Generator, length: float) -> tuple[float, float]:
    angle = rng.uniform(0.0, 2.0 * pi)
    return length * float(np.cos(angle)), length * float(np.sin(angle))


def _deposit(
    charge: FloatArray,
    x: float,
    y: float,
    dx: float,
    dy: float,
    freed: float,
    rays: CosmicRays,
    rng: np.random.Generator,
) -> None:
    """Spread the charge of one track evenly along it, in whole electrons."""
    length = float(np.hypot(dx, dy)) / rays.pixel_size
    points = max(int(np.ceil(_STEPS * length)), 1)
    along = (np.arange(points) + 0.5) / points
    column = np.rint(x + along * dx / rays.pixel_size).astype(np.int64)
    row = np.rint(y + along * dy / rays.pixel_size).astype(np.int64)
    parts = rng.multinomial(round(freed), np.full(points, 1.0 / points))
    inside = (row >= 0) & (row < charge.shape[0]) & (column >= 0) & (column < charge.shape[1])
    np.add.at(charge, (row[inside], column[inside]), parts[inside].astype(np.float32))
