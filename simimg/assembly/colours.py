"""The colours of a scene: its band, what the detector makes of it, and the spectra of its objects.

Every object has one spectrum (flat in f_nu unless it says otherwise), and every spectrum spreads
its detected photons over the band's nodes in its own way. A *kind* is the number by which the
engine knows a source's spectrum: small numbers count the spectra written in the scene (0 is flat),
numbers from `KELVIN` up are the temperatures of a catalogue's stars, in kelvin. Kinds of a few
spectra have a PSF each; many share a few reference PSFs, mixed with a stated error.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TypeAlias

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.curves import efficiency_table, spectrum_table
from simimg.errors import InputError, mistake
from simimg.light.bands import Band, custom_band, standard_band, tabulated_band
from simimg.light.colours import ColourMembers, colour_members
from simimg.light.curves import efficiency_curve
from simimg.light.nodes import node_weights, photon_nodes
from simimg.light.photons import Response, band_colour, effective_wavelength, photon_rate
from simimg.light.spectra import FLAT, Blackbody, PowerLaw, Spectrum
from simimg.scene.band import usual_system
from simimg.scene.model import Scene
from simimg.scene.objects import Luminous, Pair

ColourKey: TypeAlias = tuple[str, float | str] | None

KELVIN = 500
"""Kinds from here up are temperatures in kelvin."""

COOLEST, HOTTEST = 1000.0, 200_000.0
"""Range of the temperatures of a catalogue's stars."""

MIXING_ERROR = 2e-5
"""Largest error of an image by mixing reference PSFs, over its peak."""


@dataclass(frozen=True, eq=False)
class Palette:
    """Band, detector and spectra of a scene.

    Attributes
    ----------
    scene : Scene
    band : Band
    response : Curve or float
        Quantum efficiency.
    spectra : tuple of Spectrum
        Those written in the scene, by kind; the first is flat.
    kinds : mapping
        Kind of what is written of a colour (`colour_keys`).
    """

    scene: Scene
    band: Band
    response: Response
    spectra: tuple[Spectrum, ...]
    kinds: Mapping[ColourKey, int]

    @property
    def system(self) -> str:
        """System of the scene's magnitudes."""
        return self.scene.band.resolved_system

    @cached_property
    def wavelength(self) -> float:
        """Mean wavelength of the detected photons of a flat spectrum (m)."""
        return float(effective_wavelength(self.band, response=self.response))

    def nodes(self, count: int) -> tuple[FloatArray, FloatArray]:
        """Wavelengths (m) that stand for the band, and the weights of a flat spectrum."""
        return photon_nodes(self.band, count, response=self.response)

    def weights(self, spectrum: Spectrum, wavelengths: FloatArray) -> FloatArray:
        """Weights of the nodes for a spectrum."""
        return node_weights(wavelengths, self.band, spectrum=spectrum, response=self.response)

    def members(self, wavelengths: FloatArray) -> ColourMembers:
        """Reference temperatures for a catalogue's stars."""
        return colour_members(
            wavelengths,
            self.band,
            coolest=COOLEST,
            hottest=HOTTEST,
            tolerance=MIXING_ERROR,
            response=self.response,
        )

    def rate(self, kind: int) -> float:
        """Electrons per second and square metre of magnitude 0 in the scene's band, no losses."""
        spectrum = self.spectrum(kind)
        return photon_rate(self.band, self.system, spectrum=spectrum, response=self.response)

    def spectrum(self, kind: int) -> Spectrum:
        """Spectrum of a kind."""
        return Blackbody(float(kind)) if kind >= KELVIN else self.spectra[kind]

    def carried(self, kind: int, band_name: str | None, system: str | None) -> float:
        """What to add to a magnitude known in another band and system, to have it in the scene's.

        Raises
        ------
        ValueError
            Where the spectrum or a band's zero point does not reach.
        """
        if band_name is None and system is None:
            return 0.0
        known = self.band if band_name is None else standard_band(band_name)
        usual = self.system if band_name is None else usual_system(band_name)
        return band_colour(
            self.spectrum(kind),
            known,
            self.band,
            from_system=system or usual,
            to_system=self.system,
        )


def scene_palette(scene: Scene) -> Palette:
    """The colours of a scene.

    Raises
    ------
    InputError
        A table that cannot serve, or that does not reach over the band.
    """
    band = scene_band(scene)
    keys = dict.fromkeys([None, *(key for one in scene.objects for key in colour_keys(one))])
    spectra = tuple(_spectrum(scene, key) for key in keys)
    palette = Palette(
        scene, band, scene_response(scene), spectra, {k: i for i, k in enumerate(keys)}
    )
    if palette.system not in band.zero_flux_jy:
        line = mistake(
            scene.name,
            "band.system",
            f"there is no {palette.system} zero point at {band.centre * 1e9:.4g} nm",
            'write system = "AB", and AB magnitudes',
        )
        raise InputError(line)
    try:
        for kind in range(len(palette.spectra)):
            palette.rate(kind)
    except ValueError as error:
        line = mistake(scene.name, "band", str(error), "write tables that reach over the band")
        raise InputError(line) from error
    return palette


def scene_band(scene: Scene) -> Band:
    """The band of a scene: a standard one, one by centre and width, or one from a table."""
    band = scene.band
    if band.file is not None:
        wavelength, values = efficiency_table(scene, "band.file", band.file)
        try:
            return tabulated_band(wavelength, values, name=scene.inputs[band.file].name)
        except ValueError as error:
            line = mistake(
                scene.name, "band.file", str(error), "write a table of one band, 0 at both ends"
            )
            raise InputError(line) from error
    if band.centre is not None and band.width is not None:
        return custom_band(band.centre, band.width, name=band.name or "")
    return standard_band(str(band.name))


def scene_response(scene: Scene) -> Response:
    """Quantum efficiency of a scene's camera; 1 without one."""
    if scene.camera is None:
        return 1.0
    efficiency = scene.camera.quantum_efficiency
    if isinstance(efficiency, str):
        return efficiency_curve(*efficiency_table(scene, "camera.quantum_efficiency", efficiency))
    return efficiency


def colour_keys(one: Luminous | Pair) -> tuple[ColourKey, ...]:
    """What is written of an object's colour; of a pair's two. None is flat."""
    if isinstance(one, Pair):
        if one.temperatures is not None:
            return tuple(("temperature", t) for t in one.temperatures)
        if one.spectra is not None:
            return tuple(("spectrum", name) for name in one.spectra)
        return (None, None)
    for name in ("temperature", "spectrum", "spectral_index"):
        value = getattr(one, name)
        if value is not None:
            return ((name, value),)
    return (None,)


def _spectrum(scene: Scene, key: ColourKey) -> Spectrum:
    if key is None:
        return FLAT
    name, value = key
    if isinstance(value, str):
        return spectrum_table(scene, name, value)
    return Blackbody(value) if name == "temperature" else PowerLaw(value)


def kelvin_kinds(temperatures: FloatArray) -> AnyArray:
    """Kinds of a catalogue's stars, their temperatures in whole kelvin.

    Raises
    ------
    ValueError
        A temperature out of range.
    """
    if not bool(np.all((temperatures >= COOLEST) & (temperatures <= HOTTEST))):
        raise ValueError(f"temperatures must lie between {COOLEST:g} and {HOTTEST:g} K")
    return np.rint(temperatures).astype(np.int64)
