"""limits: every figure that is promised, as text and as JSON."""

import math
from pathlib import Path

import pytest

KEYS = {
    "version",
    "scene_id",
    "simulated",
    "warnings",
    "wavelength_nm",
    "pixel_scale_arcsec",
    "r0_m",
    "diffraction",
    "delivered",
    "dawes_arcsec",
    "strehl",
    "ee50_arcsec",
    "ee80_arcsec",
    "nyquist_pixel_arcsec",
    "objects",
}
OBJECT_KEYS = {"label", "kind", "electrons", "peak_electrons", "saturated", "snr", "snr_fit"}
PAIR_KEYS = {"separation_arcsec", "position_angle_deg", "diffraction", "delivered"}
RESOLUTION_KEYS = {"fwhm_arcsec", "rayleigh_arcsec", "sparrow_arcsec"}


def test_json_holds_what_is_promised(run, scene):
    result = run("limits", scene, "--json")
    assert (result.code, result.err) == (0, "")
    found = result.json
    assert set(found) >= KEYS
    for name in ("diffraction", "delivered"):
        assert set(found[name]) >= RESOLUTION_KEYS
    by_label = {one["label"]: one for one in found["objects"]}
    assert set(by_label) == {"SR-1", "far off"}
    assert set(by_label["far off"]) >= OBJECT_KEYS
    pair = by_label["SR-1"]
    assert set(pair) >= OBJECT_KEYS | PAIR_KEYS
    assert set(pair["delivered"]) >= RESOLUTION_KEYS
    assert len(pair["electrons"]) == 2
    assert pair["electrons"][0] > pair["electrons"][1]


def test_figures_that_a_hand_can_check(run, scene):
    found = run("limits", scene, "--json").json
    # lambda/2D in arcsec, and 116 mm / D.
    half = found["wavelength_nm"] * 1e-9 / (2 * 0.5) * math.degrees(1) * 3600
    assert found["nyquist_pixel_arcsec"] == pytest.approx(half, rel=1e-9)
    assert found["dawes_arcsec"] == pytest.approx(116 / 500, rel=1e-12)
    # First dark ring at an obstruction of 0.3: 1.1145 lambda/D, published to four digits.
    assert found["diffraction"]["rayleigh_arcsec"] == pytest.approx(1.1145 * 2 * half, rel=1e-4)
    assert found["delivered"]["fwhm_arcsec"] > found["diffraction"]["fwhm_arcsec"]


def test_above_the_air_and_without_a_pixel(run, scene):
    arguments = ["--without", "air", "--without", "camera", "--without", "sky", "--json"]
    narrow = ["--set", 'band.centre="550 nm"', "--set", 'band.width="0.1 nm"']
    found = run("limits", scene, *arguments, *narrow).json
    assert found["r0_m"] is None
    assert found["air"] is None
    assert found["pixel_scale_arcsec"] is None
    assert found["strehl"] == pytest.approx(1)
    assert found["delivered"]["fwhm_arcsec"] == pytest.approx(found["diffraction"]["fwhm_arcsec"])


def test_as_text(run, scene):
    result = run("limits", scene)
    assert result.code == 0
    for word in ("Rayleigh", "Sparrow", "Dawes", "Strehl", "Nyquist", "SR-1", '2.4"', "62 deg"):
        assert word in result.out
    assert "confirmed with the observatory" in result.err


def test_direction(run, scene):
    vanes = "telescope.vanes={count=2, width='60 mm', angle='0 deg'}"
    arguments = ["limits", scene, "--set", vanes, "--without", "air", "--json"]
    found = [
        run(*arguments, "--position-angle", angle).json["diffraction"]["fwhm_arcsec"]
        for angle in ("0", "90", "180 deg")
    ]
    # Two vanes broaden the pattern along one direction; it is the same the other way round.
    assert abs(found[0] - found[1]) > 0.005 * found[0]
    assert found[2] == pytest.approx(found[0], rel=1e-6)


