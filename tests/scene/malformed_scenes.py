"""Scenes with one mistake each, as a plain table that other tests may load too.

Each row is the content of a scene file, the key that a line must name and a word of that line.
"""

from __future__ import annotations

from tests.scene.malformed_real import MALFORMED_REAL
from tests.scene.rows import Malformed, replaced

GOOD = """\
title = "A close pair"

[telescope]
name = "Saltmarsh 2 m"
aperture = "2.0 m"
obstruction = 0.30
vanes = { count = 4, width = "20 mm", angle = "45 deg" }
throughput = 0.78
focal_length = "16 m"

[air]
seeing = "0.9 arcsec"
outer_scale = "25 m"
airmass = 1.2
extinction = 0.14

[band]
name = "V"
system = "Vega"

[camera]
name = "Camera A"
pixels = [64, 48]
pixel_size = "9 um"
quantum_efficiency = 0.88
gain = "1.4 electron/adu"
read_noise = "5 electron"
dark_current = "0.02 electron/s"
bias = "400 adu"
full_well = "90000 electron"
bit_depth = 16

[sky]
surface_brightness = 21.4

[exposure]
time = "30 s"
count = 1
seed = 20260412
start = "2026-04-12T03:00:00"

[header]
OBSERVER = "example"

[pointing]
ra = "05:34:32"
dec = "-05:23:28"

[[pair]]
label = "SR-014"
magnitudes = [11.2, 11.9]
separation = "0.35 arcsec"
position_angle = "62 deg"

[[galaxy]]
east = "2 arcsec"
magnitude = 15.0
effective_radius = "1 arcsec"

[[disc]]
x = 20
y = 30
electrons = 1e5
diameter = "1 arcsec"
phase_angle = "60 deg"

[[ring]]
ra = "05:34:32"
dec = "-05:23:27"
electrons = 1e5
inner_diameter = "1 arcsec"
outer_diameter = "2 arcsec"
"""


def edit(old: str, new: str) -> bytes:
    """The good scene with one piece of it replaced."""
    return replaced(GOOD, old, new)


def add(text: str) -> bytes:
    """The good scene with tables added."""
    return (GOOD + text).encode()


def _row(name: str, old: str, new: str, key: str, word: str) -> Malformed:
    return Malformed(name, edit(old, new), key, word)


def picture(file: str) -> bytes:
    """The good scene with a picture from the given file, which is written as TOML."""
    return add(f'\n[[picture]]\nfile = {file}\nwidth = "2 arcsec"\nmagnitude = 12\n')


def catalogue(line: str) -> bytes:
    """The good scene with a catalogue that has one more line."""
    return add(f'\n[[catalogue]]\nfile = "stars.csv"\n{line}\n')


def _without_band() -> bytes:
    return edit('[band]\nname = "V"\nsystem = "Vega"\n', "")


SIZE = 'pixel_size = "9 um"\n'

