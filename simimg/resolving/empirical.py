"""An empirical PSF of named stars: a Moffat profile and what the stars themselves show beside it.

After Stetson (1987, PASP 99, 191), who adds a table of residuals to an analytic profile, and
Anderson & King (2000, PASP 112, 1360), whose effective PSF is what the pixels record. The residual
is a sum of cubic B-splines on a square lattice, fitted to the pixels of all stars where they are:
no pixel is ever moved, so that coarsely sampled stars are not blurred. Each coefficient is held to
zero by a Gaussian prior, wide near the star and narrow where its profile is faint, so that the
noise of the wings does not become the PSF's. The stars' places and brightnesses are fitted anew
with every PSF, three times.

The noise that is left in the PSF is that of as many free coefficients as the data decide upon
(the trace of the hat matrix). Electrons and detector pixels.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil

import numpy as np
from scipy import sparse
from scipy.interpolate import BSpline

from simimg.arrays import FloatArray, frozen
from simimg.resolving.cutout import Cutout
from simimg.resolving.layout import plane
from simimg.resolving.moffat import Moffat, Stamp, fit_moffat
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.starfit import StarFit, fit_stars

_ROUNDS = 3
_REACH = 4.0  # FWHM to where the residual goes
_KNOTS = 3.0  # of the lattice to the FWHM
_FINEST = {1: 1.0, 4: 0.7, 9: 0.5}  # pixels of the lattice that so many stars can bear
_OWN, _PEAK = 0.3, 0.01  # width of the prior: share of the profile, and of its peak
_SAMPLES = 10.0  # of the tabulated PSF to the FWHM


@dataclass(frozen=True, eq=False)
class Measured:
    """A PSF measured from stars.

    Attributes
    ----------
    image : ndarray, shape (n, n)
        Share of a star's light on a pixel at each sample, the star in the middle.
    oversampling : int
        Samples to the pixel.
    noise : float
        Deviance that the PSF's own noise leaves in a star, over the square of the star's signal to
        noise.
    places : ndarray, shape (stars, 2)
        Where the stars stand in their stamps.
    chi_square : ndarray, shape (stars,)
        Reduced, of the stars it was measured from.
    """

    image: FloatArray
    oversampling: int
    noise: float
    places: FloatArray
    chi_square: FloatArray


def table_oversampling(fwhm: float) -> int:
    """Samples to the pixel that hold a smooth PSF of this width (pixels)."""
    return int(np.clip(ceil(_SAMPLES / max(fwhm, 0.5)), 1, 16))


def measured_profile(
    stamps: Sequence[Stamp], *, width: float, variance: float, half_width: float
) -> Measured:
    """The Moffat profile of some stars, tabulated.

    Parameters
    ----------
    stamps : sequence of Stamp
    width : float
        FWHM, roughly, pixels.
    variance : float
        Gaussian variance of a pixel, electrons squared.
    half_width : float
        Of the table, pixels.
    """
    fit = fit_moffat(stamps, width=width, variance=variance)
    oversampling = table_oversampling(fit.profile.fwhm)
    image = fit.profile.sampled(oversampling=oversampling, half_width=half_width)
    stars = _stars(stamps, image, oversampling, variance)
    power = sum(_signal(stamp, star) for stamp, star in zip(stamps, stars))
    return Measured(image, oversampling, 4.0 / power, fit.places, fit.chi_square)


def measured_stars(
    stamps: Sequence[Stamp], *, width: float, variance: float, half_width: float
) -> Measured:
    """The empirical PSF of some stars; parameters as for `measured_profile`."""
    profile = fit_moffat(stamps, width=width, variance=variance).profile
    lattice = _Lattice(profile, len(stamps))
    oversampling = max(table_oversampling(profile.fwhm), ceil(2.0 / lattice.step))
    base = profile.sampled(oversampling=oversampling, half_width=half_width)
    half = (base.shape[0] - 1) // 2
    axis = np.arange(-half, half + 1) / oversampling
    image, freedom = base, 0.0
    stars = _stars(stamps, image, oversampling, variance)
    for _ in range(_ROUNDS):
        coefficients, freedom = lattice.solve(stamps, stars)
        image = base + lattice.image(coefficients, axis)
        stars = _stars(stamps, image, oversampling, variance)
    power = sum(_signal(stamp, star) for stamp, star in zip(stamps, stars))
    return Measured(
        image=frozen(image * (base.sum() / image.sum())),
        oversampling=oversampling,
        noise=freedom / power,
        places=np.array([star.places[0] for star in stars]),
        chi_square=np.array([_chi_square(stamp, star) for stamp, star in zip(stamps, stars)]),
    )


@dataclass(frozen=True, eq=False)
class _Star:
    """A star as fitted: place in its stamp, electrons, shares of its light, expectation."""

    places: FloatArray
    electrons: float
    background: FloatArray
    model: FloatArray
    share: FloatArray
    variance: float


def _stars(
    stamps: Sequence[Stamp], image: FloatArray, oversampling: int, variance: float
) -> list[_Star]:
    """Fit every star with a PSF."""
    psf = PsfModel.from_image(image, oversampling=oversampling)
    return [_star(stamp, psf, variance) for stamp in stamps]


def _star(stamp: Stamp, psf: PsfModel, variance: float) -> _Star:
    cutout = Cutout.of(
        stamp.electrons, variance=variance, psf=psf, used=stamp.used > 0, tilted=True
    )
    fit: StarFit = fit_stars([cutout], places=[(stamp.x, stamp.y)])
    rows, columns = stamp.electrons.shape
    x, y = (float(value) for value in fit.places[0])
    share = psf.evaluate(x, y, columns=columns, rows=rows, order=0)[0]
    level = fit.background[0] + (fit.extras @ plane(rows, columns)).reshape(rows, columns)
    electrons = float(fit.electrons[0])
    return _Star(fit.places, electrons, level, level + electrons * share, share, variance)


def _weight(stamp: Stamp, star: _Star) -> FloatArray:
    total: FloatArray = stamp.used / np.maximum(np.maximum(star.model, 0.0) + star.variance, 1e-6)
    return total


def _signal(stamp: Stamp, star: _Star) -> float:
    """Square of a star's signal to noise."""
    return max(float((_weight(stamp, star) * (star.electrons * star.share) ** 2).sum()), 1e-6)