def test_stars_of_a_catalogue(run, scene, folder):
    (folder / "stars.csv").write_text("dx,dy,m,who\n1,2,14,A\n3,-2,15,B\n")
    columns = '{ east = "dx", north = "dy", magnitude = "m", label = "who" }'
    units = '{ east = "arcsec", north = "arcsec" }'
    more = f'\n[[catalogue]]\nfile = "stars.csv"\ncolumns = {columns}\nunits = {units}\n'
    (folder / scene).write_text((folder / scene).read_text() + more)
    assert len(run("limits", scene, "--json").json["objects"]) == 2
    labels = [one["label"] for one in run("limits", scene, "--json", "--all").json["objects"]]
    assert sorted(labels) == ["A", "B", "SR-1", "far off"]


def test_of_a_frame(run, scene):
    run("expose", scene, "-o", "frame.fits", "--quiet")
    assert run("limits", "frame.fits", "--json").json == run("limits", scene, "--json").json


def test_quiet_holds_back_the_notes_alone(run, scene):
    arguments = ["limits", scene, "--set", "camera.bias=0 adu"]
    loud, still = run(*arguments), run(*arguments, "--quiet")
    assert loud.out == still.out
    assert "warning: camera.bias" in loud.err
    assert still.err == ""


ORBIT = """
[[pair]]
label = "turning"
magnitudes = [12, 12.5]
orbit = { period = "41.623 yr", periastron = 1934.008, eccentricity = 0.2763, \
semi_major_axis = "0.907 arcsec", inclination = "59.025 deg", node = "23.717 deg", \
argument = "219.907 deg" }
"""


def test_dates_tabulate_an_orbit(run, scene):
    """Meeus, example 57.a: 0.411 arcsec at 1980.0; no exposure.start is needed."""
    Path(scene).write_text(Path(scene).read_text() + ORBIT)
    found = run("limits", scene, "--dates", "1980:2020:10", "--json").json
    assert [row["date"] for row in found["ephemeris"]] == [1980, 1990, 2000, 2010, 2020]
    assert found["ephemeris"][0]["separation_arcsec"] == pytest.approx(0.41102, abs=1e-4)
    assert {"position_angle_deg", "rayleigh", "sparrow", "label"} <= set(found["ephemeris"][0])
    checked = run("check", scene, "--json").json
    assert found["scene_id"] == checked["scene_id"]
    assert any("exposure.start" in line for line in checked["to_expose"])
    # The objects are listed as of the first date, to the second.
    (turning,) = [one for one in found["objects"] if one["label"] == "turning"]
    assert turning["separation_arcsec"] == pytest.approx(0.41102, abs=1e-4)
    assert " 1977.5 " in run("limits", scene, "--dates", "1977.5:1980:2.5").out
    for dates in ("-1000:-990:10", "20000:20010:10", "1980.5:1980.5:1"):
        assert run("limits", scene, "--dates", dates, "--quiet").code == 0


@pytest.mark.parametrize("dates", ["1980", "1990:1980:1", "1:2:0", "a:b:c", "0:1e9:1"])
def test_impossible_dates(run, scene, dates):
    done = run("limits", scene, "--dates", dates)
    assert done.code == 2
    assert "START:STOP:STEP" in done.err


def test_an_orbit_without_a_date_says_both_mends(run, scene):
    Path(scene).write_text(Path(scene).read_text() + ORBIT)
    done = run("limits", scene)
    assert done.code == 2
    assert done.out == ""
    assert "exposure.start" in done.err
    assert "--dates" in done.err


def test_how_fast_the_air_changes_and_over_which_angle(run, scene):
    found = run("limits", scene, "--json").json["air"]
    assert found["coherence_time_ms"] == pytest.approx(31.4 * found["fried_m"])
    assert found["isoplanatic_angle_arcsec"] is None
    layer = 'air.layer=[{ height = "10 km", wind = "20 m/s" }]'
    found = run("limits", scene, "--set", layer, "--json").json["air"]
    assert found["coherence_time_ms"] == pytest.approx(15.7 * found["fried_m"])
    angle = math.degrees(0.314e-4 * found["fried_m"]) * 3600
    assert found["isoplanatic_angle_arcsec"] == pytest.approx(angle)
