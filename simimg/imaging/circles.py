"""Light in circles: how much of a PSF's light falls within a radius, from its transfer function.

The sum runs over the same square lattice of frequencies as in `simimg.imaging.lattice`, here
offset by half a step in both components: the squared moduli are then whole numbers of a unit, so
that equal moduli can be summed first, without approximation, and each circle costs one short sum.
The error is the light that copies of the PSF, one period apart, put into the circle.

Angles in radians, frequencies in cycles per radian.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import pi

import numpy as np
from scipy import optimize, special

from simimg.arrays import FloatArray
from simimg.imaging.basis import Transfer
from simimg.imaging.lattice import CHUNK, effective_band, half_lattice
from simimg.imaging.profile import centroid


def _rings(transfer: Transfer, reach: float) -> tuple[FloatArray, FloatArray]:
    """Moduli of the lattice's frequencies and the transfer function summed over each modulus."""
    band = effective_band(transfer)
    half = max(half_lattice(transfer, band), int(np.ceil(32.0 * band * reach)))
    spacing = band / half
    index = np.arange(half, dtype=np.int64)
    line = np.asarray(spacing * (index + 0.5), dtype=np.float64)
    moduli = int(half * (half - 1)) + 1
    total = np.zeros(moduli)
    square = index * (index + 1)
    shift = centroid(transfer)
    step = max(1, CHUNK // half)
    if transfer.round:
        for first in range(0, half, step):
            key = (square[first : first + step, None] + square) // 2
            total += 4.0 * np.bincount(key.ravel(), minlength=moduli)
        keys = np.flatnonzero(total)
        frequency = spacing * np.sqrt(2.0 * keys + 0.5)
        return frequency, total[keys] * spacing**2 * transfer.modulus(frequency)
    for first in range(0, half, step):
        rows = line[first : first + step, None]
        key = (square[first : first + step, None] + square) // 2
        for sign in (1.0, -1.0):
            value = transfer(line[None, :], sign * rows)
            if not transfer.even:
                value = value * np.exp(
                    2j * pi * (line[None, :] * shift[0] + sign * rows * shift[1])
                )
            total += 2.0 * np.bincount(key.ravel(), value.real.ravel(), minlength=moduli)
    keys = np.flatnonzero(total)
    return spacing * np.sqrt(2.0 * keys + 0.5), total[keys] * spacing**2


def _light_within(rings: tuple[FloatArray, FloatArray], radius: float) -> float:
    frequency, weight = rings
    kernel = radius * special.j1(2.0 * pi * radius * frequency) / frequency
    return float((weight * kernel).sum())


def encircled(transfer: Transfer, radii: FloatArray | float) -> FloatArray:
    """Fraction of the light within circles about the PSF's centre of light.

    The transfer function times the transform of a disc, ``R J1(2 pi R f) / f``.

    Parameters
    ----------
    transfer : Transfer
        Transfer function of the PSF.
    radii : array_like
        Radii of the circles (rad), 0 or more.

    Returns
    -------
    ndarray
        Fractions, of the shape of `radii`; good to 1e-6.
    """
    radii = np.asarray(radii, dtype=np.float64)
    rings = _rings(transfer, float(radii.max(initial=0.0)))
    return np.array([_light_within(rings, float(r)) for r in radii.ravel()]).reshape(radii.shape)


def encircled_diameters(transfer: Transfer, fractions: Sequence[float]) -> tuple[float, ...]:
    """Diameters (rad) of the circles about the centre of light that hold given fractions of it.

    Raises
    ------
    ValueError
        For a fraction outside 0 to 0.99: the last percent of a PSF lies in far wings.
    """
    for fraction in fractions:
        if not 0.0 < fraction <= 0.99:
            raise ValueError(f"fraction of the light must lie between 0 and 0.99, got {fraction}")
    band = effective_band(transfer)
    outer = 0.25 / band
    reach = 16.0 / band
    rings = _rings(transfer, 0.0)
    diameters = []
    for fraction in fractions:
        while _light_within(rings, outer) < fraction:
            outer *= 1.5
            if outer > reach:
                reach *= 2.0
                rings = _rings(transfer, reach)
        radius = optimize.brentq(
            lambda r, rings=rings, fraction=fraction: _light_within(rings, r) - fraction,
            0.0,
            outer,
            xtol=1e-7 * outer,
        )
        diameters.append(2.0 * float(radius))
    return tuple(diameters)


def encircled_diameter(transfer: Transfer, fraction: float) -> float:
    """Diameter (rad) of the circle that holds one fraction: see `encircled_diameters`."""
    return encircled_diameters(transfer, (fraction,))[0]