MALFORMED: list[Malformed] = [
    # The text of the file.
    Malformed("empty file", b"", "telescope", "required"),
    Malformed("not UTF-8", b'title = "\xff\xfe"\n', "line 1", "UTF-8"),
    Malformed("binary", bytes(range(256)), "line 2", "UTF-8"),
    Malformed("nested without end", b"a = " + b"[" * 5000, "", "nested"),
    Malformed("tables in tables", b"[" + b".".join([b"a"] * 40) + b"]\n", "", "nested"),
    Malformed("a key of many parts", b".".join([b"a"] * 5000) + b" = 1\n", "line 1", "long"),
    Malformed("a number without end", b"count = " + b"9" * 5000, "", "number"),
    _row("unquoted quantity", '"2.0 m"', "2.0 m", "line 5", '"2.0 m"'),
    _row("no value", 'aperture = "2.0 m"', "aperture =", "line 5", "aperture"),
    _row("open quote", '"2.0 m"', '"2.0 m', "line 5", "TOML"),
    _row("open bracket", "[64, 48]", "[64, 48", "line", "TOML"),
    _row("key twice", "bit_depth = 16", "bit_depth = 16\nbit_depth = 12", "line", "second time"),
    _row("table twice", "[sky]", "[sky]\nelectrons = 1\n[sky]", "line", "second time"),
    # Keys.
    _row("misspelt key", "aperture", "apperture", "telescope.apperture", '"aperture"'),
    _row("key of another table", "[sky]", '[sky]\nseeing = "1 arcsec"', "sky.seeing", "[air]"),
    _row("unknown table", "[sky]", "[ski]", "ski", '"sky"'),
    _row("unknown key on top", "title", "titel", "titel", '"title"'),
    _row("missing aperture", 'aperture = "2.0 m"\n', "", "telescope.aperture", "required"),
    _row("missing band", '[band]\nname = "V"\nsystem = "Vega"', "", "band", "required"),
    _row("missing separation", 'separation = "0.35 arcsec"', "", "pair.0.separation", "required"),
    _row("missing dec", 'dec = "-05:23:28"', "", "pointing.dec", "required"),
    _row("odd key", "[sky]", '[sky]\n"a b\\u001b" = 1', "sky", "known"),
    Malformed("a later table", add("\n[[cluster]]\ncount = 3\n"), "cluster", "known"),
    Malformed(
        "a key misspelt",
        edit("[sky]", "[corection]\nactuators = 9\n[sky]"),
        "corection",
        "did you mean",
    ),
    # Kinds of value.
    _row("bare aperture", '"2.0 m"', "2.0", "telescope.aperture", '"2.0 m"'),
    _row("bare number as text", '"2.0 m"', '"2.0"', "telescope.aperture", '"2.0 m"'),
    _row("aperture true", '"2.0 m"', "true", "telescope.aperture", "length"),
    _row("aperture array", '"2.0 m"', "[2.0]", "telescope.aperture", "length"),
    _row("aperture words", '"2.0 m"', '"two metres"', "telescope.aperture", "length"),
    _row("aperture empty", '"2.0 m"', '""', "telescope.aperture", "empty"),
    _row("aperture in seconds", '"2.0 m"', '"2.0 s"', "telescope.aperture", "unit of time"),
    _row("unknown unit", '"2.0 m"', '"2.0 mms"', "telescope.aperture", "unknown unit"),
    _row("aperture nan", '"2.0 m"', '"nan m"', "telescope.aperture", "finite"),
    _row("aperture infinite", '"2.0 m"', '"inf m"', "telescope.aperture", "finite"),
    _row("aperture overflows", '"2.0 m"', '"1e308 km"', "telescope.aperture", "finite"),
    _row("aperture too long", '"2.0 m"', f'"{"9" * 500} m"', "telescope.aperture", "characters"),
    Malformed("table is a number", b"band = 3\n" + _without_band(), "band", "one table"),
    _row(
        "vanes a number", '{ count = 4, width = "20 mm", angle = "45 deg" }', "4", "vanes", "table"
    ),
    _row("title a number", '"A close pair"', "7", "title", "text"),
    _row("title unprintable", '"A close pair"', '"a\\u0007"', "title", "printed"),
    _row("name too long", '"Saltmarsh 2 m"', f'"{"x" * 69}"', "telescope.name", "69"),
    _row("seed a fraction", "seed = 20260412", "seed = 0.5", "exposure.seed", "whole"),
    _row("seed huge", "seed = 20260412", f"seed = 0x{'f' * 4000}", "exposure.seed", "huge"),
    _row("ratio infinite", "throughput = 0.78", "throughput = inf", "throughput", "finite"),
    _row("ratio nan", "throughput = 0.78", "throughput = nan", "throughput", "finite"),
    _row("date wrong", "2026-04-12T03:00:00", "12.4.2026", "exposure.start", "date"),
    _row("date too early", "2026-04-12T03", "0001-01-01T03", "exposure.start", "1900"),
    _row("date a number", '"2026-04-12T03:00:00"', "2026", "exposure.start", "date"),
    # Ranges.
    _row("aperture zero", '"2.0 m"', '"0 m"', "telescope.aperture", "at least"),
    _row("aperture negative", '"2.0 m"', '"-2.0 m"', "telescope.aperture", "at least"),
    _row("obstruction one", "0.30", "1.0", "telescope.obstruction", "below 1"),
    _row("obstruction above", "0.30", "1.3", "telescope.obstruction", "1.3"),
    _row("obstruction negative", "0.30", "-0.1", "telescope.obstruction", "at least"),
    _row("obstruction wide", "0.30", '"2.1 m"', "telescope.obstruction", "aperture"),
    _row("vanes wide", '"20 mm"', '"3 m"', "telescope.vanes.width", "aperture"),
    _row("no vane", "count = 4", "count = 0", "telescope.vanes.count", "from 1"),
    _row("throughput zero", "throughput = 0.78", "throughput = 0", "telescope.throughput", "above"),
    _row("seeing zero", '"0.9 arcsec"', '"0 arcsec"', "air.seeing", "at least"),
    _row(
        "one layer in single brackets",
        "[band]",
        "[air.layer]\nshare = 1\n[band]",
        "air.layer",
        "[[",
    ),
    _row("layer of no height", "[band]", "[[air.layer]]\n[band]", "air.layer.0.height", "required"),
    _row(
        "layers without turbulence",
        "[band]",
        '[[air.layer]]\nheight = "1 km"\nshare = 0\n[band]',
        "air.layer.0.share",
        "no turbulence",
    ),
    _row(
        "wind without a unit",
        "[band]",
        '[[air.layer]]\nheight = "1 km"\nwind = 10\n[band]',
        "air.layer.0.wind",
        "m/s",
    ),
    _row(
        "more layers than can be",
        "[band]",
        '[[air.layer]]\nheight = "1 km"\n' * 65 + "[band]",
        "air.layer",
        "65 layers",
    ),
    _row(
        "correction of one actuator",
        "[band]",
        "[correction]\nactuators = 1\n[band]",
        "correction.actuators",
        "from 2 to 200",
    ),
    _row(
        "correction without a mirror",
        "[band]",
        "[correction]\n[band]",
        "correction.actuators",
        "required",
    ),
    _row(
        "guide of another kind",
        "[band]",
        '[correction]\nactuators = 8\nguide = "lamp"\n[band]',
        "correction.guide",
        "star, laser",
    ),
    _row(
        "rate without a unit",
        "[band]",
        "[correction]\nactuators = 8\nrate = 1000\n[band]",
        "correction.rate",
        "Hz",
    ),
    _row("airmass below one", "airmass = 1.2", "airmass = 0.9", "air.airmass", "at least 1"),
    _row("extinction negative", "0.14", "-0.14", "air.extinction", "at least"),
    _row("efficiency above", "= 0.88", "= 1.1", "camera.quantum_efficiency", "at most"),
    _row("no column", "[64, 48]", "[0, 48]", "camera.pixels", "from 1"),
    _row("too many pixels", "[64, 48]", "[64, 40000]", "camera.pixels", "32768"),
    _row("pixels one number", "[64, 48]", "64", "camera.pixels", "array"),
    _row("three sides", "[64, 48]", "[64, 48, 2]", "camera.pixels", "array of 2"),
    _row("pixels in text", "[64, 48]", '["64", "48"]', "camera.pixels", "whole"),
    _row("gain zero", '"1.4 electron/adu"', '"0 electron/adu"', "camera.gain", "at least"),
    _row("gain upside down", '"1.4 electron/adu"', '"0.7 adu/electron"', "camera.gain", "unit"),
    _row("noise negative", '"5 electron"', '"-5 electron"', "camera.read_noise", "at least"),
    _row("noise bare", '"5 electron"', "5", "camera.read_noise", '"5 electron"'),
    _row("well zero", '"90000 electron"', '"0 electron"', "camera.full_well", "above"),
    _row("too many bits", "bit_depth = 16", "bit_depth = 64", "camera.bit_depth", "from 1"),
    _row("bias above the top", '"400 adu"', '"70000 adu"', "camera.bias", "largest count"),
    _row("time zero", 'time = "30 s"', 'time = "0 s"', "exposure.time", "above"),
    _row("time bare", 'time = "30 s"', "time = 30", "exposure.time", '"30 s"'),
    _row("no exposure", "count = 1\n", "count = 0\n", "exposure.count", "from 1"),
    _row("too many exposures", "count = 1\n", "count = 200000\n", "exposure.count", "100000"),
    _row("seed negative", "seed = 20260412", "seed = -1", "exposure.seed", "from 0"),
    _row("declination past the pole", '"-05:23:28"', '"95 deg"', "pointing.dec", "at most"),
    _row("seconds past 60", '"-05:23:28"', '"-05:23:61"', "pointing.dec", "below 60"),
    _row("no separation", '"0.35 arcsec"', '"0 arcsec"', "pair.0.separation", "above 0"),
    _row("separation bare", '"0.35 arcsec"', "0.35", "pair.0.separation", '"0.35 arcsec"'),
    _row("one magnitude", "[11.2, 11.9]", "[11.2]", "pair.0.magnitudes", "array of 2"),
    _row("magnitude nan", "[11.2, 11.9]", "[11.2, nan]", "pair.0.magnitudes", "finite"),
    _row(
        "electrons negative",
        "electrons = 1e5\ndia",
        "electrons = -1\ndia",
        "disc.0.electrons",
        "above",
    ),
    _row("phase too large", '"60 deg"', '"180 deg"', "disc.0.phase_angle", "at most"),
    # Keys together.
    _row(
        "two seeings", "[air]", '[air]\nimage_quality = "1 arcsec"', "air.image_quality", "seeing"
    ),
    _row("no seeing", 'seeing = "0.9 arcsec"\n', "", "air.seeing", "required"),
    _row("two airmasses", "[air]", '[air]\naltitude = "50 deg"', "air.altitude", "airmass"),
    _row("two bands", "[band]", '[band]\ncentre = "550 nm"', "band.centre", "band.name"),
    _row("half a band", 'name = "V"', 'centre = "550 nm"', "band.width", "required"),
    _row("no band", 'name = "V"\n', "", "band.name", "required"),
    _row("unknown band", 'name = "V"', 'name = "v"', "band.name", '"V"'),
    _row("two bands by file", "[band]", '[band]\nfile = "scene.toml"', "band.file", "band.name"),
    _row("missing band file", 'name = "V"', 'file = "v.dat"', "band.file", "no such file"),
    _row("band to zero", 'name = "V"', 'centre = "200 nm"\nwidth = "400 nm"', "band.width", "1.9"),
    _row("no Vega there", 'name = "V"', 'centre = "9 um"\nwidth = "1 um"', "band.system", "Vega"),
    _row("unknown system", '"Vega"', '"vega"', "band.system", '"Vega"'),
    _row("two scales", SIZE, SIZE + 'pixel_scale = "0.2 arcsec"\n', "camera.pixel_scale", "0.116"),
    _row("no focal length", 'focal_length = "16 m"\n', "", "telescope.focal_length", "required"),
    _row("huge pixel", SIZE, 'pixel_size = "0.5 m"\n', "camera.pixel_size", "1 deg"),
    _row("two skies", "[sky]", "[sky]\nelectrons = 3", "sky.electrons", "contradicts"),
    _row("empty sky", "surface_brightness = 21.4", "", "sky.surface_brightness", "required"),
    _row("map and vanes", "[air]", 'pupil = "scene.toml"\n[air]', "telescope.vanes", "map"),
    _row(
        "two brightnesses",
        "[11.2, 11.9]",
        "[11, 12]\nelectrons = [1, 2]",
        "pair.0.electrons",
        "second",
    ),
    _row("no brightness", "magnitudes = [11.2, 11.9]\n", "", "pair.0.magnitudes", "required"),
    _row(
        "singular of a pair",
        "magnitudes = [11.2, 11.9]",
        "magnitude = 11",
        "pair.0.magnitude",
        "pair",
    ),
    _row("two places", "x = 20\n", 'x = 20\neast = "1 arcsec"\n', "disc.0.x", "second time"),
    _row("half a place", "y = 30\n", "", "disc.0.y", "required"),
    _row("nowhere to point", "[pointing]\n", "[header.x]\n", "ring.0.ra", "[pointing]"),
    _row(
        "behind the pointing",
        '"05:34:32"\ndec = "-05:23:27"',
        '"17:34:32"\ndec = "5 deg"',
        "ring.0.ra",
        "deg",
    ),
    _row(
        "ring of no width",
        'inner_diameter = "1',
        'inner_diameter = "2',
        "ring.0.inner_diameter",
        "below",
    ),
    _row("single brackets", "[[galaxy]]", "[galaxy]", "galaxy", "[[galaxy]]"),
    _row("array of telescopes", "[telescope]", "[[telescope]]", "telescope", "one table"),
    Malformed("numbers for stars", b"star = [1]\n" + GOOD.encode(), "star.0", "table"),
    Malformed("a number for stars", b"star = 1\n" + GOOD.encode(), "star", "[[star]]"),
    Malformed(
        "too many stars",
        b"star = [" + b"{},\n" * 10001 + b"]\n" + GOOD.encode(),
        "star",
        "too many",
    ),
    # The header.
    _row("long keyword", "OBSERVER", "OBSERVERS", "header.OBSERVERS", "keyword"),
    _row("small keyword", "OBSERVER", "observer", "header.observer", "OBSERVER"),
    _row("reserved keyword", "OBSERVER", "NAXIS1", "header.NAXIS1", "keyword"),
    _row("keyword array", '"example"', "[1]", "header.OBSERVER", "type list"),
    _row("keyword nan", 'OBSERVER = "example"', "DOME = nan", "header.DOME", "finite"),
    _row("keyword too long", '"example"', f'"{"x" * 3000}"', "header.OBSERVER", "2000"),
    _row("header an array", "[header]\n", "[[header]]\n", "header", "table"),
    # Files.
    Malformed("missing picture", picture('"no.png"'), "picture.0.file", "no such file"),
    Malformed("picture is a folder", picture('"."'), "picture.0.file", "regular"),
    Malformed("picture without end", picture('"/dev/zero"'), "picture.0.file", "regular"),
    Malformed("picture with a NUL", picture('"a\\u0000b"'), "picture.0.file", "path"),
    Malformed("picture a number", picture("3"), "picture.0.file", "path"),
    Malformed("missing catalogue", catalogue(""), "catalogue.0.file", "no such file"),
    Malformed(
        "unknown column", catalogue('columns = { esat = "dx" }'), "catalogue.0.columns", '"east"'
    ),
    Malformed(
        "half a column place",
        catalogue('columns = { east = "dx" }'),
        "catalogue.0.columns.north",
        "required",
    ),
    Malformed(
        "column a number",
        catalogue("columns = { east = 3 }"),
        "catalogue.0.columns",
        "name of a column",
    ),
    Malformed("columns a list", catalogue('columns = ["dx"]'), "catalogue.0.columns", "table"),
    Malformed("wrong unit", catalogue('units = { east = "kg" }'), "catalogue.0.units.east", "unit"),
    _row(
        "missing map",
        "obstruction = 0.30\nvanes",
        'pupil = "no.fits" #',
        "telescope.pupil",
        "no such file",
    ),
    # Bands, efficiencies and vanes in more than one way.
    _row("no vane count", "count = 4, ", "", "telescope.vanes.count", "required"),
    _row("Vega in g", 'name = "V"', 'name = "g"', "band.system", "Vega"),
    _row(
        "longer than the dish",
        'name = "V"\nsystem = "Vega"',
        'centre = "1 m"\nwidth = "0.1 m"',
        "telescope.aperture",
        "wavelengths",
    ),
    _row("no efficiency table", "= 0.88", '= "no.ecsv"', "camera.quantum_eff", "no such file"),
    _row("efficiency too high", "= 0.88", '= "101 %"', "camera.quantum_eff", "at most 1"),
    _row("efficiency empty", "= 0.88", '= ""', "camera.quantum_eff", "empty"),
    _row("efficiency a list", "= 0.88", "= [0.8]", "camera.quantum_eff", "ratio"),
    # A base.
    Malformed("missing base", b'base = "no.toml"\n' + GOOD.encode(), "base", "no such file"),
    Malformed("base a number", b"base = 3\n" + GOOD.encode(), "base", "path"),
    Malformed("base inside", edit("[sky]", '[sky]\nbase = "b.toml"'), "sky.base", "known"),
    *MALFORMED_REAL,
]
