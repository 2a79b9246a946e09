"""study --pixel-advice and --separation-map: words, JSON, tables, and wrong input."""

import pytest
from astropy.table import Table


def test_pixel_advice(run, scene, files):
    arguments = ["study", scene, "--pixel-advice", "--trials", 0, "--workers", 2, "-o", "p.ecsv"]
    found = run(*arguments, "--json")
    assert (found.code, found.err) == (0, "")
    answer = found.json
    assert answer["finest_arcsec"] <= answer["best_arcsec"] <= answer["coarsest_arcsec"]
    assert answer["own_arcsec"] == pytest.approx(0.4)
    assert answer["reasons"]
    table = Table.read("p.ecsv")
    assert table["pixel_scale"].unit == "arcsec"
    assert list(table["bound_separation"]) == [one["bound_separation"] for one in answer["points"]]
    assert files() == ["p.ecsv", "tiny.toml"]


def test_separation_map(run, scene, files, folder):
    arguments = ["study", scene, "--separation-map", "--workers", 2, "--plot", "m.svg"]
    found = run(*arguments, "--width", "120mm", "--json")
    assert (found.code, found.err) == (0, "")
    assert found.json["caption"].startswith("Simulated: A tiny field. Above: the smallest")
    assert 'width="340.157' in (folder / "m.svg").read_text()[:1500]
    points = found.json["points"]
    assert [one["magnitude_difference"] for one in points][:3] == [0.0, 0.5, 1.0]
    assert points[0]["sparrow_limit"] < points[4]["sparrow_limit"]
    assert found.json["contrast"][-1]["magnitude_difference"] > 1.0
    assert files() == ["m.svg", "tiny.toml"]


@pytest.mark.parametrize(
    "arguments",
    [
        ["--pixel-advice", "--separation-map"],
        ["--pixel-advice", "--vary", "air.seeing=1:2 arcsec:2"],
        ["--separation-map", "--plot", "x.gif"],
        ["--separation-map", "--plot", "x.png", "--width", "1 m"],
        ["--pixel-advice", "--plot", "x.png"],
        ["--separation-map", "--width", "88mm"],
        ["--pixel-advice", "--pair", "nobody"],
        ["--separation-map", "-o", "x.csv"],
    ],
)
def test_wrong_input(run, scene, files, arguments):
    result = run("study", scene, *arguments)
    assert result.code == 2
    assert result.err
    assert files() == ["tiny.toml"]
