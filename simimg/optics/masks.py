"""What stands in front of an aperture: obstructions off the axis, vanes at any angle, apodisers.

Each function takes a `Pupil` and gives another on the same lattice. An obstacle is exact by area in
every square; where two share a square the product of the open parts stands for their common part.
Lengths in metres, angles in radians from the detector's +x towards +y, in the pupil as projected
on the detector.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from simimg.arrays import FloatArray
from simimg.optics.coverage import disc_coverage, polygon_coverage
from simimg.optics.pupil import Pupil


@dataclass(frozen=True)
class Vane:
    """A straight vane from the middle of the pupil to its rim.

    Attributes
    ----------
    angle : float
        Direction in which it runs (rad).
    width : float
        Its width (m), above 0.
    offset : float
        How far its middle line passes the middle of the pupil (m), positive to the left of its
        direction.
    """

    angle: float
    width: float
    offset: float = 0.0

    def __post_init__(self) -> None:
        if not (np.isfinite(self.angle) and np.isfinite(self.offset)):
            raise ValueError(f"a vane needs a finite angle and offset, got {self}")
        if not (np.isfinite(self.width) and self.width > 0.0):
            raise ValueError(f"a vane's width must be finite and above 0 m, got {self.width}")


def with_obstruction(
    pupil: Pupil, *, diameter: float, centre: tuple[float, float] = (0.0, 0.0)
) -> Pupil:
    """A pupil behind a round obstruction at any place.

    Parameters
    ----------
    pupil : Pupil
    diameter : float
        Of the obstruction (m), above 0.
    centre : (float, float)
        Its middle ``(x, y)`` (m).

    Raises
    ------
    ValueError
        For a value out of range, or if nothing is left open.
    """
    if not (np.isfinite(diameter) and diameter > 0.0):
        raise ValueError(f"an obstruction's diameter must be finite and above 0 m, got {diameter}")
    if not np.all(np.isfinite(centre)):
        raise ValueError(f"an obstruction's centre must be finite, got {centre}")
    corners = _corners(pupil)
    shut = disc_coverage(corners - centre[0], corners - centre[1], 0.5 * diameter)
    return _behind(pupil, 1.0 - shut, enveloped=False)


def with_vanes(pupil: Pupil, vanes: Iterable[Vane]) -> Pupil:
    """A pupil behind vanes at any angles.

    Parameters
    ----------
    pupil : Pupil
    vanes : iterable of Vane
        Evenly spread ones in an annulus are those of `annular_pupil`.

    Raises
    ------
    ValueError
        If nothing is left open.
    """
    corners = _corners(pupil)
    open_part = np.ones(pupil.amplitude.shape)
    for vane in vanes:
        along = np.array([np.cos(vane.angle), np.sin(vane.angle)])
        left = np.array([-along[1], along[0]])
        # The diagonal of the lattice takes it out of every corner.
        inner, outer = vane.offset * left, vane.offset * left + 2.0 * pupil.diameter * along
        half = 0.5 * vane.width * left
        outline = np.array([inner - half, outer - half, outer + half, inner + half])
        open_part *= 1.0 - polygon_coverage(corners, corners, outline)
    return _behind(pupil, open_part, enveloped=pupil.enveloped)


def apodised(pupil: Pupil, transmission: ArrayLike) -> Pupil:
    """A pupil behind a filter of uneven transmission.

    Parameters
    ----------
    pupil : Pupil
    transmission : (n, n) array_like
        Intensity transmission, 0 to 1, on the pupil's lattice.

    Raises
    ------
    ValueError
        If the transmission is not on the lattice or out of range, or no light is left.
    """
    passed = np.asarray(transmission, dtype=np.float64)
    if passed.shape != pupil.amplitude.shape:
        raise ValueError(
            f"an apodiser needs the pupil's lattice, {pupil.amplitude.shape}, got {passed.shape}"
        )
    if not np.all((passed >= 0.0) & (passed <= 1.0)):
        raise ValueError("an apodiser's transmission must lie between 0 and 1")
    light = pupil.transmission * passed
    return _changed(pupil, pupil.amplitude * np.sqrt(passed), light, enveloped=False)


def gaussian_apodiser(pupil: Pupil, edge_transmission: float) -> FloatArray:
    """Intensity transmission that falls as a Gaussian from 1 in the middle to the rim.

    Parameters
    ----------
    pupil : Pupil
    edge_transmission : float
        Transmission at the rim, above 0, at most 1. A radio dish's taper of 12 dB is 0.063.

    Raises
    ------
    ValueError
        If it is out of range.
    """
    if not 0.0 < edge_transmission <= 1.0:
        raise ValueError(f"edge transmission must be above 0, at most 1, got {edge_transmission}")
    count = pupil.amplitude.shape[0]
    places = (np.arange(count) - 0.5 * (count - 1)) * 2.0 / count
    square = places[np.newaxis, :] ** 2 + places[:, np.newaxis] ** 2
    return np.asarray(edge_transmission**square)


def _corners(pupil: Pupil) -> FloatArray:
    count = pupil.amplitude.shape[0]
    return np.linspace(-0.5 * pupil.diameter, 0.5 * pupil.diameter, count + 1)


def _behind(pupil: Pupil, open_part: FloatArray, *, enveloped: bool) -> Pupil:
    """A hard mask: of each square the same part of the amplitude and of the light is left."""
    return _changed(
        pupil, pupil.amplitude * open_part, pupil.transmission * open_part, enveloped=enveloped
    )


def _changed(pupil: Pupil, amplitude: FloatArray, light: FloatArray, *, enveloped: bool) -> Pupil:
    area = float(light.sum()) * pupil.pitch**2
    # What rounding leaves of squares that are shut is no opening.
    if not area > 1e-9 * pupil.area:
        raise ValueError("nothing of the aperture is left open")
    return Pupil(
        amplitude=amplitude,
        pitch=pupil.pitch,
        diameter=pupil.diameter,
        obstruction=pupil.obstruction,
        area=area,
        round=False,
        enveloped=enveloped,
        reach=pupil.reach,
        transmission=light,
        grey=pupil.grey,
    )
