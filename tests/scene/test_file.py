import hashlib
import math
import pickle
import subprocess
import sys
import tomllib

import numpy as np
import pytest
from numpy.testing import assert_allclose
from pydantic import ValidationError

from simimg.errors import InputError
from simimg.scene.file import (
    defaults_used,
    load_scene,
    replace,
    requirements_to_expose,
    scene_from_record,
    scene_id,
    scene_record,
    scene_text,
)
from simimg.scene.inputs import LARGEST_KEPT
from simimg_cli.starter import STARTER
from tests.scene.malformed_scenes import GOOD

ARCSEC = math.pi / 648000
# A factor and a product of doubles.
ROUNDING = 1e-14

BARE = """\
[telescope]
aperture = "1 m"
[band]
centre = "600 nm"
width = "50 nm"
"""


@pytest.fixture
def load(tmp_path):
    def _load(text=GOOD, **options):
        (tmp_path / "scene.toml").write_text(text)
        return load_scene(tmp_path / "scene.toml", **options)

    return _load


def mistakes(call, *args, **options):
    with pytest.raises(InputError) as caught:
        call(*args, **options)
    return caught.value.lines


def test_values_are_in_si(load):
    scene = load()
    assert scene.title == "A close pair"
    assert scene.telescope.aperture == 2.0
    assert scene.telescope.obstruction == 0.3
    assert_allclose(scene.telescope.vanes.angle, math.pi / 4, rtol=ROUNDING)
    assert_allclose(scene.telescope.vanes.width, 0.02, rtol=ROUNDING)
    assert_allclose(scene.air.seeing, 0.9 * ARCSEC, rtol=ROUNDING)
    assert scene.air.altitude is None
    assert scene.camera.pixels == (64, 48)
    assert scene.camera.gain == 1.4
    assert scene.exposure.time == 30.0
    assert scene.exposure.start == "2026-04-12T03:00:00"
    assert_allclose(scene.pixel_scale, 9e-6 / 16, rtol=ROUNDING)
    assert_allclose(scene.pointing.ra, (5 + 34 / 60 + 32 / 3600) * math.pi / 12, rtol=ROUNDING)
    assert scene.pair[0].magnitudes == (11.2, 11.9)
    assert_allclose(scene.pair[0].separation, 0.35 * ARCSEC, rtol=ROUNDING)
    assert (scene.pair[0].east, scene.pair[0].north) == (0.0, 0.0)
    assert_allclose(scene.galaxy[0].east, 2 * ARCSEC, rtol=ROUNDING)
    assert scene.galaxy[0].north == 0.0
    assert (scene.disc[0].x, scene.disc[0].y, scene.disc[0].east) == (20.0, 30.0, None)
    assert scene.header == {"OBSERVER": "example"}
    assert [type(one).__name__ for one in scene.objects] == ["Pair", "Galaxy", "Disc", "Ring"]


def test_what_an_absence_means(load):
    scene = load(BARE + "[air]\nseeing = '1 arcsec'\n[camera]\n")
    assert scene.telescope.obstruction == 0.0
    assert scene.telescope.vanes is None
    assert scene.telescope.throughput == 1.0
    assert (scene.air.airmass, scene.air.extinction, scene.air.outer_scale) == (1.0, 0.0, math.inf)
    camera = scene.camera
    assert (camera.quantum_efficiency, camera.gain, camera.bias) == (1.0, 1.0, 0.0)
    assert (camera.read_noise, camera.dark_current, camera.full_well) == (0.0, 0.0, None)
    assert (camera.bit_depth, camera.serial, camera.mirrored) == (16, 0, False)
    assert scene.sky is scene.exposure is scene.pointing is None
    assert scene.pixel_scale is None


@pytest.mark.parametrize(
    ("band", "system"),
    [
        ('name = "V"', "Vega"),
        ('name = "V"\nsystem = "AB"', "AB"),
        ('centre = "600 nm"\nwidth = "50 nm"', "AB"),
        ('centre = "600 nm"\nwidth = "50 nm"\nsystem = "Vega"', "Vega"),
    ],
)
def test_system_of_magnitudes(load, band, system):
    scene = load(f'[telescope]\naperture = "1 m"\n[band]\n{band}\n')
    assert scene.band.resolved_system == system


