"""What a scene may say of a real telescope, and what it becomes."""

import math

import pytest
from numpy.testing import assert_allclose

from simimg.errors import InputError
from simimg.optics.segments import segmented_pupil
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
from simimg.scene.segments import Segments
from tests.scene.malformed_real import REAL
from tests.scene.malformed_scenes import GOOD
from tests.scene.rows import replaced

ARCSEC = math.pi / 648000
DEGREE = math.pi / 180
YEAR = 365.25 * 86400
# A factor and a product of doubles.
ROUNDING = 1e-14

BARE = """\
[telescope]
aperture = "1 m"
[band]
centre = "600 nm"
width = "50 nm"
"""
CAMERA = '[camera]\npixels = [8, 8]\npixel_scale = "1 arcsec"\n'


@pytest.fixture
def load(tmp_path):
    def _load(text=REAL, **options):
        (tmp_path / "scene.toml").write_text(text)
        return load_scene(tmp_path / "scene.toml", **options)

    return _load


def near(actual, desired):
    assert_allclose(actual, desired, rtol=ROUNDING, atol=0)


def mistakes(call, *args, **options):
    with pytest.raises(InputError) as caught:
        call(*args, **options)
    return caught.value.lines


def test_telescope_in_si(load):
    telescope = load().telescope
    near(telescope.obstruction_offset, (0.1, -0.05))
    assert telescope.vanes.count is None
    near(telescope.vanes.angles, [10 * DEGREE, 130 * DEGREE, 250 * DEGREE])
    assert telescope.vanes.directions == telescope.vanes.angles
    assert telescope.apodisation == 0.8
    segments = telescope.segments
    assert (segments.rings, segments.missing_centre, segments.seed) == (2, True, 3)
    near((segments.width, segments.gap, segments.piston), (1.32, 7e-3, 20e-9))
    near(segments.tip_tilt, 0.01 * ARCSEC)
    wavefront = telescope.wavefront
    assert list(wavefront.zernike) == [4, 7]
    near(list(wavefront.zernike.values()), [60e-9, -30e-9])
    near(wavefront.defocus, 1e-4)
    near(wavefront.polishing.rms, 20e-9)
    assert (wavefront.polishing.slope, wavefront.polishing.seed) == (2.5, 1)
    assert wavefront.file == "scene.toml"
    field = telescope.field
    near((field.radius, field.coma, field.curvature), (600 * ARCSEC, 100e-9, 150e-9))
    assert field.distortion == 0.001


def test_air_band_and_camera_in_si(load):
    scene = load()
    near((scene.air.pressure, scene.air.temperature), (78000.0, 280.15))
    near((scene.air.relative_humidity, scene.air.parallactic_angle), (0.3, 25 * DEGREE))
    assert scene.air.dispersion is True
    assert scene.air.dispersion_corrector is False
    assert (scene.band.file, scene.band.nodes) == ("scene.toml", 9)
    assert scene.camera.quantum_efficiency == "scene.toml"
    assert (scene.psf.file, scene.psf.oversampling) == ("scene.toml", 4.0)


def test_what_moves_in_si(load):
    scene = load()
    near(scene.pointing.jitter, (0.05 * ARCSEC, 0.03 * ARCSEC))
    near(scene.pointing.drift.rate, 0.02 * ARCSEC)
    near(scene.pointing.drift.position_angle, math.pi / 2)
    near(scene.pointing.rotation_rate, 15 * ARCSEC)
    assert scene.pointing.track == "comet"
    assert (scene.pointing.ra, scene.pointing.dec) == (0.0, 0.0)
    near(scene.star[0].motion.rate, 30 * ARCSEC / 3600)
    near(scene.star[0].motion.position_angle, math.pi / 4)
    near(scene.disc[0].motion.rate, 0.005 * ARCSEC / YEAR)
    assert scene.disc[0].motion.position_angle == 0.0


def test_orbit_and_colours_in_si(load):
    scene = load()
    bound, wide = scene.pair
    orbit = bound.orbit
    near((orbit.period, orbit.semi_major_axis), (41.6 * YEAR, 0.9 * ARCSEC))
    assert (orbit.periastron, orbit.eccentricity) == (1934.0, 0.28)
    angles = (orbit.inclination, orbit.node, orbit.argument)
    near(angles, (59 * DEGREE, 24 * DEGREE, 220 * DEGREE))
    assert bound.separation is None
    assert bound.temperatures == (9000.0, 4000.0)
    assert wide.spectra == ("scene.toml", "scene.toml")
    near(wide.separation, ARCSEC)
    assert wide.orbit is None
    star = scene.star[0]
    assert (star.temperature, star.magnitude_band, star.magnitude_system) == (5800.0, "V", "AB")
    assert scene.galaxy[0].spectrum == "scene.toml"
    assert scene.disc[0].spectral_index == -2.0
    catalogue = scene.catalogue[0]
    assert (catalogue.magnitude_band, catalogue.columns) == ("K", {"temperature": "teff"})
    assert [one.coloured for one in scene.objects] == [True, True, True, True, True]


