"""Make the gallery of the demo scenes: README.md, and the pictures in the folder pictures.

    python scenes/make_gallery.py [FOLDER]

writes both into the folder, or beside this file. Each picture is what the commands beside it draw,
made smaller for a screen. The same scenes give the same bytes on the same versions of the
libraries.
"""

from __future__ import annotations

import io
import os
import shlex
import shutil
import sys
import tempfile
from pathlib import Path
from typing import NamedTuple

from click.testing import CliRunner
from PIL import Image

from simimg_cli.main import simimg

SCENES = Path(__file__).parent
WIDTH = 760  # pixels of a picture at most
_COLOURS = 192


class Entry(NamedTuple):
    """One scene of the gallery.

    Attributes
    ----------
    name : str
        Of the scene's file, without its ending; the picture bears the same.
    shows : str
        What it shows, in two lines.
    commands : tuple of str
        What makes the picture, in a folder that holds the folder `scenes`.
    """

    name: str
    shows: str
    commands: tuple[str, ...]


def framed(name: str, shows: str, *, options: str = "") -> Entry:
    """A scene whose frame is exposed and drawn."""
    return Entry(
        name,
        shows,
        (
            f"simimg expose scenes/{name}.toml -o {name}.fits",
            f"simimg figure {name}.fits{options} -o {name}.png",
        ),
    )


ENTRIES = (
    framed(
        "close-pair",
        "Two stars 0.35 arcsec apart in ordinary air: one star to the eye, certainly two to the\n"
        "fit, and resolved by neither criterion.",
    ),
    framed(
        "close-pair-in-space",
        "The same pair through a smaller telescope above the air: each star in its own ring, and\n"
        "resolved. The craft has rolled; follow the arrows.",
    ),
    framed(
        "unequal-pair",
        "A star and one of a sixteenth of its light, 1.2 arcsec apart: wider than Rayleigh's\n"
        "limit of an equal pair, and still no peak of its own for Sparrow.",
    ),
    framed(
        "turning-pair",
        "A pair on its orbit of 36 years. `simimg limits` with `--dates` says in which years it\n"
        "comes apart; the frame is of one night.",
    ),
    framed(
        "colours-in-low-air",
        "A hot and a cool star low in the sky, where the air is a weak prism: the light is drawn\n"
        "out towards the zenith, and the pair measured too close.",
    ),
    framed(
        "corrected-pair",
        "Two stars 0.068 arcsec apart, brought apart by adaptive optics: each shows its first\n"
        "ring again. `simimg limits` gives the error budget, cause by cause.",
    ),
    Entry(
        "mirror-segments",
        "The optics of a mirror of eighteen hexagons, not quite in phase: the PSF has the spikes\n"
        "and the hexagonal ring of its pupil.",
        ("simimg figure scenes/mirror-segments.toml --what wavefront,psf -o mirror-segments.png",),
    ),
    framed(
        "star-field",
        "A field of two thousand stars from a table, with a cluster in it, in a frame of 1024\n"
        "pixels' side, the truth of each beside it: a test frame for a pipeline.",
    ),
    Entry(
        "drawn-pairs",
        "One of a batch of frames, each with another pair in other air: separation, angle,\n"
        "brightness and seeing are drawn anew, and listed in a manifest.",
        (
            "simimg batch scenes/drawn-pairs.toml --count 2 --out pairs --workers 1",
            "simimg figure pairs/frame-000001.fits -o drawn-pairs.png",
        ),
    ),
    Entry(
        "raw-frame",
        "A frame as a used camera hands it over: a bleeding star, dust, hot and dead pixels,\n"
        "a bad column, cosmic rays, and columns of bias on the right.",
        ("simimg expose scenes/raw-frame.toml -o raw-frame.fits --preview raw-frame.png",),
    ),
    Entry(
        "speckle-pair",
        "Six of 300 frames of 10 ms: air breaks the light into specks, and a pair doubles each.\n"
        "`simimg measure --method speckle` reads 0.14 arcsec from them; their sum shows one star.",
        ("simimg expose scenes/speckle-pair.toml -o speckle-pair.fits --preview speckle-pair.png",),
    ),
    framed(
        "galaxies",
        "Three galaxies of the same light and the same half-light radius, of Sersic index 0.5, 1\n"
        "and 4: the higher, the sharper the middle and the wider the wings.",
    ),
    framed(
        "spiral",
        "A tilted spiral from a picture, taken as a map of surface brightness, as the air and\n"
        "the camera leave it, with some stars beside it.",
    ),
    framed(
        "phase-disc-and-ring",
        "A planet in phase with a ring, from orbit: lit limb, terminator, and the ring's gap,\n"
        "narrower across than along.",
    ),
)

_OPENING = """\
# The demo scenes

Made by `python scenes/make_gallery.py`: edit that, not this page.

Each scene runs as it is, says in a comment what to look for, and can be changed from the command
line (`--set air.seeing="0.4 arcsec"`). The places and instruments are invented. [KEYS.md](KEYS.md)
lists every key that a scene may have. The commands are called from the folder above this one.
"""

_BASES = """\
## What the scenes stand on

[station.toml](station.toml), a telescope of 2 m in ordinary air, and [orbiter.toml](orbiter.toml),
one of 1.2 m above it: scenes begin with `base = "station.toml"` and say only what is theirs.
`star-field.ecsv` and `spiral.fits` are made by `python scenes/make_inputs.py`.
"""


def page() -> str:
    """The gallery as Markdown."""
    parts = [_OPENING]
    for entry in ENTRIES:
        commands = "\n".join(entry.commands)
        parts.append(
            f"## {entry.name}\n\n{entry.shows}\n\n"
            f"![{entry.name}: {' '.join(entry.shows.split())}](pictures/{entry.name}.png)\n\n"
            f"```sh\n{commands}\n```\n\n"
            f"[{entry.name}.toml]({entry.name}.toml)\n"
        )
    return "\n".join([*parts, _BASES])


def picture(entry: Entry, folder: Path) -> bytes:
    """Run an entry's commands in a folder that holds `scenes`, and make their picture smaller."""
    before = Path.cwd()
    os.chdir(folder)
    try:
        for command in entry.commands:
            result = CliRunner().invoke(simimg, shlex.split(command)[1:])
            if result.exit_code != 0:
                raise RuntimeError(f"{command}: {result.stderr}")
        with Image.open(f"{entry.name}.png") as drawn:
            return smaller(drawn.convert("RGB"))
    finally:
        os.chdir(before)


def smaller(drawn: Image.Image) -> bytes:
    """A picture of fewer pixels and colours, as a PNG file in memory."""
    if drawn.width > WIDTH:
        height = round(drawn.height * WIDTH / drawn.width)
        drawn = drawn.resize((WIDTH, height), Image.Resampling.LANCZOS)
    held = io.BytesIO()
    drawn.quantize(_COLOURS, dither=Image.Dither.NONE).save(held, format="PNG", optimize=True)
    return held.getvalue()


def main(target: Path) -> None:
    """Write the page and every picture."""
    (target / "pictures").mkdir(exist_ok=True)
    with tempfile.TemporaryDirectory() as scratch:
        folder = Path(scratch)
        shutil.copytree(SCENES, folder / "scenes")
        for entry in ENTRIES:
            content = picture(entry, folder)
            (target / "pictures" / f"{entry.name}.png").write_bytes(content)
    (target / "README.md").write_text(page(), encoding="utf-8")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else SCENES)
