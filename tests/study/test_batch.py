"""Batches: what is drawn, the same bytes whoever makes them, resuming, failing."""

import contextlib
import hashlib
import math
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from astropy.io import fits
from astropy.table import Table
from scipy.special import ndtr
from scipy.stats import kstest

import simimg
from simimg.errors import InputError
from simimg.scene.file import load_scene
from simimg.study.batch import batch, estimate
from simimg.study.batchplan import plan_batch

TEXT = """
title = "pairs for a pipeline"
[telescope]
aperture = "2 m"
[air]
seeing = "0.8 arcsec"
[band]
name = "V"
[camera]
pixels = [24, 24]
pixel_scale = "0.28 arcsec"
gain = "1.5 electron/adu"
read_noise = "5 electron"
bias = "500 adu"
[sky]
electrons = "60 electron"
[exposure]
seed = 11
[draw]
{draws}
[[pair]]
label = "P"
electrons = [80000, 50000]
separation = "0.9 arcsec"
position_angle = "40 deg"
"""
USUAL = """
"pair[0].separation" = { uniform = ["0.3 arcsec", "2 arcsec"] }
"pair[0].position_angle" = { isotropic = true }
"""


def scene_of(folder, draws=USUAL):
    path = Path(folder) / "batch.toml"
    path.write_text(TEXT.replace("{draws}", draws))
    return load_scene(path)


def hashes(folder):
    return {
        str(one.relative_to(folder)): hashlib.sha256(one.read_bytes()).hexdigest()
        for one in sorted(Path(folder).rglob("*"))
        if one.is_file()
    }


DISTRIBUTIONS = [
    ('{ uniform = ["0.5 arcsec", "2 arcsec"] }', lambda x: (x - 0.5) / 1.5),
    ('{ normal = ["2 arcsec", "0.2 arcsec"] }', lambda x: ndtr((x - 2) / 0.2)),
    ('{ loguniform = ["0.5 arcsec", "2 arcsec"] }', lambda x: np.log(x / 0.5) / np.log(4)),
    (
        '{ powerlaw = ["0.5 arcsec", "2 arcsec", -2.0] }',
        lambda x: (1 / 0.5 - 1 / x) / (1 / 0.5 - 1 / 2),
    ),
]


@pytest.mark.parametrize(("draw", "law"), DISTRIBUTIONS)
def test_draws_follow_their_law(tmp_path, draw, law):
    plan = plan_batch(scene_of(tmp_path, f'"pair.0.separation" = {draw}'), count=3000)
    (column,) = plan.columns(np.arange(3000))
    assert (column.name, column.unit) == ("pair_0_separation", "arcsec")
    assert kstest(column.values, law).pvalue > 1e-3
    # The check can fail: another law is refused.
    assert kstest(column.values**1.2, law).pvalue < 1e-6


def test_angles_are_isotropic_and_choices_even(tmp_path):
    draws = (
        '"pair.0.position_angle" = { isotropic = true }\n'
        '"band.name" = { choice = ["V", "R", "I"] }\n'
    )
    plan = plan_batch(scene_of(tmp_path, draws), count=3000)
    angle, band = plan.columns(np.arange(3000))
    assert kstest(angle.values, "uniform", args=(0, 360)).pvalue > 1e-3
    counts = [int((band.values == name).sum()) for name in "VRI"]
    assert sum(counts) == 3000
    assert max(abs(one - 1000) for one in counts) < 4 * math.sqrt(667)
    # Keys are drawn apart, and frames too.
    assert len(set(angle.values)) == 3000


