"""Extra FITS keywords that a scene may add to the frame's header."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from simimg.fits.cards import card_mistake
from simimg.quantities import shown
from simimg.scene.keys import Reader, fault

_COMPUTED = {
    "WAVELEN": "set band",
    "BIASLVL": "set camera.bias",
    "DARKSIG": "set camera.dark_current",
    "SKYLVL": "set sky.surface_brightness",
    "PIXSCALE": "set camera.pixel_scale",
    "EXPNUM": "set exposure.count",
    "SEEING": "set air.seeing",
}


@dataclass(frozen=True)
class Header(Reader):
    """Extra FITS keywords: whole numbers, numbers, true or false, or text."""

    most: int = 100

    def read(self, value: Any) -> dict[str, str | int | float | bool]:
        """The keywords, in their order."""
        if not isinstance(value, Mapping):
            raise fault(f"must be a table, got {shown(value)}", "write a [header] table")
        if len(value) > self.most:
            raise fault(f"holds {len(value)} keywords", f"write at most {self.most}")
        return dict(value)

    @staticmethod
    def check(keyword: str, value: Any) -> tuple[str, str] | None:
        """What is wrong with one keyword and its mend, or None."""
        if keyword in _COMPUTED:
            return "is written by simimg itself", _COMPUTED[keyword]
        return card_mistake(keyword, value)

    @property
    def example(self) -> str:
        """A good value, as TOML."""
        return '{ OBSERVER = "example" }'

    @property
    def range(self) -> str:
        """The form of keywords and values."""
        return f"up to {self.most} FITS keywords with text, a number, true or false"
