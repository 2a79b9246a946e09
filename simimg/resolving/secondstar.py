"""Where a second star could be: scores of its light over a disc, and the disc's size in them.

Around a fitted single star, light of a second star at the offset ``theta`` adds the template
``P(x - theta)`` to the expectation. What of it the single star's own electrons, place and
background cannot imitate is its projection off their derivatives under the noise weights; the
*score* ``Z(theta)`` is the residuals' product with that projected template over its length, of
unit variance for a single star. ``Z`` squared is, to first order, the fall of the deviance that a
second star there would bring.

As ``theta`` goes to zero along the direction ``phi`` the projected template goes to that of the
second directional derivative of the PSF, the same for ``phi`` and the opposite direction. The
disc's origin is therefore blown up into a circle on which opposite directions are one: the search
region is a Moebius band with a single edge, the disc's rim. Its *area* and the *length* of its rim
in the metric ``g_ij = E[d_i Z d_j Z]`` are what the tail of the maximum of ``Z`` depends on
(Adler & Taylor 2007, Random Fields and Geometry).

Offsets in detector pixels, polar coordinates from detector +x towards +y.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.resolving.starfit import Cutout, Likelihood, StarFit

_RADII_PER_FWHM = 4
_ANGLES_PER_FWHM = 8
_LEAST_ANGLES = 12


@dataclass(frozen=True, eq=False)
class SecondStarScan:
    """Scores of a second star over a disc about a fitted star.

    Attributes
    ----------
    offsets : ndarray, shape (n, 2)
        Places of the second star from the first, pixels; all within the disc and on its rim.
    scores : ndarray, shape (n,)
        Z at each; positive where light is wanted.
    electrons : ndarray, shape (n,)
        Electrons that a second star there would take, to first order; may be negative.
    directions : ndarray, shape (m,)
        Angles in [0, pi) of the origin's circle, radians.
    direction_scores : ndarray, shape (m,)
        Z for an infinitesimal pair along each.
    direction_strengths : ndarray, shape (m,)
        Best coefficient of the second directional derivative there, electrons times pixels squared:
        half of ``q (1 - q) separation**2 electrons`` of a pair whose fainter share is ``q``.
    radius : float
        Radius of the disc, pixels.
    area, rim : float
        Area of the disc and length of its rim in the metric of the scores.
    """

    offsets: FloatArray
    scores: FloatArray
    electrons: FloatArray
    directions: FloatArray
    direction_scores: FloatArray
    direction_strengths: FloatArray
    radius: float
    area: float
    rim: float

    @property
    def highest(self) -> float:
        """The highest score found at the sampled places."""
        return float(max(self.scores.max(), self.direction_scores.max()))


class _Whitened:
    """Templates divided by the noise, single-star directions projected off."""

    def __init__(self, cutouts: Sequence[Cutout], fit: StarFit) -> None:
        likelihood = Likelihood(cutouts, len(fit.places))
        self.likelihood = likelihood
        self.star = fit.places[0]
        vector = self.vector = fit.vector
        roots, residuals = [], []
        nuisance = np.zeros((likelihood.size, sum(c.electrons.size for c in cutouts)))
        begin = 0
        for index in range(len(cutouts)):
            expectation, derivatives = likelihood.jacobian(vector, index)
            _, slope, weight = likelihood.noise[index].judge(expectation)
            root = np.sqrt(weight)
            roots.append(root)
            residuals.append(-slope / np.where(root > 0.0, root, 1.0))
            span = slice(begin, begin + root.size)
            nuisance[list(likelihood.layout.own[index]), span] = derivatives * root
            begin += root.size
        self.roots = roots
        self.residual = np.concatenate(residuals)
        lengths = np.sqrt((nuisance**2).sum(axis=1, keepdims=True))
        self.basis = np.linalg.qr((nuisance / np.where(lengths > 0, lengths, 1.0)).T)[0]

    def planes(self, dx: float, dy: float, order: int) -> FloatArray:
        """Whitened PSF and derivatives for a star at an offset, shape (planes, pixels)."""
        parts = []
        place = self.star[0] + dx, self.star[1] + dy
        for index, root in enumerate(self.roots):
            planes = self.likelihood.star(self.vector, index, place, order=order)
            flat = planes.reshape(len(planes), -1)
            flat *= root
            parts.append(flat)
        return parts[0] if len(parts) == 1 else np.concatenate(parts, axis=1)

    def project(self, templates: FloatArray) -> FloatArray:
        """Take the single-star directions off templates (rows), in place."""
        templates -= (templates @ self.basis) @ self.basis.T
        return templates


def scan_second_star(
    cutouts: Sequence[Cutout], fit: StarFit, *, radius: float, geometry: bool = True
) -> SecondStarScan:
    """Score a second star over a disc about the first star of a fit.

    Parameters
    ----------
    cutouts : sequence of Cutout
        The data of the fit.
    fit : StarFit
        A single star, or a star (the first) among others that are fitted with it.
    radius : float
        Radius of the disc, pixels, above 0.
    geometry : bool, optional
        Whether to work out `area` and `rim` (a third more time); NaN without.
    """
    whitened = _Whitened(cutouts, fit)
    fwhm = cutouts[0].psf.fwhm
    # Places to start a fit from may lie wider apart than those of an integral.
    density = 1.0 if geometry else 0.7
    count = max(6, int(np.ceil(density * _RADII_PER_FWHM * radius / fwhm)))
    angles = 2 * int(np.ceil(density * _ANGLES_PER_FWHM * radius / fwhm / 2))
    angles = max(_LEAST_ANGLES, angles)
    knots, knot_weights = np.polynomial.legendre.leggauss(count)
    radii = np.append(0.5 * radius * (knots + 1.0), radius)
    weights = 0.5 * radius * knot_weights
    phi = 2.0 * np.pi * np.arange(angles) / angles
    cosines, sines = np.cos(phi), np.sin(phi)
    offsets, scores, electrons = [], [], []
    area = rim = 0.0
    order = 1 if geometry else 0
    for ring, r in enumerate(radii):
        templates = np.stack(
            [whitened.planes(r * c, r * s, order) for c, s in zip(cosines, sines)], axis=1
        )
        if geometry:
            # From x and y to the radius and the angle.
            by_x, by_y = templates[1].copy(), templates[2]
            templates[1] = cosines[:, None] * by_x + sines[:, None] * by_y
            templates[2] = r * (cosines[:, None] * by_y - sines[:, None] * by_x)
        flat = whitened.project(templates.reshape(-1, templates.shape[-1]))
        planes = flat.reshape(templates.shape)
        lengths = np.sqrt(np.einsum("ij,ij->i", planes[0], planes[0]))
        lengths = np.maximum(lengths, 1e-300)
        score = planes[0] @ whitened.residual / lengths
        offsets.append(np.column_stack([r * cosines, r * sines]))
        scores.append(score)
        electrons.append(score / lengths)
        if not geometry:
            continue
        unit = planes[0] / lengths[:, None]
        slopes = planes[1:] / lengths[:, None]
        slopes -= np.einsum("kij,ij->ki", slopes, unit)[..., None] * unit
        metric = np.einsum("kip,lip->ikl", slopes, slopes)
        if ring < count:
            determinant = metric[:, 0, 0] * metric[:, 1, 1] - metric[:, 0, 1] ** 2
            area += weights[ring] * float(np.sqrt(np.maximum(determinant, 0.0)).sum())
        else:
            rim = float(np.sqrt(metric[:, 1, 1]).sum())
    step = 2.0 * np.pi / angles
    directions, at_zero, strengths = _origin(whitened, angles)
    return SecondStarScan(
        offsets=frozen(np.concatenate(offsets)),
        scores=frozen(np.concatenate(scores)),
        electrons=frozen(np.concatenate(electrons)),
        directions=frozen(directions),
        direction_scores=frozen(at_zero),
        direction_strengths=frozen(strengths),
        radius=float(radius),
        area=area * step if geometry else np.nan,
        rim=rim * step if geometry else np.nan,
    )


def _origin(whitened: _Whitened, angles: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Scores of infinitesimal pairs along directions of the half circle."""
    directions = np.pi * np.arange(angles) / angles
    c, s = np.cos(directions)[:, None], np.sin(directions)[:, None]
    second = whitened.planes(0.0, 0.0, 2)[3:]
    templates = whitened.project(c * c * second[0] + 2.0 * c * s * second[1] + s * s * second[2])
    lengths = np.maximum(np.sqrt(np.einsum("ij,ij->i", templates, templates)), 1e-300)
    scores = templates @ whitened.residual / lengths
    return directions, scores, scores / lengths
