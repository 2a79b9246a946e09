"""Tables of a scene as curves: transmissions, efficiencies and spectra against wavelength.

A table has wavelengths in its first column and values in its second, each with its unit where it
needs one (ECSV, FITS and VOTable carry units; in plain CSV wavelengths are in nanometres and values
have none). Metres inside.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import FloatArray
from simimg.errors import InputError, mistake
from simimg.light.curves import Curve
from simimg.light.spectra import FluxKind, TabulatedSpectrum
from simimg.scene.model import Scene
from simimg.sky.tables import read_table

_USE = "write two columns, wavelength and value, as ECSV with units, or CSV in nm"


def curve_table(scene: Scene, key: str, name: str) -> tuple[FloatArray, FloatArray, str | None]:
    """Wavelengths (m), values and the values' unit of a file that a scene names.

    Raises
    ------
    InputError
        A file that is no table of two columns of numbers, or wavelengths that do not rise.
    """
    source = scene.inputs[name]
    table = read_table(source.read(), source.name)
    where = f"{source.name}: "
    if len(table.names) < 2:
        raise InputError(mistake(scene.name, key, where + "has fewer than two columns", _USE))
    first, second = table.column(table.names[0]), table.column(table.names[1])
    try:
        wavelength = np.asarray(first.values, dtype=np.float64)
        values = np.asarray(second.values, dtype=np.float64)
        wavelength = wavelength * _metres(first.unit)
    except (TypeError, ValueError) as error:
        what = f"{where}holds no numbers, or a wavelength without a length's unit"
        raise InputError(mistake(scene.name, key, what, _USE)) from error
    rising = wavelength.ndim == 1 and wavelength.size >= 2 and bool(np.all(np.diff(wavelength) > 0))
    sound = rising and bool(np.isfinite(wavelength).all() and np.isfinite(values).all())
    if not sound or wavelength[0] <= 0.0 or bool((values < 0.0).any()):
        what = where + "needs rising wavelengths and finite values that are not negative"
        raise InputError(mistake(scene.name, key, what, _USE))
    return wavelength, values, second.unit


def _metres(unit: str | None) -> float:
    if unit is None:
        return 1e-9
    from astropy import units

    return float(units.Unit(unit).to(units.m))


def efficiency_table(scene: Scene, key: str, name: str) -> tuple[FloatArray, FloatArray]:
    """Wavelengths (m) and values from 0 to 1 of a file that a scene names; per cent are turned."""
    wavelength, values, unit = curve_table(scene, key, name)
    if unit is not None and unit.strip() in ("%", "percent"):
        values = values / 100.0
    if bool((values > 1.0).any()) or not bool((values > 0.0).any()):
        raise InputError(
            mistake(
                scene.name,
                key,
                f"{scene.inputs[name].name}: values must lie between 0 and 1, some above 0",
                'write shares, or give the column the unit "%"',
            )
        )
    return wavelength, values


def spectrum_table(scene: Scene, key: str, name: str) -> TabulatedSpectrum:
    """A spectrum from a file that a scene names; the flux's unit tells its kind.

    Raises
    ------
    InputError
        As `curve_table`, or a flux in a unit that is none of f_nu, f_lambda or photons.
    """
    wavelength, values, unit = curve_table(scene, key, name)
    kind = _flux_kind(unit)
    if kind is None or not bool((values > 0.0).any()):
        raise InputError(
            mistake(
                scene.name,
                key,
                f"{scene.inputs[name].name}: the flux has no light, or a unit that is no flux "
                f"density ({unit or 'none'})",
                'give it a unit such as "W / (m2 nm)", "Jy" or "photon / (s m2 nm)"',
            )
        )
    return TabulatedSpectrum(Curve(wavelength, values), kind)


def _flux_kind(unit: str | None) -> FluxKind | None:
    if unit is None:
        return "f_lambda"
    from astropy import units

    try:
        flux = units.Unit(unit)
    except ValueError:
        return None
    kinds: dict[str, FluxKind] = {
        "Jy": "f_nu",
        "W / (m2 nm)": "f_lambda",
        "ph / (s m2 nm)": "photons",
    }
    for example, kind in kinds.items():
        if flux.is_equivalent(units.Unit(example)):
            return kind
    return None
