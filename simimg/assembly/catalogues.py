"""The stars of a scene's catalogues, as columns: places in pixels, electrons, kinds of spectra."""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.brightness import Photometry
from simimg.assembly.colours import kelvin_kinds
from simimg.assembly.places import FieldGeometry
from simimg.errors import InputError, mistake
from simimg.scene.model import Scene
from simimg.scene.objects import Catalogue
from simimg.sky.catalogues import read_catalogue


def catalogue_rows(
    scene: Scene,
    number: int,
    catalogue: Catalogue,
    geometry: FieldGeometry,
    light: Photometry,
) -> dict[str, AnyArray]:
    """The stars of a catalogue as columns."""
    source = scene.inputs[catalogue.file]
    table = read_catalogue(
        source.read(), source.name, columns=catalogue.columns, units=catalogue.units
    )
    if "x" in table:
        x, y = table["x"], table["y"]
    elif "ra" in table:
        try:
            x, y = geometry.from_sky(table["ra"], table["dec"])
        except ValueError as error:
            line = mistake(
                scene.name,
                f"catalogue[{number}].file",
                f"{source.name}: {error}",
                "point [pointing] at the catalogue's field",
            )
            raise InputError(line) from error
    else:
        x, y = geometry.to_pixels(table["east"], table["north"])
    size = x.size
    nothing = np.full(size, np.nan)
    magnitude = table.get("magnitude", nothing)
    electrons = table.get("electrons")
    abroad = catalogue.magnitude_band not in (None, scene.band.name)
    if electrons is None and abroad and "temperature" not in table:
        line = mistake(
            scene.name,
            f"catalogue[{number}].magnitude_band",
            f"{source.name} has no temperatures that would carry its magnitudes over to the band",
            'name their column, as in columns = { temperature = "teff" }, or leave it out',
        )
        raise InputError(line)
    colour = _catalogue_kinds(scene, number, table.get("temperature"), size)
    if electrons is None:
        electrons = light.electrons(
            magnitude, colour, band=catalogue.magnitude_band, system=catalogue.magnitude_system
        )
    label = table.get("label")
    if label is None:
        stem = catalogue.label or f"catalogue-{number + 1}"
        width = len(str(size))
        numbers = np.char.zfill(np.arange(1, size + 1).astype(str), width)
        label = np.char.add(f"{stem}-", numbers)
    return {
        "label": np.asarray(label, dtype=str),
        "kind": np.full(size, "star"),
        "partner": np.full(size, -1, dtype=np.int64),
        "colour": colour,
        "x": np.asarray(x, float),
        "y": np.asarray(y, float),
        "electrons": np.asarray(electrons, float),
        "magnitude": np.asarray(magnitude, float),
        "separation": nothing,
        "position_angle": nothing,
    }


def _catalogue_kinds(
    scene: Scene, number: int, temperatures: FloatArray | None, size: int
) -> AnyArray:
    if temperatures is None:
        return np.zeros(size, dtype=np.int64)
    try:
        return kelvin_kinds(temperatures)
    except ValueError as error:
        line = mistake(
            scene.name,
            f"catalogue[{number}].columns.temperature",
            str(error),
            "give temperatures in kelvin",
        )
        raise InputError(line) from error
