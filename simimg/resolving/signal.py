"""How much of an object a detector sees: brightest pixel, saturation, signal to noise.

With S the electrons of an object in an exposure, P the share of it in each pixel, and
``B = sky + dark + read_noise^2`` the variance that a pixel has without it:

- ``snr = S / sqrt(S + n B)``, ``n = 1 / sum(P^2)`` the equivalent noise area (King 1983, PASP 95,
  163), which is the photometry of an aperture of n pixels that lost no light (Howell, Handbook of
  CCD Astronomy, the "CCD equation");
- ``snr_fit = S sqrt(sum(P^2 / (S P + B)))``, of a fit of the known image weighted by the inverse
  variance (Naylor 1998, MNRAS 296, 339): the bound for a known place and a known sky.

A star's P is that of a star centred on a pixel; any other object's is its own image, a pair's the
two stars together. Electrons an exposure and a pixel; places in pixels; angles in radians.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, floor, hypot, sqrt

import numpy as np
from scipy.interpolate import RectBivariateSpline

from simimg.arrays import FloatArray, frozen
from simimg.assembly.brightness import dark_electrons, sky_electrons
from simimg.assembly.detector import detector_settings
from simimg.assembly.objects import Entry
from simimg.assembly.train import Train
from simimg.camera.cards import full_electrons
from simimg.camera.multiplication import excess_noise
from simimg.imaging.basis import PsfBasis, Transfer
from simimg.imaging.profile import effective_band, peak_place, sampled_psf
from simimg.imaging.render import expected_image
from simimg.imaging.samples import PsfSampler
from simimg.imaging.sources import PlacedShape, Sources, no_points
from simimg.scene.model import Scene

_WINDOW = 25.0  # FWHMs, without pixel, from the star to the edge of the sums over its pixels
_TABLE = 400  # most samples from the peak to the edge of the table of its brightest pixels
_LARGEST_STAMP = 512  # samples a side of the stamp of an extended object
_DIRECT = 64  # stars whose weighted sum is made one by one; more are interpolated


@dataclass(frozen=True)
class Detector:
    """What of a camera decides how well a source is seen.

    Attributes
    ----------
    pixel_scale : float
        Side of a pixel (rad).
    sky, dark : float
        Electrons in a pixel and an exposure.
    read_noise : float
        Electrons.
    saturation : float
        Electrons at which a pixel or its converter is full; infinite where neither ends.
    columns, rows : int or None
        Size; None where the scene does not say.
    excess : float, optional
        Square of the excess noise factor: by how much the variance of light and dark signal
        exceeds their electrons.
    """

    pixel_scale: float
    sky: float
    dark: float
    read_noise: float
    saturation: float
    columns: int | None
    rows: int | None
    excess: float = 1.0

    @property
    def variance(self) -> float:
        """Variance of a pixel without an object, in squares of `excess` electrons.

        Counted in so many electrons at a time, light has again the variance of its number.
        """
        light = (self.sky + self.dark) / self.excess
        return light + (self.read_noise / self.excess) ** 2

    def holds(self, x: float, y: float) -> bool:
        """True for a place on the detector, or where its size is not known."""
        if self.columns is None or self.rows is None:
            return True
        return -0.5 <= x <= self.columns - 0.5 and -0.5 <= y <= self.rows - 0.5

    def saturates(self, peak: float) -> bool:
        """Whether the expected brightest pixel is full, sky and dark signal included."""
        return peak + self.sky + self.dark >= self.saturation


def scene_detector(scene: Scene, train: Train) -> Detector | None:
    """The detector of a scene; None without a camera or a route to its pixel scale."""
    camera, scale = scene.camera, train.pixel_scale
    if camera is None or scale is None:
        return None
    settings = detector_settings(camera, time=0.0)
    columns, rows = scene.image_size or (None, None)
    return Detector(
        pixel_scale=scale,
        sky=sky_electrons(scene, area=train.pupil.area),
        dark=dark_electrons(scene),
        read_noise=camera.read_noise / camera.em_gain,
        saturation=full_electrons(settings),
        columns=columns,
        rows=rows,
        excess=excess_noise(camera.em_gain),
    )


@dataclass(frozen=True)
class Signal:
    """How well an object is seen.

    Attributes
    ----------
    peak : float
        Electrons of its brightest pixel, from it alone.
    snr, snr_fit : float
        As at the head of this module; 0 for an object without light.
    """

    peak: float
    snr: float
    snr_fit: float


class StarLight:
    """Peaks and signal to noise of stars seen through one PSF, for any number of them.

    Parameters
    ----------
    transfer : Transfer
        Effective transfer function, pixel included.
    detector : Detector
    width : float
        FWHM of the PSF (rad), roughly.

    Attributes
    ----------
    noise_pixels : float
        ``1 / sum(P^2)`` of a star centred on a pixel.
    share : ndarray
        P of that star, at every `stride`-th pixel.
    """

    def __init__(self, transfer: Transfer, detector: Detector, *, width: float) -> None:
        scale = detector.pixel_scale
        self.detector = detector
        self.width_pixels = width / scale
        # A PSF many pixels wide is summed over every so-manieth pixel: it is smooth.
        self.stride = max(1, floor(width / (8.0 * scale)))
        band = effective_band(transfer)
        blur = max(1.0 / band, sqrt(max(width**2 - (0.9 * scale) ** 2, 0.0)))
        half = ceil((_WINDOW * blur / scale + 4.0) / self.stride)
        self._sampler = PsfSampler(
            transfer,
            pixel_scale=scale,
            step=self.stride * scale,
            half=half,
            reach=half * self.stride * scale,
        )
        self.reach_pixels = float(half * self.stride)
        self.share: FloatArray = frozen(self.image(0.0, 0.0))
        self.noise_pixels = 1.0 / float((self.share**2).sum() * self.stride**2)
        # The brightest pixel is the one at the peak or its neighbour: a small table serves.
        reach = 2.0 * scale
        fine = max(0.125 / band, reach / _TABLE)
        count = max(8, ceil(reach / fine))
        place = peak_place(transfer)
        table = sampled_psf(
            transfer, pixel_scale=fine, oversampling=1, half_width_pixels=count, centre=place
        )
        axis = np.arange(-count, count + 1) * (fine / scale)
        self._edge = float(axis[-1])
        self._table = RectBivariateSpline(axis, axis, table * (scale / fine) ** 2, kx=5, ky=5)
        self._peak = place[0] / scale, place[1] / scale

    def image(self, dx: float, dy: float) -> FloatArray:
        """Share of a star's light on every `stride`-th pixel, the middle one (dx, dy) from it."""
        scale = self.detector.pixel_scale
        return self._sampler((dx * scale, dy * scale))

    def _on_pixel(self, dx: FloatArray, dy: FloatArray) -> FloatArray:
        """Share of a star's light on a pixel at (dx, dy) from its peak; 0 beyond the table."""
        inside = (np.abs(dx) <= self._edge) & (np.abs(dy) <= self._edge)
        value = self._table.ev(np.where(inside, dy, 0.0), np.where(inside, dx, 0.0))
        return np.asarray(np.where(inside, value, 0.0))

    def peaks(self, x: FloatArray, y: FloatArray, electrons: FloatArray) -> FloatArray:
        """Electrons of each star's brightest pixel, alone and at its own place."""
        place_x, place_y = x + self._peak[0], y + self._peak[1]
        best = np.zeros(np.shape(x))
        for across in (-1.0, 0.0, 1.0):
            for up in (-1.0, 0.0, 1.0):
                dx = np.rint(place_x) + across - place_x
                dy = np.rint(place_y) + up - place_y
                best = np.maximum(best, self._on_pixel(dx, dy))
        return np.asarray(best * electrons)

    def snr(self, electrons: FloatArray) -> FloatArray:
        """Signal to noise in the equivalent aperture."""
        number = electrons / self.detector.excess
        noise = np.sqrt(number + self.noise_pixels * self.detector.variance)
        return np.asarray(number / np.where(noise > 0.0, noise, 1.0))

    def snr_fit(self, electrons: FloatArray) -> FloatArray:
        """Signal to noise of a weighted fit."""
        variance, electrons = self.detector.variance, electrons / self.detector.excess
        if variance == 0.0:
            return np.sqrt(electrons)
        nodes = np.asarray(electrons, dtype=np.float64)
        if nodes.size > _DIRECT:
            low = max(float(nodes.min()), 1e-12 * float(nodes.max()), 1e-300)
            nodes = np.geomspace(low, max(float(nodes.max()), 2.0 * low), _DIRECT)
        square = self.share**2 * self.stride**2
        sums = np.array([float((square / (s * self.share + variance)).sum()) for s in nodes])
        if nodes.size != electrons.size:
            sums = np.exp(np.interp(np.log(electrons.clip(nodes[0])), np.log(nodes), np.log(sums)))
        return np.asarray(electrons * np.sqrt(sums))