@pytest.mark.parametrize(("text", "ratio"), [("0.25", 0.25), ('"0.5 m"', 0.25), ('"25 %"', 0.25)])
def test_obstruction_is_a_ratio_or_a_length(load, text, ratio):
    scene = load(GOOD.replace("0.30", text))
    assert_allclose(scene.telescope.obstruction, ratio, rtol=ROUNDING)


def test_a_length_of_obstruction_waits_for_a_good_aperture(load):
    lines = mistakes(load, GOOD.replace("0.30", '"0.5 m"').replace('"2.0 m"', '"2.0 kg"'))
    assert len(lines) == 1
    assert "telescope.aperture" in lines[0]


@pytest.mark.parametrize(
    ("written", "start"),
    [
        ('"2026-04-12T03:00:00Z"', "2026-04-12T03:00:00"),
        ('"2026-04-12 03:00:00.25"', "2026-04-12T03:00:00.250000"),
        ("2026-04-12T03:00:00", "2026-04-12T03:00:00"),
        ("2026-04-12T05:00:00+02:00", "2026-04-12T03:00:00"),
    ],
)
def test_start_is_kept_in_utc(load, written, start):
    scene = load(GOOD.replace('"2026-04-12T03:00:00"', written))
    assert scene.exposure.start == start
    assert scene_from_record(scene_record(scene), name="f", directory=".").exposure.start == start


def test_both_routes_to_the_pixel_scale_may_agree(load):
    scale = 9e-6 / 16 / ARCSEC
    text = GOOD.replace("pixel_size", f'pixel_scale = "{scale:.5f} arcsec"\npixel_size')
    assert_allclose(load(text).pixel_scale, scale * ARCSEC, rtol=1e-4)  # as many digits given


def test_a_scene_is_frozen(load):
    scene = load()
    with pytest.raises(ValidationError):
        scene.title = "other"
    with pytest.raises(ValidationError):
        scene.air.seeing = 0.0
    scene.document["title"] = "other"
    assert scene.document["title"] == "A close pair"


def test_a_scene_survives_pickling(load):
    scene = load()
    again = pickle.loads(pickle.dumps(scene))
    assert again == scene
    assert scene_id(again) == scene_id(scene)


def test_a_byte_order_mark_and_windows_lines_do_no_harm(tmp_path, load):
    path = tmp_path / "other.toml"
    path.write_bytes(b"\xef\xbb\xbf" + GOOD.replace("\n", "\r\n").encode())
    assert scene_id(load_scene(path)) == scene_id(load())


# Overrides and tables taken away.


@pytest.mark.parametrize(
    ("override", "read"),
    [
        ('telescope.aperture="4 m"', lambda s: s.telescope.aperture == 4.0),
        ("telescope.aperture=4 m", lambda s: s.telescope.aperture == 4.0),
        (" telescope.aperture = 4 m ", lambda s: s.telescope.aperture == 4.0),
        ("telescope.obstruction=0.5", lambda s: s.telescope.obstruction == 0.5),
        ("telescope.vanes.count=3", lambda s: s.telescope.vanes.count == 3),
        ("telescope.name=7", lambda s: s.telescope.name == "7"),
        ("title=2026-04-12", lambda s: s.title == "2026-04-12"),
        ("title=true", lambda s: s.title == "true"),
        ("title=a = b", lambda s: s.title == "a = b"),
        ("band.name=R", lambda s: s.band.name == "R"),
        ("camera.pixels=[10, 20]", lambda s: s.camera.pixels == (10, 20)),
        ("camera.pixels.0=10", lambda s: s.camera.pixels == (10, 48)),
        ("camera.mirrored=true", lambda s: s.camera.mirrored),
        ("exposure.start=2026-01-02T03:04:05", lambda s: s.exposure.start[:10] == "2026-01-02"),
        ("pair.0.label=12", lambda s: s.pair[0].label == "12"),
        ("pair[0].magnitudes=[1, 2]", lambda s: s.pair[0].magnitudes == (1.0, 2.0)),
        ("pair.0.magnitudes[1]=10", lambda s: s.pair[0].magnitudes == (11.2, 10.0)),
        ("header.NIGHT=4", lambda s: s.header["NIGHT"] == 4),
        ("header.4=4", lambda s: s.header["4"] == 4),
        ("star=[{magnitude = 3}]", lambda s: s.star[0].magnitude == 3.0),
        # What excludes the given key gives way to it.
        ("air.image_quality=1 arcsec", lambda s: s.air.seeing is None),
        ("air.altitude=50 deg", lambda s: s.air.airmass is None),
        ("camera.pixel_scale=0.5 arcsec", lambda s: s.camera.pixel_size is None),
        ("sky.electrons=5", lambda s: s.sky.surface_brightness is None),
        ("pair.0.electrons=[5, 6]", lambda s: s.pair[0].magnitudes is None),
    ],
)
def test_override(load, override, read):
    assert read(load(overrides=[override]))


