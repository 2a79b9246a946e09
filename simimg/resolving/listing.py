"""The objects of a scene, one by one: brightness, signal to noise, and each pair's own limits.

Electrons an exposure, arcseconds and degrees, as the names say. What needs a pixel is None without
one; what needs an exposure time is None where a brightness is a magnitude and no time is given.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import degrees, isfinite, log10, nan, radians

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.objects import Entry, Inventory
from simimg.assembly.train import Train
from simimg.resolving.bound import PairPrecision, pair_precision
from simimg.resolving.expectation import Expectation
from simimg.resolving.resolution import Directions, Resolution, to_arcsec
from simimg.resolving.signal import Detector, Signal, StarLight, pair_signal, shape_signal

_MANY = 16  # pairs whose directions are all taken exactly; those of more share them
_SHARED = radians(5.0)


@dataclass(frozen=True)
class StarSignal:
    """One star of a pair as if it stood alone; see `ObjectLimits`."""

    electrons: float | None
    peak_electrons: float | None
    snr: float | None
    snr_fit: float | None


@dataclass(frozen=True)
class ObjectLimits:
    """How well one object is seen; of a pair also what is needed to resolve it.

    Attributes
    ----------
    label, kind : str
    electrons : float, tuple of two, or None
        In an exposure over the whole PSF; of a pair each star's. None without an exposure time.
    peak_electrons : float or None
        Brightest pixel from this object alone (of a pair: both stars).
    saturated : bool or None
        Whether that pixel, sky and dark signal included, is full. False off the detector.
    snr, snr_fit : float or None
        Signal to noise of the whole object: see `simimg.resolving.signal`.
    separation_arcsec, position_angle_deg, magnitude_difference : float or None
        Of a pair's second star about its first.
    diffraction, delivered : Resolution or None
        A pair's own limits, along its own angle and for its own magnitude difference.
    bound : PairPrecision or None
        How well a pair can be measured at best: see `simimg.resolving.bound`.
    stars : tuple of StarSignal
        A pair's two stars.
    """

    label: str
    kind: str
    electrons: float | tuple[float, float] | None
    peak_electrons: float | None
    saturated: bool | None
    snr: float | None
    snr_fit: float | None
    separation_arcsec: float | None = None
    position_angle_deg: float | None = None
    magnitude_difference: float | None = None
    diffraction: Resolution | None = None
    delivered: Resolution | None = None
    bound: PairPrecision | None = None
    stars: tuple[StarSignal, ...] = ()


@dataclass(frozen=True, eq=False)
class Listing:
    """What is needed to say how well the objects of a scene are seen.

    Attributes
    ----------
    train : Train
    timed : bool
        False where magnitudes cannot be turned into electrons.
    detector : Detector or None
    diffraction, delivered : Directions
    width : float
        FWHM delivered (rad), roughly.
    expectation : Expectation or None
        Of the image about pairs, all objects shown.
    """

    train: Train
    timed: bool
    detector: Detector | None
    diffraction: Directions
    delivered: Directions
    width: float
    expectation: Expectation | None

    def objects(self, found: Inventory) -> tuple[ObjectLimits, ...]:
        """Every object of an inventory, a pair once, in its order."""
        light = None
        if self.detector is not None and len(found):
            light = StarLight(self.delivered.transfer, self.detector, width=self.width)
        known = np.isnan(found.magnitude) | self.timed
        peaks, snr, snr_fit = _of_stars(light, found, known)
        pairs = int(np.count_nonzero(found.partner[: found.written] >= 0)) // 2
        listed = []
        for row, one in enumerate(found.entries):
            if 0 <= one.partner < row:
                continue
            electrons = one.electrons if known[row] else None
            if one.partner > row:
                second = found.entry(one.partner)
                both = known[row] and known[one.partner]
                alone = tuple(
                    StarSignal(
                        found.entry(i).electrons if known[i] else None,
                        _number(peaks[i]),
                        _number(snr[i]),
                        _number(snr_fit[i]),
                    )
                    for i in (row, one.partner)
                )
                listed.append(
                    self._pair((one, second), both, alone, light, found, coarse=pairs > _MANY)
                )
            elif one.shape is not None and self.detector is not None and known[row]:
                signal = shape_signal(self.train.basis, one, self.detector, width=self.width)
                listed.append(self._single(one, electrons, signal))
            else:
                star = None
                if one.shape is None and isfinite(peaks[row]):
                    star = Signal(float(peaks[row]), float(snr[row]), float(snr_fit[row]))
                listed.append(self._single(one, electrons, star))
        return tuple(listed)

    def _single(self, one: Entry, electrons: float | None, signal: Signal | None) -> ObjectLimits:
        return ObjectLimits(
            one.label,
            one.kind,
            electrons,
            *self._seen(signal, inside=self._inside(one)),
        )

    def _inside(self, one: Entry) -> bool:
        return self.detector is not None and self.detector.holds(one.x, one.y)

    def _seen(
        self, signal: Signal | None, *, inside: bool
    ) -> tuple[float | None, bool | None, float | None, float | None]:
        """Peak, saturation and signal to noise."""
        if signal is None or self.detector is None:
            return None, None, None, None
        saturated = inside and self.detector.saturates(signal.peak)
        return signal.peak, saturated, signal.snr, signal.snr_fit

    def _pair(
        self,
        stars: tuple[Entry, Entry],
        known: bool,
        alone: tuple[StarSignal, ...],
        light: StarLight | None,
        found: Inventory,
        *,
        coarse: bool,
    ) -> ObjectLimits:
        signal = bound = None
        if light is not None and known:
            signal = pair_signal(light, stars)
        if self.expectation is not None and known:
            bound = pair_precision(self.expectation, stars)
        first = stars[0]
        difference = magnitude_difference(stars)
        angle = found.geometry.direction(first.position_angle)
        if coarse:
            angle = _SHARED * round(angle / _SHARED)
        return ObjectLimits(
            first.label,
            first.kind,
            (first.electrons, stars[1].electrons) if known else None,
            *self._seen(signal, inside=any(self._inside(star) for star in stars)),
            separation_arcsec=to_arcsec(first.separation),
            position_angle_deg=degrees(first.position_angle) % 360.0,
            magnitude_difference=_number(difference),
            diffraction=self.diffraction.resolution(angle, difference),
            delivered=self.delivered.resolution(angle, difference),
            bound=bound,
            stars=alone,
        )


def magnitude_difference(stars: tuple[Entry, Entry]) -> float:
    """Second star's magnitude minus the first's, from electrons where need be; NaN if one is dark.

    Parameters
    ----------
    stars : tuple of Entry
        First and second.
    """
    difference = stars[1].magnitude - stars[0].magnitude
    if isfinite(difference):
        return difference
    bright = [star.electrons for star in stars]
    if min(bright) <= 0.0:
        return nan
    return 2.5 * log10(bright[0] / bright[1])


def _of_stars(
    light: StarLight | None, found: Inventory, known: AnyArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Peak, signal to noise and that of a fit for every row as a star; NaN where unknown."""
    nothing = np.full(len(found), np.nan)
    if light is None:
        return nothing, nothing, nothing
    electrons = np.where(known, found.electrons, 0.0)
    values = (
        light.peaks(found.x, found.y, electrons),
        light.snr(electrons),
        light.snr_fit(electrons),
    )
    peaks, snr, snr_fit = (np.where(known, value, np.nan) for value in values)
    return peaks, snr, snr_fit


def _number(value: float) -> float | None:
    return float(value) if isfinite(value) else None
