"""One transfer function out of several: the colours of a band, each with its share of the light.

A polychromatic PSF is a sum of monochromatic ones. Where these are round the sum is round too and
is kept as one function of the modulus; otherwise it is a function of both components, with the
refraction of each colour as a phase. Frequencies in cycles per radian, angles in radians.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import pi

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.imaging.basis import Transfer, WingLaw

# Nodes of the tables of radial factors: linear interpolation in them errs by 1e-9.
_TABLE = 1 << 16
_MANY = 1 << 14


@dataclass(frozen=True)
class Part:
    """One colour: its transfer function, its share of the light, and where it falls (rad)."""

    transfer: Transfer
    share: float
    dx: float = 0.0
    dy: float = 0.0


def mixture(parts: Sequence[Part]) -> Transfer:
    """The transfer function of several colours together.

    Parameters
    ----------
    parts : sequence of Part
        At least one, without pixels; shares of sum 1, some possibly negative.

    Returns
    -------
    Transfer
        Without pixel.

    Raises
    ------
    ValueError
        No part, a part with a pixel, or shares that do not sum to 1.
    """
    if not parts or any(part.transfer.box for part in parts):
        raise ValueError("a mixture needs at least one part, and its parts no pixel")
    if abs(sum(part.share for part in parts) - 1.0) > 1e-9:
        raise ValueError("the shares of a mixture must sum to 1")
    shifted = any(part.dx or part.dy for part in parts)
    if len(parts) == 1 and not shifted:
        return parts[0].transfer
    limit = max(part.transfer.band_limit for part in parts)
    wings = _wings(parts)
    if not shifted and all(part.transfer.round for part in parts):

        def modulus(f: FloatArray) -> FloatArray:
            return np.asarray(sum(part.share * part.transfer.modulus(f) for part in parts))

        return Transfer(limit, radial=(modulus,), wings=wings)
    terms = [_Term(part) for part in parts]

    def planar(u: FloatArray, v: FloatArray) -> AnyArray:
        total = terms[0](u, v)
        for term in terms[1:]:
            total = total + term(u, v)
        return np.asarray(total)

    even = not shifted and all(part.transfer.even for part in parts)
    return Transfer(limit, planar=(planar,), even=even, wings=wings)


class _Term:
    """One colour's part of the sum, its radial factors tabulated for large arrays."""

    def __init__(self, part: Part) -> None:
        self.part = part
        limit = part.transfer.band_limit
        self.nodes = np.linspace(0.0, limit, _TABLE + 1)
        self.table = part.transfer.modulus(self.nodes) * part.share

    def __call__(self, u: FloatArray, v: FloatArray) -> AnyArray:
        part, transfer = self.part, self.part.transfer
        u, v = np.asarray(u, dtype=np.float64), np.asarray(v, dtype=np.float64)
        f = np.hypot(u, v)
        value: AnyArray
        if f.size > _MANY:
            value = np.interp(f, self.nodes, self.table, right=0.0)
        else:
            value = transfer.modulus(f) * part.share
        for factor in transfer.planar:
            value = value * factor(u, v)
        if part.dx or part.dy:
            # Separately along u and v: rows and columns stay cheap.
            value = value * (np.exp(-2j * pi * part.dx * u) * np.exp(-2j * pi * part.dy * v))
        return value


def _wings(parts: Sequence[Part]) -> WingLaw:
    """The parts' wings by share; the core widened by how far the colours lie apart."""
    laws = [part.transfer.wings for part in parts]
    shares = [max(part.share, 0.0) for part in parts]
    spread = max(np.hypot(part.dx, part.dy) for part in parts)
    widest = max(laws, key=lambda law: law.core)
    return replace(
        widest,
        cubic=sum(s * law.cubic for s, law in zip(shares, laws, strict=True)),
        kolmogorov=sum(s * law.kolmogorov for s, law in zip(shares, laws, strict=True)),
        core=max(law.core for law in laws) + float(spread),
    )
