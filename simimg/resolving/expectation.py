"""The expected image about any pair of a scene, as cutouts that a fit could be made to.

The stars come from the effective PSF's model, sky and dark signal are even, extended objects are
painted by the engine. Detector pixels and electrons.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, floor, hypot

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.assembly.objects import Entry, Inventory
from simimg.assembly.train import Train, half_light_width
from simimg.imaging.profile import sampled_psf
from simimg.imaging.render import expected_image
from simimg.imaging.sources import PlacedShape, Sources, no_points
from simimg.resolving.neighbours import PlacedStar, star_light
from simimg.resolving.observation import spline_oversampling
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.signal import Detector, scene_detector
from simimg.resolving.starfit import Cutout
from simimg.scene.model import Scene

_MARGIN = 4.0  # FWHM of sky about the stars
_APART = 3.0 * _MARGIN  # FWHM beyond which each star has a square of its own
_REACH = 12.0  # FWHM from a star beyond which its light is not modelled

StarPair = tuple[Entry, Entry]


def pairs_of(found: Inventory) -> list[StarPair]:
    """The pairs of an inventory, first star and second, in its order."""
    return [
        (found.entry(row), found.entry(int(partner)))
        for row, partner in enumerate(found.partner[: found.written])
        if partner > row
    ]


@dataclass(frozen=True, eq=False)
class Expectation:
    """The expected image about any pair of a scene.

    Attributes
    ----------
    train : Train
    detector : Detector
    psf : PsfModel
    variance : float
        Gaussian variance of a pixel, electrons squared.
    points : ndarray, shape (n, 3)
        Places and electrons of the stars.
    shapes : tuple of PlacedShape
    """

    train: Train
    detector: Detector
    psf: PsfModel
    variance: float
    points: FloatArray
    shapes: tuple[PlacedShape, ...]

    @classmethod
    def of(cls, scene: Scene, train: Train, found: Inventory) -> Expectation | None:
        """Prepare the view of a scene.

        Parameters
        ----------
        scene : Scene
        train : Train
            Of the scene.
        found : Inventory
            Of the scene.

        Returns
        -------
        Expectation or None
            None without a camera or a route to its pixel scale. The size of the detector is not
            needed: without it no pixel is off it.
        """
        detector = scene_detector(scene, train)
        if detector is None or scene.camera is None:
            return None
        exact = scene.camera.read_noise == 0.0 and scene.camera.gain == 1.0
        rounding = 0.0 if exact else scene.camera.gain**2 / 12.0
        scale = detector.pixel_scale
        width = hypot(half_light_width(train.focal) / scale, 0.8)
        apart = found.separation[: found.written] / scale
        apart = apart[apart <= _APART * width]
        reach = max(_REACH * width, float(apart.max(initial=0.0)) + (_MARGIN + 1.0) * width, 8.0)
        oversampling = spline_oversampling(train.effective, scale)
        image = sampled_psf(
            train.effective,
            pixel_scale=scale,
            oversampling=oversampling,
            half_width_pixels=ceil(reach),
        )
        sources = found.sources
        return cls(
            train=train,
            detector=detector,
            psf=PsfModel.from_image(image, oversampling=oversampling),
            variance=detector.read_noise**2 + rounding,
            points=frozen(
                np.column_stack([sources.points.x, sources.points.y, sources.points.electrons])
            ),
            shapes=sources.shapes,
        )

    @property
    def sky(self) -> float:
        """Electrons of sky and dark signal in a pixel."""
        return self.detector.sky + self.detector.dark

    def cutouts(self, pair: StarPair) -> list[Cutout]:
        """The expected image about a pair: one square about both stars, or one about each."""
        first, second = pair
        fwhm = self.psf.fwhm
        apart = hypot(second.x - first.x, second.y - first.y)
        if apart > _APART * fwhm:
            squares = [(star.x, star.y, _MARGIN * fwhm) for star in pair]
        else:
            middle = 0.5 * (first.x + second.x), 0.5 * (first.y + second.y)
            squares = [(*middle, _MARGIN * fwhm + 0.5 * apart)]
        images = [self._cutout(pair, *square) for square in squares]
        return [image for image in images if image is not None]

    def _cutout(self, pair: StarPair, x: float, y: float, half: float) -> Cutout | None:
        """A square of the expected image, as far as it is on the detector; None off it."""
        left, right = floor(x - half), ceil(x + half)
        bottom, top = floor(y - half), ceil(y + half)
        if self.detector.columns is not None and self.detector.rows is not None:
            left, right = max(0, left), min(self.detector.columns - 1, right)
            bottom, top = max(0, bottom), min(self.detector.rows - 1, top)
        if right < left or top < bottom:
            return None
        blank = Cutout.of(
            np.zeros((top - bottom + 1, right - left + 1)),
            variance=self.variance,
            psf=self.psf,
            x0=left,
            y0=bottom,
        )
        own = [PlacedStar(star.x, star.y, star.electrons) for star in pair]
        known = self._others(blank, own)
        expected = known + star_light(own, blank) + self.sky
        return Cutout.of(
            expected,
            variance=self.variance,
            psf=self.psf,
            x0=left,
            y0=bottom,
            used=expected < self.detector.saturation,
            known=known,
        )

    def _others(self, cutout: Cutout, own: Sequence[PlacedStar]) -> FloatArray:
        """Expected electrons of all other objects on a cutout."""
        rows, columns = cutout.electrons.shape
        reach = self.psf.half_width
        x, y, electrons = self.points.T
        near = (x > cutout.x0 - reach) & (x < cutout.x0 + columns + reach)
        near &= (y > cutout.y0 - reach) & (y < cutout.y0 + rows + reach)
        for star in own:
            near &= (x != star.x) | (y != star.y) | (electrons != star.electrons)
        light = star_light([PlacedStar(*row) for row in self.points[near]], cutout)
        if self.shapes:
            moved = tuple(
                PlacedShape(one.x - cutout.x0, one.y - cutout.y0, one.electrons, one.shape)
                for one in self.shapes
            )
            light += expected_image(
                self.train.basis,
                Sources(no_points(), moved),
                columns=columns,
                rows=rows,
                pixel_scale=self.detector.pixel_scale,
            )
        return light