def test_rows_of_a_table_go_together(tmp_path):
    table = Table({"s": [0.5, 1.0, 1.5], "pa": [10.0, 20.0, 30.0]})
    table["s"].unit = "arcsec"
    table["pa"].unit = "deg"
    table.write(tmp_path / "rows.ecsv")
    draws = (
        '"pair.0.separation" = { table = "rows.ecsv", column = "s" }\n'
        '"pair.0.position_angle" = { table = "rows.ecsv", column = "pa" }\n'
    )
    scene = scene_of(tmp_path, draws)
    made = batch(scene, count=4, folder=tmp_path / "out")
    assert made.there == 4
    manifest = Table.read(tmp_path / "out" / "manifest.ecsv")
    assert list(manifest["pair_0_separation"]) == [0.5, 1.0, 1.5, 0.5]
    assert list(manifest["pair_0_position_angle"]) == [10.0, 20.0, 30.0, 10.0]
    # What all frames read is kept once.
    assert len(list((tmp_path / "out" / "inputs").iterdir())) == 1


def test_manifest_truth_and_frames_say_the_same(tmp_path):
    scene = scene_of(tmp_path)
    made = batch(scene, count=5, folder=tmp_path / "out")
    assert (made.there, made.before, made.failed) == (5, 0, ())
    manifest = Table.read(tmp_path / "out" / "manifest.ecsv")
    assert manifest.colnames[:4] == ["frame", "file", "seed", "sha256"]
    assert manifest["pair_0_separation"].unit == "arcsec"
    joined = Table.read(tmp_path / "out" / "truth.fits", hdu="TRUTH", unit_parse_strict="silent")
    for row in manifest:
        path = tmp_path / "out" / row["file"]
        assert hashlib.sha256(path.read_bytes()).hexdigest() == row["sha256"]
        frame = simimg.Frame.read(path)
        assert frame.value("SEED") == row["seed"]
        assert frame.truth["separation"][0] == pytest.approx(row["pair_0_separation"], rel=1e-9)
        assert frame.truth["pair_0_separation"][0] == row["pair_0_separation"]
        mine = joined[joined["frame"] == row["frame"]]
        assert list(mine["x"]) == list(frame.truth["x"])
    assert len(set(manifest["seed"])) == 5
    if shutil.which("fitsverify"):
        for one in ("truth.fits", "frame-000002.fits"):
            said = subprocess.run(
                ["fitsverify", "-q", tmp_path / "out" / one],
                capture_output=True,
                text=True,
                check=False,
            )
            assert "verification OK" in said.stdout


def test_a_frame_makes_itself_again(tmp_path):
    from simimg_cli.scenes import open_scene

    batch(scene_of(tmp_path), count=2, folder=tmp_path / "out")
    path = tmp_path / "out" / "frame-000001.fits"
    again = simimg.expose(open_scene(path).scene)
    np.testing.assert_array_equal(again.counts, simimg.Frame.read(path).counts)


def test_workers_make_the_same_bytes(tmp_path):
    scene = scene_of(tmp_path)
    seen = []
    batch(scene, count=20, folder=tmp_path / "one")
    batch(scene, count=20, folder=tmp_path / "two", workers=2,
          progress=lambda done, total: seen.append((done, total)))  # fmt: skip
    assert hashes(tmp_path / "one") == hashes(tmp_path / "two")
    assert seen[-1] == (20, 20)


def test_resuming_makes_what_is_missing(tmp_path):
    scene = scene_of(tmp_path)
    batch(scene, count=8, folder=tmp_path / "whole")
    batch(scene, count=4, folder=tmp_path / "part")
    (tmp_path / "part" / "frame-000002.fits").unlink()
    (tmp_path / "part" / ".simimg-0123456789abcdef.part").write_bytes(b"half")
    made = batch(scene, count=8, folder=tmp_path / "part")
    assert made.before == 3
    assert hashes(tmp_path / "part") == hashes(tmp_path / "whole")


