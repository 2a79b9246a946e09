"""Timing of cubes: frames of moving air against the Fourier transforms that they need.

Ratios are of processor seconds, which other work on the machine disturbs less than the clock.
"""

from __future__ import annotations

import statistics
import time
from math import degrees
from pathlib import Path

import numpy as np
import scipy.fft

FRAMES = 1000
SIDE = 256
WAVELENGTH, DIAMETER, STRENGTH = 600e-9, 2.0, 20.0
SCENE = """
[telescope]
aperture = "2 m"
[air]
seeing = "{seeing} arcsec"
[band]
centre = "600 nm"
width = "1 nm"
[camera]
pixels = [{side}, {side}]
pixel_scale = "{scale} arcsec"
[exposure]
frame_time = "10 ms"
count = {frames}
[[star]]
electrons = 1e5
"""


def bench_cube(folder: Path) -> list[tuple[str, str, str]]:
    """Expected images of 1000 instants, one wavelength, D/r0 = 20, on one thread."""
    import simimg
    from simimg.assembly.instants import SceneInstants
    from simimg.exposure import prepare

    fried = DIAMETER / STRENGTH / (WAVELENGTH / 500e-9) ** 1.2
    path = folder / "cube.toml"
    path.write_text(
        SCENE.format(
            seeing=degrees(0.9758634 * 500e-9 / fried) * 3600.0,
            scale=degrees(WAVELENGTH / DIAMETER / 2.0) * 3600.0,
            side=SIDE,
            frames=FRAMES,
        )
    )
    scene = simimg.load_scene(path)
    prepared = prepare(scene)

    def images(count: int) -> float:
        instants = SceneInstants(scene, prepared.train, prepared.objects)
        spent = time.process_time()
        for index in range(count):
            instants.light(instants.phases(index))
        return time.process_time() - spent

    def cube() -> float:
        start = time.perf_counter()
        for _ in simimg.expose_cube(scene):
            pass
        return time.perf_counter() - start

    plan = SceneInstants(scene, prepared.train, prepared.objects)._instants.plan
    wave = np.ones((plan.sides[0], plan.sides[0]), dtype=np.complex64)
    cells = np.ones(
        (plan.length_y * plan.subdivision, plan.length_x * plan.subdivision), dtype=np.float32
    )

    def transforms(count: int) -> float:
        spent = time.process_time()
        for _ in range(count):
            scipy.fft.fft2(wave)
            scipy.fft.irfft2(scipy.fft.rfft2(cells), s=(plan.length_y, plan.length_x))
        return time.process_time() - spent

    ours, fewer, floors = [], [], []
    for _ in range(3):
        ours.append(images(FRAMES))
        fewer.append(images(FRAMES // 4))
        floors.append(transforms(FRAMES))
    ratio = statistics.median(a / b for a, b in zip(ours, floors, strict=True))
    linear = statistics.median(a / b for a, b in zip(ours, fewer, strict=True))
    size = f"{FRAMES} instants of {SIDE} x {SIDE}, D/r0 = {STRENGTH:g}"
    return [
        (f"{size}, over the bare FFTs that they need", f"{ratio:.2f}", "under 2.5"),
        ("the same with the camera's noise, seconds (this machine)", f"{cube():.1f}", "under 30"),
        ("four times the instants", f"{linear:.2f}", "4"),
    ]
