"""The objects of a scene, one by one: brightness, signal to noise, and each pair's own limits.

Electrons an exposure, arcseconds and degrees, as the names say. What needs a pixel is None without
one; what needs an exposure time is None where a brightness is a magnitude and no time is given.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from math import degrees, isfinite, radians

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.objects import Entry, Inventory
from simimg.assembly.train import Train
from simimg.imaging.basis import Transfer
from simimg.resolving.bound import PairPrecision, pair_precision
from simimg.resolving.expectation import Expectation
from simimg.resolving.resolution import Directions, Resolution, computable, to_arcsec
from simimg.resolving.signal import Detector, Signal, StarLight, pair_signal, shape_signal
from simimg.resolving.starpsfs import StarPsfs

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
        Of a pair's second star about its first; the magnitudes are those of the detected
        electrons, which decide whether the stars come apart.
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
        Of the scene's first object in the middle of the field.
    psfs : StarPsfs
        Of each object.
    width : float
        FWHM delivered (rad), roughly.
    expectation : Expectation or None
        Of the image about pairs, all objects shown.
    differences : tuple of float
        Magnitude difference of each pair as the detector sees it.
    """

    train: Train
    timed: bool
    detector: Detector | None
    diffraction: Directions
    delivered: Directions
    psfs: StarPsfs
    width: float
    expectation: Expectation | None
    differences: tuple[float, ...]
    _lights: dict[Transfer, StarLight] = field(default_factory=dict)
    _directions: dict[Transfer, Directions] = field(default_factory=dict)

    def objects(self, found: Inventory) -> tuple[ObjectLimits, ...]:
        """Every object of an inventory, a pair once, in its order."""
        known = np.isnan(found.magnitude) | self.timed
        peaks, snr, snr_fit = self._of_stars(found, known)
        differences = iter(self.differences)
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
                    self._pair(
                        (one, second),
                        both,
                        alone,
                        found,
                        next(differences),
                        coarse=pairs > _MANY,
                    )
                )
            elif one.shape is not None and self.detector is not None and known[row]:
                psf = computable(self.psfs.star(row))
                signal = shape_signal(psf, one, self.detector, width=self.width)
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
        found: Inventory,
        difference: float,
        *,
        coarse: bool,
    ) -> ObjectLimits:
        signal = bound = None
        psf = self.psfs.pair(stars[1].partner, stars[0].partner)
        if self.detector is not None and known:
            lights = self._light(psf.first, self.detector), self._light(psf.second, self.detector)
            signal = pair_signal(lights[0], stars, second=lights[1])
        if self.expectation is not None and known:
            bound = pair_precision(self.expectation, stars)
        first = stars[0]
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
            delivered=self._cuts(psf.mean).resolution(angle, difference),
            bound=bound,
            stars=alone,
        )

    def _light(self, psf: Transfer, detector: Detector) -> StarLight:
        own = self.delivered.transfer if self.psfs.shared else computable(psf)
        if own not in self._lights:
            self._lights[own] = StarLight(own, detector, width=self.width)
        return self._lights[own]

    def _cuts(self, psf: Transfer) -> Directions:
        if self.psfs.shared:
            return self.delivered
        if psf not in self._directions:
            self._directions[psf] = Directions(computable(psf))
        return self._directions[psf]

    def _of_stars(
        self, found: Inventory, known: AnyArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Peak, signal to noise and that of a fit for every row as a star; NaN where unknown."""
        values = np.full((3, len(found)), np.nan)
        if self.detector is None:
            return values[0], values[1], values[2]
        rows: list[tuple[StarLight, AnyArray]] = []
        together = 0 if self.psfs.shared else found.written
        for row in range(together):
            if found.shapes[row] is None:
                rows.append((self._light(self.psfs.star(row), self.detector), np.array([row])))
        if len(found) > together:
            common = self._light(self.delivered.transfer, self.detector)
            rows.append((common, np.arange(together, len(found))))
        for light, chosen in rows:
            electrons = np.where(known[chosen], found.electrons[chosen], 0.0)
            values[0, chosen] = light.peaks(found.x[chosen], found.y[chosen], electrons)
            values[1, chosen] = light.snr(electrons)
            values[2, chosen] = light.snr_fit(electrons)
        values[:, ~known] = np.nan
        return values[0], values[1], values[2]


def _number(value: float) -> float | None:
    return float(value) if isfinite(value) else None
