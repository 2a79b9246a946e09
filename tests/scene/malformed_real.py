"""Scenes of a real telescope (wavefront, segments, colours, motion) with one mistake each."""

from __future__ import annotations

from tests.scene.rows import Malformed, replaced

REAL = """\
[telescope]
aperture = "6.5 m"
obstruction = 0.2
obstruction_offset = ["0.1 m", "-0.05 m"]
vanes = { angles = ["10 deg", "130 deg", "250 deg"], width = "50 mm" }
focal_length = "130 m"
apodisation = 0.8

[telescope.segments]
rings = 2
width = "1.32 m"
gap = "7 mm"
piston = "20 nm"
tip_tilt = "0.01 arcsec"
missing_centre = true
seed = 3

[telescope.wavefront]
zernike = { 4 = "60 nm", 7 = "-30 nm" }
defocus = "0.1 mm"
polishing = { rms = "20 nm", slope = 2.5, seed = 1 }
file = "scene.toml"

[telescope.field]
radius = "10 arcmin"
coma = "100 nm"
curvature = "150 nm"
distortion = 0.001

[air]
seeing = "0.7 arcsec"
altitude = "50 deg"
pressure = "780 hPa"
temperature = "7 degC"
relative_humidity = "30 %"
parallactic_angle = "25 deg"
dispersion = true
dispersion_corrector = false

[band]
file = "scene.toml"
system = "AB"
nodes = 9

[camera]
pixels = [64, 48]
pixel_size = "9 um"
quantum_efficiency = "scene.toml"

[exposure]
time = "30 s"
start = "1980-01-01T00:00:00"

[pointing]
jitter = ["0.05 arcsec", "0.03 arcsec"]
drift = { rate = "0.02 arcsec/s", position_angle = "90 deg" }
rotation_rate = "15 arcsec/s"
track = "comet"

[psf]
file = "scene.toml"
oversampling = 4

[[star]]
label = "comet"
magnitude = 14.0
magnitude_band = "V"
magnitude_system = "AB"
temperature = "5800 K"
motion = { rate = "30 arcsec/h", position_angle = "45 deg" }

[[pair]]
magnitudes = [5.0, 7.0]
temperatures = ["9000 K", "4000 K"]

[pair.orbit]
period = "41.6 yr"
periastron = 1934.0
eccentricity = 0.28
semi_major_axis = "0.9 arcsec"
inclination = "59 deg"
node = "24 deg"
argument = "220 deg"

[[pair]]
magnitudes = [5.0, 7.0]
magnitude_band = "g"
spectra = ["scene.toml", "scene.toml"]
separation = "1 arcsec"

[[galaxy]]
magnitude = 15.0
effective_radius = "1 arcsec"
spectrum = "scene.toml"

[[disc]]
electrons = 1e5
diameter = "1 arcsec"
spectral_index = -2.0
motion = { rate = "5 mas/yr" }

[[catalogue]]
file = "scene.toml"
columns = { temperature = "teff" }
units = { temperature = "K" }
magnitude_band = "K"
"""
"""A scene of a real telescope that names itself wherever a file is wanted."""


# Where the keys of a real telescope stand.
_W, _S, _V, _F = (f"telescope.{name}." for name in ("wavefront", "segments", "vanes", "field"))
_OFFSET = "telescope.obstruction_offset"


def _real(name: str, old: str, new: str, key: str, word: str, *more: str) -> Malformed:
    """A row; `more` are further pieces of the scene to be replaced, and what by."""
    return Malformed(name, replaced(REAL, old, new, *more), key, word)