def image_signal(share: FloatArray, electrons: float, detector: Detector, *, area: float) -> Signal:
    """Signal of an object from its image.

    Parameters
    ----------
    share : ndarray
        Share of its light in a pixel, at samples that each stand for `area` pixels.
    electrons : float
        Of the object.
    detector : Detector
    """
    peak = electrons * (float(share.max()) if area == 1.0 else _vertex(share))
    variance, electrons = detector.variance, electrons / detector.excess
    if electrons <= 0.0:
        return Signal(peak, 0.0, 0.0)
    noise_pixels = 1.0 / float((share**2).sum() * area)
    snr = electrons / sqrt(electrons + noise_pixels * variance)
    if variance == 0.0:
        return Signal(peak, snr, sqrt(electrons))
    weighted = float((share**2 / (electrons * share + variance)).sum() * area)
    return Signal(peak, snr, electrons * sqrt(weighted))


def _vertex(image: FloatArray) -> float:
    """Peak of a smooth image between its samples: parabolas along both axes."""
    row, column = np.unravel_index(int(np.argmax(image)), image.shape)
    top = float(image[row, column])
    peak = top
    for line, i in ((image[row], int(column)), (image[:, column], int(row))):
        if 0 < i < line.size - 1:
            bend = float(line[i - 1] - 2.0 * top + line[i + 1])
            if bend < 0.0:
                peak -= float(line[i - 1] - line[i + 1]) ** 2 / (8.0 * bend)
    return peak


