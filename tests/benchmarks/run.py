"""Timings as ratios in one run: ``python -m tests.benchmarks.run`` prints the table.

Machines differ and are noisy, so that every figure is a ratio of two things timed in turn in the
same process (or of two processes, in turn), the median of several rounds. Nothing here is asserted
by a test.
"""

from __future__ import annotations

import argparse
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np

from tests.benchmarks.cubes import bench_cube
from tests.benchmarks.many import bench_batch, bench_measure

SIDE = 4096
STARS = 100_000
SCENE = """
title = "benchmark field"
[telescope]
aperture = "2 m"
obstruction = 0.3
throughput = 0.8
[air]
seeing = "0.9 arcsec"
[band]
name = "V"
[camera]
pixels = [{side}, {side}]
pixel_scale = "0.3 arcsec"
gain = "1.5 electron/adu"
read_noise = "4 electron"
bias = "500 adu"
full_well = "90000 electron"
[sky]
electrons = 100
[exposure]
time = "30 s"
seed = 1
[[catalogue]]
file = "stars-{stars}.fits"
columns = {{ x = "x", y = "y", electrons = "electrons" }}
"""


def write_scene(folder: Path, stars: int, side: int = SIDE) -> Path:
    """A field of stars on random places, ten to a hundred thousand electrons each."""
    from astropy.table import Table

    rng = np.random.default_rng(stars)
    table = Table(
        {
            "x": rng.uniform(0, side, stars),
            "y": rng.uniform(0, side, stars),
            "electrons": 10.0 ** rng.uniform(1, 5, stars),
        }
    )
    table.write(folder / f"stars-{stars}.fits", overwrite=True)
    path = folder / f"field-{stars}.toml"
    path.write_text(SCENE.format(side=side, stars=stars))
    return path


def timed(call, rounds=3):
    """Median seconds of several rounds."""
    seconds = []
    for _ in range(rounds):
        start = time.perf_counter()
        call()
        seconds.append(time.perf_counter() - start)
    return statistics.median(seconds)


def whole_frame(scene_path: Path, out: Path) -> None:
    """Scene file to FITS file, in this process."""
    import simimg

    simimg.expose(simimg.load_scene(scene_path)).write(out, overwrite=True)


