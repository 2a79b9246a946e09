"""simimg limits: what a set-up can resolve, and how well it sees each object."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime, timedelta
from typing import TYPE_CHECKING

import click

from simimg_cli import options
from simimg_cli.output import document, paragraph, say, table, warn
from simimg_cli.words import NONE, arcsec, figures, short

if TYPE_CHECKING:
    from simimg.resolving.ephemeris import DatedPair
    from simimg.resolving.limits import Limits, ObjectLimits, Resolution
    from simimg.scene.model import Scene


@click.command("limits")
@options.scene
@click.option(
    "--position-angle",
    type=options.Degrees(),
    default="90",
    metavar="DEG",
    help="Direction in which a PSF that is not round is cut, north through east; 90 unless given.",
)
@click.option(
    "--dates",
    type=options.Dates(),
    metavar="START:STOP:STEP",
    help="Tabulate when the pairs can be resolved, at these Julian years: 1980:2020:10.",
)
@click.option("--all", "all_stars", is_flag=True, help="List the stars of catalogues, too.")
@options.as_json
@options.quiet
def command(
    scene: str,
    overrides: Sequence[str],
    without: Sequence[str],
    position_angle: float,
    dates: list[float] | None,
    all_stars: bool,
    as_json: bool,
    quiet: bool,
) -> None:
    """Say what the set-up of SCENE can resolve, and how well it sees each object.

    Diffraction limits are those of the pupil alone; delivered limits those of optics, air and
    pixel together. SCENE may be a frame of simimg, which carries its scene.
    """
    from simimg.assembly.report import cautions, describe
    from simimg.errors import InputError, mistake
    from simimg.resolving.ephemeris import ephemeris
    from simimg.resolving.limits import limits
    from simimg.scene.file import replace, scene_id
    from simimg_cli.cautions import print_cautions
    from simimg_cli.scenes import open_scene

    opened = open_scene(scene, overrides=overrides, without=without).scene
    identity = scene_id(opened)
    if dates is None and _undated(opened):
        what = "is needed to place a pair on its orbit and missing"
        mend = 'add start = "2026-04-12T03:00:00" to [exposure], or give --dates 2026:2036:1'
        raise InputError(mistake(opened.name, "exposure.start", what, mend))
    rows = None if dates is None else ephemeris(opened, dates)
    warnings: list[str] = []
    if dates and _undated(opened):
        # The objects' own table needs one date for the orbits; the first will do.
        start = _start_of(dates[0])
        opened = replace(opened, {"exposure.start": start})
        warnings.append(f"exposure.start is missing: objects are listed as of {start}")
    found = limits(opened, position_angle=position_angle, all_stars=all_stars)
    warnings += describe(opened).warnings
    if as_json:
        payload = {**found.to_dict(), "cautions": cautions(opened)}
        if rows is not None:
            payload["ephemeris"] = [row.to_dict() for row in rows]
        say(document(payload, scene_id=identity, warnings=warnings))
        return
    _print(found, f"{scene}: {opened.title or 'without a title'}")
    if rows is not None:
        _print_ephemeris(rows)
    if not quiet:
        warn(warnings)
    print_cautions(opened, quiet=quiet)


def _undated(scene: Scene) -> bool:
    """True for orbits in a scene without a date."""
    dated = scene.exposure is not None and scene.exposure.start is not None
    return not dated and any(pair.orbit is not None for pair in scene.pair)


def _start_of(year: float) -> str:
    """A Julian year as a scene's start, within the years that a scene may name."""
    days = (min(max(year, 1900.1), 2099.9) - 2000.0) * 365.25
    return (datetime(2000, 1, 1, 12) + timedelta(days=days)).isoformat(timespec="seconds")


def _print_ephemeris(rows: Sequence[DatedPair]) -> None:
    say()
    table(
        ("pair", "date", "separation", "angle", "Rayleigh", "Sparrow"),
        [
            (
                row.label,
                f"{row.date:.8g}",
                arcsec(row.separation_arcsec),
                f"{row.position_angle_deg:.2f} deg",
                "beyond" if row.rayleigh else "within",
                "beyond" if row.sparrow else "within",
            )
            for row in rows
        ],
        right=(1, 2, 3),
    )