def test_later_overrides_win_and_build_on_one_another(load):
    scene = load(
        BARE,
        overrides=["band.name=V", "air.seeing=1 arcsec", "air.seeing=2 arcsec", "sky.electrons=3"],
    )
    assert scene.band.name == "V"
    assert scene.band.centre is scene.band.width is None
    assert_allclose(scene.air.seeing, 2 * ARCSEC, rtol=ROUNDING)
    assert scene.sky.electrons == 3.0


def test_a_place_is_changed_as_a_whole(load):
    scene = load(overrides=["disc.0.east=1 arcsec"])
    assert scene.disc[0].x is scene.disc[0].y is None


@pytest.mark.parametrize(
    ("override", "key", "word"),
    [
        ("telescope.aperture", "telescope.aperture", "KEY=VALUE"),
        ("=3", '""', "KEY=VALUE"),
        ("..=3", "..", "KEY=VALUE"),
        ("a..b=3", "a..b", "KEY=VALUE"),
        ("[0].x=3", "[0].x", "KEY=VALUE"),
        ("pair.1.separation=1 arcsec", "pair.1.separation", "pair.0"),
        ("pair.separation=1 arcsec", "pair.separation", "pair.0"),
        ("pair.-1.separation=1 arcsec", "pair.-1.separation", "pair.0"),
        ("pair.99999999999999999999.x=1", "pair.", "pair.0"),
        ("star.0.magnitude=1", "star.0.magnitude", "[[star]]"),
        ("title.x=1", "title.x", "title"),
        ("title.x.y=1", "title.x.y", "title"),
        ("base=other.toml", "base", "scene file"),
        ("telescope.aperture=4", "telescope.aperture", '"4 m"'),
        ("telescope.aperture=nan", "telescope.aperture", "finite"),
        ("telescope.aparture=4 m", "telescope.aparture", '"aperture"'),
        ("telescop.aperture=4 m", "telescop", '"telescope"'),
        ("camera=3", "camera", "table"),
        ("exposure.seed=" + "9" * 5000, "exposure.seed", "whole"),
        ("exposure.count=1\nseed = 3", "exposure.count", "whole"),
        ("telescope.name=" + "[" * 10000, "telescope.name", "10000"),
        ("\x1b[2J=3", "", "KEY=VALUE"),
    ],
)
def test_wrong_override(load, override, key, word):
    lines = mistakes(load, overrides=[override])
    assert any(key in line and word in line for line in lines), lines
    for line in lines:
        assert "--set" in line
        assert "; " in line
        assert line.isprintable()


def test_without(load):
    scene = load(without=["air", "sky", "vanes", "pair", "header"])
    assert scene.air is scene.sky is scene.telescope.vanes is None
    assert scene.pair == ()
    assert scene.header == {}
    assert load(without=["telescope.vanes", "[air]"]).air is None
    assert load(BARE, without=["air", "vanes"]).air is None


def test_a_table_is_taken_away_before_it_is_set(load):
    scene = load(without=["air"], overrides=["air.seeing=2 arcsec"])
    assert scene.air.extinction == 0.0


@pytest.mark.parametrize(
    ("name", "word"),
    [
        ("telescope", "cannot"),
        ("ari", '"air"'),
        ("vans", '"vanes"'),
        ("adaptation", "one of"),
        ("", "one of"),
    ],
)
def test_wrong_without(load, name, word):
    (line,) = mistakes(load, without=[name])
    assert line.startswith("--without: ")
    assert word in line


# A base.


