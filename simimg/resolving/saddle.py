"""The saddle between two stars as the pixels show it, with its error.

Brightness is read from the pixels at points on the line that joins the stars, by cubic convolution
(Keys 1981, IEEE Trans. Acoust. Speech Signal Process. 29, 1153): each point is a fixed sum over
sixteen pixels, so that its noise, and that of a ratio of two points, follows exactly. *Where* the
two peaks and the saddle lie is taken from the fitted model, seen through the same pixels: the
lowest of many noisy points would lie too low. *How high* they are is read from the data.
"""

from __future__ import annotations

from math import floor, hypot, isfinite, sqrt

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.resolving.starfit import Cutout, Likelihood, StarFit

_STEPS = 24  # points on the line to the FWHM


def saddle_seen(
    cutout: Cutout, fit: StarFit, *, first: int = 0, second: int = 1, index: int = 0
) -> tuple[float, float]:
    """Measure the saddle between two fitted stars over the lower of their peaks.

    Parameters
    ----------
    cutout : Cutout
        That holds both stars.
    fit : StarFit
        The fit, of this cutout among others.
    first, second : int
        Which of its stars.
    index : int
        Which of the fit's cutouts it is; of the first frame.

    Returns
    -------
    ratio, error : float
        Background taken off. Where the model has no saddle the ratio is 1; NaN where masked
        pixels or the cutout's edge are in the way.
    """
    likelihood = Likelihood([cutout], len(fit.places))
    vector = fit.own(index)
    model = likelihood.jacobian(vector, 0)[0].reshape(cutout.electrons.shape)
    start = fit.places[first] - (cutout.x0, cutout.y0)
    along = fit.places[second] - fit.places[first]
    length = hypot(*along)
    if not (isfinite(length) and length > 0.0):
        return float("nan"), float("nan")
    # The peaks of a blend lie a little inside or outside the stars' own places.
    reach = min(0.5, 0.5 * cutout.psf.fwhm / length)
    count = max(8, int((1.0 + 2.0 * reach) * length / cutout.psf.fwhm * _STEPS)) + 1
    share = np.linspace(-reach, 1.0 + reach, count)
    points = start + share[:, None] * along
    if not all(_readable(cutout, x, y) for x, y in points):
        return float("nan"), float("nan")
    vector[2 : 3 * likelihood.stars : 3] = 0.0
    base = likelihood.jacobian(vector, 0)[0].reshape(cutout.electrons.shape)
    light = model - base
    seen = np.array([_weights(x, y) @ _patch(light, x, y) for x, y in points])
    near = min(0.5, reach)
    one = int(np.argmax(np.where(share <= near, seen, -np.inf)))
    two = int(np.argmax(np.where(share >= 1.0 - near, seen, -np.inf)))
    low = one + int(np.argmin(seen[one : two + 1]))
    lower = one if seen[one] < seen[two] else two
    shown = low not in (one, two)
    if not shown:
        # No saddle: the noise is that of the midpoint against the fainter star's own place.
        fainter = 1.0 if fit.electrons[second] < fit.electrons[first] else 0.0
        low, lower = (int(np.argmin(np.abs(share - place))) for place in (0.5, fainter))
    matrix = np.array([_row(cutout, *points[low]), _row(cutout, *points[lower])])
    values = matrix @ (cutout.electrons - base).ravel()
    covariance = (matrix * (np.maximum(model.ravel(), 0.0) + cutout.variance)) @ matrix.T
    if values[1] <= 0.0:
        return float("nan"), float("nan")
    ratio = float(values[0] / values[1])
    slope = np.array([1.0, -ratio]) / values[1]
    error = sqrt(max(0.0, float(slope @ covariance @ slope)))
    return (ratio if shown else 1.0), error


def _readable(cutout: Cutout, x: float, y: float) -> bool:
    """Whether the sixteen pixels about a point are there and count."""
    rows, columns = cutout.electrons.shape
    left, bottom = floor(x) - 1, floor(y) - 1
    if left < 0 or bottom < 0 or left + 4 > columns or bottom + 4 > rows:
        return False
    return bool(cutout.used[bottom : bottom + 4, left : left + 4].all())


def _patch(image: FloatArray, x: float, y: float) -> FloatArray:
    left, bottom = floor(x) - 1, floor(y) - 1
    return image[bottom : bottom + 4, left : left + 4].ravel()


def _weights(x: float, y: float) -> FloatArray:
    """Weights of the sixteen pixels in the brightness at a point, row by row."""
    across = _cubic(x - (floor(x) - 1) - np.arange(4))
    along = _cubic(y - (floor(y) - 1) - np.arange(4))
    return np.outer(along, across).ravel()


def _row(cutout: Cutout, x: float, y: float) -> FloatArray:
    """Weights of all pixels of a cutout in the brightness at a point."""
    left, bottom = floor(x) - 1, floor(y) - 1
    result = np.zeros(cutout.electrons.shape)
    result[bottom : bottom + 4, left : left + 4] = _weights(x, y).reshape(4, 4)
    return result.ravel()


def _cubic(distance: AnyArray) -> FloatArray:
    """Keys' kernel at distances within 2 pixels."""
    d = np.abs(distance)
    near = (1.5 * d - 2.5) * d * d + 1.0
    far = ((-0.5 * d + 2.5) * d - 4.0) * d + 2.0
    return np.where(d <= 1.0, near, np.where(d < 2.0, far, 0.0))
