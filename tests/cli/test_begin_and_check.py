"""begin writes a scene that runs; check says what a scene means."""

import re

import pytest

from simimg_cli.starter import STARTER


class TestBegin:
    def test_the_scene_is_right_and_warns_of_nothing(self, run, files):
        assert run("begin", "new.toml").code == 0
        assert files() == ["new.toml"]
        result = run("check", "new.toml")
        assert result.code == 0
        assert "ready to expose" in result.out
        assert "warning" not in result.err

    def test_refuses_to_overwrite(self, run, scene, folder):
        before = (folder / scene).read_text()
        result = run("begin", scene)
        assert result.code == 2
        assert "exists already" in result.err
        assert (folder / scene).read_text() == before
        assert run("begin", scene, "--overwrite", "--quiet").out == ""
        assert (folder / scene).read_text() == STARTER

    def test_every_remark_that_shows_a_value_is_right(self, folder, run):
        # Take the # off each table and key that is shown as a remark, one at a time.
        lines = STARTER.split("\n")
        shown = [i for i, line in enumerate(lines) if re.match(r"# (\w+ = |\[)", line)]
        assert len(shown) > 15
        blocks = []
        for i in shown:
            if lines[i].startswith("# [") or i - 1 not in shown:
                blocks.append([])
            blocks[-1].append(i)
        (folder / "stars.csv").write_text("dx,dy,m\n1,2,14\n")
        for block in blocks:
            singles = [block] if lines[block[0]].startswith("# [") else [[i] for i in block]
            for single in singles:
                changed = [
                    line[2:] if i in single else line
                    for i, line in enumerate(lines)
                    # A key is shown in place of another one.
                    if not (line.startswith("seeing") and "image_quality" in lines[single[0]])
                ]
                (folder / "tried.toml").write_text("\n".join(changed))
                result = run("check", "tried.toml")
                assert result.code == 0, (lines[single[0]], result.err)


class TestCheck:
    def test_says_what_the_scene_means(self, run, scene):
        result = run("check", scene)
        assert result.code == 0
        for words in ("A tiny field", "pixel scale", "0.4 arcsec", "zero point", "r0", "sampling"):
            assert words in result.out
        assert "\x1b" not in result.out

    def test_lists_the_defaults(self, run, scene):
        out = run("check", scene).out
        for key in ("camera.quantum_efficiency", "camera.bit_depth", "air.outer_scale", "pointing"):
            assert re.search(rf"^{re.escape(key)} ", out, re.M), key

    def test_as_json(self, run, scene):
        result = run("check", scene, "--json")
        found = result.json
        assert found["version"]
        assert found["simulated"] is True
        assert re.fullmatch("[0-9a-f]{64}", found["scene_id"])
        assert found["pixel_scale_arcsec"] == pytest.approx(0.4)
        assert found["warnings"] == []
        assert {row["key"] for row in found["defaults"]} >= {"camera.bit_depth", "pointing"}
        assert found["to_expose"] == []
        assert result.err == ""

    def test_warns_of_what_will_bite(self, run, scene):
        result = run("check", scene, "--set", "camera.bias=0 adu")
        assert result.code == 0
        assert "warning: camera.bias is 0 adu" in result.err
        found = run("check", scene, "--set", "camera.bias=0 adu", "--json").json
        assert "camera.bias is 0 adu" in found["warnings"][0]

    def test_says_what_an_exposure_needs(self, run, scene):
        result = run("check", scene, "--without", "exposure")
        assert result.code == 0
        assert "to expose it, it also needs" in result.out
        assert "exposure.time" in result.out
        found = run("check", scene, "--without", "exposure", "--json").json
        assert "exposure.time" in found["to_expose"][0]

    def test_overrides_and_tables_taken_away(self, run, scene):
        found = run(
            "check", scene, "--set", "telescope.aperture=4 m", "--without", "air", "--json"
        ).json
        assert found["r0_m"] is None
        assert found["collecting_area_m2"] > 10

    def test_every_mistake_at_once(self, run, scene):
        result = run(
            "check", scene, "--set", "telescope.obstruction=1.3", "--set", "air.seeing=-1 arcsec"
        )
        assert result.code == 2
        assert result.out == ""
        lines = result.err.splitlines()
        assert len(lines) == 2
        assert all(line.startswith(scene) for line in lines)

    def test_a_file_that_a_scene_names_is_looked_into(self, run, scene, folder):
        (folder / "stars.csv").write_text("a,b\n1,2\n")
        columns = '{ east = "dx", north = "dy", magnitude = "m" }'
        more = f'\n[[catalogue]]\nfile = "stars.csv"\ncolumns = {columns}\n'
        (folder / scene).write_text((folder / scene).read_text() + more)
        result = run("check", scene)
        assert result.code == 2
        assert "dx" in result.err

    def test_quiet(self, run, scene):
        result = run("check", scene, "--quiet")
        assert (result.code, result.out, result.err) == (0, "", "")

    def test_the_sun_is_spoken_of_even_in_quiet(self, run, scene):
        for quiet in ([], ["--quiet"]):
            result = run("check", scene, "--set", "title=The Sun, eclipsed", *quiet)
            assert "certified solar filters" in result.err

    def test_everything_is_a_simulation(self, run, scene):
        assert "confirmed with the observatory" in run("check", scene).err
        assert any("simulation" in text for text in run("check", scene, "--json").json["cautions"])


class TestSchema:
    def test_it_is_json_and_alone(self, run):
        from simimg.scene.schema import scene_schema

        result = run("check", "--schema")
        assert (result.code, result.err) == (0, "")
        assert result.json == scene_schema()

    @pytest.mark.parametrize(
        "arguments",
        [["check"], ["check", "tiny.toml", "--schema"], ["check", "--schema", "--without", "air"]],
    )
    def test_of_no_scene_or_of_every_scene(self, run, scene, files, arguments):
        result = run(*arguments)
        assert (result.code, result.out) == (2, "")
        assert "SCENE" in result.err
        assert files() == [scene]