MALFORMED_REAL: list[Malformed] = [
    # The wavefront.
    _real("zernike a list", '{ 4 = "60 nm", 7 = "-30 nm" }', "[4]", _W + "zernike", "table"),
    _real("piston term", '4 = "60 nm"', '1 = "60 nm"', _W + "zernike", "from 2 to 100"),
    _real("term too high", '4 = "60 nm"', '101 = "60 nm"', _W + "zernike", "from 2 to 100"),
    _real("term in words", '4 = "60 nm"', 'coma = "60 nm"', _W + "zernike", '"coma"'),
    _real("bare term", '4 = "60 nm"', "4 = 60", _W + "zernike", "needs a unit"),
    _real("term in arcsec", '"60 nm"', '"60 arcsec"', _W + "zernike", "unit of angle"),
    _real("bare defocus", '"0.1 mm"', "0.1", _W + "defocus", "needs a unit"),
    _real("defocus too far", '"0.1 mm"', '"11 m"', _W + "defocus", "at most 10 m"),
    _real(
        "defocus without a focal length",
        'focal_length = "130 m"\n',
        "",
        "telescope.focal_length",
        "wavefront.defocus",
    ),
    _real("negative polishing", 'rms = "20 nm"', 'rms = "-1 nm"', _W + "polishing.rms", "least"),
    _real("polishing no rms", 'rms = "20 nm", ', "", _W + "polishing.rms", "required"),
    _real("polishing slope", "slope = 2.5", "slope = 7", _W + "polishing.slope", "at most 6"),
    _real("polishing seed", "seed = 1 }", "seed = -1 }", _W + "polishing.seed", "from 0"),
    _real(
        "polishing a length",
        '{ rms = "20 nm", slope = 2.5, seed = 1 }',
        '"20 nm"',
        _W + "polishing",
        "rms =",
    ),
    _real(
        "no map",
        'file = "scene.toml"\n\n[telescope.field]',
        'file = "no.fits"\n\n[telescope.field]',
        _W + "file",
        "no such file",
    ),
    _real("misspelt wavefront key", "defocus", "defocs", _W + "defocs", '"defocus"'),
    # Segments, obstruction, vanes, apodisation.
    _real("no ring", "rings = 2", "rings = 0", "telescope.segments.rings", "from 1"),
    _real("rings missing", "rings = 2\n", "", "telescope.segments.rings", "required"),
    _real("segments no width", 'width = "1.32 m"\n', "", "telescope.segments.width", "required"),
    _real("segments wide", '"1.32 m"', '"3 m"', "telescope.segments.width", "corner to corner"),
    _real("gap negative", '"7 mm"', '"-7 mm"', "telescope.segments.gap", "at least"),
    _real("gap wide", '"7 mm"', '"2 m"', "telescope.segments.gap", "less than width"),
    _real("piston negative", '"20 nm"\ntip', '"-2 nm"\ntip', "telescope.segments.piston", "least"),
    _real("tilt a length", '"0.01 arcsec"', '"1 nm"', "telescope.segments.tip_tilt", "length"),
    _real("centre in words", "= true\nseed", '= "yes"\nseed', _S + "missing_centre", "true"),
    _real("segment seed", "seed = 3", "seed = 0.5", "telescope.segments.seed", "whole"),
    _real("segments a number", "[telescope.segments]", "segments = 3\n[x]", _S[:-1], "table"),
    _real("map and segments", "focal_length", 'pupil = "scene.toml"\nfocal_length', _S[:-1], "map"),
    _real(
        "map and apodisation",
        "focal_length",
        'pupil = "scene.toml"\nfocal_length',
        "telescope.apodisation",
        "map",
    ),
    _real(
        "map and offset",
        "focal_length",
        'pupil = "scene.toml"\nfocal_length',
        "telescope.obstruction_offset",
        "map",
    ),
    _real("apodised to nothing", "apodisation = 0.8", "apodisation = 0", "telescope.apo", "above"),
    _real("offset of one", '["0.1 m", "-0.05 m"]', '"0.1 m"', _OFFSET, "array of 2"),
    _real("offset bare", '["0.1 m", "-0.05 m"]', "[0.1, 0]", _OFFSET, "needs a unit"),
    _real("offset too far", '["0.1 m", "-0.05 m"]', '["3 m", "0 m"]', _OFFSET, "inside"),
    _real("offset of nothing", "obstruction = 0.2\n", "", "telescope.obstruction", "beside"),
    _real("offset of zero", "obstruction = 0.2\n", "obstruction = 0\n", _OFFSET, "obstruction"),
    _real("count and angles", "{ angles", "{ count = 3, angles", "telescope.vanes.count", "angles"),
    _real(
        "angle and angles", "{ angles", '{ angle = "1 deg", angles', "telescope.vanes.angle", "angl"
    ),
    _real("no vane angle", '["10 deg", "130 deg", "250 deg"]', "[]", _V + "angles", "array"),
    _real("bare vane angle", '"130 deg"', "130", _V + "angles", "needs a unit"),
    _real(
        "too many angles",
        '["10 deg", "130 deg", "250 deg"]',
        "[" + '"1 deg", ' * 65 + "]",
        _V + "angles",
        "at most 64",
    ),
    # The field.
    _real("field without radius", 'radius = "10 arcmin"\n', "", _F + "radius", "required"),
    _real("field radius zero", '"10 arcmin"', '"0 arcmin"', _F + "radius", "at least"),
    _real("coma an angle", 'coma = "100 nm"', 'coma = "1 arcsec"', _F + "coma", "unit of angle"),
    _real("curvature bare", '"150 nm"', "150", _F + "curvature", "needs a unit"),
    _real("distorted", "distortion = 0.001", "distortion = 0.5", _F + "distortion", "at most 0.3"),
    _real("folded", '"10 arcmin"', '"0.01 arcsec"', _F + "distortion", "corner"),
    # Air and refraction.
    _real("pressure bare", '"780 hPa"', "780", "air.pressure", '"780 hPa"'),
    _real("pressure high", '"780 hPa"', '"20 bar"', "air.pressure", "at most"),
    _real("air too cold", '"7 degC"', '"-101 degC"', "air.temperature", "at least"),
    _real("air humid", '"30 %"', "1.1", "air.relative_humidity", "at most 1"),
    _real("parallactic bare", '"25 deg"', "25", "air.parallactic_angle", "needs a unit"),
    _real("dispersion a number", "dispersion = true", "dispersion = 1", "air.dispersion", "true"),
    _real(
        "corrector in words",
        "corrector = false",
        'corrector = "no"',
        "air.dispersion_corrector",
        "true or false",
    ),
    _real("refraction at the horizon", 'altitude = "50 deg"', "airmass = 39.0", "air.disp", "38"),
    _real(
        "refraction in the far ultraviolet",
        'file = "scene.toml"\nsystem',
        'centre = "170 nm"\nwidth = "5 nm"\nsystem',
        "air.dispersion",
        "180 nm",
    ),
    # Bands and colours.
    _real(
        "band file a number", 'file = "scene.toml"\nsystem', "file = 3\nsystem", "band.file", "pa"
    ),
    _real("file and centre", "nodes = 9", 'centre = "1 um"', "band.centre", "table"),
    _real("no node", "nodes = 9", "nodes = 0", "band.nodes", "from 1"),
    _real("many nodes", "nodes = 9", "nodes = 65", "band.nodes", "to 64"),
    _real("star too cold", '"5800 K"', '"0 K"', "star.0.temperature", "at least"),
    _real("temperature bare", '"5800 K"', "5800", "star.0.temperature", "needs a unit"),
    _real(
        "two colours",
        'temperature = "5800 K"',
        'temperature = "5800 K"\nspectrum = "scene.toml"',
        "star.0.spectrum",
        "second time",
    ),
    _real(
        "a third colour",
        'temperature = "5800 K"',
        'temperature = "5800 K"\nspectral_index = 1',
        "star.0.spectral_index",
        "second time",
    ),
    _real("index too steep", "= -2.0", "= -21", "disc.0.spectral_index", "at least -20"),
    _real(
        "no spectrum", 'spectrum = "scene.toml"', 'spectrum = "no.txt"', "galaxy.0.spectrum", "such"
    ),
    _real(
        "one spectrum", '["scene.toml", "scene.toml"]', '"a.txt"', "pair.1.spectra", "array of 2"
    ),
    _real(
        "a missing spectrum",
        '["scene.toml", "scene.toml"]',
        '["scene.toml", "b.txt"]',
        "pair.1.spectra.1",
        "no such file",
    ),
    _real("one temperature", '["9000 K", "4000 K"]', '["9000 K"]', "pair.0.temperatures", "of 2"),
    _real("temperature of a pair", "temperatures", "temperature", "pair.0.temperature", '["9000'),
    _real("temperatures of a star", 'temperature = "5', 'temperatures = "5', "star.0", "a pair"),
    _real("spectrum of a pair", "spectra =", "spectrum =", "pair.1.spectrum", "spectra"),
    _real(
        "two colours of a pair",
        "temperatures",
        'spectra = ["scene.toml", "scene.toml"]\ntemperatures',
        "pair.0.spectra",
        "second time",
    ),
    _real("unknown other band", 'band = "V"', 'band = "W"', "star.0.magnitude_band", "unknown"),
    _real("no colour to carry", 'temperature = "5800 K"\n', "", "star.0.magnitude_band", "colour"),
    _real(
        "no colours to carry",
        'spectra = ["scene.toml", "scene.toml"]\n',
        "",
        "pair.1.magnitude_band",
        "temperatures",
    ),
    _real(
        "band of electrons", "magnitude = 14.0", "electrons = 5", "star.0.magnitude_band", "electr"
    ),
    _real(
        "Vega in another g",
        'band = "g"',
        'band = "g"\nmagnitude_system = "Vega"',
        "pair.1.magnitude_system",
        "Vega",
    ),
    _real(
        "Vega of stars in z",
        'band = "K"',
        'band = "z"\nmagnitude_system = "Vega"',
        "catalogue.0.magnitude_system",
        "Vega",
    ),
    _real(
        "no Vega in the scene",
        'file = "scene.toml"\nsystem = "AB"',
        'name = "i"',
        "galaxy.0.magnitude_system",
        "Vega",
        "magnitude = 15.0",
        'magnitude = 15.0\nmagnitude_system = "Vega"',
    ),
    _real(
        "system of electrons",
        "electrons = 1e5",
        'electrons = 1e5\nmagnitude_system = "AB"',
        "disc.0.magnitude_system",
        "electrons",
    ),
    _real(
        "celsius of stars",
        'units = { temperature = "K" }',
        'units = { temperature = "degC" }',
        "catalogue.0.units.temperature",
        "absolute",
    ),
    _real(
        "band of electrons in a table",
        '{ temperature = "teff" }',
        '{ electrons = "n" }',
        "catalogue.0.magnitude_band",
        "electrons",
    ),
    # Pointing and motion.
    _real(
        "jitter of three",
        '["0.05 arcsec", "0.03 arcsec"]',
        '["1 mas", "1 mas", "1 mas"]',
        "pointing.jitter",
        "array of 2",
    ),
    _real("jitter negative", '"0.03 arcsec"]', '"-1 arcsec"]', "pointing.jitter", "at least"),
    _real("drift no rate", 'rate = "0.02 arcsec/s", ', "", "pointing.drift.rate", "required"),
    _real("drift an angle", '"0.02 arcsec/s"', '"0.02 arcsec"', "pointing.drift.rate", "angle"),
    _real("drift bare", '"0.02 arcsec/s"', "0.02", "pointing.drift.rate", "arcsec/s"),
    _real("drift far", '"0.02 arcsec/s"', '"1 deg/s"', "pointing.drift.rate", "trail of 30 deg"),
    _real(
        "drift a rate",
        '{ rate = "0.02 arcsec/s", position_angle = "90 deg" }',
        '"1 arcsec/s"',
        "pointing.drift",
        "drift = {",
    ),
    _real(
        "rotation fast",
        '"15 arcsec/s"',
        '"-1 deg/s"',
        "pointing.rotation_rate",
        "once",
        'time = "30 s"',
        'time = "400 s"',
    ),
    _real("rotation bare", '"15 arcsec/s"', "15", "pointing.rotation_rate", "arcsec/s"),
    _real("track of nothing", 'track = "comet"', 'track = "moon"', "pointing.track", "none"),
    _real(
        "track at rest",
        'motion = { rate = "30 arcsec/h", position_angle = "45 deg" }\n',
        "",
        "pointing.track",
        "does not move",
    ),
    _real(
        "track of two", "spectral_index", 'label = "comet"\nspectral_index', "pointing.track", "2"
    ),
    _real("ra alone", "[pointing]", '[pointing]\nra = "1 deg"', "pointing.dec", "beside ra"),
    _real("dec alone", "[pointing]", '[pointing]\ndec = "1 deg"', "pointing.ra", "beside dec"),
    _real(
        "nowhere for a place",
        "electrons = 1e5",
        'ra = "1 deg"\ndec = "1 deg"\nelectrons = 1e5',
        "disc.0.ra",
        "[pointing]",
    ),
    _real("motion fast", '"5 mas/yr"', '"1 deg/s"', "disc.0.motion.rate", "trail"),
    _real("motion no rate", 'rate = "5 mas/yr"', "", "disc.0.motion.rate", "required"),
    _real("motion an angle", '"5 mas/yr"', '"5 mas"', "disc.0.motion.rate", "angle"),
    _real("motion a rate", '{ rate = "5 mas/yr" }', '"5 mas/yr"', "disc.0.motion", "motion = {"),
    _real(
        "motion of a catalogue", 'magnitude_band = "K"', "motion = 3", "catalogue.0.mot", "known"
    ),
    # Orbits.
    _real("no period", 'period = "41.6 yr"\n', "", "pair.0.orbit.period", "required"),
    _real("period zero", '"41.6 yr"', '"0 yr"', "pair.0.orbit.period", "at least"),
    _real("period bare", '"41.6 yr"', "41.6", "pair.0.orbit.period", "needs a unit"),
    _real("periastron a date", "1934.0", '"1934-01-01"', "pair.0.orbit.periastron", "1934.0"),
    _real("open orbit", "0.28", "1.0", "pair.0.orbit.eccentricity", "below 1"),
    _real(
        "orbit of no size", '"0.9 arcsec"', '"0 arcsec"', "pair.0.orbit.semi_major_axis", "above"
    ),
    _real("inclined too far", '"59 deg"', '"181 deg"', "pair.0.orbit.inclination", "at most"),
    _real("node bare", '"24 deg"', "24", "pair.0.orbit.node", "needs a unit"),
    _real("no argument", 'argument = "220 deg"\n', "", "pair.0.orbit.argument", "required"),
    _real(
        "orbit and separation",
        "\n[pair.orbit]",
        'separation = "1 arcsec"\n[pair.orbit]',
        "pair.0.separation",
        "orbit",
    ),
    _real(
        "orbit and angle",
        "\n[pair.orbit]",
        'position_angle = "1 deg"\n[pair.orbit]',
        "pair.0.position_angle",
        "orbit",
    ),
    _real("orbit of a star", "[pair.orbit]", "[star.orbit]", "star.0.orbit", "known"),
    # A measured PSF.
    _real("psf without a file", '[psf]\nfile = "scene.toml"', "[psf]", "psf.file", "required"),
    _real("no psf", '[psf]\nfile = "scene.toml"', '[psf]\nfile = "no.fits"', "psf.file", "such"),
    _real("psf coarse", "oversampling = 4", "oversampling = 0.5", "psf.oversampling", "at least 1"),
    _real("psf without a scale", 'pixel_size = "9 um"\n', "", "psf.file", "pixel scale"),
    _real("two psfs", "[psf]", "[[psf]]", "psf", "one table"),
]
