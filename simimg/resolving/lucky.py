"""Sums of short exposures: all of them, all recentred, or the best ones alone.

The plain sum is the long exposure. Recentred on their centroids the frames lose the image motion.
Of the lucky frames, the sharpest share of a cube, each is laid with its brightest place on that of
the others (shift-and-add): the more are thrown away, the sharper and the fainter the image (Fried
1978; Law, Mackay & Baldwin 2006). Shifts are whole pixels, so that every count stays a count.

References
----------
Fried, D. L. 1978, J. Opt. Soc. Am. 68, 1651.
Law, N. M., Mackay, C. D. & Baldwin, J. E. 2006, A&A 446, 739.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.ndimage import uniform_filter

from simimg.arrays import AnyArray, FloatArray, frozen

Quality = Literal["peak", "sharpness"]


@dataclass(frozen=True, eq=False)
class Sharpness:
    """How good each frame of a cube is, and where its light lies.

    Attributes
    ----------
    quality : (frames,) ndarray
        Greater is better.
    brightest : (frames, 2) ndarray of int
        Pixel (y, x) of the brightest place.
    centroid : (frames, 2) ndarray
        Of the light above the background, pixels (y, x).
    """

    quality: FloatArray
    brightest: AnyArray
    centroid: FloatArray

    def __post_init__(self) -> None:
        for name in ("quality", "brightest", "centroid"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    def best(self, keep: float) -> AnyArray:
        """Numbers of the best frames, a share `keep` of all and at least one, in order of time."""
        if not 0.0 < keep <= 1.0:
            raise ValueError(f"keep must be above 0 and at most 1, got {keep}")
        count = max(round(keep * self.quality.size), 1)
        return np.sort(np.argsort(-self.quality, kind="stable")[:count])


def judge_frames(
    frames: Iterable[AnyArray], *, background: float, quality: Quality = "peak"
) -> Sharpness:
    """Judge every frame.

    Parameters
    ----------
    frames : iterable of ndarray, shape (rows, columns)
    background : float
        Level without light, in the frames' unit.
    quality : {"peak", "sharpness"}
        Brightest mean of three by three pixels, or that of the squared light over the square of
        the light.

    Raises
    ------
    ValueError
        An unknown quality, or no frames.
    """
    if quality not in ("peak", "sharpness"):
        raise ValueError(f'quality must be "peak" or "sharpness", got {quality!r}')
    good, places, centres = [], [], []
    for frame in frames:
        light = frame.astype(np.float64) - background
        smooth = uniform_filter(light, 3, mode="constant")
        place = np.unravel_index(int(smooth.argmax()), smooth.shape)
        peak = float(smooth[place])
        whole = max(float(light.sum()), 1e-300)
        # Products of neighbours hold the squared light without the noise of each pixel.
        squared = float((light[:, 1:] * light[:, :-1]).sum())
        good.append(peak if quality == "peak" else squared / whole**2)
        places.append((int(place[0]), int(place[1])))
        # Noise far out would pull at a plain mean.
        strong = np.where(smooth > 0.1 * peak, np.maximum(smooth, 0.0), 0.0)
        mass = max(float(strong.sum()), 1e-300)
        y = float(strong.sum(axis=1) @ np.arange(strong.shape[0])) / mass
        x = float(strong.sum(axis=0) @ np.arange(strong.shape[1])) / mass
        centres.append((y, x))
    if not good:
        raise ValueError("there are no frames")
    return Sharpness(np.array(good), np.array(places), np.array(centres))


def shift_and_add(
    frames: Iterable[AnyArray],
    places: AnyArray,
    *,
    chosen: Sequence[int] | AnyArray,
    target: tuple[int, int],
    background: float,
) -> FloatArray:
    """Sum of chosen frames, each moved so that its place falls on the target.

    Parameters
    ----------
    frames : iterable of ndarray, shape (rows, columns)
    places : (frames, 2) ndarray
        Of each frame (y, x), rounded to whole pixels.
    chosen : sequence of int
        Numbers of the frames that are summed.
    target : (y, x)
    background : float
        What stands where a moved frame has no pixels.

    Returns
    -------
    ndarray, shape (rows, columns)
    """
    wanted = {int(one) for one in chosen}
    total: AnyArray = np.zeros(0)
    for number, frame in enumerate(frames):
        if number not in wanted:
            continue
        down, across = (round(float(t - p)) for t, p in zip(target, places[number], strict=True))
        rows, columns = frame.shape
        moved = np.full(frame.shape, background)
        to_y, to_x = (
            slice(max(down, 0), rows + min(down, 0)),
            slice(max(across, 0), columns + min(across, 0)),
        )
        from_y, from_x = (
            slice(max(-down, 0), rows - max(down, 0)),
            slice(max(-across, 0), columns - max(across, 0)),
        )
        moved[to_y, to_x] = frame[from_y, from_x]
        total = total + moved if total.size else moved
    return np.asarray(total)
