"""What many short exposures have in common: mean power spectra, and how lopsided they are.

The mean power spectrum keeps detail down to the telescope's own limit where the mean image does not
(Labeyrie 1970). It cannot tell a pair from the same pair turned by half a turn; the mean product of
the transforms of the squared image and of the image can, as the brighter star dominates the square.
Both are kept in blocks of frames that follow one another, so that errors can be told from the
scatter among blocks. Electrons.

References
----------
Labeyrie, A. 1970, A&A 6, 85.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
import scipy.fft

from simimg.arrays import AnyArray, FloatArray, frozen

BLOCKS = 16
"""Blocks of frames, where there are frames enough."""

FEWEST = 24
"""Frames of the shortest cube whose errors can be told."""


@dataclass(frozen=True, eq=False)
class SpeckleSums:
    """Means over the frames of each block.

    Attributes
    ----------
    shape : (rows, columns)
        Of a frame.
    frames : (B,) ndarray
        In each block.
    electrons : (B,) ndarray
        Of a frame.
    power : (B, rows, columns // 2 + 1) ndarray
        Power spectrum, electrons squared, photon noise included.
    lopsided : the same shape, complex
        Transform of the squared image times the conjugate of that of the image.
    """

    shape: tuple[int, int]
    frames: FloatArray
    electrons: FloatArray
    power: FloatArray
    lopsided: AnyArray

    def __post_init__(self) -> None:
        for name in ("frames", "electrons", "power", "lopsided"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    def mean(self, *, without: int | None = None) -> FloatArray:
        """Mean power spectrum of all frames, or of all but one block's."""
        weight = self.frames.copy()
        if without is not None:
            weight[without] = 0.0
        return np.asarray(np.tensordot(weight / weight.sum(), self.power, axes=1))


def speckle_sums(
    frames: Iterable[AnyArray], count: int, *, bias: float, gain: float, background: float
) -> SpeckleSums:
    """Sum up frames.

    Parameters
    ----------
    frames : iterable of ndarray, shape (rows, columns)
        Counts, in the order of time.
    count : int
        How many, `FEWEST` or more.
    bias : float
        ADU.
    gain : float
        Electrons of light to an ADU.
    background : float
        Electrons a pixel of sky and dark signal, taken away.

    Raises
    ------
    ValueError
        Too few frames, or another number than said.
    """
    if count < FEWEST:
        raise ValueError(f"speckles need at least {FEWEST} frames, got {count}")
    blocks = min(BLOCKS, count // 3)
    edges = np.linspace(0, count, blocks + 1).astype(int)
    number = np.zeros(blocks)
    electrons = np.zeros(blocks)
    power: AnyArray = np.zeros(0)
    lopsided: AnyArray = np.zeros(0)
    shape = (0, 0)
    for index, counts in enumerate(frames):
        light = (counts.astype(np.float64) - bias) * gain - background
        if not power.size:
            shape = (light.shape[0], light.shape[1])
            half = (blocks, shape[0], shape[1] // 2 + 1)
            power, lopsided = np.zeros(half), np.zeros(half, dtype=np.complex128)
        block = int(np.searchsorted(edges, index, side="right")) - 1
        own = scipy.fft.rfft2(light)
        squared = scipy.fft.rfft2(light * light)
        power[block] += own.real**2 + own.imag**2
        lopsided[block] += squared * np.conj(own)
        electrons[block] += light.sum()
        number[block] += 1.0
    if number.sum() != count:
        raise ValueError(f"{number.sum():.0f} frames where {count} were said")
    power /= number[:, None, None]
    lopsided /= number[:, None, None]
    return SpeckleSums(shape, number, electrons / number, power, lopsided)