def _print(found: Limits, heading: str) -> None:
    from simimg.assembly.report import wavelength_text

    air = "above the air" if found.r0_m is None else f"r0 {figures(found.r0_m * 100, 3)} cm"
    scale = found.pixel_scale_arcsec
    pixel = "without a pixel" if scale is None else f'pixel {short(scale)}"'
    say(heading)
    say(f"{wavelength_text(found.wavelength_nm * 1e-9)}, {air}, {pixel}")
    say()
    say("Limits for an equal pair (Rayleigh by diffraction: the first dark ring)")
    angle = short(found.position_angle_deg)
    rows = [
        ("diffraction", found.diffraction, "of the pupil alone"),
        ("delivered", found.delivered, "of optics, air and pixel"),
    ]
    table(
        (f"along {angle} deg", "FWHM", "Rayleigh", "Sparrow", ""),
        [
            (
                name,
                arcsec(one.fwhm_arcsec),
                arcsec(one.rayleigh_arcsec),
                arcsec(one.sparrow_arcsec),
                remark,
            )
            for name, one, remark in rows
        ],
        right=(1, 2, 3),
    )
    say()
    table(
        ("", "", ""),
        [
            ("Dawes", arcsec(found.dawes_arcsec), "observers' custom, for reference"),
            ("Strehl ratio", figures(found.strehl, 3), "without the pixel"),
            *_optional_rows(found),
            ("50 % of the light", arcsec(found.ee50_arcsec), "diameter, delivered"),
            ("80 % of the light", arcsec(found.ee80_arcsec), "diameter, delivered"),
            (
                "Nyquist pixel",
                arcsec(found.nyquist_pixel_arcsec),
                "lambda/2D, the largest without loss of detail",
            ),
        ],
        right=(1,),
    )
    _print_correction(found)
    if found.objects:
        _print_objects(found.objects)
    for text in found.notes:
        say()
        say(paragraph(text))


_CAUSES = (
    ("fitting", "finer than the actuators"),
    ("lag", "the air moves on while the correction is on its way"),
    ("noise", "the guide star's photons"),
    ("aliasing", "errors too fine for the sensor taken for coarser ones"),
    ("anisoplanatism", "the guide star stands aside"),
    ("cone", "the laser's spot is not at infinity"),
    ("tilt", "the tilt star stands aside"),
    ("total", "in quadrature"),
)


def _print_correction(found: Limits) -> None:
    correction = found.correction
    if correction is None:
        return
    budget = correction.budget_nm
    say()
    say("What the correction leaves at the field centre, each cause alone")
    table(
        ("cause", "rms", ""),
        [
            (name, f"{figures(budget[name], 3)} nm", remark)
            for name, remark in _CAUSES
            if budget[name] > 0.0
        ],
        right=(1,),
    )
    say(
        f"Strehl ratio of the corrected air {figures(correction.strehl, 3)}; "
        f"{figures(correction.strehl_from_variance, 3)} by its variance "
        f"({figures(correction.remainder_nm, 3)} nm, causes together, without piston)"
    )


def _optional_rows(found: Limits) -> list[tuple[str, str, str]]:
    """Rows of what not every scene has: a wavefront, refraction."""
    rows = []
    if found.wavefront_rms_nm > 0.0:
        rms = figures(found.wavefront_rms_nm, 3)
        rows.append(
            ("Strehl from the rms", figures(found.strehl_from_rms, 3), f"of {rms} nm, optics alone")
        )
    if found.dispersion_arcsec > 0.0:
        rows.append(
            (
                "dispersion",
                arcsec(found.dispersion_arcsec),
                "between the band's edges",
            )
        )
    return rows


def _print_objects(objects: Sequence[ObjectLimits]) -> None:
    say()
    table(
        ("object", "kind", "electrons", "peak pixel", "S/N", "S/N of a fit", ""),
        [
            (
                one.label or NO_LABEL,
                one.kind,
                _electrons(one.electrons),
                figures(one.peak_electrons),
                figures(one.snr),
                figures(one.snr_fit),
                "saturated" if one.saturated else "",
            )
            for one in objects
        ],
        right=(2, 3, 4, 5),
    )
    pairs = [one for one in objects if one.kind == "pair"]
    if not pairs:
        return
    say()
    rows = []
    for one in pairs:
        rows.append(
            (
                one.label or NO_LABEL,
                f'{short(one.separation_arcsec)}"',
                f"{short(one.position_angle_deg)} deg",
                short(one.magnitude_difference),
                *_own("delivered", one.delivered),
            )
        )
        rows.append(("", "", "", "", *_own("diffraction", one.diffraction)))
    table(
        ("pair", "separation", "angle", "dm", "its own", "Rayleigh", "Sparrow"),
        rows,
        right=(1, 2, 3, 5, 6),
    )
    bounds = [(one.label or NO_LABEL, one.bound) for one in pairs if one.bound is not None]
    if bounds:
        say()
        table(
            ("measured at best", "separation", "angle", "dm", "second star"),
            [
                (
                    label,
                    f"+/- {arcsec(bound.separation_arcsec, 2)}",
                    f"+/- {figures(bound.position_angle_deg, 2)} deg",
                    f"+/- {figures(bound.magnitude_difference, 2)}",
                    f"{figures(bound.expected_significance, 3)} sigma",
                )
                for label, bound in bounds
            ],
            right=(1, 2, 3, 4),
        )


def _own(name: str, limits: Resolution | None) -> tuple[str, str, str]:
    if limits is None:
        return name, NONE, NONE
    return name, arcsec(limits.rayleigh_arcsec), arcsec(limits.sparrow_arcsec)


NO_LABEL = "(no label)"


def _electrons(value: float | tuple[float, float] | None) -> str:
    if isinstance(value, tuple):
        return " + ".join(figures(one) for one in value)
    return figures(value)
