"""The tables of a set-up: what was assumed, what it can resolve, how well it sees each object."""

from __future__ import annotations

from math import degrees

from simimg.assembly.report import wavelength_text
from simimg.resolving.listing import ObjectLimits
from simimg.resolving.resolution import Resolution
from simimg.scene.model import Scene
from simimg.show.reportfacts import Facts
from simimg.show.reporttable import Cell, Column, Table, figures, number, table, word

NO_LABEL = "no label"

_THREE = tuple(Column(name, "arcsec", numbers=True) for name in ("FWHM", "Rayleigh", "Sparrow"))


def setup_table(facts: Facts) -> Table:
    """Telescope, air, band, camera and exposure, stated or worked out."""
    rows = [*_stated(facts.scene), *facts.meaning.lines]
    return table(
        "set-up",
        "The set-up: as the scene states it, and what follows from it",
        (Column("quantity"), Column("value"), Column("remark")),
        [[word(part) for part in row] for row in rows],
    )


def defaults_table(facts: Facts) -> Table | None:
    """What the scene leaves unsaid; None where it says everything."""
    if not facts.meaning.defaults:
        return None
    return table(
        "defaults",
        "Defaults used where the scene says nothing",
        (Column("key"), Column("value"), Column("meaning")),
        [[word(str(part)) for part in row] for row in facts.meaning.defaults],
    )


def limits_table(facts: Facts) -> Table:
    """What two stars must keep between them: of the pupil, and as delivered."""
    found = facts.limits
    along = f"along position angle {found.position_angle_deg:.4g} deg"
    rows = [
        [word("equal pair"), word("diffraction: the pupil alone"), *_three(found.diffraction)],
        [word("equal pair"), word("delivered: optics, air, pixel"), *_three(found.delivered)],
    ]
    for told in facts.pairs:
        for kind in ("diffraction", "delivered"):
            one = None if told.limits is None else getattr(told.limits, kind)
            if one is not None:
                rows.append([word(told.name), word(f"{kind}, its own"), *_three(one)])
    return table(
        "limits",
        f"Limits of resolution, {along} (a pair's own: along it, for its magnitude difference)",
        (Column("of"), Column("set by"), *_THREE),
        rows,
    )


def figures_table(facts: Facts) -> Table:
    """What else tells how sharp the set-up is."""
    found = facts.limits
    rows: list[tuple[str, Cell, str, str]] = [
        ("wavelength", number(found.wavelength_nm), "nm", "centre of the band"),
        ("Strehl ratio", number(found.strehl, 3), "", "without the pixel"),
        ("50 % of the light", number(found.ee50_arcsec), "arcsec", "diameter, delivered"),
        ("80 % of the light", number(found.ee80_arcsec), "arcsec", "diameter, delivered"),
        (
            "Nyquist pixel",
            number(found.nyquist_pixel_arcsec),
            "arcsec",
            "lambda/2D, the largest that keeps all detail of the optics",
        ),
        ("Dawes", number(found.dawes_arcsec), "arcsec", "observers' custom, for reference"),
    ]
    if found.wavefront_rms_nm > 0.0:
        rms = (figures(found.strehl_from_rms, 3), "by Marechal's formula")
        rows.append(("wavefront", number(found.wavefront_rms_nm, 3), "nm rms", " ".join(rms)))
    if found.dispersion_arcsec > 0.0:
        cell = number(found.dispersion_arcsec, 3)
        rows.append(("dispersion", cell, "arcsec", "between the images of the band's edges"))
    return table(
        "sharpness",
        "Other measures of sharpness",
        (Column("quantity"), Column("value", numbers=True), Column("unit"), Column("remark")),
        [[word(name), cell, word(unit), word(remark)] for name, cell, unit, remark in rows],
    )


def correction_table(facts: Facts) -> Table | None:
    """What the adaptive optics leave of the wavefront; None without them."""
    found = facts.limits.correction
    if found is None:
        return None
    return table(
        "correction",
        "What the correction of the air leaves at the field centre, each cause alone",
        (Column("cause"), Column("wavefront error", "nm rms", numbers=True)),
        [[word(cause), number(rms, 3)] for cause, rms in found.budget_nm.items() if rms > 0.0],
    )


