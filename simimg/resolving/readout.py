"""How the counts of a frame stand for electrons, and with what noise: of a scene, or foreign.

A foreign frame is taken at its header's word, or its user's, as far as they go. What they leave
open is read from the pixels: the scatter of the background is its photons' and the read noise's
together, so that gain and read noise tell how many electrons of sky a background holds, whatever
bias has been left in or sky been taken out. Every assumption leaves a line behind.

Electrons to the count; counts; electrons squared.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, sqrt

import numpy as np

from simimg.arrays import AnyArray, frozen
from simimg.assembly.detector import detector_settings
from simimg.camera.cards import saturation
from simimg.camera.masks import (
    BAD_COLUMN,
    BLEEDING,
    COSMIC_RAY,
    DEAD,
    FLICKERING,
    HOT,
    SATURATED,
)
from simimg.camera.multiplication import excess_noise
from simimg.errors import InputError, mistake
from simimg.frame import Frame
from simimg.resolving.backdrop import Backdrop, find_backdrop
from simimg.resolving.given import Given
from simimg.resolving.headers import (
    header_bias,
    header_excess,
    header_gain,
    header_read_noise,
    header_saturation,
    header_section,
    header_time,
    header_unit,
)
from simimg.scene.camera import Camera

UNFIT = SATURATED | BLEEDING | COSMIC_RAY | HOT | DEAD | BAD_COLUMN | FLICKERING
"""Bits of a mask that take a pixel out."""

_CLEAR = 5.0  # noises above zero from which a level is that of a sky that was left in
_COUNTED = 2.0  # counts of noise from which pixels may well be counts of one electron each
_ELECTRONS = 25.0  # of background where nothing tells how many: Gaussian enough
_PLATEAU = 3  # pixels of the very highest value that make it the top of the scale
_NOISELESS, _ASSUMED = 1e-6, 1e-4  # noise over the brightest pixel: none at all, assumed then
_ODD = 0.25  # relative difference of noise found and noise told that is worth a line


@dataclass(frozen=True, eq=False)
class Readout:
    """How counts stand for electrons.

    Attributes
    ----------
    gain : float
        Electrons to the count.
    bias : float
        Counts of a pixel without electrons.
    saturation : float
        Counts from which a pixel is full.
    variance : float
        Gaussian variance of a pixel (read noise, rounding), electrons squared.
    barred : ndarray of bool or None
        Pixels that do not count, whatever they hold.
    backdrop : Backdrop or None
        The background, where it is read from the pixels.
    notes : tuple of str
        What was assumed.
    excess : float
        Electrons of the camera that one electron here stands for.
    """

    gain: float
    bias: float
    saturation: float
    variance: float
    barred: AnyArray | None = None
    backdrop: Backdrop | None = None
    notes: tuple[str, ...] = ()
    excess: float = 1.0


def scene_readout(camera: Camera, given: Given, shape: tuple[int, ...]) -> Readout:
    """The read-out of a frame that simimg exposed; what is given goes before the scene.

    With electron multiplication the noise of light is twice that of counting: gain and read noise
    are then those of a camera without, whose every electron stands for two
    (`simimg.camera.multiplication`), and ``excess`` says how many.
    """
    excess = excess_noise(camera.em_gain)
    factor = camera.em_gain * excess
    gains = camera.amplifier_gains or (camera.gain,)
    biases = camera.amplifier_biases or (camera.bias,)
    # What is given is meant as a header says it: of electrons as they enter the register.
    gain = sum(gains) / len(gains) / factor if given.gain is None else given.gain / excess
    bias = sum(biases) / len(biases) if given.bias is None else given.bias
    read_noise = camera.read_noise / factor
    if given.read_noise is not None:
        read_noise = given.read_noise / excess
    full = saturation(detector_settings(camera, time=0.0))
    rounding = 0.0 if read_noise == 0.0 and gain == 1.0 else gain**2 / 12.0
    return Readout(
        gain=gain,
        bias=bias,
        saturation=float(np.floor(full) if given.saturation is None else given.saturation),
        variance=read_noise**2 + rounding,
        excess=excess,
        barred=_without_charge(camera, shape),
        notes=_raw(camera),
    )


def _without_charge(camera: Camera, shape: tuple[int, ...]) -> AnyArray | None:
    """Pixels that see no sky; None where all do."""
    if not camera.prescan and not camera.overscan:
        return None
    barred = np.ones((shape[0], shape[1]), dtype=bool)
    barred[:, camera.prescan : shape[1] - camera.overscan] = False
    return frozen(barred)


def _raw(camera: Camera) -> tuple[str, ...]:
    """What a frame still has in it that a reduction would take out."""
    left = [
        words
        for words, there in (
            ("flat response", camera.flat_rms or camera.vignetting or camera.dust_rings),
            ("the shutter's pattern", camera.shutter is not None),
            ("the dark pattern", camera.dark_rms),
            ("non-linearity", camera.nonlinearity),
            ("the structure of the bias", camera.bias_rms or camera.bias_drift),
            ("trailing charge", camera.transfer_inefficiency),
            ("coupling between pixels", camera.pixel_coupling),
        )
        if there
    ]
    if not left:
        return ()
    return (
        f"the frame is raw, and its noise is taken as that of a reduced one: {', '.join(left)} "
        "not corrected",
    )


def foreign_readout(frame: Frame, given: Given) -> Readout:
    """The read-out of any frame, from what is given, its header and its pixels.

    Raises
    ------
    InputError
        No pixel counts.
    """
    notes: list[str] = []
    barred = _barred(frame, notes)
    saturation = _saturation(frame, given, barred, notes)
    good = np.isfinite(frame.counts) & (frame.counts < saturation)
    if barred is not None:
        good &= ~barred
    if not good.any():
        what = "no pixel counts: all are full, masked or without a number"
        raise InputError(mistake("frame", "", what, "give --saturation, or another image"))
    backdrop = find_backdrop(frame.counts, good)
    whole = _whole_numbers(frame.counts, good)
    brightest = float(frame.counts[good].max()) - backdrop.level
    quiet = backdrop.noise <= _NOISELESS * brightest
    excess = header_excess(frame)
    gain = _gain(frame, given, backdrop, 0.0 if quiet else backdrop.noise, whole, notes) / excess
    bias, read_noise = _overscan(frame, given, gain * excess, backdrop)
    read_noise = None if read_noise is None else read_noise / excess
    rounding = gain**2 / 12.0 if whole else 0.0
    scatter = (gain * backdrop.noise) ** 2
    if quiet or scatter == 0.0:
        scatter = max((gain * _ASSUMED * brightest) ** 2, rounding, 1e-12)
        notes.append("the background has no noise: one ten-thousandth of the brightest is assumed")
    if bias is None:
        bias, variance = _from_scatter(backdrop, gain, scatter, read_noise, rounding, notes=notes)
    else:
        variance = _with_bias(backdrop, gain, scatter, read_noise, rounding, bias, notes)
    return Readout(
        gain=gain,
        bias=bias,
        saturation=saturation,
        variance=variance,
        barred=barred,
        backdrop=backdrop,
        notes=tuple(notes),
        excess=excess,
    )


def unfit(frame: Frame) -> AnyArray | None:
    """Pixels that a frame's mask takes out; None without a mask."""
    return None if frame.mask is None else np.asarray((frame.mask & UNFIT) != 0)


