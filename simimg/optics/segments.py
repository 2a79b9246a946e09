"""Hexagonally segmented apertures, and the errors with which their segments stand.

Regular hexagons of one size lie side by side around the middle, ring by ring, with even gaps
between them. The lattice of the pupil spans the circle about the outermost corners; squares that
an edge or a gap divides are grey by area, exactly. A segment's error is a piston and a slope of
its part of the wavefront, both in optical path: on a mirror they are twice those of the surface.
Lengths in metres, angles in radians from the detector's +x towards +y.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from simimg.arrays import FloatArray, frozen
from simimg.optics.coverage import polygon_coverage
from simimg.optics.pupil import Pupil
from simimg.optics.wavefront import pupil_places

MOST_RINGS = 20
"""Most rings of segments about the middle (1261 segments)."""


@dataclass(frozen=True, eq=False)
class SegmentedPupil:
    """A segmented aperture and which square belongs to which segment.

    Attributes
    ----------
    pupil : Pupil
        Its diameter is that of the circle about all corners.
    centres : (k, 2) ndarray of float64
        Middle ``(x, y)`` of each segment (m).
    labels : (n, n) ndarray of int
        Index of the segment whose middle is nearest to the square's, also where no light passes.
    """

    pupil: Pupil
    centres: FloatArray
    labels: NDArray[np.intp]

    def __post_init__(self) -> None:
        object.__setattr__(self, "centres", frozen(self.centres))
        object.__setattr__(self, "labels", frozen(self.labels))


@dataclass(frozen=True, eq=False)
class SegmentErrors:
    """Piston and slopes of every segment.

    Attributes
    ----------
    piston : (k,) ndarray of float64
        Path at the segment's middle (m).
    tip, tilt : (k,) ndarray of float64
        Slope of the path along +x and along +y (rad): where the segment's own image goes.
    """

    piston: FloatArray
    tip: FloatArray
    tilt: FloatArray

    def __post_init__(self) -> None:
        for name in ("piston", "tip", "tilt"):
            object.__setattr__(self, name, frozen(np.asarray(getattr(self, name), np.float64)))


def segment_centres(
    rings: int, *, width: float, gap: float, missing_centre: bool = False, angle: float = 0.0
) -> FloatArray:
    """Middles of the segments.

    Parameters
    ----------
    rings : int
        Rings about the central segment, 0 to `MOST_RINGS`; ring k has 6 k segments.
    width : float
        From flat to flat of one segment (m), above 0.
    gap : float
        Between the flats of neighbours (m), 0 or more.
    missing_centre : bool
        True to leave the central segment out.
    angle : float
        Direction of a neighbour of the central segment (rad), which a flat faces.

    Returns
    -------
    (k, 2) ndarray of float64
        ``(x, y)`` in metres: the centre unless missing, then ring by ring, each from the corner
        towards ``angle`` and on from +x towards +y.

    Raises
    ------
    ValueError
        For a value out of range, or if nothing is left.
    """
    if not 0 <= rings <= MOST_RINGS:
        raise ValueError(f"rings must be from 0 to {MOST_RINGS}, got {rings}")
    if not (np.isfinite(width) and width > 0.0):
        raise ValueError(f"segment width must be finite and above 0 m, got {width}")
    if not (np.isfinite(gap) and gap >= 0.0):
        raise ValueError(f"segment gap must be finite and at least 0 m, got {gap}")
    if not np.isfinite(angle):
        raise ValueError(f"segment angle must be finite, got {angle}")
    if missing_centre and rings == 0:
        raise ValueError("a single segment cannot be missing")
    steps = (width + gap) * np.exp(1j * (angle + np.arange(6) * np.pi / 3.0))
    places = [] if missing_centre else [0j]
    for ring in range(1, rings + 1):
        for side in range(6):
            # From one corner of the ring to the next, two directions on.
            along = steps[(side + 2) % 6]
            places += [ring * steps[side] + k * along for k in range(ring)]
    return np.array([[place.real, place.imag] for place in places])


def segmented_pupil(
    rings: int,
    *,
    width: float,
    gap: float,
    missing_centre: bool = False,
    angle: float = 0.0,
    samples: int = 512,
) -> SegmentedPupil:
    """An aperture of hexagonal segments.

    Parameters
    ----------
    rings, width, gap, missing_centre, angle
        As for `segment_centres`.
    samples : int
        Squares across the circumscribed diameter, at least 16.

    Returns
    -------
    SegmentedPupil
        The collecting area is exact.

    Raises
    ------
    ValueError
        For a value out of range.
    """
    if samples < 16:
        raise ValueError(f"samples must be at least 16, got {samples}")
    centres = segment_centres(
        rings, width=width, gap=gap, missing_centre=missing_centre, angle=angle
    )
    turns = angle + (np.arange(6) + 0.5) * np.pi / 3.0
    hexagon = width / np.sqrt(3.0) * np.stack([np.cos(turns), np.sin(turns)], axis=1)
    outlines = centres[:, np.newaxis, :] + hexagon
    diameter = 2.0 * float(np.hypot(outlines[..., 0], outlines[..., 1]).max())
    corners = np.linspace(-0.5 * diameter, 0.5 * diameter, samples + 1)
    open_part = np.zeros((samples, samples))
    for outline in outlines:
        open_part += polygon_coverage(corners, corners, outline)
    pupil = Pupil(
        amplitude=np.clip(open_part, 0.0, 1.0),
        pitch=diameter / samples,
        diameter=diameter,
        obstruction=0.0,
        area=0.5 * np.sqrt(3.0) * width**2 * len(centres),
        round=False,
        enveloped=False,
        reach=diameter,
    )
    return SegmentedPupil(pupil, centres, _labels(pupil, centres))


def _labels(pupil: Pupil, centres: FloatArray) -> NDArray[np.intp]:
    """The nearest segment of each square."""
    x, y = pupil_places(pupil)
    labels = np.zeros(pupil.amplitude.shape, dtype=np.intp)
    nearest = np.full(pupil.amplitude.shape, np.inf)
    for index, (centre_x, centre_y) in enumerate(centres):
        distance = (x - centre_x) ** 2 + (y - centre_y) ** 2
        closer = distance < nearest
        labels[closer] = index
        nearest[closer] = distance[closer]
    return labels


def segment_wavefront(segmented: SegmentedPupil, errors: SegmentErrors) -> FloatArray:
    """The wavefront of segments that stand wrong.

    Parameters
    ----------
    segmented : SegmentedPupil
    errors : SegmentErrors
        One of each a segment.

    Returns
    -------
    (n, n) ndarray of float64
        Optical path (m); where no light passes, that of the nearest segment goes on.

    Raises
    ------
    ValueError
        If the errors are not one a segment or not finite.
    """
    count = len(segmented.centres)
    for name, values in (("piston", errors.piston), ("tip", errors.tip), ("tilt", errors.tilt)):
        if values.shape != (count,) or not np.all(np.isfinite(values)):
            raise ValueError(f"{name} needs {count} finite values, one a segment")
    x, y = pupil_places(segmented.pupil)
    label = segmented.labels
    centre_x, centre_y = segmented.centres[label, 0], segmented.centres[label, 1]
    path = errors.piston[label]
    path = path + errors.tip[label] * (x - centre_x) + errors.tilt[label] * (y - centre_y)
    return np.asarray(path)


def draw_segment_errors(
    count: int, *, piston: float = 0.0, tip_tilt: float = 0.0, rng: np.random.Generator
) -> SegmentErrors:
    """Random errors of the segments: normal, without a common part, of exact rms.

    Parameters
    ----------
    count : int
        Number of segments; at least 3 for errors other than 0.
    piston : float
        Root mean square over the segments (m of optical path).
    tip_tilt : float
        Root mean square over the segments of the slope along each axis (rad of the wavefront).
    rng : numpy.random.Generator
        What draws them; the same numbers are drawn whatever the two values are.

    Raises
    ------
    ValueError
        If a value is not finite or below 0, or there are too few segments.
    """
    for name, value in (("piston", piston), ("tip_tilt", tip_tilt)):
        if not (np.isfinite(value) and value >= 0.0):
            raise ValueError(f"{name} must be finite and at least 0, got {value}")
        if value > 0.0 and count < 3:
            raise ValueError(f"{name} errors need at least 3 segments, got {count}")
    draws = rng.standard_normal((3, count))
    draws -= draws.mean(axis=1, keepdims=True)
    scale = np.sqrt(np.mean(draws * draws, axis=1, keepdims=True))
    draws /= np.where(scale > 0.0, scale, 1.0)
    return SegmentErrors(piston * draws[0], tip_tilt * draws[1], tip_tilt * draws[2])


def one_segment_moved(
    count: int, index: int, *, piston: float = 0.0, tip: float = 0.0, tilt: float = 0.0
) -> SegmentErrors:
    """Errors of a single segment (m and rad), the others perfect.

    Raises
    ------
    IndexError
        If there is no such segment.
    """
    values: list[ArrayLike] = []
    for value in (piston, tip, tilt):
        errors = np.zeros(count)
        errors[index] = value
        values.append(errors)
    return SegmentErrors(*(np.asarray(error) for error in values))