def _chi_square(stamp: Stamp, star: _Star) -> float:
    rest = stamp.electrons - star.model
    return float((_weight(stamp, star) * rest**2).sum() / max(stamp.used.sum() - 6.0, 1.0))


class _Lattice:
    """Cubic B-splines on a square lattice about a star."""

    def __init__(self, profile: Moffat, stars: int) -> None:
        self._profile = profile
        fwhm = max(profile.fwhm, 1.0)
        finest = min(step for count, step in _FINEST.items() if stars >= count)
        self.step = max(fwhm / _KNOTS, finest)
        self.count = max(2, ceil(_REACH * fwhm / self.step))
        self._knots = self.step * np.arange(-self.count - 2, self.count + 3, dtype=np.float64)
        nodes = self.step * np.arange(-self.count, self.count + 1)
        height = profile.light(nodes[None, :], nodes[:, None])[0]
        radius = np.hypot(nodes, nodes[:, None]) / fwhm
        self._prior = (_OWN * height + _PEAK * float(height.max()) / (1.0 + radius**2)).ravel()

    def _splines(self, offset: FloatArray) -> FloatArray:
        """Value of each spline at offsets from the star along one axis, shape (n, splines)."""
        inside = np.abs(offset) < (self.count + 2) * self.step
        result = np.zeros((offset.size, 2 * self.count + 1))
        for index in range(2 * self.count + 1):
            knots = self._knots[index : index + 5]
            spline = BSpline.basis_element(knots, extrapolate=False)
            result[:, index] = np.nan_to_num(spline(np.where(inside, offset, np.nan)))
        return result

    def solve(self, stamps: Sequence[Stamp], stars: Sequence[_Star]) -> tuple[FloatArray, float]:
        """Coefficients of the residual, and how many of them the data decide upon."""
        size = (2 * self.count + 1) ** 2
        normal, right = np.zeros((size, size)), np.zeros(size)
        for stamp, star in zip(stamps, stars):
            rows, columns = stamp.electrons.shape
            x, y = star.places[0]
            across = sparse.csr_array(self._splines(np.arange(columns) - x))
            along = sparse.csr_array(self._splines(np.arange(rows) - y))
            # Each pixel is reached by sixteen splines of all.
            design = star.electrons * sparse.kron(along, across, format="csr")
            weighted = design.multiply(_weight(stamp, star).ravel()[:, None]).T.tocsr()
            normal += (weighted @ design).toarray()
            dx, dy = np.arange(columns) - x, (np.arange(rows) - y)[:, None]
            known = star.background + star.electrons * self._profile.light(dx, dy)[0]
            right += weighted @ (stamp.electrons - known).ravel()
        # In units of the prior's width, where nothing is far from 1.
        unit = normal * np.outer(self._prior, self._prior) + np.eye(size)
        inverse = np.linalg.inv(unit)
        coefficients = self._prior * (inverse @ (self._prior * right))
        return coefficients, float(size - np.trace(inverse))

    def image(self, coefficients: FloatArray, axis: FloatArray) -> FloatArray:
        """The residual on a square grid."""
        splines = self._splines(axis)
        count = 2 * self.count + 1
        return np.asarray(splines @ coefficients.reshape(count, count) @ splines.T)
