"""Adaptive optics in a long exposure: structure function and transfer function.

The residual phase has a power spectrum (`simimg.air.residual`); its structure function
``D(r) = 2 int W (1 - cos 2 pi f.r) d2f`` gives the transfer function of the corrected air,
``exp(-D/2)`` (Rigaut, Veran & Lai 1998; Jolissaint, Veran & Conan 2006). It is the seeing's own,
exactly, less that of the power which the correction takes away; and that power lies within the
square of frequencies that the mirror controls (`simimg.air.controlsquare`). What lies beyond, to
infinite frequency, is so never truncated, and a correction that takes nothing away leaves the
seeing.

Lengths in metres, phases in radians at one wavelength, times in seconds.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from math import hypot

import numpy as np
from scipy.interpolate import BSpline, make_interp_spline

from simimg.air.controlsquare import ControlSquare, StructureTable
from simimg.air.layers import Layer
from simimg.air.residual import Loop, Turbulence, displacement, residual_spectrum
from simimg.air.turbulence import von_karman_structure
from simimg.arrays import FloatArray

_MANY = 4096  # shifts of which a table of the seeing's structure function serves
_NODES = 2048  # of that table, which is right to 1e-9

FARTHEST = 6.0
"""Diameters by which a layer is displaced at most; farther off its waves have nothing in common
with those before the guide star but the slowest, which move the image."""


@dataclass(frozen=True, eq=False)
class CorrectedAir:
    """Turbulence behind a correction, at one wavelength; others follow.

    Parameters
    ----------
    turbulence : Turbulence
    loop : Loop
    wavelength : float
        At which both are stated (m).
    """

    turbulence: Turbulence
    loop: Loop
    wavelength: float

    def transfer(self, sx: FloatArray, sy: FloatArray, wavelength: float) -> FloatArray:
        """Transfer function of the air at a shift in the pupil.

        Parameters
        ----------
        sx, sy : array_like
            Shifts (m) towards east and north, at most the diameter; they broadcast.
        wavelength : float
            Phases scale with its inverse (m).
        """
        scale = (self.wavelength / wavelength) ** 2
        sx, sy = np.broadcast_arrays(sx, sy)
        return np.asarray(np.exp(-0.5 * scale * self.structure(sx, sy)))

    def structure(self, sx: FloatArray, sy: FloatArray) -> FloatArray:
        """Structure function (rad2) of the residual phase at shifts (m) of one shape."""
        r = np.hypot(sx, sy)
        if r.size > _MANY:
            root = np.cbrt(np.minimum(r, _margin(self.loop.diameter)))
            seeing = np.asarray(self._seeing(root))
        else:
            seeing = self._exact(r)
        return np.asarray(np.maximum(seeing - self._taken(sx, sy), 0.0))

    def _exact(self, r: FloatArray) -> FloatArray:
        return von_karman_structure(r, self.turbulence.r0, self.turbulence.outer_scale)

    @cached_property
    def _seeing(self) -> BSpline:
        """The seeing's structure function by the cube root of distance, in which it is smooth."""
        root = np.linspace(0.0, _margin(self.loop.diameter) ** (1.0 / 3.0), _NODES)
        return make_interp_spline(root, self._exact(root**3), k=5)

    @cached_property
    def bounded(self) -> Loop:
        """The loop, its offsets no farther than where the turbulence has nothing in common."""
        loop = self.loop
        most = FARTHEST * loop.diameter
        away = max((layer.height for layer in self.turbulence.layers), default=0.0)

        def near(offset: tuple[float, float]) -> tuple[float, float]:
            way = away * hypot(*offset)
            share = 1.0 if way <= most else most / way
            return offset[0] * share, offset[1] * share

        tilt = None if loop.tilt_offset is None else near(loop.tilt_offset)
        return replace(loop, offset=near(loop.offset), tilt_offset=tilt)

    @cached_property
    def square(self) -> ControlSquare:
        """Nodes of the integrals over what is controlled."""
        loop = self.bounded
        ways = [_way(layer, loop) for layer in self.turbulence.layers]
        return ControlSquare(loop.edge, _margin(loop.diameter) + max(ways, default=0.0))

    @cached_property
    def _taken(self) -> StructureTable:
        """Structure function of the power that is taken away."""

        def power(fx: FloatArray, fy: FloatArray) -> FloatArray:
            whole = self.turbulence.spectrum(np.hypot(fx, fy))
            return whole - residual_spectrum(fx, fy, self.turbulence, self.bounded)

        return StructureTable(power, self.square, longest=_margin(self.loop.diameter))


def _margin(diameter: float) -> float:
    """Longest shift that is tabulated."""
    return 1.05 * diameter


def _way(layer: Layer, loop: Loop) -> float:
    """Longest displacement of a layer (m), by whichever star."""
    ways = [hypot(*displacement(layer, lag=loop.lag, offset=loop.offset))]
    if loop.tilt_offset is not None:
        ways.append(hypot(*displacement(layer, lag=loop.lag, offset=loop.tilt_offset)))
    return max(ways)
