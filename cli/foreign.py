"""Options for frames that other programs made, and for where their PSF comes from."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar

import click

from simimg.errors import InputError
from simimg_cli import options

if TYPE_CHECKING:
    from simimg.resolving.given import Given
    from simimg.resolving.psfsource import PsfChoice

_F = TypeVar("_F", bound=Callable[..., Any])
_WORDS = ("scene", "extension")


class Amount(click.ParamType):
    """A number, or a number with its unit."""

    def __init__(self, kind: str, unit: float, example: str) -> None:
        self.kind, self.unit, self.example = kind, unit, example
        self.name = kind

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        if isinstance(value, float):
            return value
        try:
            number = float(value)
        except ValueError:
            number = self._with_unit(value)
        if not math.isfinite(number):
            self.fail(f"{value!r} will not do; write for example {self.example}", param, ctx)
        return number

    def _with_unit(self, text: str) -> float:
        from simimg.quantities import parse_quantity

        try:
            return parse_quantity(text, self.kind) / self.unit
        except (InputError, ValueError):
            return math.nan


_ARCSEC = math.pi / 648000.0
_OPTIONS = (
    click.option(
        "--psf",
        metavar="FILE",
        help="The PSF as a FITS image (its PSF extension, or the first image), or one of the words "
        "scene and extension: which of a simulated frame's own. Unless given: the scene, else the "
        "extension, else as --psf-profile.",
    ),
    click.option(
        "--psf-oversampling",
        type=click.IntRange(1, 1000),
        metavar="N",
        help="Samples of the PSF's image to the pixel, where its header has no OVERSAMP; else 1.",
    ),
    click.option(
        "--psf-star",
        "psf_stars",
        type=options.Place(),
        multiple=True,
        metavar="X,Y",
        help="Measure the PSF from the single star here. May be given several times.",
    ),
    click.option(
        "--psf-profile",
        is_flag=True,
        help="Fit an elliptical Moffat profile to the frame's isolated stars, as PSF.",
    ),
    click.option(
        "--gain",
        type=Amount("gain", 1.0, "1.4"),
        metavar="G",
        help="Electrons to the count, where the header does not say or is wrong.",
    ),
    click.option(
        "--read-noise",
        type=Amount("electrons", 1.0, "5"),
        metavar="E",
        help="Read noise in electrons, likewise.",
    ),
    click.option(
        "--pixel-scale",
        type=Amount("angle", _ARCSEC, "0.12"),
        metavar="A",
        help="Arcseconds to the pixel, likewise.",
    ),
    click.option(
        "--saturation",
        type=float,
        metavar="C",
        help="Counts from which a pixel is full, likewise.",
    ),
    click.option(
        "--bias", type=float, metavar="C", help="Counts of a pixel without electrons, likewise."
    ),
    click.option(
        "--hdu",
        metavar="N",
        help="The HDU that holds the image, by number from 0 or by name; the first 2-D image "
        "unless given.",
    ),
)


def frame_options(function: _F) -> _F:
    """All of them; the command takes them as keywords for `Wanted`."""
    for add in reversed(_OPTIONS):
        function = add(function)
    return function


def frame_options_named(*names: str) -> Callable[[_F], _F]:
    """Some of them, by the names of their keywords."""

    def add_all(function: _F) -> _F:
        for add in reversed(_OPTIONS):
            made = add(lambda: None)
            if made.__click_params__[0].name in names:  # type: ignore[attr-defined]
                function = add(function)
        return function

    return add_all


@dataclass(frozen=True, kw_only=True)
class Wanted:
    """What the user says of frames and their PSF; the names are those of the options."""

    psf: str | None = None
    psf_oversampling: int | None = None
    psf_stars: Sequence[tuple[float, float]] = ()
    psf_profile: bool = False
    gain: float | None = None
    read_noise: float | None = None
    pixel_scale: float | None = None
    saturation: float | None = None
    bias: float | None = None
    hdu: str | None = None

    def __post_init__(self) -> None:
        asked = [self.psf is not None, bool(self.psf_stars), self.psf_profile]
        if sum(asked) > 1:
            raise click.UsageError("--psf, --psf-star and --psf-profile: give one of the three")
        if self.psf_oversampling is not None and (self.psf is None or self.psf in _WORDS):
            raise click.UsageError("--psf-oversampling goes with --psf FILE")

    @property
    def anything(self) -> bool:
        """Whether any of the options was given."""
        return self != Wanted()

    def given(self) -> Given:
        """What goes before the frames' headers."""
        from simimg.resolving.given import Given

        try:
            return Given(
                gain=self.gain,
                read_noise=self.read_noise,
                pixel_scale_arcsec=self.pixel_scale,
                saturation=self.saturation,
                bias=self.bias,
            )
        except InputError as error:
            lines = [line.replace("_arcsec", "").replace("_", "-") for line in error.lines]
            raise InputError(*("--" + line.removeprefix("frame: ") for line in lines)) from error

    def choice(self) -> PsfChoice:
        """Where the PSF is to come from; its file is read.

        Raises
        ------
        InputError
            A file that holds no PSF.
        """
        from simimg.frame import PsfImage
        from simimg.resolving.psfsource import PsfChoice, usable_image

        if self.psf in _WORDS:
            return PsfChoice(source=self.psf)
        if self.psf is not None:
            from simimg.fits.reader import read_psf_file

            image, told = read_psf_file(self.psf)
            psf = PsfImage(image, self.psf_oversampling or told or 1)
            try:
                usable_image(psf, "")
            except InputError as error:
                lines = [line.removeprefix("psf: ") for line in error.lines]
                raise InputError(*(f"{self.psf}: {line}" for line in lines)) from error
            return PsfChoice(source="file", image=psf)
        if self.psf_stars:
            return PsfChoice(source="stars", stars=tuple(self.psf_stars))
        return PsfChoice(source="profile" if self.psf_profile else None)