def test_what_an_absence_means(load):
    scene = load(
        BARE + CAMERA + "[pointing]\n[air]\nseeing = '1 arcsec'\n[[star]]\nmagnitude = 3\n"
        "[telescope.wavefront]\n[telescope.field]\nradius = '1 arcmin'\n"
        "[telescope.segments]\nrings = 1\nwidth = '0.35 m'\n"
    )
    telescope = scene.telescope
    assert telescope.obstruction_offset is telescope.pupil is None
    assert telescope.apodisation == 1.0
    assert (telescope.wavefront.zernike, telescope.wavefront.defocus) == ({}, 0.0)
    assert telescope.wavefront.polishing is telescope.wavefront.file is None
    assert (telescope.field.coma, telescope.field.curvature, telescope.field.distortion) == (0,) * 3
    segments = telescope.segments
    assert (segments.gap, segments.piston, segments.tip_tilt, segments.seed) == (0, 0, 0, 0)
    assert segments.missing_centre is False
    air = scene.air
    assert (air.pressure, air.temperature, air.relative_humidity) == (101325.0, 288.15, 0.0)
    assert (air.dispersion, air.dispersion_corrector, air.parallactic_angle) == (False, False, 0.0)
    assert scene.band.nodes is scene.psf is None
    pointing = scene.pointing
    assert (pointing.ra, pointing.dec, pointing.rotation_rate) == (0, 0, 0)
    assert pointing.jitter == (0.0, 0.0)
    assert pointing.drift is pointing.track is None
    star = scene.star[0]
    assert star.motion is star.temperature is star.spectrum is star.spectral_index is None
    assert star.magnitude_band is star.magnitude_system is None
    assert not star.coloured


def test_jitter_of_both_axes(load):
    scene = load(BARE + '[pointing]\njitter = "0.1 arcsec"\n')
    near(scene.pointing.jitter, (0.1 * ARCSEC, 0.1 * ARCSEC))


@pytest.mark.parametrize(("rings", "gap"), [(1, 0.0), (2, 0.007), (5, 0.05)])
def test_segments_span_the_circle_about_their_corners(rings, gap):
    segments = Segments.model_validate({"rings": rings, "width": "1.3 m", "gap": f"{gap} m"})
    built = segmented_pupil(rings, width=1.3, gap=gap, samples=16)
    near(segments.diameter, built.pupil.diameter)


def test_evenly_spread_vanes_have_directions(load):
    vanes = load(GOOD).telescope.vanes
    near(vanes.directions, [math.radians(45 + 90 * one) for one in range(4)])


@pytest.mark.parametrize(
    ("band", "system"),
    [
        ('name = "g"', "AB"),
        ('name = "z"\nsystem = "AB"', "AB"),
        ('name = "K"', "Vega"),
        ('file = "scene.toml"', "AB"),
        ('file = "scene.toml"\nsystem = "Vega"', "Vega"),
    ],
)
def test_system_of_magnitudes(load, band, system):
    scene = load(f'[telescope]\naperture = "1 m"\n[band]\n{band}\n')
    assert scene.band.resolved_system == system


@pytest.mark.parametrize(
    ("aperture", "centre", "width"),
    [("1 m", "120 nm", "20 nm"), ("10 m", "100 um", "30 um"), ("100 m", "21 cm", "1 cm")],
)
def test_far_ultraviolet_to_radio(load, aperture, centre, width):
    scene = load(
        f'[telescope]\naperture = "{aperture}"\n[band]\ncentre = "{centre}"\nwidth = "{width}"\n'
    )
    assert scene.band.resolved_system == "AB"


@pytest.mark.parametrize(("text", "value"), [("0.5", 0.5), ('"88 %"', 0.88), ('"a/qe.txt"', None)])
def test_efficiency_is_a_number_or_a_file(load, tmp_path, text, value):
    (tmp_path / "a").mkdir()
    (tmp_path / "a" / "qe.txt").write_text("table")
    scene = load(BARE + f"[camera]\nquantum_efficiency = {text}\n")
    if value is None:
        assert scene.camera.quantum_efficiency == "a/qe.txt"
        assert scene.inputs["a/qe.txt"].read() == b"table"
    else:
        near(scene.camera.quantum_efficiency, value)
        assert scene.inputs == {}


