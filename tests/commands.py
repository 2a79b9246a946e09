"""Commands of the documents, run in this process: as they stand there, and quickly.

What a command does is untouched; one thread is used, pictures have few dots, and the separation of
a PSF into products, a pure function that takes most of many commands' time, is done once for each
PSF.
"""

from __future__ import annotations

import hashlib
import os
import re
import shlex
from contextlib import contextmanager
from pathlib import Path

import numpy as np
from click.testing import CliRunner
from threadpoolctl import threadpool_limits

from simimg.resolving.psfmodel import PsfModel
from simimg.show import canvas
from simimg_cli.main import simimg

_separate = PsfModel.from_image
_separated: dict[tuple[str, int], PsfModel] = {}


def _once(image, *, oversampling):
    samples = np.ascontiguousarray(image, dtype=np.float64)
    key = (hashlib.sha256(samples.tobytes()).hexdigest(), oversampling)
    if key not in _separated:
        _separated[key] = _separate(image, oversampling=oversampling)
    return _separated[key]


@contextmanager
def quickly(monkeypatch):
    """Within this, commands take as little time as they can."""
    with monkeypatch.context() as patched, threadpool_limits(limits=1):
        patched.setattr(canvas, "_DOTS_PER_INCH", 40)
        patched.setattr(PsfModel, "from_image", _once)
        yield


def run(command, folder):
    """Run a command, a line or its words, in a folder; what click's runner says of it."""
    words = shlex.split(command) if isinstance(command, str) else list(command)
    before = Path.cwd()
    os.chdir(folder)
    try:
        return CliRunner().invoke(simimg, words[1:])
    finally:
        os.chdir(before)


def in_one_colour(scenes):
    """Make the base scenes of a folder quicker to image: no vanes, no outer scale, few pixels."""
    for name in ("station", "orbiter"):
        path = scenes / f"{name}.toml"
        text = path.read_text()
        assert text.count("[band]\n") == 1
        text = text.replace("[band]\n", "[band]\nnodes = 1\n")
        text, count = re.subn(r"^pixels = .*\n", "pixels = [96, 96]\n", text, flags=re.M)
        assert count == 1
        path.write_text(re.sub(r"^(vanes|outer_scale) = .*\n", "", text, flags=re.M))
