"""The square lattice of frequencies over which a PSF's integrals are summed.

A PSF is the Fourier integral of its transfer function. Summed over a lattice whose spacing is one
over a period P it is, by Poisson's summation formula, the PSF plus its own copies, P apart: the
error is what the wings hold at a distance P, whatever kinks the transfer function has inside. With
`NODES` nodes across the band it stays below 1e-7 of the peak for round, obstructed and turbulent
PSFs (a spike of a thin vane, which falls slowly, can leave 1e-6 along itself).

Angles in radians, frequencies in cycles per radian.
"""

from __future__ import annotations

import numpy as np

from simimg.imaging.basis import Transfer

NODES = 1024
"""Lattice points across the band."""

CHUNK = 1 << 19
"""Lattice points handled at once."""

_NEGLIGIBLE = 1e-12  # transfer that cannot show at 1e-7 of the peak


def effective_band(transfer: Transfer) -> float:
    """Frequency (cycles/rad) beyond which the transfer function is everywhere below 1e-12.

    Never above ``transfer.band_limit``; far below it when turbulence sets the limit.
    """
    count = 2048
    radii = transfer.band_limit * (np.arange(count) + 0.5) / count
    angles = np.zeros(1) if transfer.round else np.pi * np.arange(24) / 24
    values = np.abs(transfer(np.cos(angles)[:, None] * radii, np.sin(angles)[:, None] * radii)).max(
        axis=0
    )
    seen = np.flatnonzero(values > _NEGLIGIBLE)
    if seen.size == 0:
        raise ValueError("the transfer function vanishes everywhere")
    return float(min(transfer.band_limit, transfer.band_limit * (seen[-1] + 2) / count))


def half_lattice(transfer: Transfer, band: float) -> int:
    """Lattice points from the origin to the edge of the band.

    A pixel wider than the diffraction pattern lowers the peak but not the wings that fold in, so
    that the period must grow.
    """
    wide = int(np.ceil(160.0 * (transfer.box * band) ** (2.0 / 3.0)))
    return min(max(NODES // 2, wide), 3 * NODES // 2)