def test_folders_of_others_are_refused(tmp_path):
    batch(scene_of(tmp_path), count=1, folder=tmp_path / "out")
    other = scene_of(tmp_path, '"pair.0.separation" = { uniform = ["0.3 arcsec", "1 arcsec"] }')
    with pytest.raises(InputError, match="another scene"):
        batch(other, count=1, folder=tmp_path / "out")
    (tmp_path / "full").mkdir()
    (tmp_path / "full" / "mine.txt").write_text("mine")
    with pytest.raises(InputError, match="other things"):
        batch(other, count=1, folder=tmp_path / "full")
    with pytest.raises(InputError, match="does not exist"):
        batch(other, count=1, folder=tmp_path / "no" / "where")
    with pytest.raises(InputError, match="not a folder"):
        batch(other, count=1, folder=tmp_path / "full" / "mine.txt")


def test_a_draw_that_cannot_be_fails_alone(tmp_path):
    # About one in two of the separations is below nothing.
    scene = scene_of(tmp_path, '"pair.0.separation" = { uniform = ["-1 arcsec", "1 arcsec"] }')
    said = []
    made = batch(scene, count=12, folder=tmp_path / "out", workers=2, tell=said.append)
    assert 0 < len(made.failed) < 12
    assert made.there == 12 - len(made.failed)
    assert all("separation" in why for _, why in made.failed)
    assert len(said) == len(made.failed)
    manifest = Table.read(tmp_path / "out" / "manifest.ecsv")
    assert set(manifest["frame"]) == set(range(12)) - {number for number, _ in made.failed}
    assert (manifest["pair_0_separation"] > 0).all()


@pytest.mark.parametrize(
    ("draws", "says"),
    [
        ('"pair.0.separation" = { uniform = ["2 arcsec", "1 arcsec"] }', "below the second"),
        ('"pair.0.separation" = { uniform = ["1 arcsec", "2 m"] }', "two units"),
        ('"pair.0.separation" = { loguniform = ["0 arcsec", "1 arcsec"] }', "above 0"),
        ('"pair.0.separation" = { even = [1, 2] }', "even"),
        ('"pair.0.separation" = 3', "must be a table"),
        ('"pair.0.seperation" = { uniform = ["1 arcsec", "2 arcsec"] }', "seperation"),
        ('"pair.7.separation" = { uniform = ["1 arcsec", "2 arcsec"] }', "pair"),
        ('"pair.0.separation" = { uniform = [1, 2] }', "separation"),
        ('"pair.0.separation" = { table = "no.ecsv", column = "s" }', "no such file"),
        ('"exposure.seed" = { choice = [1, 2] }', "cannot be drawn"),
        ('"pair.0.position_angle" = { isotropic = false }', "isotropic"),
    ],
)
def test_wrong_draws_name_the_key(tmp_path, draws, says):
    with pytest.raises(InputError, match=says):
        batch(scene_of(tmp_path, draws), count=2, folder=tmp_path / "out")
    assert not (tmp_path / "out").exists()


def test_an_estimate_leaves_nothing(tmp_path):
    scene = scene_of(tmp_path)
    told = estimate(scene, count=1000, folder=tmp_path / "out")
    assert (told.frames, told.missing) == (1000, 1000)
    assert not (tmp_path / "out").exists()
    batch(scene, count=2, folder=tmp_path / "out")
    size = (tmp_path / "out" / "frame-000000.fits").stat().st_size
    assert told.bytes == pytest.approx(1000 * size, rel=0.05)
    assert 0 < told.hours < 10


def test_a_process_that_dies_is_told_and_the_rest_goes_on(tmp_path, monkeypatch):
    scene = scene_of(tmp_path)
    killer = tmp_path / "killer"
    killer.mkdir()
    (killer / "sitecustomize.py").write_text(
        "import os, simimg.study.batchframes as b\n"
        "write = b.FrameMaker.write\n"
        "def deadly(self, number, folder):\n"
        "    if number == 5:\n"
        "        os._exit(9)\n"
        "    return write(self, number, folder)\n"
        "b.FrameMaker.write = deadly\n"
    )
    monkeypatch.setenv("PYTHONPATH", f"{killer}{os.pathsep}{os.environ.get('PYTHONPATH', '')}")
    said = []
    made = batch(scene, count=12, folder=tmp_path / "out", workers=2, tell=said.append)
    assert [number for number, _ in made.failed] == [5]
    assert made.there == 11
    assert any("died" in line for line in said)


