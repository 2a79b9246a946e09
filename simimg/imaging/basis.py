"""The one seam for every point-spread function: transfer functions and how they are mixed.

A `Transfer` is an optical transfer function on the sky, from pupil, air, pointing and pixel alike,
kept as factors: functions of the frequency's modulus (which the engine tabulates once), functions
of both components, and the square response of a pixel. A `PsfBasis` is K of them and a rule that
gives each source its K weights, so that colour, field and distance from a guide star are all the
same thing to the engine. Frequencies are in cycles per radian, u along the detector's +x and v
along its +y; angles in radians.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from math import pi

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.imaging.sources import Points

Radial = Callable[[FloatArray], FloatArray]
Planar = Callable[[FloatArray, FloatArray], AnyArray]
Weigh = Callable[[Points], FloatArray]


@dataclass(frozen=True)
class WingLaw:
    """An upper envelope of a PSF far from its core, per steradian at unit total light.

    The wing of a PSF is set by the cusp of its transfer function at the origin: a fall of
    ``1 - c f`` (the edges of a pupil) gives ``c / (4 pi^2) theta^-3``, and Kolmogorov's
    ``1 - k f^(5/3)`` gives ``k pi^(-8/3) Gamma(11/6) / |Gamma(-5/6)| theta^(-11/3)``
    (Stein & Weiss 1971, transform of a homogeneous function). Straight vanes and edges throw
    spikes that fall as ``theta^-2`` beyond their own diffraction angle.

    Attributes
    ----------
    cubic : float
        Coefficient of ``theta^-3`` (rad), rings included (their maxima are twice the mean).
    kolmogorov : float
        Coefficient of ``theta^(-11/3)`` (rad^(5/3)).
    spikes : tuple of (float, float)
        For each set of spikes its level per steradian and the angle (rad) from which it falls.
    core : float
        Angle (rad) that holds the core, where the laws of the wing do not hold yet.
    """

    cubic: float = 0.0
    kolmogorov: float = 0.0
    spikes: tuple[tuple[float, float], ...] = ()
    core: float = 0.0

    def __call__(self, theta: FloatArray) -> FloatArray:
        """Envelope per steradian at angles `theta` (rad, positive)."""
        smooth = self.cubic * theta**-3.0 + self.kolmogorov * theta ** (-11.0 / 3.0)
        for level, angle in self.spikes:
            smooth = smooth + level * np.minimum(1.0, (angle / theta) ** 2)
        return smooth

    def mean(self, theta: FloatArray) -> FloatArray:
        """Azimuthal mean per steradian at angles `theta` (rad), without rings and spikes."""
        return 0.5 * self.cubic * theta**-3.0 + self.kolmogorov * theta ** (-11.0 / 3.0)

    def light_beyond(self, theta: FloatArray) -> FloatArray:
        """Share of the light farther out than `theta` (rad), spikes left out (they are thin)."""
        theta = np.maximum(theta, 1e-30)
        return 2.0 * pi * (0.5 * self.cubic / theta + 0.6 * self.kolmogorov * theta ** (-5.0 / 3.0))

    def reach(self, level: FloatArray | float) -> FloatArray:
        """Angle (rad) beyond which the envelope stays below `level` (per steradian).

        Each law is solved for its share of the level, and the farthest answer taken.
        """
        share = np.asarray(level, dtype=np.float64) / (2.0 + len(self.spikes))
        farthest = (self.cubic / share) ** (1.0 / 3.0)
        farthest = np.maximum(farthest, self.core)
        farthest = np.maximum(farthest, (self.kolmogorov / share) ** (3.0 / 11.0))
        for spike_level, angle in self.spikes:
            beyond = angle * np.sqrt(spike_level / share)
            farthest = np.maximum(farthest, np.where(spike_level > share, beyond, 0.0))
        return np.asarray(farthest, dtype=np.float64)


@dataclass(frozen=True)
class Transfer:
    """An optical transfer function, 1 at the origin.

    Attributes
    ----------
    band_limit : float
        Modulus of frequency (cycles/rad) at and beyond which it vanishes.
    radial : tuple of callable
        Factors that depend on the modulus alone.
    planar : tuple of callable
        Factors of ``(u, v)``; arrays of any broadcastable shapes, real or complex.
    box : float
        Side of the square pixel (rad); 0 without a pixel.
    even : bool
        True when every factor is real, so that the PSF is its own mirror image.
    wings : WingLaw
        Envelope of the PSF far out.
    """

    band_limit: float
    radial: tuple[Radial, ...] = ()
    planar: tuple[Planar, ...] = ()
    box: float = 0.0
    even: bool = True
    wings: WingLaw = field(default_factory=WingLaw)

    @property
    def round(self) -> bool:
        """True when it depends on the modulus of the frequency alone."""
        return not self.planar and self.box == 0.0

    def modulus(self, f: FloatArray) -> FloatArray:
        """Product of the radial factors at moduli `f` (cycles/rad), zero beyond the band limit."""
        f = np.asarray(f, dtype=np.float64)
        value = np.ones_like(f)
        for factor in self.radial:
            value = value * factor(f)
        return np.where(f < self.band_limit, value, 0.0)

    def __call__(self, u: FloatArray, v: FloatArray) -> AnyArray:
        """Value at frequencies `u`, `v` (cycles/rad, broadcast together); real where `even`."""
        u = np.asarray(u, dtype=np.float64)
        v = np.asarray(v, dtype=np.float64)
        value: AnyArray = self.modulus(np.hypot(u, v))
        for factor in self.planar:
            value = value * factor(u, v)
        if self.box:
            value = value * (np.sinc(u * self.box) * np.sinc(v * self.box))
        return value

    def with_pixel(self, side: float) -> Transfer:
        """The same, seen by square pixels of `side` (rad)."""
        return replace(self, box=side)


@dataclass(frozen=True)
class PsfBasis:
    """K transfer functions and the rule that mixes them for each source.

    Attributes
    ----------
    members : tuple of Transfer
        At least one.
    weigh : callable, optional
        ``weigh(points) -> (N, K)`` weights, possibly negative, rows summing to 1. Absent for a
        single PSF.
    """

    members: tuple[Transfer, ...]
    weigh: Weigh | None = None

    def __post_init__(self) -> None:
        if not self.members:
            raise ValueError("a PsfBasis needs at least one transfer function")
        if self.weigh is None and len(self.members) > 1:
            raise ValueError("a PsfBasis of several members needs a rule for their weights")

    def weights(self, points: Points) -> FloatArray:
        """Weights of every source, shape ``(N, K)``."""
        if self.weigh is None:
            return np.ones((len(points), 1))
        return self.weigh(points)

    @property
    def wings(self) -> WingLaw:
        """An envelope that holds for every member."""
        return _widest([member.wings for member in self.members])


def _widest(laws: Sequence[WingLaw]) -> WingLaw:
    """One law at least as wide as each of several."""
    return WingLaw(
        cubic=max(law.cubic for law in laws),
        kolmogorov=max(law.kolmogorov for law in laws),
        core=max(law.core for law in laws),
        spikes=max((law.spikes for law in laws), key=lambda s: sum(a * b * b for a, b in s)),
    )
