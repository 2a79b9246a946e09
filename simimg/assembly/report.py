"""What a scene means, in words: for the person who wants to know before anything is computed.

Derived figures (plate scale, sampling, Fried's parameter, zero point, light a pixel), the defaults
that were used, what will bite, and the cautions that go with a scene that could hurt someone.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import degrees, isfinite, sqrt

import numpy as np

from simimg.air.windows import shut_parts, shut_share
from simimg.assembly.atmosphere import air_figures, scene_layers
from simimg.assembly.brightness import (
    dark_electrons,
    exposure_time,
    sky_electrons,
    zero_point,
)
from simimg.assembly.colours import scene_band
from simimg.assembly.correction import correction_figures, sensor_photons
from simimg.assembly.objects import inventory
from simimg.assembly.orbits import scene_year
from simimg.assembly.train import Train, assemble_train, half_light_width
from simimg.camera.converter import converter_top
from simimg.imaging.grid import peak_share
from simimg.optics.wavefront import marechal_holds, marechal_strehl, steepest_step
from simimg.scene.camera import Camera
from simimg.scene.file import defaults_used, scene_id
from simimg.scene.model import Scene

SIMULATION_NOTE = (
    "Every frame is a simulation: limits and exposure times are estimates for planning, to be "
    "confirmed with the observatory."
)
LASER_NOTE = (
    "Lasers above the horizon need the leave of the aviation and laser-clearance authorities and "
    "trained staff; local rules govern."
)
SUN_NOTE = (
    "Never point an unfiltered telescope or eye at or near the Sun; follow the observatory's rules "
    "and use certified solar filters."
)


@dataclass(frozen=True)
class Description:
    """What a scene means.

    Attributes
    ----------
    lines : tuple of (str, str, str)
        Name, value with its unit, and a remark that may be empty.
    defaults : tuple of (str, str, str)
        Key, the value used in its absence, and what that means.
    warnings : tuple of str
        What will bite.
    cautions : tuple of str
        What could hurt someone, and that it is a simulation.
    values : dict
        The derived figures for programs; units in the names.
    """

    lines: tuple[tuple[str, str, str], ...]
    defaults: tuple[tuple[str, str, str], ...]
    warnings: tuple[str, ...]
    cautions: tuple[str, ...]
    values: dict[str, object]

    def to_dict(self) -> dict[str, object]:
        """The same for JSON."""
        return {
            **self.values,
            "defaults": [
                {"key": key, "value": value, "meaning": meaning}
                for key, value, meaning in self.defaults
            ],
            "cautions": list(self.cautions),
        }


def describe(scene: Scene) -> Description:
    """Work out what a scene means.

    Raises
    ------
    InputError
        A pupil map that cannot serve, or an image quality sharper than diffraction.
    """
    train = assemble_train(scene)
    lines = [*_light_lines(scene, train), *_air_lines(scene, train), *_camera_lines(scene, train)]
    return Description(
        lines=tuple(lines),
        defaults=tuple(defaults_used(scene)),
        warnings=tuple(_warnings(scene, train)),
        cautions=cautions(scene),
        values=_values(scene, train),
    )


def cautions(scene: Scene) -> tuple[str, ...]:
    """What must be said beside any product of a scene."""
    found = []
    if names_the_sun(scene):
        found.append(SUN_NOTE)
    if scene.correction is not None and scene.correction.guide == "laser":
        found.append(LASER_NOTE)
    return (*found, SIMULATION_NOTE)


def names_the_sun(scene: Scene) -> bool:
    """True where a scene speaks of the Sun: its title, an object's label, or sunlight outright.

    The scene does not know where the Sun stands, so that words and brightness must do: nothing but
    the Sun is brighter than magnitude -14.
    """
    texts = [scene.title or "", *[one.label or "" for one in scene.objects]]
    words = {w.strip(".,;:!?()[]\"'").lower() for text in texts for w in text.split()}
    bright = any((getattr(one, "magnitude", None) or 0.0) < -14.0 for one in scene.objects)
    return bright or bool(words & {"sun", "solar", "sunspot", "sunspots", "photosphere"})


def wavelength_text(length: float) -> str:
    """A wavelength (m) in nm, or beyond 10 um in what keeps it short."""
    units = ((1.0, "m"), (1e-2, "cm"), (1e-3, "mm"), (1e-6, "um"))
    size, name = next((one for one in units if length >= one[0] * 0.999999), (1e-9, "nm"))
    if length < 1e-5:
        size, name = 1e-9, "nm"
    return f"{length / size:.5g} {name}"


def _arcsec(angle: float) -> float:
    return degrees(angle) * 3600.0


def _light_lines(scene: Scene, train: Train) -> list[tuple[str, str, str]]:
    band = scene_band(scene)
    zero = zero_point(scene, area=train.pupil.area, airmass=train.airmass)
    what = "electrons" if scene.camera is not None else "photons"
    return [
        (
            "band",
            f"{band.name or 'by centre and width'}, {wavelength_text(band.centre)}, "
            f"{wavelength_text(band.width)} wide",
            f"{scene.band.resolved_system} magnitudes; {_nodes(train)}",
        ),
        ("collecting area", f"{train.pupil.area:.4g} m2", "obstruction and vanes taken off"),
        (
            "zero point",
            f"{zero:.4g} {what}/s",
            "of magnitude 0 above the air, at the detector",
        ),
        (
            "diffraction FWHM",
            f"{_arcsec(half_light_width(train.optics)):.4g} arcsec",
            f"lambda/D is {_arcsec(train.wavelength / scene.telescope.aperture):.4g} arcsec",
        ),
        *_wavefront_lines(train),
    ]


def _nodes(train: Train) -> str:
    count = train.wavelengths.size
    return "the PSF is that of the centre" if count == 1 else f"the PSF is of {count} wavelengths"


def _wavefront_lines(train: Train) -> list[tuple[str, str, str]]:
    rms, wavelength = train.aperture.rms, train.wavelength
    if rms == 0.0:
        return []
    strehl = marechal_strehl(rms, wavelength)
    remark = f"{rms / wavelength:.2g} waves: a Strehl ratio of {strehl:.3g} by Marechal's formula"
    if not marechal_holds(rms, wavelength):
        remark = f"{rms / wavelength:.2g} waves, beyond the range of Marechal's formula"
    return [("wavefront", f"{rms * 1e9:.4g} nm rms", remark)]


def _air_lines(scene: Scene, train: Train) -> list[tuple[str, str, str]]:
    if train.fried is None or train.seeing is None:
        return [("air", "none", "above the atmosphere")]
    lines = [
        ("airmass", f"{train.airmass:.4g}", ""),
        (
            "seeing",
            f"{_arcsec(train.seeing):.4g} arcsec",
            "FWHM at 500 nm, at the zenith, for an infinite outer scale",
        ),
        ("Fried's r0", f"{train.fried * 100.0:.4g} cm", "in this band, at this airmass"),
        *_layer_lines(scene, train),
        *_correction_lines(scene, train),
        (
            "image quality",
            f"{_arcsec(half_light_width(train.focal)):.4g} arcsec",
            "FWHM delivered at the focal plane, without pixel",
        ),
    ]
    if train.dispersion > 0.0:
        lines.append(
            (
                "dispersion",
                f"{_arcsec(train.dispersion):.3g} arcsec",
                "by refraction, between the images of the band's edges",
            )
        )
    return lines


def _layer_lines(scene: Scene, train: Train) -> list[tuple[str, str, str]]:
    """How fast the air changes, and over which angle."""
    figures = air_figures(scene.air, train.fried)
    if figures is None:
        return []
    count = len(scene_layers(scene.air))
    of = "of one layer of turbulence" if count == 1 else f"of {count} layers of turbulence"
    time, angle = figures.coherence_time_ms, figures.isoplanatic_angle_arcsec
    return [
        (
            "coherence time",
            f"{time:.3g} ms" if isfinite(time) else "infinite",
            f"0.314 r0 over the wind, {of}" if isfinite(time) else "nothing moves",
        ),
        (
            "isoplanatic angle",
            f"{angle:.3g} arcsec" if isfinite(angle) else "infinite",
            "0.314 r0 over the distance of the layers"
            if isfinite(angle)
            else "all turbulence lies at the telescope",
        ),
    ]


def _correction_lines(scene: Scene, train: Train) -> list[tuple[str, str, str]]:
    """What corrects the air, and how well."""
    figures = correction_figures(train.corrector, train.optics)
    correction, airmass = scene.correction, train.airmass
    if figures is None or correction is None or airmass is None:
        return []
    pitch = scene.telescope.aperture / correction.actuators
    photons = sensor_photons(correction, pitch=pitch)
    sensor = "no noise" if photons is None else f"{photons:.3g} photons a measurement"
    return [
        (
            "correction",
            f"{correction.actuators} actuators across",
            f"{pitch * 100.0:.3g} cm apart; a lag of {correction.lag * 1e3:.3g} ms; the sensor "
            f"has {sensor}",
        ),
        (
            "corrected wavefront",
            f"{figures.budget_nm['total']:.3g} nm rms",
            f"a Strehl ratio of {figures.strehl:.3g} at the field centre, perfect optics",
        ),
    ]


def _camera_lines(scene: Scene, train: Train) -> list[tuple[str, str, str]]:
    camera, scale = scene.camera, train.pixel_scale
    if camera is None:
        return [("camera", "none", "limits are those of the focal plane")]
    lines = []
    if scale is not None:
        width = half_light_width(train.focal)
        nyquist = train.wavelength / scene.telescope.aperture / 2.0
        lines += [
            ("pixel scale", f"{_arcsec(scale):.4g} arcsec", ""),
            (
                "sampling",
                f"{width / scale:.3g} pixels a FWHM",
                f"the optics' own detail needs {_arcsec(nyquist):.3g} arcsec (Nyquist)",
            ),
        ]
        if scene.image_size is not None:
            columns, rows = scene.image_size
            sides = " x ".join(f"{_arcsec(scale * n) / 60.0:.3g}" for n in scene.image_size)
            lines.append(("field", f"{sides} arcmin", f"{columns} x {rows}"))
    sky, dark = sky_electrons(scene, area=train.pupil.area), dark_electrons(scene)
    noise = sqrt(sky + dark + camera.read_noise**2)
    lines += [
        ("sky", f"{sky:.4g} electrons", "in a pixel and an exposure"),
        ("dark signal", f"{dark:.4g} electrons", "in a pixel and an exposure"),
        (
            "background noise",
            f"{noise:.4g} electrons",
            f"of which the read noise is {camera.read_noise:.4g}",
        ),
    ]
    return lines


def _warnings(scene: Scene, train: Train) -> list[str]:
    camera, found = scene.camera, []
    if camera is not None:
        noise_counts = camera.read_noise / camera.gain
        if camera.bias < 5.0 * noise_counts:
            found.append(
                f"camera.bias is {camera.bias:.4g} adu, under five read noises "
                f"({noise_counts:.3g} adu each): counts will clip at zero"
            )
        top = converter_top(camera.bit_depth)
        if camera.full_well is not None and camera.full_well / camera.gain + camera.bias > top:
            found.append(
                f"the converter ends at {top} adu, before the full well: frames saturate at "
                f"{(top - camera.bias) * camera.gain:.4g} electrons"
            )
    scale = train.pixel_scale
    undated = scene_year(scene) is None and any(pair.orbit is not None for pair in scene.pair)
    if camera is not None and scale is not None and not undated:
        found += _saturating(scene, train, camera, scale)
    if scale is not None:
        width = half_light_width(train.focal)
        if width / scale < 2.0:
            found.append(
                f"undersampled: {width / scale:.2g} pixels a FWHM; the pixel sets the resolution"
            )
    if scene.correction is not None and train.corrector is None:
        why = "above the air" if scene.air is None else "beside a measured PSF"
        found.append(f"[correction] has nothing to correct {why}")
    found += _blocked(train)
    if train.dispersion > half_light_width(train.focal) / 3.0:
        found.append(
            f"the air draws the band out over {_arcsec(train.dispersion):.3g} arcsec, more than a "
            "third of the FWHM"
        )
    if train.aperture.path is not None:
        step = steepest_step(train.aperture.path, train.pupil)
        if step > 0.5 * train.wavelength:
            found.append(
                f"the wavefront changes by up to {step / train.wavelength:.2g} waves from one "
                "square of the pupil to the next: light far out is folded back"
            )
    if train.airmass is not None and train.airmass > 3.0:
        found.append(f"airmass {train.airmass:.3g}: extinction and seeing so low are uncertain")
    if scene.camera is not None and exposure_time(scene) == 0.0:
        found.append("no exposure time: dark signal and sky brightness count for nothing")
    return found


def _blocked(train: Train) -> list[str]:
    """Where the air does not let the band through; common practice of the trade."""
    if train.airmass is None:
        return []
    lower, upper = train.palette.band.support
    share = shut_share(lower, upper)
    if share < 0.05:
        return []
    window, _ = max(shut_parts(lower, upper), key=lambda part: part[1])
    return [
        f"the air is shut over {share:.0%} of the band: {window.sentence} (common practice); no "
        "extinction stands for that: observe above the air"
    ]


def _saturating(scene: Scene, train: Train, camera: Camera, scale: float) -> list[str]:
    """A warning where stars fill the well or reach the end of the converter."""
    objects = inventory(scene, train=train)
    points = objects.sources.points
    room = (converter_top(camera.bit_depth) - camera.bias) * camera.gain
    if camera.full_well is not None:
        room = min(room, camera.full_well)
    flat = sky_electrons(scene, area=train.pupil.area) + dark_electrons(scene)
    peaks = points.electrons * peak_share(train.effective, scale) + flat
    count = int((peaks > room).sum())
    if count == 0:
        return []
    times = float(peaks.max()) / room
    stars = "1 star saturates" if count == 1 else f"{count} stars saturate"
    return [
        f"{stars}: a peak of up to {peaks.max():.3g} electrons, {times:.2g} times what a pixel can "
        "record; measure cannot use saturated pixels"
    ]


def _values(scene: Scene, train: Train) -> dict[str, object]:
    zero = zero_point(scene, area=train.pupil.area, airmass=train.airmass)
    scale = train.pixel_scale
    return {
        "scene_id": scene_id(scene),
        "wavelength_nm": train.wavelength * 1e9,
        "collecting_area_m2": train.pupil.area,
        "zero_point_electrons_per_second": zero,
        "zero_point_magnitude": 2.5 * float(np.log10(zero)),
        "airmass": train.airmass,
        "r0_m": train.fried,
        **_air_values(scene, train),
        "wavelengths": train.wavelengths.size,
        "wavefront_rms_nm": train.aperture.rms * 1e9,
        "dispersion_arcsec": _arcsec(train.dispersion),
        "seeing_arcsec": None if train.seeing is None else _arcsec(train.seeing),
        "image_quality_arcsec": _arcsec(half_light_width(train.focal)),
        "pixel_scale_arcsec": None if scale is None else _arcsec(scale),
        "sky_electrons": sky_electrons(scene, area=train.pupil.area),
        "dark_electrons": dark_electrons(scene),
    }


def _air_values(scene: Scene, train: Train) -> dict[str, object]:
    figures = air_figures(scene.air, train.fried)
    time = None if figures is None else figures.coherence_time_ms
    angle = None if figures is None else figures.isoplanatic_angle_arcsec
    return {
        "coherence_time_ms": time if time is not None and isfinite(time) else None,
        "isoplanatic_angle_arcsec": angle if angle is not None and isfinite(angle) else None,
    }
