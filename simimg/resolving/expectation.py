"""The expected image about any pair of a scene, as cutouts that a fit could be made to.

The pair's stars come from models of their effective PSFs, each from its own where they differ;
other stars too as long as all share one PSF; sky and dark signal are even, all else is painted by
the engine. Where the PSF is very many pixels wide, blocks of pixels are taken together,
which loses nothing: it hardly changes over one. Blocks (mostly of one pixel) and electrons.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from math import ceil, floor, hypot
from typing import Any

import numpy as np

from simimg.arrays import AnyArray, FloatArray, frozen
from simimg.assembly.objects import Entry, Inventory
from simimg.assembly.train import Train, half_light_width
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.profile import effective_band, sampled_psf
from simimg.imaging.render import expected_image
from simimg.imaging.sources import PlacedShape, Points, Sources, no_points
from simimg.resolving.neighbours import PlacedStar, star_light
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.resolution import computable
from simimg.resolving.signal import Detector, scene_detector
from simimg.resolving.starfit import Cutout
from simimg.resolving.starpsfs import StarPsfs
from simimg.scene.model import Scene

_MARGIN = 4.0  # FWHM of sky about the stars
_APART = 3.0 * _MARGIN  # FWHM beyond which each star has a square of its own
_REACH = 12.0  # FWHM from a star beyond which its light is not modelled
_FINEST = 12.0  # blocks to the FWHM above which pixels are taken together
_KEPT = 64  # models of PSFs held at once
_SAMPLES = 8.0, 24  # of the PSF: to the wave of highest frequency, at most to the block

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
    block : int
        Pixels to the side of a block.
    psf : PsfModel
        In blocks; of the scene's first object in the middle of the field.
    variance : float
        Gaussian variance of a block, electrons squared.
    points : ndarray, shape (n, 3)
        Places (blocks) and electrons of all objects.
    stars : ndarray of bool, shape (n,)
        Which of them are stars.
    shapes : tuple of PlacedShape
        The others.
    psfs : StarPsfs
        Of each star and pair.
    near : int
        Half side (blocks) of the models of PSFs that are a star's own: the square about its pair.
    """

    train: Train
    detector: Detector
    block: int
    psf: PsfModel
    variance: float
    points: FloatArray
    stars: AnyArray
    shapes: tuple[PlacedShape, ...]
    psfs: StarPsfs
    near: int
    _models: dict[Transfer, PsfModel] = field(default_factory=dict)

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
        # Counted in so many electrons at a time, light has the variance of its number.
        noise, gain = detector.read_noise / detector.excess, scene.camera.gain
        exact = noise == 0.0 and gain == 1.0
        rounding = 0.0 if exact else (gain / scene.camera.em_gain / detector.excess) ** 2 / 12.0
        pixels = hypot(half_light_width(train.focal) / detector.pixel_scale, 0.8)
        block = max(1, floor(pixels / _FINEST))
        scale, width = block * detector.pixel_scale, pixels / block
        apart = found.separation[: found.written] / scale
        apart = apart[apart <= _APART * width]
        half, near = (
            ceil(max(reach * width, float(apart.max(initial=0.0)) + (_MARGIN + 1.0) * width, 8.0))
            for reach in (_REACH, 2.0 * _MARGIN)
        )
        return cls(
            train=train,
            detector=detector,
            block=block,
            psf=_model(train.effective, scale, half),
            near=near,
            variance=(noise**2 + rounding) * block**2,
            **_placed(found, block, detector.excess),
        )

    def showing(self, found: Inventory) -> Expectation:
        """The same view of other objects, no pair of which is wider than those it was made for.

        Parameters
        ----------
        found : Inventory
        """
        return replace(self, **_placed(found, self.block, self.detector.excess))

    @property
    def sky(self) -> float:
        """Electrons of sky and dark signal in a block."""
        light = (self.detector.sky + self.detector.dark) / self.detector.excess
        return light * self.block**2

    @property
    def scale(self) -> float:
        """Side of a block (rad)."""
        return self.detector.pixel_scale * self.block

    def rows(self, pair: StarPair) -> FloatArray:
        """Places (blocks) and electrons of a pair's stars, shape (2, 3)."""
        return self.points[[*_numbers(pair)]]

    def models(self, pair: StarPair) -> tuple[PsfModel, PsfModel, PsfModel]:
        """The PSFs (in blocks) of a pair's two stars, and the one that stands for both."""
        if self.psfs.shared:
            return self.psf, self.psf, self.psf
        of = self.psfs.pair(*_numbers(pair))
        return self._model(of.first), self._model(of.second), self._model(of.mean)

    def _model(self, transfer: Transfer) -> PsfModel:
        if transfer not in self._models:
            if len(self._models) >= _KEPT:
                self._models.clear()
            self._models[transfer] = _model(transfer, self.scale, self.near)
        return self._models[transfer]

    def cutouts(self, pair: StarPair) -> list[Cutout]:
        """The expected image about a pair: one square about both stars, or one about each."""
        first, second = self.rows(pair)[:, :2]
        fwhm = self.models(pair)[2].fwhm
        apart = hypot(*(second - first))
        if apart > _APART * fwhm:
            squares = [(*first, _MARGIN * fwhm), (*second, _MARGIN * fwhm)]
        else:
            squares = [(*(0.5 * (first + second)), _MARGIN * fwhm + 0.5 * apart)]
        images = [self._cutout(pair, *square) for square in squares]
        return [image for image in images if image is not None]

    def _cutout(self, pair: StarPair, x: float, y: float, half: float) -> Cutout | None:
        """A square of the expected image, as far as it is on the detector; None off it."""
        left, right = floor(x - half), ceil(x + half)
        bottom, top = floor(y - half), ceil(y + half)
        if self.detector.columns is not None and self.detector.rows is not None:
            left, right = max(0, left), min((self.detector.columns - 1) // self.block, right)
            bottom, top = max(0, bottom), min((self.detector.rows - 1) // self.block, top)
        if right < left or top < bottom:
            return None
        *own, mean = self.models(pair)
        blank = Cutout.of(
            np.zeros((top - bottom + 1, right - left + 1)),
            variance=self.variance,
            psf=mean,
            x0=left,
            y0=bottom,
        )
        known = self._others(blank, pair)
        expected = known + self.sky
        for row, model in zip(self.rows(pair), own, strict=True):
            expected += star_light([PlacedStar(*row)], replace(blank, psf=model))
        return Cutout.of(
            expected,
            variance=self.variance,
            psf=mean,
            x0=left,
            y0=bottom,
            used=expected < self.detector.saturation / self.detector.excess * self.block**2,
            known=known,
        )

    def _others(self, cutout: Cutout, pair: StarPair) -> FloatArray:
        """Expected electrons of all other objects on a cutout."""
        rows, columns = cutout.electrons.shape
        reach = self.psf.half_width
        x, y, _ = self.points.T
        near = self.stars & (x > cutout.x0 - reach) & (x < cutout.x0 + columns + reach)
        near &= (y > cutout.y0 - reach) & (y < cutout.y0 + rows + reach)
        near[[*_numbers(pair)]] = False
        light = np.zeros((rows, columns))
        painted = no_points()
        if self.psfs.shared:
            light += star_light([PlacedStar(*row) for row in self.points[near]], cutout)
        elif near.any():
            drawn = self.psfs.found.drawn(np.flatnonzero(near))
            places = drawn.x / self.block - cutout.x0, drawn.y / self.block - cutout.y0
            painted = Points(*places, drawn.electrons / self.detector.excess, drawn.kind)
        if self.shapes or len(painted):
            moved = tuple(
                replace(one, x=one.x / self.block - cutout.x0, y=one.y / self.block - cutout.y0)
                for one in self.shapes
            )
            light += expected_image(
                self._basis(cutout),
                Sources(painted, moved),
                columns=columns,
                rows=rows,
                pixel_scale=self.scale,
            )
        return light

    def _basis(self, cutout: Cutout) -> PsfBasis:
        """The scene's basis, its rule told where on the detector the things on a cutout are."""
        basis, block = self.train.basis, self.block
        weigh = basis.weigh
        if weigh is None:
            return basis

        def there(points: Points) -> FloatArray:
            x, y = (points.x + cutout.x0) * block, (points.y + cutout.y0) * block
            return weigh(Points(x, y, points.electrons, points.kind))

        return PsfBasis(basis.members, there)


def _numbers(pair: StarPair) -> tuple[int, int]:
    """Rows of the inventory that hold a pair's first and second star."""
    return pair[1].partner, pair[0].partner


def _model(transfer: Transfer, scale: float, half_width: float) -> PsfModel:
    """The model of a PSF in blocks of a side of `scale` (rad)."""
    effective = computable(transfer)
    samples = ceil(_SAMPLES[0] * effective_band(effective) * scale)
    oversampling = min(max(samples, 1), _SAMPLES[1])
    image = sampled_psf(
        effective, pixel_scale=scale, oversampling=oversampling, half_width_pixels=half_width
    )
    return PsfModel.from_image(image, oversampling=oversampling)


def _placed(found: Inventory, block: int, excess: float) -> dict[str, Any]:
    """The objects of an inventory as a view holds them."""
    electrons = found.electrons / excess
    stars = np.ones(len(found), dtype=bool)
    stars[: found.written] = [shape is None for shape in found.shapes]
    return {
        "points": frozen(np.column_stack([found.x / block, found.y / block, electrons])),
        "stars": stars,
        "shapes": tuple(
            replace(one, electrons=one.electrons / excess) for one in found.sources.shapes
        ),
        "psfs": StarPsfs(found),
    }
