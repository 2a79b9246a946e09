"""Small scenes of one pair, quick to expose and to measure, changed key by key."""

from pathlib import Path

from simimg.scene.file import load_scene, replace

AIR = """
title = "a pair in air"
[telescope]
aperture = "2 m"
[air]
seeing = "0.8 arcsec"
[band]
name = "V"
[camera]
pixels = [48, 48]
pixel_scale = "0.28 arcsec"
gain = "1.5 electron/adu"
read_noise = "5 electron"
bias = "500 adu"
bit_depth = 20
[sky]
electrons = "60 electron"
[exposure]
seed = 11
[[pair]]
label = "P"
x = 23.3
y = 23.8
electrons = ["80000 electron", "80000 electron"]
separation = "0.9 arcsec"
position_angle = "40 deg"
"""

SPACE = """
title = "a pair above the air"
[telescope]
aperture = "1 m"
obstruction = 0.3
[band]
name = "V"
[camera]
pixels = [40, 40]
pixel_scale = "0.05 arcsec"
gain = "1 electron/adu"
read_noise = "3 electron"
bias = "300 adu"
bit_depth = 20
[sky]
electrons = "4 electron"
[exposure]
seed = 12
[[pair]]
label = "P"
x = 19.2
y = 19.6
electrons = ["60000 electron", "10000 electron"]
separation = "0.15 arcsec"
position_angle = "200 deg"
"""


def pair_scene(folder: Path, text: str = AIR, **changes):
    """The scene with dotted keys changed; two underscores stand for a dot."""
    path = folder / "scene.toml"
    path.write_text(text)
    loaded = load_scene(path)
    if changes:
        loaded = replace(loaded, {key.replace("__", "."): value for key, value in changes.items()})
    return loaded
