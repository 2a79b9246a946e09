"""What the tables of a scene ask of one another, beyond what each checks by itself."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

from simimg.scene.colours import vega_fault
from simimg.scene.objects import Catalogue, Luminous, Pair
from simimg.scene.table import MANY, Fault

if TYPE_CHECKING:
    from simimg.scene.model import Scene

LONGEST_TRAIL = math.radians(10.0)
"""Longest way that an object or the aim may go in an exposure (rad)."""

FEWEST_WAVELENGTHS = 4.0
"""Least aperture over wavelength: below, the beam is too wide for small angles."""

SHORTEST_IN_AIR = 180e-9
"""Shortest wavelength (m) for which the refraction of air is known."""

MOST_DISTORTION = 0.3
"""Largest relative distortion on the detector; from a third on, a barrel folds the field back."""


def scene_faults(scene: Scene) -> Iterator[Fault]:
    """Mistakes in how the tables of a scene go together, where each is right by itself."""
    yield from _light(scene)
    yield from _optics(scene)
    yield from _correcting(scene)
    yield from _tracking(scene)
    yield from _trails(scene)
    yield from _magnitudes(scene)


def _light(scene: Scene) -> Iterator[Fault]:
    band = scene.band
    if band.centre is None or band.width is None:
        return
    if scene.telescope.aperture < FEWEST_WAVELENGTHS * band.centre:
        yield Fault(
            ("telescope", "aperture"),
            f"must be at least {FEWEST_WAVELENGTHS:g} wavelengths of band.centre",
            "write a larger aperture or a shorter wavelength",
        )
    bluest = band.centre - 0.5 * band.width
    if scene.air is not None and scene.air.dispersion and bluest < SHORTEST_IN_AIR:
        yield Fault(
            ("air", "dispersion"),
            "is not known below 180 nm, where the band begins",
            "write dispersion = false, or a band of longer wavelengths",
        )


def _optics(scene: Scene) -> Iterator[Fault]:
    scale = scene.pixel_scale
    if scene.psf is not None and scale is None:
        yield Fault(
            ("psf", "file"),
            "needs a pixel scale, which is missing",
            'add pixel_scale = "0.12 arcsec" to [camera]',
        )
    field, camera = scene.telescope.field, scene.camera
    if field is None or camera is None or camera.pixels is None or scale is None:
        return
    corner = 0.5 * scale * math.hypot(*camera.pixels)
    distortion = field.distortion * (corner / field.radius) ** 2
    if abs(distortion) > MOST_DISTORTION:
        yield Fault(
            ("telescope", "field", "distortion"),
            f"grows to {distortion:.3g} at the corner of the detector",
            f"write a value that stays within {MOST_DISTORTION:g} there, or a larger radius",
        )


def _correcting(scene: Scene) -> Iterator[Fault]:
    air = scene.air
    if scene.correction is not None and air is not None and air.tilt_removed is not None:
        yield Fault(
            ("air", "tilt_removed"),
            "contradicts [correction], which takes the tilt away by itself",
            "leave out tilt_removed or [correction]",
        )


def _tracking(scene: Scene) -> Iterator[Fault]:
    if scene.pointing is None or scene.pointing.track is None:
        return
    found = [one for one in scene.objects if one.label == scene.pointing.track]
    if len(found) != 1:
        yield Fault(
            ("pointing", "track"),
            "must be the label of one object, "
            + ("which none bears" if not found else f"but {len(found)} bear it"),
            'write the label of an object with motion, as track = "comet"',
        )
    elif found[0].motion is None:
        yield Fault(
            ("pointing", "track"),
            "names an object that does not move",
            'give it motion = { rate = "30 arcsec/h", position_angle = "45 deg" }',
        )


def _trails(scene: Scene) -> Iterator[Fault]:
    time = scene.exposure.time if scene.exposure is not None else None
    if time is None:
        return
    rates: list[tuple[tuple[str | int, ...], float]] = []
    if scene.pointing is not None:
        if scene.pointing.drift is not None:
            rates.append((("pointing", "drift", "rate"), scene.pointing.drift.rate))
        if abs(scene.pointing.rotation_rate) * time > 2.0 * math.pi:
            yield Fault(
                ("pointing", "rotation_rate"),
                "turns the field more than once in the exposure",
                "write a smaller rate or a shorter exposure.time",
            )
    for kind in MANY:
        for index, one in enumerate(getattr(scene, kind)):
            motion = getattr(one, "motion", None)
            if motion is not None:
                rates.append(((kind, index, "motion", "rate"), motion.rate))
    for place, rate in rates:
        if rate * time > LONGEST_TRAIL:
            yield Fault(
                place,
                f"gives a trail of {math.degrees(rate * time):.3g} deg in the exposure",
                "write a rate for a trail of at most 10 deg, or a shorter exposure.time",
            )


def _magnitudes(scene: Scene) -> Iterator[Fault]:
    for kind in MANY:
        for index, one in enumerate(getattr(scene, kind)):
            if one.magnitude_band is None:
                wrong = vega_fault(scene.band.name, one.magnitude_system)
                if wrong is None and one.magnitude_system == "Vega" and not scene.band.has_vega:
                    wrong = (
                        "has no Vega zero point in the scene's band",
                        'write "AB" (and AB magnitudes)',
                    )
                if wrong is not None:
                    yield Fault((kind, index, "magnitude_system"), *wrong)
            elif _must_be_carried(scene, one):
                sample = (
                    'temperatures = ["9000 K", "4000 K"], or spectra'
                    if kind == "pair"
                    else 'temperature = "5800 K", or spectrum'
                )
                yield Fault(
                    (kind, index, "magnitude_band"),
                    "needs a colour to carry the magnitude over to the scene's band",
                    f"add {sample}",
                )


def _must_be_carried(scene: Scene, one: Luminous | Pair | Catalogue) -> bool:
    """True where a magnitude is known in another band and no colour carries it over.

    The stars of a catalogue may have their temperatures in its file.
    """
    if isinstance(one, Catalogue) or one.magnitude_band == scene.band.name:
        return False
    return not one.coloured