def objects_table(facts: Facts) -> Table | None:
    """How well each object is seen; None where none is listed."""
    objects = facts.limits.objects
    if not objects:
        return None
    return table(
        "objects",
        "The objects in one exposure (of a catalogue none is listed)"
        if facts.scene.catalogue
        else "The objects in one exposure",
        (
            Column("object"),
            Column("kind"),
            Column("electrons", numbers=True),
            Column("of the second star", numbers=True),
            Column("brightest pixel", "electrons", numbers=True),
            Column("S/N", numbers=True),
            Column("S/N of a fit", numbers=True),
            Column("saturated"),
        ),
        [_object(one) for one in objects],
    )


def _object(one: ObjectLimits) -> list[Cell]:
    first, second = one.electrons if isinstance(one.electrons, tuple) else (one.electrons, None)
    full = {None: "unknown", True: "yes", False: "no"}[one.saturated]
    return [
        word(one.label or NO_LABEL),
        word(one.kind),
        number(first),
        number(second, missing=""),
        number(one.peak_electrons),
        number(one.snr),
        number(one.snr_fit),
        word(full),
    ]


def _three(one: Resolution) -> list[Cell]:
    return [number(one.fwhm_arcsec), number(one.rayleigh_arcsec), number(one.sparrow_arcsec)]


def _stated(scene: Scene) -> list[tuple[str, str, str]]:
    """What a reader wants to know first of a set-up, as the scene has it."""
    telescope, camera, exposure = scene.telescope, scene.camera, scene.exposure
    rows = [] if telescope.name is None else [("telescope", telescope.name, "")]
    rows.append(("aperture", f"{telescope.aperture:.6g} m", ""))
    if telescope.obstruction:
        rows.append(("obstruction", f"{telescope.obstruction:.4g}", "of the aperture's diameter"))
    if telescope.segments is not None or telescope.pupil is not None:
        rows.append(("pupil", "segments" if telescope.pupil is None else "from a map", ""))
    if camera is not None and camera.name is not None:
        rows.append(("camera", camera.name, ""))
    if camera is not None:
        rows += [
            ("read noise", f"{camera.read_noise:.4g} electrons", ""),
            ("gain", f"{camera.gain:.4g} electrons/adu", ""),
        ]
        if camera.full_well is not None:
            rows.append(("full well", f"{camera.full_well:.6g} electrons", ""))
    if exposure is not None and exposure.time is not None:
        several = f"{exposure.count} exposures" if exposure.count > 1 else "one exposure"
        rows.append(("exposure", f"{exposure.time:.6g} s", several))
    if exposure is not None and exposure.start is not None:
        rows.append(("start", exposure.start, "UTC"))
    if scene.pointing is not None:
        ra, dec = degrees(scene.pointing.ra), degrees(scene.pointing.dec)
        rows.append(("pointing", f"ra {ra:.6g} deg, dec {dec:.6g} deg", "centre of the field"))
    return rows


def band_words(facts: Facts) -> str:
    """The set-up in one line."""
    scene, found = facts.scene, facts.limits
    parts = [
        scene.telescope.name or "",
        f"{scene.telescope.aperture:.4g} m",
        scene.band.name or wavelength_text(found.wavelength_nm * 1e-9),
        "above the atmosphere" if found.r0_m is None else _seeing(facts),
    ]
    if scene.air is not None and scene.correction is not None:
        parts.append(f"adaptive optics of {scene.correction.actuators} actuators across")
    if found.pixel_scale_arcsec is not None:
        parts.append(f"pixels of {figures(found.pixel_scale_arcsec, 3)} arcsec")
    if scene.exposure is not None and scene.exposure.time is not None:
        parts.append(f"{scene.exposure.time:.6g} s")
    return ", ".join(part for part in parts if part) + "."


def _seeing(facts: Facts) -> str:
    train = facts.setup.train
    if train.seeing is None or train.airmass is None:
        return ""
    seeing = figures(degrees(train.seeing) * 3600.0, 3)
    return f"seeing {seeing} arcsec (500 nm, zenith), airmass {train.airmass:.3g}"
