"""A small scene for measuring, quick to assemble, and its frames."""

from __future__ import annotations

import hashlib

import simimg
from simimg.scene.file import scene_from_record

AIR = """
[telescope]
aperture = "2 m"
[air]
seeing = "0.9 arcsec"
[band]
centre = "550 nm"
width = "80 nm"
[camera]
pixels = [{columns}, {rows}]
pixel_scale = "0.25 arcsec"
gain = "1.4 electron/adu"
read_noise = "5 electron"
bias = "400 adu"
full_well = "200000 electron"
rotation = "{rotation} deg"
mirrored = {mirrored}
[sky]
electrons = 40.0
[exposure]
time = "10 s"
seed = {seed}
[pointing]
ra = "150 deg"
dec = "20 deg"
"""


def scene(
    objects: str,
    *,
    columns=96,
    rows=90,
    rotation=0.0,
    mirrored=False,
    seed=5,
    overrides=(),
    air=True,
):
    """The scene with these objects; above the air its pixels are half the diffraction's Nyquist."""
    text = AIR.format(
        columns=columns, rows=rows, rotation=rotation, mirrored=str(mirrored).lower(), seed=seed
    )
    content = (text + objects).encode()
    record = [("test.toml", hashlib.sha256(content).hexdigest(), content)]
    return scene_from_record(
        record,
        name="test.toml",
        directory=".",
        overrides=overrides if air else [*overrides, 'camera.pixel_scale="0.03 arcsec"'],
        without=() if air else ["air"],
    )


def frame(objects: str, *, index=0, **choices):
    """An exposure of the scene."""
    return simimg.expose(scene(objects, **choices), index=index, threads=1)


def pair(
    separation: str, angle: float, electrons: tuple[float, float], place: str = "", label="P"
) -> str:
    """A pair's table."""
    return f"""
[[pair]]
label = "{label}"
{place}
electrons = [{electrons[0]}, {electrons[1]}]
separation = "{separation}"
position_angle = "{angle} deg"
"""


def star(electrons: float, place: str = "", label="S") -> str:
    """A star's table."""
    return f"""
[[star]]
label = "{label}"
{place}
electrons = {electrons}
"""
