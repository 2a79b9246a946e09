"""How many electrons: zero point, sources, sky and dark signal of a scene's set-up.

A magnitude is above the air, in the scene's band and system or carried over from another band; the
source's spectrum, the air's extinction, the telescope's collecting area and throughput and the
camera's quantum efficiency turn it into electrons at the detector. The sky's surface brightness is
as observed, so that no extinction is applied to it; its spectrum is flat in f_nu.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import degrees, log10, nan

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.colours import KELVIN, Palette, colour_keys, scene_palette
from simimg.errors import InputError, mistake
from simimg.scene.model import Scene
from simimg.scene.objects import Pair

# Temperatures at which a catalogue's zero points are computed; between them in log, cubic by far.
_TEMPERATURES = 96


@dataclass(frozen=True, eq=False)
class Photometry:
    """Magnitudes to electrons.

    Attributes
    ----------
    palette : Palette
    through : float
        Collecting area (m2) times throughput times what the air lets through.
    time : float
        Exposure (s).
    """

    palette: Palette
    through: float
    time: float

    def zero_point(self, kind: int = 0) -> float:
        """Electrons per second from magnitude 0 in the scene's band, of a kind of spectrum."""
        return float(self.palette.rate(kind) * self.through)

    def electrons(
        self,
        magnitude: FloatArray | float,
        kind: AnyArray | int = 0,
        *,
        band: str | None = None,
        system: str | None = None,
    ) -> FloatArray:
        """Electrons an exposure.

        Parameters
        ----------
        magnitude : array_like
        kind : array_like of int
            Of the sources' spectra, one for all or one each.
        band, system : str, optional
            Where the magnitudes are known; the scene's own unless given.

        Raises
        ------
        InputError
            Where a spectrum or a zero point does not reach over a band.
        """
        return self.rate(magnitude, kind, band=band, system=system) * self.time

    def rate(
        self,
        magnitude: FloatArray | float,
        kind: AnyArray | int = 0,
        *,
        band: str | None = None,
        system: str | None = None,
    ) -> FloatArray:
        """Electrons per second; parameters and errors as of `electrons`."""
        faint = 10.0 ** (-0.4 * np.asarray(magnitude, dtype=np.float64))
        return np.asarray(faint * self._factors(np.asarray(kind, dtype=np.int64), band, system))

    def difference(self, pair: Pair) -> float:
        """A pair's magnitude difference as the detector sees it, second minus first.

        That of the detected electrons, which is what decides whether the stars come apart. It
        differs from that of the catalogue where the stars' spectra differ or the magnitudes are
        known in another band.
        """
        light = pair.electrons
        if light is None:
            assert pair.magnitudes is not None
            kinds = [self.palette.kinds[key] for key in colour_keys(pair)]
            first, second = (
                float(self.rate(one, kind, band=pair.magnitude_band, system=pair.magnitude_system))
                for one, kind in zip(pair.magnitudes, kinds, strict=True)
            )
            light = first, second
        return 2.5 * log10(light[0] / light[1]) if min(light) > 0.0 else nan

    def _factors(self, kind: AnyArray, band: str | None, system: str | None) -> FloatArray:
        def one(number: int) -> float:
            try:
                carried = self.palette.carried(number, band, system)
            except ValueError as error:
                scene = self.palette.scene
                line = mistake(
                    scene.name,
                    "magnitude_band",
                    str(error),
                    "give the magnitude in another band, or a spectrum that reaches over both",
                )
                raise InputError(line) from error
            return float(self.zero_point(number) * 10.0 ** (-0.4 * carried))

        if kind.ndim == 0:
            return np.asarray(one(int(kind)))
        known = np.unique(kind)
        if known.size > _TEMPERATURES and known[0] >= KELVIN:
            # Smooth in 1/T; a hundred points of it leave 1e-6 by cubic splines.
            from scipy.interpolate import CubicSpline

            places = np.linspace(1.0 / known[-1], 1.0 / known[0], _TEMPERATURES)
            table = np.log([one(round(1.0 / place)) for place in places])
            spline = CubicSpline(1.0 / np.rint(1.0 / places), table)
            return np.asarray(np.exp(spline(1.0 / kind)))
        values = np.array([one(int(number)) for number in known])
        return np.asarray(values[np.searchsorted(known, kind)])


def photometry(
    scene: Scene, *, area: float, airmass: float | None, palette: Palette | None = None
) -> Photometry:
    """The way from magnitudes to electrons in a scene.

    Parameters
    ----------
    scene : Scene
    area : float
        Collecting area of the pupil (m2).
    airmass : float or None
        None above the air: no extinction.
    palette : Palette, optional
        The scene's, where it is at hand.
    """
    extinction = scene.air.extinction if scene.air is not None else 0.0
    loss = 10.0 ** (-0.4 * extinction * (airmass or 0.0))
    through = area * scene.telescope.throughput * loss
    return Photometry(palette or scene_palette(scene), float(through), exposure_time(scene))


def zero_point(scene: Scene, *, area: float, airmass: float | None) -> float:
    """Electrons per second at the detector from a star of magnitude 0, flat in f_nu."""
    return photometry(scene, area=area, airmass=airmass).zero_point()


def exposure_time(scene: Scene) -> float:
    """Exposure time (s); 0 where every signal is in electrons and none is given."""
    if scene.exposure is None or scene.exposure.time is None:
        return 0.0
    return scene.exposure.time


def sky_electrons(scene: Scene, *, area: float) -> float:
    """Electrons of the sky in a pixel and an exposure; 0 without [sky] or without a pixel."""
    sky, scale = scene.sky, scene.pixel_scale
    if sky is None:
        return 0.0
    if sky.electrons is not None:
        return sky.electrons
    if sky.surface_brightness is None or scale is None:
        return 0.0
    square_arcsec = (degrees(scale) * 3600.0) ** 2
    clear = photometry(scene, area=area, airmass=None)
    return float(clear.electrons(sky.surface_brightness) * square_arcsec)


def dark_electrons(scene: Scene) -> float:
    """Electrons of the dark signal in a pixel and an exposure."""
    if scene.camera is None:
        return 0.0
    return scene.camera.dark_current * exposure_time(scene) * scene.camera.binning**2