def pair_signal(
    light: StarLight, stars: tuple[Entry, Entry], *, second: StarLight | None = None
) -> Signal:
    """Signal of the two stars of a pair together, at their own places on the pixels.

    Parameters
    ----------
    light : StarLight
        Of the PSF of both, or of the first.
    stars : tuple of Entry
    second : StarLight, optional
        Of the second star's PSF, of the same width.
    """
    lights = light, light if second is None else second
    detector, stride = light.detector, light.stride
    apart = max(abs(stars[1].x - stars[0].x), abs(stars[1].y - stars[0].y))
    x = np.array([star.x for star in stars])
    y = np.array([star.y for star in stars])
    electrons = np.array([star.electrons for star in stars])
    total = float(electrons.sum())
    if apart > 0.5 * light.reach_pixels:
        rows = [slice(0, 1), slice(1, 2)]
        peak = max(
            float(one.peaks(x[i], y[i], electrons[i]).max())
            for one, i in zip(lights, rows, strict=True)
        )
        if total <= 0.0:
            return Signal(peak, 0.0, 0.0)
        # Apart, their squares add.
        squares = float(sum(n**2 / one.noise_pixels for n, one in zip(electrons, lights)))
        number = total / detector.excess
        snr = number / sqrt(number + total**2 / squares * detector.variance)
        fits = [float(one.snr_fit(electrons[i])[0]) for one, i in zip(lights, rows, strict=True)]
        return Signal(peak, snr, hypot(*fits))
    parts = electrons / total if total > 0.0 else np.array([0.5, 0.5])
    side = min(one.share.shape[0] for one in lights)
    share = np.zeros((side, side))
    # A pixel near the brighter star in the middle, so that its brightest pixel is a sample.
    brighter = int(np.argmax(electrons))
    middle = np.rint(x[brighter]), np.rint(y[brighter])
    for one, part, at_x, at_y in zip(lights, parts, x, y, strict=True):
        edge = (one.share.shape[0] - side) // 2
        image = one.image(float(middle[0] - at_x), float(middle[1] - at_y))
        share += part * image[edge : edge + side, edge : edge + side]
    return image_signal(share, total, detector, area=float(stride**2))


def shape_signal(psf: Transfer, one: Entry, detector: Detector, *, width: float) -> Signal:
    """Signal of an extended object, painted alone on a stamp of its own.

    Parameters
    ----------
    psf : Transfer
        The object's own, pixel included.
    one : Entry
    detector : Detector
    width : float
        FWHM of the PSF (rad), roughly.

    Notes
    -----
    An object of more than 512 pixels a side is sampled more coarsely.
    """
    shape = one.shape
    if shape is None:
        raise ValueError("an object without a shape is a star")
    faint = shape.radius_below(1e-4 / max(shape.radius, width) ** 2)
    radius = min(shape.radius, faint) + 3.0 * width
    stride = max(1, ceil(2.0 * radius / detector.pixel_scale / _LARGEST_STAMP))
    half = ceil(radius / detector.pixel_scale / stride) + 2
    # The stamp keeps the object's phase on the pixels.
    x, y = (half + (place - round(place)) / stride for place in (one.x, one.y))
    sources = Sources(no_points(), (PlacedShape(x, y, 1.0, shape),))
    image = expected_image(
        PsfBasis((psf,)),
        sources,
        columns=2 * half + 1,
        rows=2 * half + 1,
        pixel_scale=stride * detector.pixel_scale,
    )
    share = np.asarray(image, dtype=np.float64) / stride**2
    return image_signal(share, one.electrons, detector, area=float(stride**2))