@pytest.mark.parametrize(
    ("place", "text"),
    [
        ("band.file", REAL.replace('file = "scene.toml"\nsystem', 'file = "x"\nsystem')),
        ("psf.file", REAL.replace('[psf]\nfile = "scene.toml"', '[psf]\nfile = "x"')),
        ("camera.quantum_efficiency", REAL.replace('efficiency = "scene.toml"', 'efficiency="x"')),
        ("telescope.wavefront.file", REAL.replace('1 }\nfile = "scene.toml"', '1 }\nfile = "x"')),
        ("galaxy.0.spectrum", REAL.replace('spectrum = "scene.toml"', 'spectrum = "x"')),
        ("pair.1.spectra.0", REAL.replace('["scene.toml", ', '["x", ')),
        ("pair.1.spectra.1", REAL.replace(', "scene.toml"]', ', "x"]')),
    ],
)
def test_every_file_is_an_input_and_travels_with_the_frame(load, tmp_path, place, text):
    (line,) = mistakes(load, text)
    assert f": {place}: no such file" in line
    (tmp_path / "x").write_bytes(b"data")
    scene = load(text)
    assert scene.inputs["x"].read() == b"data"
    (tmp_path / "x").unlink()
    again = scene_from_record(scene_record(scene), name="frame.fits", directory=tmp_path)
    assert again.inputs["x"].read() == b"data"
    assert scene_id(again) == scene_id(scene)
    (tmp_path / "x").symlink_to("/dev/zero")
    (line,) = mistakes(load, text)
    assert "regular file" in line


def test_files_of_a_base_are_relative_to_the_base(tmp_path, load):
    (tmp_path / "a").mkdir()
    for name in ("map.fits", "filter.dat", "qe.dat", "one.dat", "two.dat"):
        (tmp_path / "a" / name).write_text(name)
    (tmp_path / "a" / "base.toml").write_text(
        '[telescope]\naperture = "1 m"\nwavefront = { file = "map.fits" }\n'
        '[band]\nfile = "filter.dat"\n[camera]\nquantum_efficiency = "qe.dat"\n'
        '[[pair]]\nelectrons = [1, 2]\nseparation = "1 arcsec"\nspectra = ["one.dat", "two.dat"]\n'
    )
    scene = load('base = "a/base.toml"\n')
    assert scene.telescope.wavefront.file == "a/map.fits"
    assert scene.pair[0].spectra == ("a/one.dat", "a/two.dat")
    assert set(scene.inputs) == {
        f"a/{name}" for name in ("map.fits", "filter.dat", "qe.dat", "one.dat", "two.dat")
    }


def test_scene_text_reads_back(load, tmp_path):
    scene = load()
    (tmp_path / "again.toml").write_text(scene_text(scene))
    again = load_scene(tmp_path / "again.toml")
    assert again.document == scene.document
    assert again == again.made_from(
        scene.document,
        name="again.toml",
        where=again.where,
        directory=again.directory,
        inputs=again.inputs,
    )
    assert again.telescope == scene.telescope
    assert again.pair == scene.pair


@pytest.mark.parametrize(
    ("override", "read"),
    [
        ("telescope.wavefront.zernike.4=10 nm", lambda s: s.telescope.wavefront.zernike[4] == 1e-8),
        ("telescope.wavefront.zernike.11=1 um", lambda s: len(s.telescope.wavefront.zernike) == 3),
        (
            "telescope.wavefront.polishing.slope=3",
            lambda s: s.telescope.wavefront.polishing.slope == 3,
        ),
        ("telescope.vanes.angles.0=0 deg", lambda s: s.telescope.vanes.angles[0] == 0.0),
        ("telescope.vanes.count=3", lambda s: s.telescope.vanes.angles is None),
        ("band.name=r", lambda s: s.band.file is None),
        ("camera.quantum_efficiency=0.5", lambda s: s.camera.quantum_efficiency == 0.5),
        ("pointing.jitter=0 arcsec", lambda s: s.pointing.jitter == (0.0, 0.0)),
        ("pointing.drift.rate=0 deg/h", lambda s: s.pointing.drift.rate == 0.0),
        ("star.0.spectral_index=1", lambda s: s.star[0].temperature is None),
        ("star.0.electrons=5", lambda s: s.star[0].magnitude is s.star[0].magnitude_band is None),
        ("pair.0.separation=1 arcsec", lambda s: s.pair[0].orbit is None),
        ("pair.0.orbit.eccentricity=0", lambda s: s.pair[0].orbit.eccentricity == 0.0),
        ("pair.1.temperatures=['1 K', '2 K']", lambda s: s.pair[1].spectra is None),
        ("telescope.pupil=scene.toml", lambda s: s.telescope.segments is s.telescope.vanes is None),
        ("air.dispersion_corrector=true", lambda s: s.air.dispersion_corrector),
    ],
)
def test_override(load, override, read):
    assert read(load(overrides=[override]))


