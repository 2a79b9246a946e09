"""Integrals over the square of spatial frequencies that an adaptive mirror controls.

The power that a correction takes away lies within |fx|, |fy| < 1/(2d). Its structure function,
``2 int R (1 - cos 2 pi f.r) d2f``, is an integral over that bounded region, done by Gauss' rule: in
polar coordinates within an inner square, whose radial nodes crowd towards the origin as the
spectrum wants it, and over rectangles outside, where a product of two rules makes the sum over
frequencies a product of matrices. It is the same for a shift and its opposite: half a plane of
frequencies and half a plane of shifts hold all. Lengths in metres, frequencies in cycles per metre.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import ceil, factorial, pi, sqrt

import numpy as np
from scipy import ndimage
from threadpoolctl import threadpool_limits

from simimg.arrays import FloatArray

INNER = 0.25
"""Half side of the inner square over that of the whole."""

_FINE = 16  # samples of a table to the shortest period
_ORDER = 5  # of the splines
_MARGIN = 16  # samples of a table beyond what is asked of it, so that its spline is right there
_PER_CYCLE = 3.5  # nodes of Gauss' rule for a cycle of the fastest cosine, above pi
_LEAST = 40
_SMOOTH = 70  # nodes that the spectrum itself wants over the longest side of a rectangle

Power = Callable[[FloatArray, FloatArray], FloatArray]
"""Spectrum at frequencies ``(fx, fy)`` (rad2 m2), the same for opposite ones."""


@dataclass(frozen=True, eq=False)
class Rectangle:
    """A product of two Gauss rules.

    Attributes
    ----------
    fx, fy : ndarray
        Nodes of each axis.
    x_weight, y_weight : ndarray
        Of each; the opposite rectangle is counted by the first.
    """

    fx: FloatArray
    fy: FloatArray
    x_weight: FloatArray
    y_weight: FloatArray


@dataclass(frozen=True, eq=False)
class ControlSquare:
    """Nodes of the integrals over a square of control.

    Parameters
    ----------
    edge : float
        Half side of the square (cycles/m).
    reach : float
        Longest distance (m) whose cosine is to be integrated, that of the spectrum's own cosines
        included.
    """

    edge: float
    reach: float

    def polar(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Frequencies and weights within the inner square."""
        half = INNER * self.edge
        cycles = sqrt(2.0) * half * self.reach
        # The substitution below runs through the last cycles three times as fast.
        t, t_weight = _rule(0.0, 1.0, _LEAST + ceil(2.2 * _PER_CYCLE * cycles))
        octants = [
            _rule(k * pi / 4.0, (k + 1) * pi / 4.0, 16 + ceil(0.5 * _PER_CYCLE * cycles))
            for k in range(4)
        ]
        angle, angle_weight = (np.concatenate(one) for one in zip(*octants, strict=True))
        c, s = np.cos(angle)[:, None], np.sin(angle)[:, None]
        border = half / np.maximum(np.abs(c), np.abs(s))
        # f = border t^3 makes the steep spectrum times the slow cosine smooth at the origin.
        f = border * t**3
        weight = 2.0 * f * border * 3.0 * t**2 * t_weight * angle_weight[:, None]
        return (f * c).ravel(), (f * s).ravel(), weight.ravel()

    def rectangles(self) -> tuple[Rectangle, Rectangle]:
        """Outside the inner square: beside it, and above it."""
        edge, half = self.edge, INNER * self.edge
        long, short = 2.0 * edge * self.reach, (edge - half) * self.reach
        beside = _rule(half, edge, _LEAST + ceil(_PER_CYCLE * short))
        along = _rule(-edge, edge, _SMOOTH + ceil(_PER_CYCLE * long))
        over = _rule(-half, half, _LEAST + ceil(_PER_CYCLE * 2.0 * half * self.reach))
        return (
            Rectangle(beside[0], along[0], 2.0 * beside[1], along[1]),
            Rectangle(over[0], beside[0], 2.0 * over[1], beside[1]),
        )

    def nodes(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Frequencies and weights over the whole square, as flat arrays."""
        parts = [self.polar()]
        for one in self.rectangles():
            fx, fy = np.broadcast_arrays(one.fx, one.fy[:, None])
            parts.append((fx.ravel(), fy.ravel(), np.outer(one.y_weight, one.x_weight).ravel()))
        fx, fy, weight = (np.concatenate(one) for one in zip(*parts, strict=True))
        return fx, fy, weight


def _rule(start: float, stop: float, count: int) -> tuple[FloatArray, FloatArray]:
    knots, weights = np.polynomial.legendre.leggauss(count)
    return start + 0.5 * (stop - start) * (knots + 1.0), 0.5 * (stop - start) * weights


class StructureTable:
    """Structure function of a spectrum within a square of control, tabulated.

    Parameters
    ----------
    power : callable
        The spectrum.
    square : ControlSquare
    longest : float
        Longest shift (m) that is asked for, in x and in y.
    """

    def __init__(self, power: Power, square: ControlSquare, *, longest: float) -> None:
        # One thread: what a sum's order may change must not hang on the number of processors.
        with threadpool_limits(limits=1):
            inner, coarse = _inner_table(power, square, longest)
            value, step, x, y = _outer_table(power, square, longest)
        self._step = step
        value += _looked_up(inner, coarse, *np.meshgrid(x, y))
        self._coefficients = ndimage.spline_filter(value, order=_ORDER, mode="nearest")

    def __call__(self, sx: FloatArray, sy: FloatArray) -> FloatArray:
        """At shifts (m) of one shape."""
        sign = np.where(sy < 0.0, -1.0, 1.0)
        return _looked_up(self._coefficients, self._step, sign * sx, sign * sy)


def _looked_up(coefficients: FloatArray, step: float, sx: FloatArray, sy: FloatArray) -> FloatArray:
    half = coefficients.shape[1] // 2
    places = [(sy / step + _MARGIN).ravel(), (sx / step + half).ravel()]
    found = ndimage.map_coordinates(
        coefficients, places, order=_ORDER, prefilter=False, mode="nearest"
    )
    return np.asarray(found.reshape(np.shape(sx)))


def _grid(fastest: float, longest: float) -> tuple[float, FloatArray, FloatArray]:
    """Step, x and y (from 0 up) of a table of what has no faster wave."""
    count = max(8, ceil(_FINE * fastest * longest))
    step = longest / count
    count += _MARGIN
    return step, step * np.arange(-count, count + 1), step * np.arange(-_MARGIN, count + 1)


def _inner_table(power: Power, square: ControlSquare, longest: float) -> tuple[FloatArray, float]:
    """Spline coefficients and step of the inner square's part, whose waves are slower."""
    step, x, y = _grid(INNER * square.edge, longest)
    fx, fy, weight = square.polar()
    weight = weight * power(fx, fy)
    slow = 2.0 * pi * np.hypot(fx, fy) * sqrt(2.0) * x[-1] < 1.0
    value = _slow_waves(fx[slow], fy[slow], weight[slow], x, y)
    fx, fy, weight = fx[~slow], fy[~slow], weight[~slow]
    ax, ay = 2.0 * pi * np.outer(fx, x), 2.0 * pi * np.outer(fy, y)
    waves = (np.cos(ay) * weight[:, None]).T @ np.cos(ax)
    waves -= (np.sin(ay) * weight[:, None]).T @ np.sin(ax)
    value += 2.0 * (weight.sum() - waves)
    return ndimage.spline_filter(value, order=_ORDER, mode="nearest"), step


def _outer_table(
    power: Power, square: ControlSquare, longest: float
) -> tuple[FloatArray, float, FloatArray, FloatArray]:
    """Values, step, x and y of the part of the rectangles."""
    step, x, y = _grid(square.edge, longest)
    value = np.zeros((y.size, x.size))
    for one in square.rectangles():
        fx, fy = np.broadcast_arrays(one.fx, one.fy[:, None])
        weight = power(fx, fy) * one.x_weight * one.y_weight[:, None]
        ax, ay = 2.0 * pi * np.outer(one.fx, x), 2.0 * pi * np.outer(y, one.fy)
        waves = np.cos(ay) @ (weight @ np.cos(ax)) - np.sin(ay) @ (weight @ np.sin(ax))
        value += 2.0 * (weight.sum() - waves)
    return value, step, x, y


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