COMMAND = [sys.executable, "-m", "simimg_cli", "batch"]


def test_killed_at_any_moment_and_gone_on_with(tmp_path):
    scene_of(tmp_path)
    arguments = [*COMMAND, tmp_path / "batch.toml", "--count", "30", "--workers", "2", "-q"]
    whole = subprocess.run([*arguments, "--out", tmp_path / "whole"], check=False)
    assert whole.returncode == 0
    rng = np.random.default_rng(4)
    kills = 0
    for _ in range(int(os.environ.get("SIMIMG_KILLS", "4"))):
        process = subprocess.Popen(
            [*arguments, "--out", tmp_path / "killed"], start_new_session=True
        )
        time.sleep(rng.uniform(0.5, 4.0))
        kills += process.poll() is None
        # It may have ended by itself.
        with contextlib.suppress(ProcessLookupError):
            os.killpg(process.pid, signal.SIGKILL)
        process.wait()
        if len(list((tmp_path / "killed").glob("frame-*.fits"))) == 30:
            shutil.rmtree(tmp_path / "killed")
    assert kills > 0
    last = subprocess.run([*arguments, "--out", tmp_path / "killed"], check=False)
    assert last.returncode == 0
    assert hashes(tmp_path / "killed") == hashes(tmp_path / "whole")


def test_a_cluster_of_two_processes_makes_the_same_bytes(tmp_path):
    distributed = pytest.importorskip("distributed", reason="dask.distributed is not installed")
    del distributed
    scene = scene_of(tmp_path)
    batch(scene, count=12, folder=tmp_path / "alone")
    file = tmp_path / "scheduler.json"
    environment = {**os.environ, "DASK_DISTRIBUTED__WORKER__DAEMON": "False"}
    started = []

    def start(*arguments):
        with (tmp_path / f"{len(started)}.log").open("w") as log:
            started.append(
                subprocess.Popen(
                    [sys.executable, "-m", "distributed.cli." + arguments[0], *arguments[1:]],
                    stdout=log,
                    stderr=log,
                    env=environment,
                    cwd=tmp_path,
                )
            )

    try:
        start("dask_scheduler", "--host", "127.0.0.1", "--port", "0", "--no-dashboard",
              "--scheduler-file", str(file))  # fmt: skip
        for _ in range(300):
            if file.exists() and file.stat().st_size:
                break
            time.sleep(0.1)
        import json

        address = json.loads(file.read_text())["address"]
        for _ in range(2):
            start("dask_worker", address, "--nthreads", "1", "--no-dashboard", "--no-nanny")
        made = subprocess.run(
            [*COMMAND, tmp_path / "batch.toml", "--count", "12", "--out", tmp_path / "cluster",
             "--cluster", address, "-q"],
            check=False,
            timeout=120,
        )  # fmt: skip
        study = subprocess.run(
            [sys.executable, "-m", "simimg_cli", "study", tmp_path / "batch.toml", "-q",
             "--vary", "air.seeing=0.6:0.8 arcsec:2", "-o", tmp_path / "cluster.ecsv",
             "--cluster", address],
            check=False,
            timeout=120,
        )  # fmt: skip
    finally:
        for one in reversed(started):
            one.terminate()
            one.wait(timeout=30)
    assert made.returncode == 0
    assert hashes(tmp_path / "cluster") == hashes(tmp_path / "alone")
    assert study.returncode == 0
    assert len(Table.read(tmp_path / "cluster.ecsv")) == 2