def test_base(tmp_path, load):
    (tmp_path / "station.toml").write_text(
        BARE + '[camera]\npixels = [8, 8]\npixel_size = "9 um"\n[air]\nseeing = "1 arcsec"\n'
        "airmass = 2.0\n[header]\nA = 1\nB = 2\n[[star]]\nmagnitude = 3\n"
    )
    scene = load(
        'base = "station.toml"\ntitle = "above"\n[band]\nname = "V"\n[camera]\npixels = [9, 9]\n'
        'pixel_scale = "1 arcsec"\n[air]\nimage_quality = "2 arcsec"\n[header]\nB = 3\n'
        "[[star]]\nmagnitude = 4\n"
    )
    assert scene.title == "above"
    assert scene.telescope.aperture == 1.0
    assert scene.band.name == "V"
    assert scene.camera.pixels == (9, 9)
    assert scene.camera.pixel_size is None
    assert scene.air.seeing is None
    assert scene.air.airmass == 2.0
    assert scene.header == {"A": 1, "B": 3}
    assert [one.magnitude for one in scene.star] == [4.0]
    assert "base" not in scene.document


def test_a_mistake_names_the_file_in_which_it_stands(tmp_path, load):
    (tmp_path / "station.toml").write_text(BARE.replace('"1 m"', '"1 kg"'))
    lines = mistakes(load, 'base = "station.toml"\ntitel = "x"\n')
    assert lines[0].startswith(f"{tmp_path / 'station.toml'}: telescope.aperture: ")
    assert lines[1].startswith(f"{tmp_path / 'scene.toml'}: titel: ")


def test_paths_in_a_base_are_relative_to_the_base(tmp_path, load):
    (tmp_path / "a" / "b").mkdir(parents=True)
    (tmp_path / "a" / "b" / "map.fits").write_bytes(b"map")
    (tmp_path / "a" / "b" / "low.toml").write_text(
        BARE.replace("[band]", 'pupil = "map.fits"\n[band]')
    )
    (tmp_path / "a" / "mid.toml").write_text('base = "b/low.toml"\n')
    scene = load('base = "a/mid.toml"\n')
    assert scene.telescope.pupil == "a/b/map.fits"
    assert scene.inputs["a/b/map.fits"].read() == b"map"


def test_a_ring_of_bases_is_refused(tmp_path, load):
    (tmp_path / "a.toml").write_text('base = "scene.toml"\n')
    (line,) = mistakes(load, 'base = "a.toml"\n')
    assert "leads back" in line


def test_a_tower_of_bases_is_refused(tmp_path, load):
    for index in range(10):
        (tmp_path / f"{index}.toml").write_text(f'base = "{index + 1}.toml"\n')
    (line,) = mistakes(load, 'base = "0.toml"\n')
    assert "too many" in line


# Files, record, identity.

PICTURE = '\n[[picture]]\nfile = "data/spiral.png"\nwidth = "5 arcsec"\nmagnitude = 12\n'


@pytest.fixture
def pictured(tmp_path, load):
    (tmp_path / "data").mkdir()
    (tmp_path / "data" / "spiral.png").write_bytes(b"png")
    return load(GOOD + PICTURE)


def test_files_are_read_and_hashed(pictured, tmp_path):
    one = pictured.inputs["data/spiral.png"]
    assert one.content == one.read() == b"png"
    assert one.sha256 == hashlib.sha256(b"png").hexdigest()
    assert one.path == tmp_path / "data" / "spiral.png"


def test_record_makes_the_scene_again_without_the_files(pictured, tmp_path):
    record = scene_record(pictured)
    assert [name for name, _, _ in record] == ["scene.toml", "data/spiral.png"]
    for _, sha256, content in record:
        assert hashlib.sha256(content).hexdigest() == sha256
    (tmp_path / "data" / "spiral.png").unlink()
    again = scene_from_record(record, name="frame.fits", directory=tmp_path)
    assert scene_id(again) == scene_id(pictured)
    assert scene_record(again) == record
    assert again.inputs["data/spiral.png"].read() == b"png"
    assert str(tmp_path) not in record[0][2].decode()


def test_record_holds_the_scene_as_run(load):
    scene = load(overrides=["telescope.aperture=3 m"], without=["air"])
    again = scene_from_record(scene_record(scene), name="frame.fits", directory=".")
    assert again.telescope.aperture == 3.0
    assert again.air is None
    changed = scene_from_record(
        scene_record(scene), name="frame.fits", directory=".", overrides=["exposure.seed=5"]
    )
    assert changed.exposure.seed == 5


