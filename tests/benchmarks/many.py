"""Timings of many: a thousand pairs in one frame, and thousands of frames of one pair."""

from __future__ import annotations

import cProfile
import pstats
import shutil
import statistics
import time
from pathlib import Path

import numpy as np

Rows = list[tuple[str, str, str]]
PAIRS = 1000
FIELD = """
title = "a thousand pairs"
[telescope]
aperture = "2 m"
[air]
seeing = "0.8 arcsec"
[band]
name = "V"
[camera]
pixels = [4096, 4096]
pixel_scale = "0.28 arcsec"
gain = "1.5 electron/adu"
read_noise = "5 electron"
bias = "500 adu"
[sky]
electrons = "60 electron"
[exposure]
seed = 11
"""
DRAWN = """
title = "one pair of many"
[telescope]
aperture = "2 m"
[air]
seeing = "0.8 arcsec"
[band]
name = "V"
[camera]
pixels = [64, 64]
pixel_scale = "0.28 arcsec"
bias = "500 adu"
read_noise = "5 electron"
[exposure]
seed = 11
[draw]
"pair[0].separation" = { uniform = ["0.3 arcsec", "2 arcsec"] }
"pair[0].position_angle" = { isotropic = true }
[[pair]]
electrons = [80000, 50000]
separation = "0.9 arcsec"
position_angle = "40 deg"
"""
STAGES = (
    ("observation.py", "observe", "PSF"),
    ("sighting.py", "look", "fits of one and two stars"),
    ("judging.py", "judge", "limits and verdicts"),
)


def write_pairs(folder: Path, count: int) -> Path:
    """A field of pairs on a loose lattice: separations of half a second to two and a half."""
    rng = np.random.default_rng(5)
    parts = [FIELD]
    for number in range(count):
        x = 64 + (number % 32) * 127 + rng.uniform(-30, 30)
        y = 64 + (number // 32) * 127 + rng.uniform(-30, 30)
        light = rng.uniform(2e4, 2e5)
        parts.append(
            f'[[pair]]\nlabel = "P{number}"\nx = {x:.3f}\ny = {y:.3f}\n'
            f"electrons = [{light:.1f}, {light * rng.uniform(0.3, 1):.1f}]\n"
            f'separation = "{rng.uniform(0.5, 2.5):.3f} arcsec"\n'
            f'position_angle = "{rng.uniform(0, 360):.2f} deg"\n'
        )
    path = folder / f"pairs-{count}.toml"
    path.write_text("\n".join(parts))
    return path


def bench_measure(folder: Path) -> Rows:
    """A thousand pairs of a large frame, as `simimg measure` does it, and where the time goes."""
    import os

    import simimg
    from simimg.resolving.measure import measure_frame

    frame = simimg.expose(simimg.load_scene(write_pairs(folder, PAIRS)))
    began, busy = time.perf_counter(), os.times()
    measure_frame(frame, workers=os.cpu_count() or 1)
    seconds, after = time.perf_counter() - began, os.times()
    processor = sum(after[:4]) - sum(busy[:4])
    profile = cProfile.Profile()
    profile.enable()
    measure_frame(frame, workers=1)
    profile.disable()
    stats = pstats.Stats(profile)
    whole = stats.total_tt  # type: ignore[attr-defined]
    shares = []
    for file, function, words in STAGES:
        spent = sum(
            entry[3]
            for (path, _, name), entry in stats.stats.items()  # type: ignore[attr-defined]
            if path.endswith(file) and name == function
        )
        shares.append(f"{words} {spent / whole:.0%}")
    return [
        (f"{PAIRS} pairs of 4096 x 4096 measured, seconds", f"{seconds:.0f}", "under 60"),
        ("of processor time, all processes", f"{processor:.0f}", ""),
        ("where it goes", ", ".join(shares), ""),
    ]


def bench_batch(folder: Path) -> Rows:
    """Frames by the thousand: two processes against one, and ten times the frames."""
    import simimg
    from simimg.study.batch import batch

    path = folder / "drawn.toml"
    path.write_text(DRAWN)
    scene = simimg.load_scene(path)

    def made(count: int, workers: int) -> float:
        out = folder / "frames"
        shutil.rmtree(out, ignore_errors=True)
        began = time.perf_counter()
        batch(scene, count=count, folder=out, workers=workers)
        return time.perf_counter() - began

    made(20, 1)
    one, two = [], []
    for _ in range(3):
        one.append(made(600, 1))
        two.append(made(600, 2))
    ratio = statistics.median(a / b for a, b in zip(one, two, strict=True))
    few, many = made(200, 2), made(2000, 2)
    return [
        ("batch of 600 frames: two processes over one", f"{ratio:.2f}", "at least 1.8"),
        ("ten times the frames of a batch", f"{many / few:.1f}", "about 10"),
    ]