def _whole_numbers(counts: AnyArray, good: AnyArray) -> bool:
    """Whether all pixels (or a sample of them) hold whole numbers."""
    if counts.dtype.kind in "iu":
        return True
    values = counts[good]
    values = values[:: max(1, values.size // 10_000)]
    return bool((values == np.rint(values)).all())


def _saturation(frame: Frame, given: Given, barred: AnyArray | None, notes: list[str]) -> float:
    """Counts from which a pixel is full: told, or the top of the scale where it is reached."""
    if given.saturation is not None:
        return given.saturation
    told = header_saturation(frame)
    if told is not None:
        return told.value
    counts = frame.counts
    seen = np.isfinite(counts)
    if barred is not None:
        seen &= ~barred
    finite = counts[seen]
    if finite.size == 0:
        return inf
    highest = float(finite.max())
    if counts.dtype.kind in "iu" and highest == np.iinfo(counts.dtype).max:
        notes.append(f"pixels of {highest:g} counts, the top of the scale, are taken as full")
        return highest
    middle, low = float(np.median(finite)), float(np.percentile(finite, 5.0))
    plateau = int(np.count_nonzero(finite == highest))
    if plateau >= _PLATEAU and highest > middle + 20.0 * max(middle - low, 0.0) > middle:
        notes.append(f"{plateau} pixels share the highest value, {highest:g}: taken as full")
        return highest
    return inf


def _barred(frame: Frame, notes: list[str]) -> AnyArray | None:
    """Pixels outside the useful part of the frame, or masked."""
    barred = unfit(frame)
    section = header_section(frame, "TRIMSEC", "DATASEC")
    if section is None:
        return barred
    outside = np.ones(frame.counts.shape, dtype=bool)
    outside[section] = False
    if not outside.any():
        return barred
    notes.append("pixels outside the header's useful section are left out")
    return frozen(outside if barred is None else barred | outside)


def _gain(
    frame: Frame,
    given: Given,
    backdrop: Backdrop,
    noise: float,
    whole: bool,
    notes: list[str],
) -> float:
    """Electrons to the count: given, told, or assumed."""
    if given.gain is not None:
        return given.gain
    unit, rate = header_unit(frame)
    time = header_time(frame) if rate else None
    seconds = time if time is not None else 1.0
    if rate and time is None:
        notes.append("the unit is a rate and no exposure time is told: 1 second is assumed")
    if unit == "electron":
        return seconds
    told, said = header_gain(frame)
    notes += said
    if told is not None:
        return told.value * seconds
    level = backdrop.level
    # Fractions of a count are the mark of a frame that has been calibrated: no bias is left in it.
    if not whole and level > _CLEAR * noise > 0.0:
        notes.append(
            "the gain is not known: the background's scatter is taken as that of its photons, on "
            "which the errors and probabilities rest"
        )
        return level / noise**2
    if unit == "adu" or whole or noise * seconds >= _COUNTED or noise == 0.0:
        notes.append(
            "the gain is not known: 1 electron to the count is assumed, on which the errors and "
            "probabilities rest"
        )
        return seconds
    notes.append(
        "the gain is not known and the sky has been taken off: the stars' own photon noise is a "
        "guess, on which the errors and probabilities rest"
    )
    return sqrt(_ELECTRONS) / noise


def _overscan(
    frame: Frame, given: Given, gain: float, backdrop: Backdrop
) -> tuple[float | None, float | None]:
    """Bias (counts) and read noise (electrons): given, told, or read from the overscan."""
    bias, read_noise = given.bias, given.read_noise
    if bias is None:
        told = header_bias(frame)
        bias = None if told is None else told.value
    if read_noise is None:
        found = header_read_noise(frame, gain)
        read_noise = None if found is None else found.value
    section = header_section(frame, "BIASSEC")
    useful = header_section(frame, "TRIMSEC", "DATASEC")
    if section is None or useful is None or (bias is not None and read_noise is not None):
        return bias, read_noise
    values = np.asarray(frame.counts[section], dtype=np.float64)
    values = values[np.isfinite(values)]
    if values.size < 100 or not np.median(values) <= backdrop.level + backdrop.noise:
        return bias, read_noise
    middle = float(np.median(values))
    if read_noise is None:
        # Whole counts: a median deviation would come in whole steps.
        spread = 1.4826 * float(np.median(np.abs(values - middle)))
        near = values[np.abs(values - middle) <= 4.0 * max(spread, 1.0)]
        read_noise = gain * float(near.std())
    return (middle if bias is None else bias), read_noise


def _from_scatter(
    backdrop: Backdrop,
    gain: float,
    scatter: float,
    read_noise: float | None,
    rounding: float,
    *,
    notes: list[str],
) -> tuple[float, float]:
    """Bias and Gaussian variance where no bias is told: from the scatter of the background."""
    if read_noise is None:
        notes.append(
            "the read noise is not known: the background's scatter is taken as that of its photons"
        )
    variance = (read_noise or 0.0) ** 2 + rounding
    sky = scatter - variance
    uncertain = 8.0 * backdrop.error * scatter + 0.03 * scatter
    if abs(gain * backdrop.level - sky) <= uncertain and backdrop.level >= 0.0:
        return 0.0, variance
    if sky < -uncertain:
        notes.append(
            f"the background scatters by {sqrt(scatter):.3g} electrons, less than the read noise "
            "alone: its scatter is used"
        )
    if sky < 0.0:
        return backdrop.level, scatter
    bias = backdrop.level - sky / gain
    what = (
        "the sky seems to have been taken off"
        if bias < -0.1 * backdrop.noise
        else "no bias level is told"
    )
    notes.append(
        f"{what}: by its scatter the background holds {sky:.4g} electrons a pixel, so that "
        f"{bias:.6g} counts stand for none"
    )
    return bias, variance


def _with_bias(
    backdrop: Backdrop,
    gain: float,
    scatter: float,
    read_noise: float | None,
    rounding: float,
    bias: float,
    notes: list[str],
) -> float:
    """Gaussian variance where the bias is told: read noise, or what scatter is left for it."""
    sky = max(gain * (backdrop.level - bias), 0.0)
    if read_noise is None:
        variance = max(scatter - sky, rounding)
        notes.append(
            f"the read noise is not known: {sqrt(variance):.3g} electrons by the background's "
            "scatter"
        )
        return variance
    variance = read_noise**2 + rounding
    expected = sky + variance
    if abs(scatter - expected) > max(_ODD, 8.0 * backdrop.error) * expected:
        notes.append(
            f"the background scatters by {sqrt(scatter):.3g} electrons, where gain, bias and read "
            f"noise say {sqrt(expected):.3g}: the larger is used"
        )
        variance += max(scatter - expected, 0.0)
    return variance