def test_a_table_that_an_override_begins_displaces_its_rivals(load):
    text = BARE.replace("[band]", 'pupil = "scene.toml"\n[band]')
    scene = load(text, overrides=["telescope.segments.rings=1", "telescope.segments.width=0.35 m"])
    assert scene.telescope.pupil is None
    assert scene.telescope.segments.rings == 1


def test_a_base_gives_way_key_by_key(tmp_path, load):
    (tmp_path / "station.toml").write_text(REAL)
    scene = load(
        'base = "station.toml"\n[telescope]\nvanes = { count = 4 }\n'
        "[telescope.wavefront]\nzernike = { 4 = '5 nm', 11 = '7 nm' }\n[band]\nname = 'V'\n"
    )
    assert scene.telescope.vanes.angles is None
    near(scene.telescope.vanes.width, 0.05)
    near(list(scene.telescope.wavefront.zernike.values()), [5e-9, -30e-9, 7e-9])
    assert scene.band.file is None


def test_without(load):
    scene = load(without=["wavefront", "telescope.segments", "field", "psf", "[vanes]"])
    telescope = scene.telescope
    assert telescope.wavefront is telescope.segments is telescope.field is telescope.vanes is None
    assert scene.psf is None


def test_replace(load):
    scene = load()
    other = replace(
        scene,
        {
            "telescope.wavefront.zernike": {4: "10 nm"},
            "pair.0.orbit": None,
            "pair.0.separation": "1 arcsec",
            "star.0.motion": {"rate": "1 arcsec/s"},
        },
    )
    near(other.telescope.wavefront.zernike[4], 1e-8)
    assert other.pair[0].orbit is None
    near(other.star[0].motion.rate, ARCSEC)


def test_what_an_exposure_needs(load):
    assert requirements_to_expose(load()) == []
    lines = requirements_to_expose(
        load(replaced(REAL, 'start = "1980-01-01T00:00:00"', "").decode())
    )
    assert [line.split(": ")[1] for line in lines] == ["exposure.start"]
    assert "pair.0.orbit" in lines[0]


@pytest.mark.parametrize(
    ("extra", "cause"),
    [
        ("[pointing]\ndrift = { rate = '1 arcsec/s' }\n", "pointing.drift"),
        ("[pointing]\nrotation_rate = '1 arcsec/s'\n", "pointing.rotation_rate"),
        ("[[star]]\nelectrons = 3\nmotion = { rate = '1 arcsec/s' }\n", "star.0.motion"),
        ("[pointing]\njitter = '1 arcsec'\n", None),
    ],
)
def test_what_moves_needs_a_time(load, extra, cause):
    lines = requirements_to_expose(load(BARE + CAMERA + extra))
    assert [line.split(": ")[1] for line in lines] == (["exposure.time"] if cause else [])
    assert cause is None or cause in lines[0]


def test_a_measured_psf_needs_no_seeing(load):
    text = BARE + CAMERA + "[air]\nextinction = 0.1\n"
    (line,) = mistakes(load, text)
    assert "air.seeing: is required" in line
    scene = load(text + '[psf]\nfile = "scene.toml"\n')
    assert scene.air.seeing is scene.air.image_quality is scene.psf.oversampling is None
    assert scene.air.airmass == 1.0


def test_another_system_of_the_same_band_needs_no_colour(load):
    text = BARE + '[[star]]\nmagnitude = 3\nmagnitude_system = "Vega"\n'
    assert load(text).star[0].magnitude_system == "Vega"
    text = text.replace('centre = "600 nm"\nwidth = "50 nm"', 'name = "V"')
    scene = load(text + 'magnitude_band = "V"\n')
    assert scene.star[0].magnitude_band == "V"


def test_defaults_hang_on_what_is_used(load):
    rows = {key: value for key, value, _ in defaults_used(load(GOOD))}
    assert rows["air.dispersion"] == "false"
    assert rows["telescope.wavefront"] == rows["telescope.field"] == "none"
    assert rows["pointing.drift"] == "none"
    assert rows["pair.0.temperatures"] == "none"
    assert rows["galaxy.0.temperature"] == "none"
    assert not {"air.pressure", "air.temperature", "air.dispersion_corrector"} & set(rows)
    rows = {
        key: value for key, value, _ in defaults_used(load(GOOD, overrides=["air.dispersion=true"]))
    }
    assert rows["air.pressure"] == "1013.25 hPa"
    assert rows["air.dispersion_corrector"] == "false"
    rows = {key: value for key, value, _ in defaults_used(load())}
    assert rows["disc.0.motion.position_angle"] == "0 deg"
    assert "telescope.vanes.angle" not in rows
    assert "pair.*.position_angle" in rows
    assert "disc.0.temperature" not in rows
    assert "star.0.temperature" not in rows
    assert "telescope.obstruction" not in rows
