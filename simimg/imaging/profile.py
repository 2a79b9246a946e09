"""The shape of one PSF, taken straight from its transfer function: cuts, peak, centre.

Along a line the Fourier integral of a PSF separates (projection-slice theorem, Bracewell 1956,
Aust. J. Phys. 9, 198): the transfer function summed across the direction is the one-dimensional
transform of the cut. The sums run over the lattice of `simimg.imaging.lattice`, which also says how
exact they are.

Angles in radians, frequencies in cycles per radian, PSFs per steradian at unit total light.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from math import cos, isfinite, pi, sin

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.imaging.basis import Transfer
from simimg.imaging.lattice import CHUNK, effective_band, half_lattice
from simimg.imaging.samples import sampled_psf

__all__ = [
    "PsfCut",
    "centroid",
    "effective_band",
    "peak_place",
    "psf_cut",
    "psf_peak",
    "sampled_psf",
    "strehl",
]


@dataclass(frozen=True, eq=False)
class PsfCut:
    """A PSF along a straight line: value and derivatives at any angle.

    Attributes
    ----------
    transfer : Transfer
        What it was cut from.
    angle : float
        Direction of the line (rad), from the detector's +x towards its +y.
    through : (float, float)
        Point (x, y; rad from the star's place) through which it runs and where ``t`` is 0.
    band : float
        Highest frequency in it (cycles/rad).
    reach : float
        ``abs(t)`` up to which the stored sum holds; farther out it is made anew, at greater cost.
    """

    transfer: Transfer
    angle: float
    through: tuple[float, float]
    band: float
    reach: float
    _frequency: FloatArray
    _strength: AnyArray

    def __call__(self, t: FloatArray | float) -> FloatArray:
        """PSF (per steradian) at `t` (rad along the line), to 1e-7 of the peak."""
        return self.derivative(t, 0)

    def derivative(self, t: FloatArray | float, order: int) -> FloatArray:
        """Derivative of `order` 0, 1, 2, ... with respect to `t`, per steradian per rad^order."""
        t = np.asarray(t, dtype=np.float64)
        far = float(np.abs(t).max(initial=0.0))
        if not isfinite(far):
            raise ValueError("a PSF is asked for at a place that is not finite")
        if far > self.reach:
            wider = psf_cut(self.transfer, self.angle, through=self.through, reach=far)
            return wider.derivative(t, order)
        weight = 2.0 * self._strength * (2.0 * pi * self._frequency) ** order
        flat = t.ravel()
        result = np.empty(flat.size)
        step = max(1, CHUNK // self._frequency.size)
        for first in range(0, flat.size, step):
            phase = 2.0 * pi * flat[first : first + step, None] * self._frequency
            # Each derivative turns the wave by a quarter.
            wave = np.cos(phase + 0.5 * pi * order)
            part = (wave * weight.real).sum(axis=1)
            if np.iscomplexobj(weight):
                part = part - (np.sin(phase + 0.5 * pi * order) * weight.imag).sum(axis=1)
            result[first : first + step] = part
        return result.reshape(t.shape)


def _sum_across(
    transfer: Transfer, angle: float, k: FloatArray, p: FloatArray, through: tuple[float, float]
) -> AnyArray:
    """Sum the transfer function over `p` across the direction, for each `k` along it."""
    c, s = cos(angle), sin(angle)
    shifted = through != (0.0, 0.0)
    total = np.zeros(k.size, dtype=np.float64 if transfer.even and not shifted else np.complex128)
    step = max(1, CHUNK // p.size)
    for first in range(0, k.size, step):
        part = k[first : first + step]
        # Along an axis the two arguments stay a row and a column: tabulated factors are then fast.
        if abs(s) < 1e-12:
            u, v, axis = c * part[None, :], c * p[:, None], 0
        elif abs(c) < 1e-12:
            u, v, axis = -s * p[None, :], s * part[:, None], 1
        else:
            u, v = part[:, None] * c - p * s, part[:, None] * s + p * c
            axis = 1
        value = transfer(u, v)
        if shifted:
            value = value * np.exp(2j * pi * (u * through[0] + v * through[1]))
        total[first : first + step] = value.sum(axis=axis)
    return total


def psf_cut(
    transfer: Transfer,
    angle: float,
    *,
    through: tuple[float, float] = (0.0, 0.0),
    reach: float = 0.0,
) -> PsfCut:
    """Cut a PSF along a straight line.

    Parameters
    ----------
    transfer : Transfer
        Transfer function of the PSF.
    angle : float
        Direction of the line (rad), from the detector's +x towards its +y.
    through : (float, float), optional
        Point (x, y; rad from the star's place) on the line where ``t`` is 0: the peak of a PSF
        that is not symmetric.
    reach : float, optional
        Greatest ``abs(t)`` (rad) that will be asked; at least 128 over the effective band.

    Returns
    -------
    PsfCut

    Raises
    ------
    ValueError
        When the transfer function vanishes everywhere.
    """
    band = effective_band(transfer)
    half = half_lattice(transfer, band)
    across = band / half
    p = across * (np.arange(2 * half, dtype=np.float64) + 0.5 - half)
    fold = 1.0
    if transfer.round and through == (0.0, 0.0):
        p, fold = p[half:], 2.0
    half = max(half, int(np.ceil(4.0 * band * reach)))
    spacing = band / half
    k = spacing * (np.arange(half, dtype=np.float64) + 0.5)
    strength = _sum_across(transfer, angle, k, p, through) * (fold * spacing * across)
    return PsfCut(
        transfer=transfer,
        angle=angle,
        through=through,
        band=band,
        reach=0.25 / spacing,
        _frequency=frozen(k),
        _strength=frozen(strength),
    )


def psf_peak(transfer: Transfer) -> float:
    """Greatest value of the PSF (per steradian at unit total light).

    For a transfer function that is not even, the peak is first looked for: see `peak_place`.
    """
    place = peak_place(transfer)
    return float(psf_cut(transfer, 0.0, through=place)(0.0))


def strehl(transfer: Transfer, reference: Transfer) -> float:
    """Strehl ratio: peak of a PSF over that of a reference with the same light (Strehl 1902).

    Equal to the ratio of the integrals of the two transfer functions where both are even.
    """
    return psf_peak(transfer) / psf_peak(reference)


def centroid(transfer: Transfer) -> tuple[float, float]:
    """Centre of the light (x, y; rad): the slope of the transfer function's phase at the origin."""
    if transfer.even:
        return (0.0, 0.0)
    small = 1e-4 * effective_band(transfer)
    value = transfer(np.array([small, 0.0]), np.array([0.0, small]))
    slope = -np.angle(value) / (2.0 * pi * small)
    return (float(slope[0]), float(slope[1]))


@lru_cache(maxsize=16)
def peak_place(transfer: Transfer) -> tuple[float, float]:
    """Where the PSF is brightest (x, y; rad from the star's place); the origin for an even one.

    The brightest of samples a quarter of the finest detail apart, then Newton's method on the
    Fourier sum itself.
    """
    if transfer.even:
        return (0.0, 0.0)
    x, y = centroid(transfer)
    band = effective_band(transfer)
    fine, half = 0.25 / band, 64
    image = sampled_psf(
        transfer, pixel_scale=fine, oversampling=1, half_width_pixels=half, centre=(x, y)
    )
    row, column = divmod(int(np.argmax(image)), image.shape[1])
    x += fine * (column - half)
    y += fine * (row - half)
    nodes = half_lattice(transfer, band)
    v = (np.arange(nodes) + 0.5) * (band / nodes)
    u = np.concatenate([-v[::-1], v])
    # The half plane of positive v: the other one adds the conjugate.
    plane = np.asarray(transfer(u[None, :], v[:, None]), dtype=np.complex128)
    wave_u, wave_v = 2j * pi * u, 2j * pi * v
    for _ in range(6):
        across = np.exp(wave_u * x)
        sums = plane @ np.stack([across, wave_u * across, wave_u**2 * across], axis=1)
        along = np.exp(wave_v * y)
        whole, first, second = along @ sums, (wave_v * along) @ sums, (wave_v**2 * along) @ sums
        slope = np.array([whole[1].real, first[0].real])
        bend = np.array([[whole[2].real, first[1].real], [first[1].real, second[0].real]])
        step = np.linalg.solve(bend, slope)
        if not np.hypot(*step) < fine:
            break
        x, y = x - float(step[0]), y - float(step[1])
        if np.hypot(*step) < 1e-9 / band:
            break
    return (x, y)
