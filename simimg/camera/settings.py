"""What the chain of a camera must know of a camera and an exposure, checked once.

Electrons, seconds, metres and counts (ADU), as the names and the docstrings say. Whatever is left
at its default does nothing.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field


@dataclass(frozen=True, kw_only=True)
class Patterns:
    """What is fixed in a detector, drawn from its serial number.

    Parameters
    ----------
    flat_rms : float
        Relative scatter of the response from pixel to pixel, 0 to below 0.3.
    vignetting : float
        Share of the light lost in the corners, 0 to below 1.
    dust_rings : int
        Out-of-focus grains of dust, 0 or above.
    dark_rms : float
        Relative scatter of the dark current from pixel to pixel, 0 or above.
    hot_fraction, flickering_fraction, dead_fraction : float
        Shares of the pixels, 0 to below 1.
    hot_current, flicker_current : float
        Mean extra dark current of a hot pixel, and of a flickering one while it is on, electrons
        per second.
    bad_columns : int
        Columns that respond badly from some row on, 0 or above.
    """

    flat_rms: float = 0.0
    vignetting: float = 0.0
    dust_rings: int = 0
    dark_rms: float = 0.0
    hot_fraction: float = 0.0
    hot_current: float = 20.0
    flickering_fraction: float = 0.0
    flicker_current: float = 5.0
    dead_fraction: float = 0.0
    bad_columns: int = 0

    def __post_init__(self) -> None:
        _within(self, ("flat_rms",), below=0.3)
        _within(
            self,
            ("vignetting", "hot_fraction", "flickering_fraction", "dead_fraction"),
            below=1.0,
        )
        _within(self, ("dark_rms", "hot_current", "flicker_current", "dust_rings", "bad_columns"))

    @property
    def respond(self) -> bool:
        """Whether pixels respond to light differently."""
        return bool(
            self.flat_rms
            or self.vignetting
            or self.dust_rings
            or self.dead_fraction
            or self.bad_columns
        )

    @property
    def darken(self) -> bool:
        """Whether the dark current differs from pixel to pixel."""
        return bool(self.dark_rms or self.hot_fraction or self.flickering_fraction)


@dataclass(frozen=True, kw_only=True)
class CosmicRays:
    """Charged particles through the detector.

    Parameters
    ----------
    rate : float
        Hits per square metre and second, above 0.
    pixel_size : float
        Side of a pixel, m.
    thickness : float
        Of the sensitive layer, m.
    """

    rate: float
    pixel_size: float
    thickness: float = 15e-6

    def __post_init__(self) -> None:
        for name in ("rate", "pixel_size", "thickness"):
            value = getattr(self, name)
            if not (math.isfinite(value) and value > 0.0):
                raise ValueError(f"{name} must be above 0, got {value!r}")


@dataclass(frozen=True, kw_only=True)
class Shutter:
    """A shutter that takes time to open and to close.

    Parameters
    ----------
    kind : {"iris", "blade"}
        An iris opens from the middle and closes towards it; a blade opens from the first column
        and closes towards it.
    travel : float
        Seconds that opening takes, and closing, above 0.
    """

    kind: str
    travel: float

    def __post_init__(self) -> None:
        if self.kind not in ("iris", "blade"):
            raise ValueError(f"kind must be iris or blade, got {self.kind!r}")
        if not (math.isfinite(self.travel) and self.travel > 0.0):
            raise ValueError(f"travel must be above 0, got {self.travel!r}")


@dataclass(frozen=True, kw_only=True)
class Readout:
    """What happens to charge on its way from the pixels to the counts.

    Parameters
    ----------
    inefficiency : float
        Share of the charge left behind at each shift of the rows, 0 to below 0.1.
    trail_length : float
        Rows over which such a trail falls to 1/e, above 0.
    binning : int
        Pixels to the side of a bin, 1 or more.
    em_gain : float
        Of an electron-multiplying register, 1 (none) or more.
    em_well : float or None
        Electrons that the register holds; None without end.
    coupling : float
        Share of a pixel's signal that each neighbour takes, 0 to 0.2.
    noise_spread : float
        Scatter of the logarithm of the pixels' read noise, 0 or above; its rms over the pixels
        stays.
    nonlinearity : float
        Share by which a full signal falls short, 0 to 0.4.
    gains, biases : tuple of float
        Of each of 2 or 4 amplifiers; empty where one reads all.
    crosstalk : float
        Share of each other amplifier's signal that leaks in, 0 to 0.1.
    bias_rms, bias_drift : float
        Scatter of the columns' bias, and of its drift between rows, counts.
    prescan, overscan : int
        Columns read before the first and after the last, without charge.
    """

    inefficiency: float = 0.0
    trail_length: float = 2.0
    binning: int = 1
    em_gain: float = 1.0
    em_well: float | None = None
    coupling: float = 0.0
    noise_spread: float = 0.0
    nonlinearity: float = 0.0
    gains: tuple[float, ...] = ()
    biases: tuple[float, ...] = ()
    crosstalk: float = 0.0
    bias_rms: float = 0.0
    bias_drift: float = 0.0
    prescan: int = 0
    overscan: int = 0

    def __post_init__(self) -> None:
        _within(self, ("inefficiency", "crosstalk"), below=0.1 + 1e-12)
        _within(self, ("coupling",), below=0.2 + 1e-12)
        _within(self, ("nonlinearity",), below=0.4 + 1e-12)
        _within(self, ("noise_spread", "bias_rms", "bias_drift", "prescan", "overscan"))
        if not (math.isfinite(self.trail_length) and self.trail_length > 0.0):
            raise ValueError(f"trail_length must be above 0, got {self.trail_length!r}")
        if self.binning < 1 or not 1.0 <= self.em_gain < math.inf:
            raise ValueError(
                f"binning and em_gain must be 1 or more, got {self.binning!r}, {self.em_gain!r}"
            )
        for name in ("gains", "biases"):
            if len(getattr(self, name)) not in (0, 2, 4):
                raise ValueError(f"{name} must be of 2 or 4 amplifiers, got {getattr(self, name)}")

    @property
    def amplifiers(self) -> int:
        """How many read the detector."""
        return max(len(self.gains), len(self.biases), 1)


@dataclass(frozen=True, kw_only=True)
class Window:
    """The part of a detector that is read.

    Parameters
    ----------
    shape : (int, int)
        Rows and columns of the whole detector.
    rows, columns : slice
        Of it that are read, without a step.
    """

    shape: tuple[int, int]
    rows: slice
    columns: slice

    def __post_init__(self) -> None:
        for one, length in zip((self.rows, self.columns), self.shape, strict=True):
            if not 0 <= one.start < one.stop <= length:
                raise ValueError(f"{one} is no part of {length} pixels")

    def binned(self, side: int) -> Window:
        """The same in bins of so many pixels to the side."""
        rows, columns = (
            slice(one.start // side, one.stop // side) for one in (self.rows, self.columns)
        )
        height, width = self.shape
        return Window(shape=(height // side, width // side), rows=rows, columns=columns)


@dataclass(frozen=True, kw_only=True)
class CameraSettings:
    """What the chain must know of a camera and an exposure.

    Parameters
    ----------
    time : float
        Exposure, seconds, 0 or above (a bias frame has 0).
    gain : float
        Electrons per count, above 0.
    read_noise : float
        Electrons, 0 or above.
    dark_current : float
        Electrons per second and pixel, 0 or above.
    bias : float
        Counts.
    full_well : float or None
        Electrons that a pixel holds, above 0; None without end.
    bleeding : bool
        Whether a full pixel spills along its column; its excess is lost otherwise.
    bit_depth : int
        Bits of the converter, 1 to 31.
    serial : int
        Which camera of its kind: fixes what is constant from frame to frame, 0 or above.
    patterns : Patterns
    cosmic_rays : CosmicRays or None
    shutter : Shutter or None
    readout : Readout
    window : Window or None
        What is read where that is not the whole detector.

    Raises
    ------
    ValueError
        A value outside its range.
    """

    time: float = 0.0
    gain: float = 1.0
    read_noise: float = 0.0
    dark_current: float = 0.0
    bias: float = 0.0
    full_well: float | None = None
    bleeding: bool = False
    bit_depth: int = 16
    serial: int = 0
    patterns: Patterns = field(default_factory=Patterns)
    cosmic_rays: CosmicRays | None = None
    shutter: Shutter | None = None
    readout: Readout = field(default_factory=Readout)
    window: Window | None = None

    def __post_init__(self) -> None:
        _within(self, ("time", "read_noise", "dark_current"))
        if not (math.isfinite(self.gain) and self.gain > 0.0):
            raise ValueError(f"gain must be above 0, got {self.gain!r}")
        if not math.isfinite(self.bias):
            raise ValueError(f"bias must be finite, got {self.bias!r}")
        if self.full_well is not None and not (
            math.isfinite(self.full_well) and self.full_well > 0.0
        ):
            raise ValueError(f"full_well must be above 0, got {self.full_well!r}")
        if not 1 <= self.bit_depth <= 31:
            raise ValueError(f"bit_depth must be 1 to 31, got {self.bit_depth!r}")
        if self.serial < 0:
            raise ValueError(f"serial must not be negative, got {self.serial!r}")


def _within(table: object, names: tuple[str, ...], *, below: float = math.inf) -> None:
    """Refuse what is not finite, negative, or not below a bound."""
    for name in names:
        value = getattr(table, name)
        if not (math.isfinite(value) and 0.0 <= value < below):
            least = "finite and not negative" if below == math.inf else f"0 to below {below:g}"
            raise ValueError(f"{name} must be {least}, got {value!r}")
