"""Layers of turbulence above a telescope: heights, shares, winds, and what follows from them.

Turbulence lies in thin layers that the wind carries past without changing them (Taylor's frozen
flow). Their strengths add as r0^(-5/3), so that moments of height and speed to the power 5/3 give
the time over which a wavefront stays the same and the angle within which two stars share one
(Fried 1982; Roddier 1981). Above an airmass X every layer is X times as far away along the line of
sight. Metres, seconds, radians.

References
----------
Roddier, F. 1981, Progress in Optics 19, 281.
Fried, D. L. 1982, J. Opt. Soc. Am. 72, 52.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import cos, inf, isfinite, sin

SPAN = 0.314
"""Coherence time over r0/speed, and isoplanatic angle over r0/distance: 6.88^(-3/5)."""


@dataclass(frozen=True)
class Layer:
    """One layer.

    Attributes
    ----------
    height : float
        Above the telescope (m), 0 or more.
    share : float
        Of the turbulence's strength, 0 to 1.
    wind : float
        Speed (m/s), 0 or more.
    direction : float
        Position angle towards which it moves, north through east (rad).

    Raises
    ------
    ValueError
        A value out of range.
    """

    height: float
    share: float
    wind: float
    direction: float = 0.0

    def __post_init__(self) -> None:
        for name in ("height", "share", "wind"):
            value = getattr(self, name)
            if not (isfinite(value) and value >= 0.0):
                raise ValueError(f"{name} must be finite and not negative, got {value!r}")

    @property
    def velocity(self) -> tuple[float, float]:
        """Towards east and north (m/s)."""
        return self.wind * sin(self.direction), self.wind * cos(self.direction)


def normalised(layers: Sequence[Layer]) -> tuple[Layer, ...]:
    """The same layers, their shares adding up to 1.

    Raises
    ------
    ValueError
        Without a layer that has a share.
    """
    total = sum(layer.share for layer in layers)
    if not total > 0.0:
        raise ValueError("no layer has a share of the turbulence")
    return tuple(
        Layer(layer.height, layer.share / total, layer.wind, layer.direction) for layer in layers
    )


def effective_wind(layers: Sequence[Layer]) -> float:
    """Speed (m/s) of one layer that would change the wavefront as fast."""
    return float(sum(one.share * one.wind ** (5.0 / 3.0) for one in layers) ** 0.6)


def effective_distance(layers: Sequence[Layer], *, airmass: float = 1.0) -> float:
    """Distance (m) along the line of sight of one layer that would divide two stars as much."""
    return float(sum(one.share * (airmass * one.height) ** (5.0 / 3.0) for one in layers) ** 0.6)


def coherence_time(r0: float, layers: Sequence[Layer]) -> float:
    """Time (s) after which the wavefront has changed by 1 rad rms, 0.314 r0 / wind.

    Parameters
    ----------
    r0 : float
        Fried's parameter at the wavelength and airmass in hand (m).
    layers : sequence of Layer
        Of shares that add up to 1; infinity where none moves.
    """
    wind = effective_wind(layers)
    return SPAN * r0 / wind if wind > 0.0 else inf


def isoplanatic_angle(r0: float, layers: Sequence[Layer], *, airmass: float = 1.0) -> float:
    """Angle (rad) between stars whose wavefronts differ by 1 rad rms, 0.314 r0 / distance.

    Parameters
    ----------
    r0 : float
        Fried's parameter at the wavelength and airmass in hand (m).
    layers : sequence of Layer
        Of shares that add up to 1; infinity where all lie at the telescope.
    airmass : float
    """
    distance = effective_distance(layers, airmass=airmass)
    return SPAN * r0 / distance if distance > 0.0 else inf