def test_no_scheduler_no_batch(tmp_path):
    pytest.importorskip("distributed", reason="dask.distributed is not installed")
    scene_of(tmp_path)
    made = subprocess.run(
        [*COMMAND, tmp_path / "batch.toml", "--count", "2", "--out", tmp_path / "out",
         "--cluster", "tcp://127.0.0.1:9"],
        capture_output=True,
        text=True,
        check=False,
        timeout=120,
    )  # fmt: skip
    assert made.returncode == 2
    assert "no scheduler answers" in made.stderr
    assert "Traceback" not in made.stderr


@pytest.mark.skipif(os.geteuid() != 0, reason="only the superuser can make a small disk")
def test_a_full_disk_leaves_nothing_half_written(tmp_path):
    scene_of(tmp_path)
    disk = tmp_path / "disk"
    disk.mkdir()
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=300k", "tmpfs", disk], check=False
    )
    if mounted.returncode != 0:
        pytest.skip("no small disk could be mounted")
    try:
        made = subprocess.run(
            [*COMMAND, tmp_path / "batch.toml", "--count", "40", "--out", disk / "out"],
            capture_output=True,
            text=True,
            check=False,
        )
        assert made.returncode == 1
        assert "No space left" in made.stderr
        assert "Traceback" not in made.stderr
        frames = list((disk / "out").glob("frame-*.fits"))
        assert frames
        for one in frames:
            with fits.open(one, checksum=True) as hdus:
                hdus.verify("exception")
        assert not list((disk / "out").glob(".simimg-*"))
    finally:
        subprocess.run(["umount", disk], check=True)


def test_files_that_are_chosen_among_are_kept_once(tmp_path):
    """The same frames again after the originals have gone."""
    for name, slope in (("red.csv", 1.0), ("blue.csv", -1.0)):
        rows = "".join(
            f"{nm},{0.6 + slope * (nm - 550) / 1000:.3f}\n" for nm in range(450, 651, 20)
        )
        (tmp_path / name).write_text("wavelength_nm,throughput\n" + rows)
    draws = USUAL + '"band.file" = { choice = ["red.csv", "blue.csv"] }\n'
    path = tmp_path / "batch.toml"
    path.write_text(TEXT.replace("{draws}", draws).replace('name = "V"', 'file = "red.csv"'))
    out = tmp_path / "out"
    batch(load_scene(path), count=8, folder=out)
    assert len(list((out / "inputs").iterdir())) == 2
    chosen = [str(one) for one in Table.read(out / "manifest.ecsv")["band_file"]]
    assert len(set(chosen)) == 2
    assert all((out / one).is_file() for one in chosen)
    for name in ("red.csv", "blue.csv"):
        (tmp_path / name).unlink()
    frame = simimg.Frame.read(out / "frame-000000.fits")
    record = {name: content for name, _, content in frame.scene_files}
    assert record[chosen[0]] == b""
    again = subprocess.run(
        [sys.executable, "-m", "simimg_cli", "expose", out / "frame-000000.fits", "-q",
         "-o", tmp_path / "again.fits"],
        check=False,
    )  # fmt: skip
    assert again.returncode == 0
    assert np.array_equal(simimg.Frame.read(tmp_path / "again.fits").counts, frame.counts)


@pytest.mark.skipif(os.geteuid() != 0, reason="only the superuser can make a read-only disk")
def test_a_read_only_folder_is_told_and_left_alone(tmp_path):
    scene_of(tmp_path)
    disk = tmp_path / "disk"
    disk.mkdir()
    if subprocess.run(["mount", "-t", "tmpfs", "-o", "ro", "tmpfs", disk], check=False).returncode:
        pytest.skip("no read-only disk could be mounted")
    try:
        for out in (disk, disk / "out"):
            made = subprocess.run(
                [*COMMAND, tmp_path / "batch.toml", "--count", "2", "--out", out],
                capture_output=True,
                text=True,
                check=False,
            )
            assert made.returncode == 1
            assert "Read-only file system" in made.stderr
            assert "Traceback" not in made.stderr
            assert list(disk.iterdir()) == []
    finally:
        subprocess.run(["umount", disk], check=True)
