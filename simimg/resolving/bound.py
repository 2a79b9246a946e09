"""How well a pair can be measured at best, before any photon is drawn.

The expected image of a pair has a Fisher information about its two places, its two brightnesses
and the background: with ``mu`` the expected electrons of a pixel and ``i(mu)`` the information that
one reading holds about them, the sum over the pixels of ``i d mu d mu``. Its inverse bounds from
below the covariance of any unbiased estimate (Rao 1945; Cramer 1946); for stars on pixels see
Lindegren 1978 (IAU Coll. 48, 197). ``i`` is ``1 / (mu + read noise^2 + gain^2 / 12)``, and somewhat
more where next to no electrons are expected and the read noise can tell one from none
(`simimg.resolving.pixelnoise.information`).

The same image tells how surely the second star will show: the deviance of the best single star
against it.

Arcseconds, degrees and magnitudes in what is returned; detector pixels and electrons before.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import degrees, hypot, inf, isfinite, sqrt

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.assembly.objects import Inventory, inventory
from simimg.assembly.train import Train, assemble_train
from simimg.errors import InputError
from simimg.resolving.expectation import Expectation, StarPair, pairs_of
from simimg.resolving.pairfit import pair_geometry
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.resolution import to_arcsec
from simimg.resolving.starfit import Cutout, Likelihood, StarFit, covariance_of, fit_stars
from simimg.scene.file import requirements_to_expose
from simimg.scene.model import Scene

_BLENDED = 0.8, 3.0  # FWHM between which the best single star may stand on either or between


@dataclass(frozen=True, kw_only=True)
class PairPrecision:
    """The Cramer-Rao bounds of a pair: standard deviations, all else being free.

    Attributes
    ----------
    label : str
        Of the pair.
    x, y : float
        Place of its first star, pixels.
    separation_arcsec, position_angle_deg, magnitude_difference : float
        Bounds; infinite where the image does not tell.
    expected_significance : float
        How many standard deviations the second star stands out in the expected image; see
        `precision`.
    """

    label: str
    x: float
    y: float
    separation_arcsec: float
    position_angle_deg: float
    magnitude_difference: float
    expected_significance: float

    def to_dict(self) -> dict[str, float | None]:
        """For JSON: the four figures; None for what is not finite."""
        figures = {
            "separation_arcsec": self.separation_arcsec,
            "position_angle_deg": self.position_angle_deg,
            "magnitude_difference": self.magnitude_difference,
            "expected_significance": self.expected_significance,
        }
        return {name: value if isfinite(value) else None for name, value in figures.items()}


def precision(scene: Scene, *, exposures: int = 1) -> list[PairPrecision]:
    """Work out how well each pair of a scene can be measured at best.

    Parameters
    ----------
    scene : Scene
        With a camera and an exposure.
    exposures : int, optional
        Frames that are fitted together, each with a background of its own.

    Returns
    -------
    list of PairPrecision
        One for each pair, in the order of the scene.

    Raises
    ------
    InputError
        The scene lacks what an exposure needs.
    ValueError
        Fewer than one exposure.

    Notes
    -----
    Free are both places, both brightnesses and the background of the square that is cut out about
    the pair (about each star, where they are more than twelve FWHM apart). The light of other
    objects is known, but its noise counts. Pixels in which the expected image is full are left out,
    and those off the detector.

    Stars whose PSFs differ (by colour, place or motion) each have their own; the single star that
    is set against them has their mean, weighted by light.

    ``expected_significance`` is S, with ``S^2 = 2 sum(d ln(d / m) - d + m)`` over the pixels. Here
    d is the expected electrons of the two stars and all else, read noise squared and rounding added
    (a Poisson number of that mean has the noise of the pixel), and m the same of the single star
    whose place, brightness and background make S least. It is the expected fall of twice the
    negative log-likelihood from one star to two. In a frame that fall, from which `measure` reckons
    ``probability_single``, scatters about S^2 by some 2 S, and lies about three higher, as two
    stars have three parameters more with which to follow the noise. A ``probability_single`` of 1 %
    stands at a fall of about 14 when the second star is sought over two FWHM: with S = 3.5 it comes
    out below 1 % in half of the frames, with S = 5 in nineteen of twenty, with S = 6 in nearly all.
    """
    if exposures < 1:
        raise ValueError(f"exposures must be 1 or more, got {exposures}")
    missing = requirements_to_expose(scene)
    if missing:
        raise InputError(*missing)
    train = assemble_train(scene)
    return scene_bounds(scene, train, inventory(scene, train=train), exposures=exposures)


def scene_bounds(
    scene: Scene, train: Train, found: Inventory, *, exposures: int = 1
) -> list[PairPrecision]:
    """The same where a scene's train and inventory are at hand; empty without a camera."""
    view, pairs = None, pairs_of(found)
    if pairs:
        view = Expectation.of(scene, train, found)
    return [] if view is None else [pair_precision(view, one, exposures=exposures) for one in pairs]


