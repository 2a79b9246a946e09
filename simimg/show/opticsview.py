"""The optics of a scene as pictures and curves, before they are drawn.

Pupil and wavefront as projected on the detector, the PSF that falls on the focal plane, and the
modulus of its transfer function. Lengths in metres, angles in radians, frequencies in cycles per
radian.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np

from simimg.arrays import FloatArray, frozen
from simimg.assembly.places import field_geometry
from simimg.assembly.train import Train, assemble_train, half_light_width
from simimg.imaging.basis import Transfer
from simimg.imaging.circles import encircled_diameters
from simimg.imaging.profile import centroid, psf_peak
from simimg.imaging.samples import sampled_psf
from simimg.optics.wavefront import without_tilt
from simimg.scene.model import Scene
from simimg.show.compass import Compass

_HALF = 200  # samples from the middle of a PSF's picture to its edge
_RINGS = 10.0  # lambda/D from the middle of a PSF's picture to its edge, at least
_CIRCLES = 1.4  # of the diameter that holds 80 % of the light, likewise
_CURVE = 400  # points of a curve
_LEFT = 3e-3  # modulus below which a curve of the transfer function lies on the axis
_SAME = 1e-3  # difference of curves below which nothing was added to the perfect pupil
_ALIKE = 1e-2  # difference of curves below which one stands for both directions
_OPEN = 0.02  # transmission above which a square of the pupil has a wavefront to show


@dataclass(frozen=True)
class Curve:
    """A modulus of a transfer function along a line."""

    key: str
    name: str
    values: FloatArray


@dataclass(frozen=True, eq=False)
class OpticsView:
    """What there is to draw of a scene's optics.

    Attributes
    ----------
    scene : Scene
    train : Train
    compass : Compass
        North and east on the detector.
    """

    scene: Scene
    train: Train
    compass: Compass

    @property
    def side(self) -> float:
        """Side of the pupil's picture (m)."""
        pupil = self.train.pupil
        return pupil.pitch * len(pupil.amplitude)

    def wavefront(self) -> FloatArray:
        """Optical path on the axis (m), tilt taken out; NaN where hardly any light passes."""
        pupil, path = self.train.pupil, self.train.aperture.path
        flat = np.zeros(pupil.amplitude.shape) if path is None else without_tilt(path, pupil)
        lit = pupil.transmission
        level = flat - (lit * flat).sum() / lit.sum()
        return np.where(lit > _OPEN, level, np.nan)

    def psf(self) -> tuple[FloatArray, float]:
        """The PSF over its peak at the focal plane, without pixel, and half its side (rad)."""
        focal, train = self.train.focal, self.train
        (wide,) = encircled_diameters(focal, (0.8,))
        half = max(_RINGS * train.wavelength / train.pupil.diameter, _CIRCLES * wide)
        image = sampled_psf(
            focal,
            pixel_scale=half / _HALF,
            oversampling=1,
            half_width_pixels=_HALF,
            centre=centroid(focal),
        )
        return np.asarray(image / image.max()), half

    def curves(self) -> tuple[FloatArray, list[Curve]]:
        """Frequencies (cycles/rad), and transfer functions along the detector's axes."""
        train = self.train
        limit = train.optics.band_limit
        # Where the air leaves only the lowest frequencies, the rest of the optics' says nothing.
        wide = np.linspace(0.0, limit, 20 * _CURVE)
        left = [_modulus(train.focal, wide, angle) for angle in (0.0, 0.5 * pi)]
        seen = float(wide[np.flatnonzero(np.maximum(*left) > _LEFT).max()])
        end = limit if seen > 0.4 * limit else 1.4 * seen
        frequency = np.linspace(0.0, end, _CURVE)
        curves = [Curve("perfect", "perfect pupil", _modulus(train.perfect, frequency, 0.0))]
        along = [_modulus(train.focal, frequency, angle) for angle in (0.0, 0.5 * pi)]
        if max(np.abs(one - curves[0].values).max() for one in along) > _SAME:
            if np.abs(along[0] - along[1]).max() < _ALIKE:
                curves.append(Curve("delivered", "delivered", along[0]))
            else:
                curves.append(Curve("delivered-x", "delivered, along x", along[0]))
                curves.append(Curve("delivered-y", "delivered, along y", along[1]))
        if train.effective is not train.focal:
            values = _modulus(train.effective, frequency, 0.0)
            curves.append(Curve("pixel", "with the pixel, along x", values))
        return frozen(frequency), curves

    @property
    def strehl(self) -> float:
        """Peak of the PSF over the perfect pupil's, over the band, without pixel."""
        train = self.train
        if train.focal is train.perfect:
            return 1.0
        return min(1.0, psf_peak(train.focal) / psf_peak(train.perfect))

    @property
    def fwhm(self) -> float:
        """FWHM (rad) of the PSF's azimuthal mean, without pixel."""
        return half_light_width(self.train.focal)


def optics_view(scene: Scene) -> OpticsView:
    """Assemble the optics of a scene.

    Raises
    ------
    InputError
        A map or table that cannot serve, or an image quality sharper than diffraction.
    """
    geometry = field_geometry(scene)
    north, east = (_unit(geometry.direction(angle)) for angle in (0.0, 0.5 * pi))
    return OpticsView(scene, assemble_train(scene), Compass(north, east, None, known=True))


def _unit(angle: float) -> tuple[float, float]:
    return float(np.cos(angle)), float(np.sin(angle))


def _modulus(transfer: Transfer, frequency: FloatArray, angle: float) -> FloatArray:
    u, v = frequency * np.cos(angle), frequency * np.sin(angle)
    return frozen(np.abs(transfer(u, v)))