def test_a_large_file_is_kept_by_its_hash(tmp_path, load):
    (tmp_path / "data").mkdir()
    path = tmp_path / "data" / "spiral.png"
    path.write_bytes(b"x" * (LARGEST_KEPT + 1))
    scene = load(GOOD + PICTURE)
    one = scene.inputs["data/spiral.png"]
    assert one.content is None
    assert one.read() == path.read_bytes()
    record = scene_record(scene)
    assert record[1][2] == b""
    again = scene_from_record(record, name="frame.fits", directory=tmp_path)
    assert scene_id(again) == scene_id(scene)
    path.write_bytes(b"y" * (LARGEST_KEPT + 1))
    with pytest.raises(InputError, match="changed"):
        one.read()
    (line,) = mistakes(scene_from_record, record, name="frame.fits", directory=tmp_path)
    assert "frame.fits: picture.0.file: " in line
    path.unlink()
    with pytest.raises(InputError, match="no such file"):
        one.read()
    (line,) = mistakes(scene_from_record, record, name="frame.fits", directory=tmp_path)
    assert one.sha256 in line
    # A frame whose picture is not wanted any more does not need the file.
    scene_from_record(record, name="frame.fits", directory=tmp_path, without=["picture"])


def test_an_empty_file_is_not_a_missing_one(tmp_path, load):
    (tmp_path / "data").mkdir()
    (tmp_path / "data" / "spiral.png").write_bytes(b"")
    record = scene_record(load(GOOD + PICTURE))
    (tmp_path / "data" / "spiral.png").unlink()
    again = scene_from_record(record, name="frame.fits", directory=tmp_path)
    assert again.inputs["data/spiral.png"].read() == b""


@pytest.mark.parametrize(
    ("damage", "word"),
    [
        (lambda _: [], "empty"),
        (lambda r: [(r[0][0], r[0][1], r[0][2] + b" "), r[1]], "damaged"),
        (lambda r: [(r[0][0], r[0][1], b""), r[1]], "damaged"),
        (lambda r: [r[0], (r[1][0], r[1][1], b"other")], "damaged"),
        (lambda r: [(r[0][0], hashlib.sha256(b"base='x'").hexdigest(), b"base='x'")], "base"),
        (lambda r: [(r[0][0], hashlib.sha256(b"a=").hexdigest(), b"a=")], "TOML"),
    ],
)
def test_a_damaged_record_is_refused(pictured, tmp_path, damage, word):
    record = damage(scene_record(pictured))
    lines = mistakes(scene_from_record, record, name="frame.fits", directory=tmp_path)
    assert all(line.startswith("frame.fits: ") for line in lines)
    assert any(word in line for line in lines)


def test_identity(load, tmp_path):
    first = scene_id(load())
    assert first == scene_id(load("# a comment\n" + GOOD.replace(" = ", "=")))
    assert first != scene_id(load(overrides=["exposure.seed=1"]))
    assert len(first) == 64
    (tmp_path / "data").mkdir()
    (tmp_path / "data" / "spiral.png").write_bytes(b"1")
    one = scene_id(load(GOOD + PICTURE))
    (tmp_path / "data" / "spiral.png").write_bytes(b"2")
    assert one != scene_id(load(GOOD + PICTURE))


def test_scene_text_is_the_same_document(load):
    scene = load()
    assert tomllib.loads(scene_text(scene)) == scene.document == tomllib.loads(GOOD)


# Changes in Python.


def test_replace(pictured, tmp_path):
    (tmp_path / "data" / "spiral.png").unlink()
    other = replace(
        pictured,
        {
            "air.image_quality": "0.5 arcsec",
            "exposure.seed": np.int64(7),
            "telescope.obstruction": np.float64(0.25),
            "camera.pixels": np.array([4, 5]),
            "pair.0.separation": "1 arcsec",
            "sky": None,
            "telescope.vanes": None,
            "ring.0": None,
            "band": {"name": "R"},
        },
    )
    assert other.air.seeing is None
    assert other.exposure.seed == 7
    assert other.telescope.obstruction == 0.25
    assert other.camera.pixels == (4, 5)
    assert other.sky is other.telescope.vanes is None
    assert other.ring == ()
    assert other.band.name == "R"
    assert pictured.sky is not None
    assert other.inputs == pictured.inputs
    assert scene_id(other) != scene_id(pictured)
    assert scene_from_record(scene_record(other), name="f", directory=".") == scene_from_record(
        scene_record(other), name="f", directory="."
    )


