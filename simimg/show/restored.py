"""A restored view: the light before the PSF spread it, as far as the noise lets one guess.

By the iteration of Richardson (1972, J. Opt. Soc. Am. 62, 55) and Lucy (1974, Astron. J. 79, 745),
which scikit-image carries out: it climbs to the image of highest likelihood under Poisson noise,
and its number of iterations is all that holds the noise back. Read noise is allowed for by adding
its variance to the data (Snyder, Hammoud & White 1993, J. Opt. Soc. Am. A 10, 1014). The view adds
no information beyond a fit of the same PSF; it is a way of looking. Electrons and pixels.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil
from typing import Any

import numpy as np
from scipy import ndimage

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.frame import Frame
from simimg.resolving.given import Given
from simimg.resolving.observation import Observation, observe
from simimg.show.canvas import beside, grouped
from simimg.show.framepanel import COLOUR_MAP, orient
from simimg.show.marks import draw_word
from simimg.show.signal import clipped_background
from simimg.show.stretch import choose_stretch
from simimg.show.subject import Subject

ITERATIONS = 30
REMARK = "restoration adds no information beyond the fit"

_REACH = 8.0  # FWHM of the PSF that is used, and of margin about the window
_MOST_PIXELS = 1 << 22  # of a window that is worth restoring for a figure


@dataclass(frozen=True, eq=False)
class Restored:
    """A restored window of a frame.

    Attributes
    ----------
    values : (rows, columns) array
        Electrons above the background.
    noise : float
        Standard deviation of a pixel without an object, before the restoration, electrons.
    iterations : int
    source : str
        Where the PSF comes from.
    """

    values: FloatArray
    noise: float
    iterations: int
    source: str


def restore(frame: Frame, subject: Subject, *, iterations: int = ITERATIONS) -> Restored:
    """Restore the window of a frame about a subject.

    Parameters
    ----------
    frame : Frame
    subject : Subject
    iterations : int, optional
        1 or more.

    Raises
    ------
    InputError
        A frame whose PSF is not to be had.
    ValueError
        Fewer than one iteration, or too large a window.
    """
    if iterations < 1:
        raise ValueError(f"iterations must be 1 or more, got {iterations}")
    left, right, bottom, top = subject.window
    if (right - left) * (top - bottom) > _MOST_PIXELS:
        raise ValueError(f"a window of {right - left} x {top - bottom} pixels is too large")
    # A length on the sky is not needed here, so that one will do for frames that tell none.
    given = None if frame.scene_files else Given(pixel_scale_arcsec=1.0)
    seen = observe(frame, given=given)
    margin = ceil(min(_REACH * seen.fwhm, seen.psf.half_width))
    rows, columns = frame.counts.shape
    box = (
        slice(max(0, bottom - margin), min(rows, top + margin)),
        slice(max(0, left - margin), min(columns, right + margin)),
    )
    electrons = _filled(seen, box)
    background, noise = clipped_background(electrons)
    data = np.maximum(electrons + seen.variance, 1e-3)
    light = sharpened(data, _kernel(seen, margin), iterations)
    down, along = bottom - box[0].start, left - box[1].start
    window = light[down : down + top - bottom, along : along + right - left]
    return Restored(
        values=frozen(window - background - seen.variance),
        noise=noise,
        iterations=iterations,
        source=seen.sourced.source,
    )


def sharpened(data: FloatArray, kernel: FloatArray, iterations: int) -> FloatArray:
    """Richardson-Lucy with room at the edges, so that no light is lost across them.

    Parameters
    ----------
    data : ndarray, shape (rows, columns)
        Above 0.
    kernel : ndarray, shape (n, n), n odd
        Of unit sum.
    iterations : int
    """
    from skimage.restoration import richardson_lucy

    room = min(kernel.shape[0] // 2, *(side - 1 for side in data.shape))
    padded = np.pad(data, room, mode="reflect")
    # The first guess of the library is one half everywhere: the mean, in these units.
    unit = 2.0 * float(padded.mean())
    result = unit * richardson_lucy(padded / unit, kernel, num_iter=iterations, clip=False)
    rows, columns = data.shape
    return np.asarray(result[room : room + rows, room : room + columns])


def _kernel(seen: Observation, half: int) -> FloatArray:
    """The effective PSF of a star on the middle of a pixel, of unit sum."""
    side = 2 * half + 1
    image = seen.psf.evaluate(half, half, columns=side, rows=side, order=0)[0]
    image = np.maximum(image, 0.0)
    return np.asarray(image / image.sum())


def _filled(seen: Observation, box: tuple[slice, slice]) -> FloatArray:
    """Electrons of a box, pixels that do not count filled in from those around."""
    good = seen.usable(box)
    electrons = np.where(good, seen.flattened(box), 0.0)
    if good.all():
        return np.asarray(electrons)
    weight = ndimage.gaussian_filter(good.astype(np.float64), 1.5)
    around = ndimage.gaussian_filter(electrons, 1.5) / np.maximum(weight, 1e-6)
    far = float(np.median(electrons[good])) if good.any() else 0.0
    return np.where(good, electrons, np.where(weight > 0.05, around, far))


def draw_restored(axes: Any, restored: Restored, subject: Subject, *, simulated: bool) -> None:
    """Draw a restored window.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    restored : Restored
    subject : Subject
    simulated : bool
        Whether the panel says so.
    """
    from matplotlib.colors import AsinhNorm

    left, right, bottom, top = subject.window
    values: AnyArray = restored.values
    stretch = choose_stretch(values, noise=restored.noise, field=subject.kind in ("star", "source"))
    picture = axes.imshow(
        values,
        origin="lower",
        extent=(left - 0.5, right - 0.5, bottom - 0.5, top - 0.5),
        cmap=COLOUR_MAP,
        norm=AsinhNorm(stretch.softening, vmin=stretch.low, vmax=stretch.high),
        interpolation="nearest",
        gid="restored",
    )
    axes.set_xlabel("x (pixel)")
    axes.set_ylabel("y (pixel)")
    axes.locator_params(nbins=5, integer=True)
    if simulated:
        draw_word(axes, suffix="-restored")
    orient(axes, subject, [], suffix="-restored")
    bar = axes.figure.colorbar(picture, cax=axes.inset_axes(beside(axes)))
    ticks = stretch.ticks()
    bar.set_ticks(ticks, labels=[grouped(tick) for tick in ticks])
    bar.ax.minorticks_off()
    bar.set_label("electrons per pixel, restored")
    bar.outline.set_linewidth(0.6)