def floor(plan_cells: tuple[int, int], out: Path, threads: int) -> None:
    """The least the job can cost: one real FFT pair, the Poisson and normal draws, the file."""
    import scipy.fft
    from astropy.io import fits

    grid = np.zeros(plan_cells, dtype=np.float32)
    grid[::97, ::89] = 1e4
    back = scipy.fft.irfft2(scipy.fft.rfft2(grid, workers=threads), s=plan_cells, workers=threads)
    mean = np.full((SIDE, SIDE), 130.0) + abs(float(back[0, 0])) * 0
    counts = np.empty((SIDE, SIDE), dtype=np.uint16)

    def draw(part: int) -> None:
        rows = slice(part * SIDE // threads, (part + 1) * SIDE // threads)
        rng = np.random.default_rng(part)
        electrons = rng.poisson(mean[rows])
        noise = rng.standard_normal(electrons.shape, dtype=np.float32)
        counts[rows] = (electrons + 4 * noise).clip(0, 65535)

    with ThreadPoolExecutor(threads) as pool:
        list(pool.map(draw, range(threads)))
    fits.PrimaryHDU(counts).writeto(out, overwrite=True, checksum=True)


def bench_frame(folder: Path) -> list[tuple[str, str, str]]:
    """The whole frame against its floor, and its peak memory in a process of its own."""
    import simimg
    from simimg.assembly.objects import inventory
    from simimg.assembly.train import assemble_train
    from simimg.imaging.grid import plan_grid

    path = write_scene(folder, STARS)
    scene = simimg.load_scene(path)
    train = assemble_train(scene)
    plan = plan_grid(
        train.basis,
        inventory(scene).sources,
        columns=SIDE,
        rows=SIDE,
        pixel_scale=train.pixel_scale or 0,
        memory_bytes=2**31,
    )
    (tile,) = plan.tiles
    cells = tile.length_y * plan.subdivision, tile.length_x * plan.subdivision
    out = folder / "frame.fits"
    threads = os.cpu_count() or 1
    whole_frame(path, out)
    ours, floors = [], []
    for _ in range(5):
        ours.append(timed(lambda: whole_frame(path, out), 1))
        floors.append(timed(lambda: floor(cells, out, threads), 1))
    ratio = statistics.median(a / b for a, b in zip(ours, floors, strict=True))
    peak = subprocess.run(
        [sys.executable, "-m", "tests.benchmarks.run", "--peak", str(path)],
        capture_output=True,
        text=True,
        check=True,
    ).stdout.strip()
    return [
        (
            f"{SIDE} x {SIDE}, {STARS} stars, noise and FITS file, over its floor",
            f"{ratio:.2f}",
            "under 2",
        ),
        ("seconds of the two (this machine)", f"{min(ours):.2f}, {min(floors):.2f}", ""),
        ("peak memory of that frame, GiB", peak, "under 2.5"),
    ]


def bench_photutils(folder: Path) -> list[tuple[str, str, str]]:
    """The expected image alone against photutils' model image of 25 x 25 stamps."""
    from astropy.table import Table
    from photutils.datasets import make_model_image
    from photutils.psf import ImagePSF

    import simimg
    from simimg.assembly.objects import inventory
    from simimg.assembly.train import assemble_train
    from simimg.imaging.profile import sampled_psf
    from simimg.imaging.render import expected_image

    scene = simimg.load_scene(write_scene(folder, STARS))
    train = assemble_train(scene)
    sources = inventory(scene).sources
    scale = train.pixel_scale or 0.0

    def ours():
        return expected_image(
            train.basis, sources, columns=SIDE, rows=SIDE, pixel_scale=scale, threads=os.cpu_count()
        )

    psf = sampled_psf(train.effective, pixel_scale=scale, oversampling=4, half_width_pixels=16)
    model = ImagePSF(psf, oversampling=4)
    few = STARS // 10
    table = Table(
        {
            "x_0": sources.points.x[:few],
            "y_0": sources.points.y[:few],
            "flux": sources.points.electrons[:few],
        }
    )
    ours()
    mine, theirs = [], []
    for _ in range(3):
        mine.append(timed(ours, 1))
        # A tenth of the stars, for patience; its cost is a constant for each star.
        call = lambda: make_model_image((SIDE, SIDE), model, table, model_shape=(25, 25))  # noqa: E731
        theirs.append(10 * timed(call, 1))
    ratio = statistics.median(b / a for a, b in zip(mine, theirs, strict=True))
    return [
        (
            "expected image: times faster than photutils' make_model_image, 25 x 25 stamps",
            f"{ratio:.0f}",
            "at least 15",
        )
    ]


def bench_scaling(folder: Path) -> list[tuple[str, str, str]]:
    """Ten times the stars, twice, from scene file to FITS file."""
    seconds = {}
    for stars in (10_000, 100_000, 1_000_000):
        path = write_scene(folder, stars)
        seconds[stars] = timed(lambda path=path: whole_frame(path, folder / "s.fits"), 3)
    return [
        (
            f"{b} stars over {a}",
            f"{seconds[b] / seconds[a]:.2f}",
            "under 1.6",
        )
        for a, b in ((10_000, 100_000), (100_000, 1_000_000))
    ]


def bench_colour(folder: Path) -> list[tuple[str, str, str]]:
    """Stars of every temperature over a broad band, against one wavelength for all."""
    from astropy.table import Table

    plain = write_scene(folder, STARS)
    table = Table.read(folder / f"stars-{STARS}.fits")
    table["temperature"] = np.random.default_rng(2).uniform(2500, 40000, STARS)
    table.write(folder / "coloured.fits", overwrite=True)
    coloured = folder / "coloured.toml"
    text = plain.read_text().replace(f"stars-{STARS}.fits", "coloured.fits")
    coloured.write_text(text.replace("columns = {", 'columns = { temperature = "temperature",'))
    single = folder / "single.toml"
    single.write_text(plain.read_text().replace('name = "V"', 'name = "V"\nnodes = 1'))
    whole_frame(coloured, folder / "c.fits")
    many, one = [], []
    for _ in range(3):
        many.append(timed(lambda: whole_frame(coloured, folder / "c.fits"), 1))
        one.append(timed(lambda: whole_frame(single, folder / "m.fits"), 1))
    ratio = statistics.median(a / b for a, b in zip(many, one, strict=True))
    return [
        (
            f"{STARS} stars of every temperature over a band, over one wavelength for all",
            f"{ratio:.2f}",
            "under 4",
        )
    ]


def bench_help(_: Path) -> list[tuple[str, str, str]]:
    """``simimg --help`` against importing click."""
    ours, click = [], []
    run = {"stdout": subprocess.DEVNULL, "check": True}
    for _round in range(9):
        ours.append(
            timed(lambda: subprocess.run([sys.executable, "-m", "simimg_cli", "--help"], **run), 1)
        )
        click.append(
            timed(lambda: subprocess.run([sys.executable, "-c", "import click"], **run), 1)
        )
    ratio = statistics.median(a / b for a, b in zip(ours, click, strict=True))
    return [("`simimg --help` over `python -c 'import click'`", f"{ratio:.2f}", "under 3")]


BENCHMARKS = {
    "frame": bench_frame,
    "photutils": bench_photutils,
    "scaling": bench_scaling,
    "colour": bench_colour,
    "help": bench_help,
    "measure": bench_measure,
    "batch": bench_batch,
    "cube": bench_cube,
}


def main() -> None:
    """Run the chosen benchmarks, or all, and print one table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("names", nargs="*", choices=[*BENCHMARKS, []], default=[])
    parser.add_argument("--peak", type=Path, help="make this scene's frame, print the peak memory")
    chosen = parser.parse_args()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        if chosen.peak:
            whole_frame(chosen.peak, folder / "frame.fits")
            print(f"{resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20:.2f}")  # noqa: T201
            return
        print("| what | measured | wanted |\n| --- | --- | --- |")  # noqa: T201
        for benchmark in chosen.names or BENCHMARKS:
            for row in BENCHMARKS[benchmark](folder):
                print("| " + " | ".join(row) + " |", flush=True)  # noqa: T201


if __name__ == "__main__":
    main()
