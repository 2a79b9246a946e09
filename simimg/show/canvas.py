"""Figures as files: one look whatever the user's settings, the same bytes each time.

matplotlib without pyplot: a figure object on a file-writing canvas. No clock and no random name
enters a file.
"""

from __future__ import annotations

import io
import os
from collections.abc import Iterator
from contextlib import contextmanager
from math import inf
from pathlib import Path
from typing import Any

from simimg.errors import InputError, mistake
from simimg.newfile import check_new_file, new_file

MILLIMETRE = 1.0 / 25.4
COLUMN, PAGE = 88.0, 180.0
"""Widths of a figure, mm: one column of a page, and two."""
NARROWEST, WIDEST = 80.0, 400.0
"""Widths that a figure can have, mm."""
TWO_ABREAST = 170.0
"""Width from which two panels stand side by side, mm; below it they stand over one another."""
FORMATS = {".png": "png", ".pdf": "pdf", ".svg": "svg"}

BLACK, BLUE, VERMILION, GREEN = "#000000", "#0072B2", "#D55E00", "#00795B"
"""Colours that stay apart for colour-blind eyes (after Okabe & Ito 2008)."""

_DOTS_PER_INCH = 300
_LOOK = {
    "axes.labelpad": 2.5,
    "axes.labelsize": 7.5,
    "axes.linewidth": 0.6,
    "axes.titlesize": 8.0,
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 7.5,
    "legend.fontsize": 7.0,
    "lines.linewidth": 1.0,
    "pdf.fonttype": 42,
    "svg.fonttype": "path",
    "svg.hashsalt": "simimg",
    "xtick.labelsize": 7.0,
    "ytick.labelsize": 7.0,
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
}


def figure_format(path: str | os.PathLike[str], *, overwrite: bool = False) -> str:
    """The format that a file's ending asks for.

    Raises
    ------
    InputError
        Another ending than .png, .pdf or .svg, or a file that may not be written.
    """
    shown = os.fspath(path)
    suffix = Path(shown).suffix.lower()
    lines = check_new_file(path, overwrite=overwrite)
    if suffix not in FORMATS and "\0" not in shown:
        what = f"{suffix!r} is no format of a figure" if suffix else "the name has no ending"
        lines.append(mistake(shown, "", what, "end it in .png, .pdf or .svg"))
    if lines:
        raise InputError(*lines)
    return FORMATS[suffix]


def check_width(width: float) -> float:
    """The width of a figure (mm), if it can have it.

    Raises
    ------
    ValueError
        Narrower than text stays legible in, or wider than a sheet.
    """
    if not NARROWEST <= width <= WIDEST:
        raise ValueError(
            f"a figure is {NARROWEST:g} to {WIDEST:g} mm wide, got {width:g}; its text would not "
            "be legible"
        )
    return width


def sheet(width: float, height: float) -> Any:
    """An empty matplotlib figure of a size in mm, to be called within `look`."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width * MILLIMETRE, height * MILLIMETRE))
    FigureCanvasAgg(figure)
    return figure


def beside(axes: Any, *, gap: float = 1.8, wide: float = 2.8) -> tuple[float, float, float, float]:
    """Place of a colour bar to the right of a panel, in parts of the panel.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    gap, wide : float, optional
        Between panel and bar, and across the bar, mm.
    """
    inches = axes.get_position(original=True).width * axes.figure.get_size_inches()[0]
    across = inches / MILLIMETRE
    return 1.0 + gap / across, 0.0, wide / across, 1.0


@contextmanager
def look() -> Iterator[None]:
    """Draw within this: the settings that every figure has, whatever the user's own are."""
    import matplotlib
    import matplotlib.style

    with matplotlib.rc_context():
        matplotlib.style.use(["default", _LOOK])
        yield


def save(
    figure: Any,
    path: str | os.PathLike[str],
    *,
    format: str,  # noqa: A002 (the word of the trade)
    title: str,
    description: str,
    overwrite: bool,
) -> None:
    """Write a figure: whole, or not at all. To be called within `look`.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    path : path
    format : {"png", "pdf", "svg"}
    title, description : str
        Kept in the file's own metadata.
    overwrite : bool

    Raises
    ------
    InputError
        The file may not be written.
    RunError
        The system refused.
    """
    about = {
        "png": {"Title": title, "Description": description, "Software": "simimg"},
        "pdf": {
            "Title": title,
            "Subject": description,
            "Creator": "simimg",
            "CreationDate": None,
        },
        "svg": {"Title": title, "Description": description, "Creator": "simimg", "Date": None},
    }
    held = io.BytesIO()
    figure.savefig(held, format=format, dpi=_DOTS_PER_INCH, metadata=about[format])
    with new_file(path, overwrite=overwrite) as handle:
        handle.write(held.getvalue())


def drawable(text: str, *, longest: int = 60, ems: float = inf) -> str:
    """Text from a stranger's file as it may stand in a figure.

    Controls become blanks, what the font cannot draw a question mark; cut at `longest` characters
    and at a width of `ems` font sizes. To be drawn with ``parse_math=False``, so that no sign in it
    is taken for a formula.
    """
    from matplotlib.font_manager import FontProperties, findfont, get_font

    font = get_font(findfont(FontProperties(family="DejaVu Sans")))
    letters = [c if c.isprintable() else " " for c in text]
    known = "".join(c if font.get_char_index(ord(c)) else "?" for c in letters)
    known = " ".join(known.split())
    font.set_size(10.0, 72)
    widths = [font.load_char(ord(c)).linearHoriAdvance / 65536.0 / 10.0 for c in known]
    if len(known) <= longest and sum(widths) <= ems:
        return known
    while known and (len(known) > longest - 1 or sum(widths[: len(known)]) > ems - 1.0):
        known = known[:-1]
    return known + "\N{HORIZONTAL ELLIPSIS}"


def grouped(value: float) -> str:
    """A number in plain digits, thousands set apart by a thin space."""
    sign = "\N{MINUS SIGN}" if value < 0.0 else ""
    return sign + f"{abs(value):,.6g}".replace(",", "\N{THIN SPACE}")