def pair_precision(view: Expectation, pair: StarPair, *, exposures: int = 1) -> PairPrecision:
    """The bounds of one pair of a scene; see `precision`."""
    first = pair[0]
    separation = angle = difference = inf
    significance = 0.0
    images = view.cutouts(pair)
    stars = view.rows(pair)
    if images and float(stars[:, 2].min()) > 0.0:
        sky = np.full(len(images), view.sky)
        own = view.models(pair)[:2]
        separation, angle, difference = pair_errors(images, stars=stars, background=sky, psfs=own)
        significance = second_star_significance(images, stars=stars)
    fewer = 1.0 / sqrt(exposures)
    return PairPrecision(
        label=first.label,
        x=first.x,
        y=first.y,
        separation_arcsec=to_arcsec(separation * view.scale) * fewer,
        position_angle_deg=degrees(angle) * fewer,
        magnitude_difference=difference * fewer,
        expected_significance=significance / fewer,
    )


def pair_errors(
    images: Sequence[Cutout],
    *,
    stars: FloatArray,
    background: FloatArray,
    psfs: tuple[PsfModel, PsfModel] | None = None,
) -> tuple[float, float, float]:
    """Bounds on separation (pixels), angle (radians) and magnitude difference of two stars.

    Parameters
    ----------
    images : sequence of Cutout
        The expected image.
    stars : ndarray, shape (2, 3)
        x, y and electrons of each.
    background : ndarray, shape (images,)
        Electrons a pixel.
    psfs : tuple of two PsfModel, optional
        Of the two stars; that of the images unless given.
    """
    likelihood = Likelihood(images, 2) if psfs is None else _OwnPsfs(images, psfs)
    expansion = likelihood.expand(np.concatenate([stars.ravel(), background]))
    fit = StarFit(
        places=frozen(stars[:, :2]),
        electrons=frozen(stars[:, 2]),
        background=frozen(background),
        covariance=frozen(covariance_of(expansion.information)),
        deviance=expansion.deviance,
        pixels=likelihood.pixels,
        converged=True,
    )
    return pair_geometry(fit).errors


class _OwnPsfs(Likelihood):
    """The likelihood of two stars that have a PSF each."""

    def __init__(self, cutouts: Sequence[Cutout], psfs: tuple[PsfModel, PsfModel]) -> None:
        super().__init__(cutouts, 2)
        self.each = [Likelihood([replace(c, psf=psf) for c in cutouts], 2) for psf in psfs]

    def jacobian(self, vector: FloatArray, index: int) -> tuple[FloatArray, FloatArray]:
        """Expectation and derivatives, each star's part by its own PSF."""
        one, two = (likelihood.jacobian(vector, index) for likelihood in self.each)
        derivatives = one[1].copy()
        derivatives[3:6] = two[1][3:6]
        second = vector[5] * (two[1][5] - one[1][5])
        return one[0] + second, derivatives


def second_star_significance(images: Sequence[Cutout], *, stars: FloatArray) -> float:
    """The root of the deviance of the best single star against the expected image of two.

    Parameters
    ----------
    images : sequence of Cutout
        The expected image.
    stars : ndarray, shape (2, 3)
        x, y and electrons of each.
    """
    shifted = [
        Cutout.of(
            image.electrons + image.variance,
            variance=0.0,
            psf=image.psf,
            x0=image.x0,
            y0=image.y0,
            used=image.used,
            known=image.known + image.variance,
        )
        for image in images
    ]
    electrons = stars[:, 2]
    middle = (electrons @ stars[:, :2]) / electrons.sum()
    apart = hypot(*(stars[1, :2] - stars[0, :2])) / images[0].psf.fwhm
    starts = [] if apart > _BLENDED[1] else [middle]
    if apart > _BLENDED[0]:
        starts += list(stars[:, :2])
    least = min(fit_stars(shifted, places=[start]).deviance for start in starts)
    return sqrt(max(0.0, least))
