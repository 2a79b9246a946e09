"""Adaptive optics in a long exposure: structure function and transfer function.

The residual phase has a power spectrum (`simimg.air.residual`); its structure function
``D(r) = 2 int W (1 - cos 2 pi f.r) d2f`` gives the transfer function of the corrected air,
``exp(-D/2)`` (Rigaut, Veran & Lai 1998; Jolissaint, Veran & Conan 2006). It is taken apart so that
nothing is lost: beyond the circle of frequencies about the square of control it is the seeing's
own, exactly (its analytic structure function less a band-limited integral), a function of distance
alone; within the circle it is an integral over a bounded region, done by Gauss' rule in polar
coordinates, whose radial nodes crowd towards the origin as the spectrum wants it.

Lengths in metres, phases in radians at one wavelength, times in seconds.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import ceil, factorial, pi, sqrt

import numpy as np
from scipy import ndimage
from scipy.interpolate import BSpline, make_interp_spline
from scipy.special import j0

from simimg.air.residual import Loop, Turbulence, residual_spectrum
from simimg.air.turbulence import von_karman_structure
from simimg.arrays import AnyArray, FloatArray

_PER_CYCLE = 4  # nodes of Gauss' rule for a cycle of the fastest cosine
_LEAST = 24
_FINE = 8  # samples of a table to the shortest period
_OCTANTS = 8
_CHUNK = 4096  # frequencies summed at a time
_MARGIN = 16  # samples of a table beyond what is asked of it, so that its spline is right there


@dataclass(frozen=True, eq=False)
class Nodes:
    """Frequencies and weights of an integral over a half plane of frequencies, doubled.

    Attributes
    ----------
    fx, fy, weight : ndarray, shape (n,)
        The weights hold the area of both half planes.
    inside : ndarray of bool, shape (n,)
        Which lie within the square of control.
    """

    fx: FloatArray
    fy: FloatArray
    weight: FloatArray
    inside: AnyArray


def control_nodes(edge: float, *, reach: float) -> Nodes:
    """Nodes over the circle of frequencies about the square of control, half of it.

    Parameters
    ----------
    edge : float
        Half side of the square (cycles/m).
    reach : float
        Longest distance (m) whose cosine is to be integrated.
    """
    cycles = sqrt(2.0) * edge * reach
    radial = _LEAST + ceil(_PER_CYCLE * cycles)
    turning = _LEAST // 2 + ceil(_PER_CYCLE * cycles * pi / 8.0)
    knots, own = np.polynomial.legendre.leggauss(radial)
    t, t_weight = 0.5 * (knots + 1.0), 0.5 * own
    angles, angle_weights = [], []
    around, around_weight = np.polynomial.legendre.leggauss(turning)
    for octant in range(_OCTANTS // 2):
        start = octant * pi / 4.0
        angles.append(start + (around + 1.0) * pi / 8.0)
        angle_weights.append(around_weight * pi / 8.0)
    angle, angle_weight = np.concatenate(angles), np.concatenate(angle_weights)
    c, s = np.cos(angle)[:, None], np.sin(angle)[:, None]
    border = edge / np.maximum(np.abs(c), np.abs(s))
    parts = []
    # f = border t^3 makes the steep spectrum times the slow cosine smooth at the origin.
    f = border * t**3
    parts.append((f, f * border * 3.0 * t**2 * t_weight, True))
    outer = sqrt(2.0) * edge
    # Between the square and the circle; there is next to nothing at the corners.
    rest = border + (outer - border) * t
    parts.append((rest, rest * (outer - border) * t_weight, False))
    fx, fy, weight, inside = [], [], [], []
    for f, measure, within in parts:
        fx.append((f * c).ravel())
        fy.append((f * s).ravel())
        weight.append((2.0 * measure * angle_weight[:, None]).ravel())
        inside.append(np.full(f.size, within))
    return Nodes(*(np.concatenate(one) for one in (fx, fy, weight, inside)))


@dataclass(frozen=True, eq=False)
class CorrectedAir:
    """Turbulence behind a correction, at one wavelength; others follow.

    Parameters
    ----------
    turbulence : Turbulence
    loop : Loop
    wavelength : float
        At which both are stated (m).
    reach : float
        Longest separation of two points of the pupil (m).
    """

    turbulence: Turbulence
    loop: Loop
    wavelength: float
    reach: float

    def transfer(self, sx: FloatArray, sy: FloatArray, wavelength: float) -> FloatArray:
        """Transfer function of the air at a shift in the pupil.

        Parameters
        ----------
        sx, sy : array_like
            Shifts (m) towards east and north, within the reach; they broadcast.
        wavelength : float
            Phases scale with its inverse (m).
        """
        scale = (self.wavelength / wavelength) ** 2
        sx, sy = np.broadcast_arrays(sx, sy)
        value = self.beyond(np.hypot(sx, sy)) + self.within(sx, sy)
        return np.asarray(np.exp(-0.5 * scale * np.maximum(value, 0.0)))

    def beyond(self, r: FloatArray) -> FloatArray:
        """Structure function (rad2) of what lies beyond the circle of frequencies."""
        seeing = von_karman_structure(r, self.turbulence.r0, self.turbulence.outer_scale)
        return np.asarray(np.maximum(seeing - self._slow(np.minimum(r, self._most)), 0.0))

    def within(self, sx: FloatArray, sy: FloatArray) -> FloatArray:
        """Structure function (rad2) of what is left within the circle."""
        table, step = self._table
        half = table.shape[1] // 2
        # It is the same for a shift and its opposite: y from 0 up.
        sign = np.where(sy < 0.0, -1.0, 1.0)
        places = [(sign * sy) / step + _MARGIN, (sign * sx) / step + half]
        value = ndimage.map_coordinates(
            table, [one.ravel() for one in places], order=5, prefilter=False, mode="nearest"
        )
        return np.asarray(value.reshape(np.shape(sx)))

    @property
    def _circle(self) -> float:
        return sqrt(2.0) * self.loop.edge

    @property
    def _most(self) -> float:
        return 1.05 * self.reach

    @cached_property
    def _slow(self) -> BSpline:
        """Structure function of the turbulence within the circle, by distance."""
        circle, most = self._circle, self._most
        knots, own = np.polynomial.legendre.leggauss(_LEAST + ceil(_PER_CYCLE * circle * most))
        t, weight = 0.5 * (knots + 1.0), 0.5 * own
        f = circle * t**3
        measure = 2.0 * pi * f * circle * 3.0 * t**2 * weight * self.turbulence.spectrum(f)
        r = np.linspace(0.0, most, 16 + ceil(16 * circle * most))
        value = np.empty_like(r)
        for start in range(0, r.size, 512):
            part = slice(start, start + 512)
            waves = _one_less_j0(2.0 * pi * np.outer(r[part], f))
            value[part] = (2.0 * measure * waves).sum(axis=1)
        return make_interp_spline(r, value, k=7)

    @cached_property
    def nodes(self) -> Nodes:
        """Of the integral within the circle."""
        return control_nodes(self.loop.edge, reach=self._most)

    @cached_property
    def left(self) -> FloatArray:
        """Power spectrum at the nodes, weights applied: the variance (rad2) at each."""
        nodes = self.nodes
        inside = nodes.inside
        power = self.turbulence.spectrum(np.hypot(nodes.fx, nodes.fy))
        power[inside] = residual_spectrum(
            nodes.fx[inside], nodes.fy[inside], self.turbulence, self.loop
        )
        return power * nodes.weight

    @cached_property
    def _table(self) -> tuple[FloatArray, float]:
        """Spline coefficients of the structure function within the circle, y from 0 up."""
        from threadpoolctl import threadpool_limits

        count = _MARGIN + ceil(_FINE * self._circle * self._most)
        step = self._most / (count - _MARGIN)
        x = step * np.arange(-count, count + 1)
        y = step * np.arange(-_MARGIN, count + 1)
        nodes, power = self.nodes, self.left
        slow = 2.0 * pi * np.hypot(nodes.fx, nodes.fy) * sqrt(2.0) * step * count < 1.0
        value = _slow_waves(nodes.fx[slow], nodes.fy[slow], power[slow], x, y)
        fx, fy, power = nodes.fx[~slow], nodes.fy[~slow], power[~slow]
        # One thread: what a sum's order may change must not hang on the number of processors.
        with threadpool_limits(limits=1):
            for start in range(0, fx.size, _CHUNK):
                part = slice(start, start + _CHUNK)
                across = 2.0 * pi * np.outer(fx[part], x)
                along = 2.0 * pi * np.outer(fy[part], y)
                waves = (np.cos(along) * power[part, None]).T @ np.cos(across)
                waves -= (np.sin(along) * power[part, None]).T @ np.sin(across)
                value += 2.0 * (power[part].sum() - waves)
        coefficients = ndimage.spline_filter(value, order=5, mode="nearest")
        return coefficients, step


def _one_less_j0(z: FloatArray) -> FloatArray:
    """1 - J0(z), with its digits at small z."""
    square = z * z
    series = 0.25 * square * (1.0 - square / 16.0 * (1.0 - square / 36.0))
    return np.where(z < 0.1, series, 1.0 - j0(z))


def _slow_waves(
    fx: FloatArray, fy: FloatArray, power: FloatArray, x: FloatArray, y: FloatArray
) -> FloatArray:
    """Twice the sum of ``power (1 - cos 2 pi f.r)`` for phases below 1, on a grid (y, x).

    By the cosine's series: where the spectrum is steepest the difference is too small for its
    terms to be taken one from the other. The seventh term is below 1e-10 of the first.
    """
    value = np.zeros((y.size, x.size))
    for order in range(2, 14, 2):
        sign = -1.0 if order % 4 == 0 else 1.0
        for k in range(order + 1):
            # Of (fx x + fy y)^order over its factorial.
            moment = float((power * fx**k * fy ** (order - k)).sum())
            factor = 2.0 * sign * (2.0 * pi) ** order / (factorial(k) * factorial(order - k))
            value += factor * moment * np.outer(y ** (order - k), x**k)
    return value
