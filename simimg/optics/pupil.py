"""Apertures as arrays: what part of each small square of the pupil lets light through.

A pupil lies on a square lattice that spans the clear diameter, its rows along the detector's +y and
its columns along +x, as projected on the detector. Edges are grey: a square that an edge divides
carries the part of its area that is open, so that both the collecting area and the transfer
function converge as the sampling squared. Lengths are in metres, angles in radians from the
detector's +x towards +y.

For hard edges the open part of a square is its mean amplitude, and (an open point transmits all or
nothing) also its mean intensity transmission; the collecting area is therefore the sum of the open
parts, not of their squares. A map from a file is different: there each value is an intensity
transmission, its root the amplitude, and the area the sum of the transmissions.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray, frozen
from simimg.optics.coverage import disc_coverage

LARGEST_MAP = 2048
"""Most pixels a side of a pupil map."""

Vanes = tuple[int, float, float]
"""Number of vanes, their width (m), and the angle of the first (rad)."""


@dataclass(frozen=True, eq=False)
class Pupil:
    """An aperture without phase.

    Attributes
    ----------
    amplitude : (n, n) ndarray of float64
        Amplitude transmission 0..1, row 0 at the lowest y; the lattice spans ``diameter``.
    pitch : float
        Side of a square of the lattice (m).
    diameter : float
        Clear diameter (m).
    obstruction : float
        Diameter of the central obstruction over ``diameter``; 0 for a map.
    area : float
        Collecting area (m2).
    round : bool
        True for a clear or annular aperture without vanes: the analytic transfer function holds.
    enveloped : bool
        True where ``diameter`` and ``obstruction`` describe the outline of the pupil (round or with
        vanes), False for a map.
    reach : float
        Upper bound of the distance between two open points (m): the transfer function is zero at
        and beyond this shift.
    transmission : (n, n) ndarray of float64
        Part of the light that each square passes; the amplitude itself, the open part, unless
        given.
    grey : bool
        True where edges are grey by area, False where the values are samples, as in a map.
    """

    amplitude: FloatArray
    pitch: float
    diameter: float
    obstruction: float
    area: float
    round: bool
    enveloped: bool
    reach: float
    transmission: FloatArray = field(default_factory=lambda: np.empty(0))
    grey: bool = True

    def __post_init__(self) -> None:
        amplitude = frozen(self.amplitude)
        object.__setattr__(self, "amplitude", amplitude)
        passed = frozen(self.transmission) if self.transmission.size else amplitude
        object.__setattr__(self, "transmission", passed)


def annular_pupil(
    diameter: float,
    obstruction: float = 0.0,
    *,
    vanes: Vanes | None = None,
    samples: int = 512,
) -> Pupil:
    """A clear aperture less its central obstruction and the vanes that carry it.

    Parameters
    ----------
    diameter : float
        Clear diameter (m).
    obstruction : float
        Diameter of the obstruction over that of the aperture, 0 <= obstruction < 1.
    vanes : (count, width, angle), optional
        Vane k runs straight from the centre to the edge, at ``angle + 2 pi k / count`` (rad) from
        the detector's +x towards +y, ``width`` metres wide.
    samples : int
        Squares across the diameter, at least 16.

    Returns
    -------
    Pupil
        The area without vanes is exact; with vanes, and of each square, to about one square in
        the whole (where a vane ends within a square, the product of the open parts stands for
        their common part).

    Raises
    ------
    ValueError
        For a value out of range, or if the vanes leave nothing open.
    """
    if not (np.isfinite(diameter) and diameter > 0.0):
        raise ValueError(f"diameter must be finite and above 0 m, got {diameter}")
    if not 0.0 <= obstruction < 1.0:
        raise ValueError(f"obstruction must be at least 0 and below 1, got {obstruction}")
    if samples < 16:
        raise ValueError(f"samples must be at least 16, got {samples}")
    pitch = diameter / samples
    # In units of the radius: corners of the squares.
    corners = np.linspace(-1.0, 1.0, samples + 1)
    open_part = disc_coverage(corners, corners, 1.0)
    if obstruction > 0.0:
        open_part -= disc_coverage(corners, corners, obstruction)
    area = 0.25 * np.pi * diameter**2 * (1.0 - obstruction) * (1.0 + obstruction)
    if vanes is not None:
        open_part *= _between_vanes(corners * 0.5 * diameter, vanes)
        area = float(open_part.sum()) * pitch**2
        if not area > 0.0:
            raise ValueError(f"vanes of width {vanes[1]} m leave no opening")
    return Pupil(
        amplitude=np.clip(open_part, 0.0, 1.0),
        pitch=pitch,
        diameter=diameter,
        obstruction=obstruction,
        area=area,
        round=vanes is None,
        enveloped=True,
        reach=diameter,
    )


def map_pupil(transmission: ArrayLike, diameter: float, *, hard_edges: bool = False) -> Pupil:
    """A pupil from a map of its intensity transmission.

    An annulus drawn as steps on 512 pixels has its point spread function within 1e-4 of the peak,
    on 1024 pixels within 2e-5; drawn with hard edges that are grey by area, within 2e-6.

    Parameters
    ----------
    transmission : (n, n) array_like
        Intensity transmission 0..1; the side of the map is the aperture's diameter, row 0 lies at
        the lowest y and column 0 at the lowest x of the detector. The amplitude is its square root.
        Draw a hard edge as a step between 0 and 1, finely sampled: a half-open edge pixel given as
        0.5 counts as a half-silvered one, unless ``hard_edges`` says otherwise.
    diameter : float
        Clear diameter (m). Light may pass in the corners of the map, too.
    hard_edges : bool
        True for a map of open and shut places alone, in which a value between 0 and 1 is the open
        part of a square that an edge divides: it is then the mean amplitude of the square, too.

    Returns
    -------
    Pupil
        Its ``area`` is the sum of the transmissions times the area of a pixel.

    Raises
    ------
    ValueError
        If the map is not square, smaller than 16 or larger than 2048 pixels (whose autocorrelation
        takes 0.6 GB), not within 0..1 or wholly dark, or the diameter is out of range.
    """
    values = np.asarray(transmission, dtype=np.float64)
    if values.ndim != 2 or values.shape[0] != values.shape[1]:
        raise ValueError(f"a pupil map must be square, got shape {values.shape}")
    if not 16 <= values.shape[0] <= LARGEST_MAP:
        raise ValueError(
            f"a pupil map needs 16 to {LARGEST_MAP} pixels a side, got {values.shape[0]}"
        )
    if not np.all((values >= 0.0) & (values <= 1.0)):
        raise ValueError("transmission must lie between 0 and 1 everywhere")
    if not values.any():
        raise ValueError("the pupil map lets no light through")
    if not (np.isfinite(diameter) and diameter > 0.0):
        raise ValueError(f"diameter must be finite and above 0 m, got {diameter}")
    count = values.shape[0]
    pitch = diameter / count
    rows, columns = np.nonzero(values)
    outer_x = np.abs(columns - 0.5 * (count - 1)) + 0.5
    outer_y = np.abs(rows - 0.5 * (count - 1)) + 0.5
    return Pupil(
        amplitude=values if hard_edges else np.sqrt(values),
        pitch=pitch,
        diameter=diameter,
        obstruction=0.0,
        area=float(values.sum()) * pitch**2,
        round=False,
        enveloped=False,
        reach=2.0 * pitch * float(np.hypot(outer_x, outer_y).max()),
        transmission=values,
        grey=hard_edges,
    )


def _between_vanes(corners: FloatArray, vanes: Vanes) -> FloatArray:
    """Part of each square that the vanes leave open."""
    count, width, angle = vanes
    if count < 1:
        raise ValueError(f"vanes need a count of at least 1, got {count}")
    if not (np.isfinite(width) and width > 0.0 and np.isfinite(angle)):
        raise ValueError(f"vanes need a finite width above 0 m and angle, got {width}, {angle}")
    centres = 0.5 * (corners[1:] + corners[:-1])
    side = corners[1] - corners[0]
    x, y = centres[np.newaxis, :], centres[:, np.newaxis]
    open_part = np.ones((centres.size, centres.size))
    for k in range(count):
        direction = angle + 2.0 * np.pi * k / count
        cosine, sine = np.cos(direction), np.sin(direction)
        along, across = x * cosine + y * sine, y * cosine - x * sine
        covered = _beyond(across + 0.5 * width, side, cosine, sine)
        covered -= _beyond(across - 0.5 * width, side, cosine, sine)
        covered *= _beyond(along, side, cosine, sine)
        open_part *= 1.0 - covered
    return open_part


def _beyond(distance: FloatArray, side: float, cosine: float, sine: float) -> FloatArray:
    """Part of a square beyond a straight edge, its centre ``distance`` within; exact.

    A square seen along the edge is a trapezium; its running area is made of squared ramps.
    """
    long = 0.5 * side * max(abs(cosine), abs(sine))
    short = 0.5 * side * min(abs(cosine), abs(sine))
    if short < 1e-9 * side:
        return np.asarray(np.clip(0.5 + 0.5 * distance / long, 0.0, 1.0))

    # Beyond the corners nothing changes: clipping keeps the differences of squares accurate.
    t = np.clip(distance, -(long + short), long + short)
    total = (
        np.maximum(t + long + short, 0.0) ** 2
        - np.maximum(t + long - short, 0.0) ** 2
        - np.maximum(t - long + short, 0.0) ** 2
    )
    return np.asarray(np.clip(total / (8.0 * long * short), 0.0, 1.0))
