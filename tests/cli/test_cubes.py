"""Cubes on the command line: made, measured by a method, and refused where a frame is meant."""

import pytest

FILM = ["--set", "exposure.frame_time=10 ms", "--set", "exposure.count=20"]


@pytest.fixture
def cube(run, scene):
    made = run("expose", scene, *FILM, "--set", "band.nodes=1", "-o", "cube.fits", "-q")
    assert (made.code, made.err) == (0, "")
    return "cube.fits"


def test_a_cube_is_measured_by_a_method(run, cube):
    told = run("measure", cube, "--method", "sum", "--json").json
    (pair,) = told["pairs"]
    assert pair["truth"]["separation_arcsec"] == pytest.approx(2.4)
    assert told["simulated"] is True


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["measure", "cube.fits"], "simimg measure --method speckle"),
        (["figure", "cube.fits", "-o", "f.png"], "simimg measure --method speckle"),
        (["measure", "cube.fits", "--method", "lucky", "--keep", "0%"], "no share above 0"),
    ],
)
def test_what_a_cube_is_not_for(run, cube, files, arguments, says):  # noqa: ARG001
    result = run(*arguments)
    assert result.code == 2
    assert says in " ".join(result.err.split())
    assert files() == ["cube.fits", "tiny.toml"]
