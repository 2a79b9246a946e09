"""A plain scene for the tests of assembly and exposure, built from text and changed key by key."""

from pathlib import Path

from simimg.scene.file import load_scene, replace

TEXT = """
title = "test field"
[telescope]
aperture = "2 m"
obstruction = 0.3
throughput = 0.8
[air]
seeing = "0.9 arcsec"
airmass = 1.2
extinction = 0.14
[band]
name = "V"
[camera]
pixels = [101, 81]
pixel_scale = "0.25 arcsec"
quantum_efficiency = 0.9
gain = "1.5 electron/adu"
read_noise = "4 electron"
bias = "500 adu"
[sky]
surface_brightness = 21
[exposure]
time = "30 s"
seed = 4
[[star]]
label = "one"
magnitude = 17
"""


def scene(folder: Path, text: str = TEXT, **changes):
    """The scene with dotted keys changed; two underscores stand for a dot."""
    path = folder / "scene.toml"
    path.write_text(text)
    loaded = load_scene(path)
    if changes:
        loaded = replace(loaded, {k.replace("__", "."): v for k, v in changes.items()})
    return loaded