def test_wrong_replace(load):
    scene = load()
    lines = mistakes(replace, scene, {"pair.3.x": 1, "a..b": 2, "title": object()})
    assert len(lines) == 3
    assert mistakes(replace, scene, {"air.seeing": math.nan})[0].startswith(scene.where)


# What a scene leaves unsaid.


def test_what_an_exposure_needs(load):
    assert requirements_to_expose(load()) == []
    lines = requirements_to_expose(load(BARE + "[[star]]\nmagnitude = 3\n"))
    keys = [line.split(": ")[1] for line in lines]
    assert keys == ["camera.pixels", "camera.pixel_scale", "exposure.time"]
    assert all("; add " in line for line in lines)


@pytest.mark.parametrize(
    ("extra", "needed"),
    [
        ("[[star]]\nelectrons = 3\n", False),
        ("[[pair]]\nelectrons = [3, 4]\nseparation = '1 arcsec'\n", False),
        ("[[pair]]\nmagnitudes = [3, 4]\nseparation = '1 arcsec'\n", True),
        ("[[star]]\nelectrons = 3\n[sky]\nelectrons = 3\n", False),
        ("[[star]]\nelectrons = 3\n[sky]\nsurface_brightness = 21\n", True),
        ("[[catalogue]]\nfile = 'scene.toml'\n", True),
        ("[[catalogue]]\nfile = 'scene.toml'\ncolumns = { electrons = 'n' }\n", False),
    ],
)
def test_time_is_needed_unless_every_signal_is_in_electrons(load, extra, needed):
    camera = "[camera]\npixels = [8, 8]\npixel_scale = '1 arcsec'\n"
    assert bool(requirements_to_expose(load(BARE + camera + extra))) is needed
    dark = camera + "dark_current = '1 electron/s'\n"
    assert requirements_to_expose(load(BARE + dark + extra))


def test_defaults_used(load):
    rows = {key: (value, meaning) for key, value, meaning in defaults_used(load(BARE))}
    assert set(rows) == {
        "telescope.obstruction",
        "telescope.vanes",
        "telescope.throughput",
        "telescope.wavefront",
        "telescope.field",
        "air",
        "correction",
        "band.nodes",
        "band.system",
        "camera",
        "sky",
        "exposure",
        "pointing",
    }
    assert rows["band.system"][0] == "AB"
    rows = {key: value for key, value, _ in defaults_used(load())}
    assert "telescope.obstruction" not in rows
    assert rows["pair.0.east"] == "0 arcsec"
    assert rows["galaxy.0.sersic_index"] == "1"
    assert rows["camera.rotation"] == "0 deg"
    assert "disc.0.east" not in rows
    assert "air.altitude" not in rows
    assert "air.airmass" not in {
        k for k, _, _ in defaults_used(load(overrides=["air.altitude=50 deg"]))
    }


def test_defaults_of_many_objects_share_a_row(load):
    text = BARE + "[[star]]\nmagnitude = 3\n[[star]]\nmagnitude = 4\neast = '1 arcsec'\n"
    rows = {key: meaning for key, _, meaning in defaults_used(load(text))}
    assert rows["star.*.east"].endswith("(1 of 2)")
    assert rows["star.*.north"].endswith("(2 of 2)")


def test_starter_scene_can_be_exposed(load):
    scene = load(STARTER)
    assert requirements_to_expose(scene) == []
    assert scene.pair
    assert scene.star


def test_reading_a_scene_imports_nothing_slow(tmp_path):
    (tmp_path / "scene.toml").write_text(GOOD)
    code = (
        "import sys; from simimg.scene.file import load_scene; load_scene(sys.argv[1]); "
        "sys.exit(', '.join({'astropy', 'scipy', 'matplotlib', 'tomlkit'} & set(sys.modules)) or 0)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path / "scene.toml")],
        check=False,
        capture_output=True,
        text=True,
    )
    assert done.stderr.strip() == ""
    assert done.returncode == 0
