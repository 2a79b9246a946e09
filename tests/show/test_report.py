"""The report: what it says is what the other verbs say, and no text of a scene breaks the page."""

import re
from dataclasses import replace as changed

import numpy as np
import pytest

import simimg
from simimg.assembly.report import SUN_NOTE
from simimg.assembly.train import assemble_train
from simimg.errors import InputError
from simimg.scene.file import replace, scene_id, scene_text
from simimg.show import reportpictures
from simimg.show.report import report, write_report
from simimg.show.reportbudget import noise_shares, width_budget
from simimg.show.reportfacts import gather
from simimg.show.reportpictures import view_pictures
from simimg.show.reportviews import View, views
from tests.show.frames import PAIR, STARS
from tests.show.frames import scene as coloured
from tests.show.pages import Page, visible

TRIALS = 6
TITLE = "<script>alert('t')</script> & \"quoted\" ]]> <!-- javascript:alert(1)"
LABEL = "\"><img src=x onerror='alert(1)'>{{ 7*7 }}</pre>"
STAR = "=HYPERLINK(1;2)"
NAME = "<b onclick=alert(2)>Tester"


def toml(text):
    return '"' + text.replace("\\", "\\\\").replace('"', '\\"') + '"'


HOSTILE = PAIR.replace('"T-1"', toml(LABEL)) + STARS.replace('"faint"', toml(STAR))


def scene(objects=PAIR, *, overrides=()):
    """A scene of one wavelength: quickly computed."""
    return coloured(objects, overrides=["band.nodes=1", *overrides])


def hostile_scene():
    overrides = [
        f"title={toml(TITLE)}",
        f"telescope.name={toml(NAME)}",
        f"camera.name={toml(LABEL)}",
    ]
    overrides += ["pair.0.separation=1.1 arcsec", "exposure.count=2"]
    return scene(HOSTILE, overrides=overrides)


@pytest.fixture(scope="module")
def made():
    """The report of a scene whose every text is a trap."""
    return report(hostile_scene(), trials=TRIALS)


@pytest.fixture(scope="module")
def page(made):
    return Page(made.html)


class TestThePage:
    def test_its_title_is_the_scene_s(self, page):
        assert page.one("title")["text"] == TITLE
        assert page.one("h1")["text"] == TITLE

    def test_it_says_that_all_is_simulated(self, page):
        stamp, *_ = page.all("strong")
        assert stamp["text"] == "Simulated"
        assert "Every frame is a simulation" in page.one("header")["text"]

    def test_no_text_of_the_scene_becomes_markup(self, made, page):
        assert page.all("script", "iframe", "object", "embed", "form", "b", "svg") == []
        assert not re.search(r"<script|<img src=x|<b onclick", made.html)
        for one in page.elements:
            assert not [name for name in one["attrs"] if name.startswith("on") or name == "style"]
        seen = visible(page)
        for text in (TITLE, LABEL, STAR):
            assert text in seen
        assert "{{ 7*7 }}" in seen
        assert "49" not in page.one("h1")["text"]

    def test_it_fetches_nothing(self, page):
        for one in page.elements:
            for name in ("src", "href", "srcset", "action", "data", "poster", "background"):
                target = one["attrs"].get(name)
                assert target is None or target.startswith(("#", "data:")), target
        (style,) = page.all("style")
        assert "url(" not in style["text"]
        assert "@import" not in style["text"]
        policy = next(
            one["attrs"]["content"]
            for one in page.all("meta")
            if one["attrs"].get("http-equiv") == "Content-Security-Policy"
        )
        assert "default-src 'none'" in policy
        assert "unsafe" not in policy

    def test_every_picture_has_its_words(self, page):
        pictures = page.all("img")
        assert len(pictures) == 4
        words = [one["attrs"]["alt"] for one in pictures]
        assert all(len(text) > 40 for text in words)
        assert len(set(words)) == 4
        for one in pictures:
            assert one["attrs"]["src"].startswith("data:image/png;base64,")
            assert int(one["attrs"]["width"]) > 300
            assert int(one["attrs"]["height"]) > 300
        assert len(page.all("figcaption")) == 4

    def test_headings_are_in_order_and_the_contents_lead_to_them(self, page):
        assert page.one("html")["attrs"]["lang"] == "en"
        levels = [int(one["tag"][1]) for one in page.all("h1", "h2", "h3", "h4")]
        assert levels[0] == 1
        assert levels.count(1) == 1
        assert all(b - a <= 1 for a, b in zip(levels, levels[1:], strict=False))
        names = [one["attrs"]["id"] for one in page.elements if "id" in one["attrs"]]
        assert len(names) == len(set(names))
        links = [one for one in page.all("a") if one["attrs"]["href"].startswith("#")]
        assert [
            one["attrs"]["href"][1:] for one in links if one["attrs"].get("class") == "skip"
        ] == ["content"]
        assert {one["attrs"]["href"][1:] for one in links} == {
            "content",
            *(one["attrs"]["id"] for one in page.all("h2")),
        }

    def test_every_table_has_a_caption_and_headings_that_say_of_what(self, page):
        tables = page.all("table")
        assert len(page.all("caption")) == len(tables) >= 9
        heads = page.all("th")
        assert {one["attrs"]["scope"] for one in heads} == {"col", "row"}
        for one in page.all("td"):
            assert "tbody" in one["within"]

    def test_nothing_of_the_machine_or_the_clock(self, made):
        import datetime
        import os
        import socket

        said = re.sub(r"data:[^\"]*", "", made.html)
        for text in (os.getcwd(), socket.gethostname(), str(datetime.datetime.now().date())):
            assert text not in said

    def test_the_files_have_plain_names(self, page):
        for name in page.files():
            assert re.fullmatch(r"[A-Za-z0-9._-]+", name)


class TestWhatItSays:
    def test_limits_are_those_of_limits(self, made, page):
        found = simimg.limits(made.facts.scene, position_angle=np.radians(40.0))
        rows = page.table("limits")
        assert [row["set by"] for row in rows] == [
            "diffraction: the pupil alone",
            "delivered: optics, air, pixel",
            "diffraction, its own",
            "delivered, its own",
        ]
        own = found.objects[0] if found.objects[0].kind == "pair" else found.objects[-1]
        expected = [found.diffraction, found.delivered, own.diffraction, own.delivered]
        for row, one in zip(rows, expected, strict=True):
            assert float(row["FWHM (arcsec)"]) == pytest.approx(one.fwhm_arcsec, rel=1e-9)
            assert float(row["Rayleigh (arcsec)"]) == pytest.approx(one.rayleigh_arcsec, rel=1e-9)
            assert float(row["Sparrow (arcsec)"]) == pytest.approx(one.sparrow_arcsec, rel=1e-9)

    def test_the_probability_of_a_split_is_that_of_trials(self, made, page):
        (told,) = simimg.trials(made.facts.scene, count=TRIALS)
        verdicts, rows = page.table("verdicts"), page.table("trials")
        for place, key in ((1, "rayleigh"), (2, "sparrow")):
            share = getattr(told, key)
            assert float(rows[place]["trials"]) == TRIALS
            for name, of in (("share (%)", "fraction_resolved"), ("at least (%)", "low")):
                assert float(rows[place][name]) == pytest.approx(100.0 * getattr(share, of))
            assert float(verdicts[place - 1]["at most (%)"]) == pytest.approx(100.0 * share.high)
        assert [row["fitted"] for row in rows[::3]] == ["one exposure", "2 exposures together"]
        share = told.together.sparrow.fraction_resolved
        assert float(rows[5]["share (%)"]) == pytest.approx(100.0 * share)
        said = visible(page)
        assert "Of 2 exposures fitted together: " in said
        assert "As many sets of 2 exposures each were fitted together." in said
        bias = told.bias.separation_arcsec
        assert float(page.table("accuracy")[0]["bias"]) == pytest.approx(bias, rel=1e-9)
        # Some bias is negative, and stays a number.
        assert any(row["bias"].startswith("-") for row in page.table("accuracy"))

    def test_the_verdict_is_that_of_measure(self, made, page):
        (measured,) = simimg.measure(simimg.expose(made.facts.scene))
        rows = page.table("verdicts")
        for row, one in zip(rows, (measured.rayleigh, measured.sparrow), strict=True):
            assert row["this frame"] == one.verdict
            assert float(row["delivered limit (arcsec)"]) == pytest.approx(one.limit_arcsec)
            value = float(row["probability beyond the limit"])
            assert value == pytest.approx(one.probability, abs=1e-9)
        separation = page.table("measured")[0]
        assert float(separation["measured"]) == pytest.approx(measured.separation_arcsec, rel=1e-9)
        assert float(separation["true"]) == pytest.approx(1.1)
        verdicts = {one["text"] for one in page.all("td") if one["attrs"].get("class")} & {
            "resolved",
            "borderline",
            "unresolved",
        }
        assert verdicts == {measured.rayleigh.verdict, measured.sparrow.verdict}

    def test_the_scene_can_be_taken_away(self, made, page):
        files = page.files()
        assert files["test.toml"].decode() == scene_text(made.facts.scene)
        assert scene_id(made.facts.scene) in visible(page)
        assert f"simimg report test.toml -o test.html --trials {TRIALS}" in visible(page)

    def test_labels_are_safe_in_a_spreadsheet(self, page):
        labels = [row["object"] for row in page.table("objects")]
        assert f"'{STAR}" in labels
        for name, content in page.files().items():
            if name.endswith(".csv"):
                for cell in re.findall(rb'(?:^|,)"?([=+@])', content, re.M):
                    raise AssertionError((name, cell))

    def test_the_profile_is_the_picture_s(self, made, page):
        rows = page.table("profile")
        light = [float(row["light (electrons per pixel)"]) for row in rows]
        np.testing.assert_allclose(light, made.facts.profile.values, rtol=1e-9)

    def test_defaults_and_set_up(self, page):
        assert {"airmass", "seeing", "pixel scale", "band"} <= {
            row["quantity"] for row in page.table("set-up")
        }
        assert "telescope.throughput" in {row["key"] for row in page.table("defaults")}


class TestOtherScenes:
    def test_without_a_pair_nothing_is_tried_and_the_sun_is_warned_of_first(self):
        page = Page(report(scene(STARS, overrides=['title="The Sun"'])).html)
        assert SUN_NOTE in page.one("header")["text"]
        heads = [one["text"] for one in page.all("h2")]
        assert "How sure is the split" not in heads
        assert "What can be resolved" in heads
        assert "The scene has no pair in the frame" in visible(page)
        assert "--trials" not in visible(page)

    def test_trials_of_no_pair_are_refused(self):
        with pytest.raises(InputError, match="trials need a pair"):
            report(scene(STARS), trials=3)

    def test_without_trials_no_probability_is_claimed_and_above_the_air_there_is_one_view(self):
        page = Page(report(replace(scene(), {"air": None}), trials=0).html)
        assert "No trials were made" in visible(page)
        assert {row["trials resolved (%)"] for row in page.table("verdicts")} == {""}
        assert "Side by side" not in [one["text"] for one in page.all("h2")]
        assert len(page.all("img")) == 2

    def test_the_pair_that_is_asked_for(self):
        second = PAIR.replace('"T-1"', '"T-2"').replace(
            "[3e5", 'east = "2 arcsec"\nelectrons = [3e5'
        )
        second = second.replace("electrons = east", "east")
        facts = gather(scene(PAIR + second), count=0, pair="T-2")
        assert facts.subject.label == "T-2"
        assert [told.name for told in facts.pairs] == ["T-1", "T-2"]
        with pytest.raises(InputError, match="no pair is labelled 'T-3'"):
            gather(scene(), pair="T-3")

    def test_a_pair_off_the_frame_is_not_asked_for(self):
        off = scene(overrides=["pair.0.east=30 arcsec"])
        with pytest.raises(InputError, match="does not lie in the frame"):
            gather(off, pair="T-1")
        assert gather(off).pairs == ()

    def test_a_pair_in_which_no_second_star_is_seen(self):
        faint = scene(overrides=["pair.0.electrons=[30, 20]"])
        made = report(replace(faint, {"title": None}), trials=2)
        (told,) = made.facts.pairs
        assert np.isnan(told.measured.separation_arcsec)
        page = Page(made.html)
        assert page.one("title")["text"] == "A scene without a title"
        assert [row["measured"] for row in page.table("measured")] == [""] * 3
        frame, profile, *_ = (one["text"] for one in page.all("figcaption"))
        assert "a cross at the one star that is fitted" in frame
        assert "how far from the star, at 0, another must be" in profile
        assert {row["this frame"] for row in page.table("verdicts")} == {"unresolved"}

    def test_what_an_exposure_needs_is_said(self):
        with pytest.raises(InputError, match=r"camera\.pixels"):
            report(replace(scene(), {"camera": None}))

    def test_fewer_than_no_trials(self):
        with pytest.raises(ValueError, match="trials must be 0 or more"):
            report(scene(), trials=-1)


def width_costs(one):
    """How much narrower stars would be without each part, arcsec."""
    whole, *parts = width_budget(one, simimg.limits(one), None)
    costs = {row.part: whole.fwhm_arcsec - row.fwhm_arcsec for row in parts}
    return {"whole": whole.fwhm_arcsec} | costs


class TestBudget:
    def test_without_the_air_it_is_the_scene_without_the_air(self):
        one = scene()
        found = simimg.limits(one, position_angle=np.radians(40.0))
        rows = {row.part: row for row in width_budget(one, found, 0)}
        above = simimg.limits(replace(one, {"air": None}), position_angle=np.radians(40.0))
        for row, limits in ((rows[""], found), (rows["air"], above)):
            (own,) = limits.objects
            assert row.fwhm_arcsec == pytest.approx(own.delivered.fwhm_arcsec, rel=1e-9)
            assert row.sparrow_arcsec == pytest.approx(own.delivered.sparrow_arcsec, rel=1e-9)
            assert row.separation_arcsec == pytest.approx(own.bound.separation_arcsec, rel=1e-9)
            assert row.position_angle_deg == pytest.approx(own.bound.position_angle_deg, rel=1e-9)
        pupil = rows["all but the pupil"]
        assert pupil.fwhm_arcsec == pytest.approx(found.diffraction.fwhm_arcsec, rel=1e-9)
        assert rows["pixel"].fwhm_arcsec < 0.99 * rows[""].fwhm_arcsec
        for part, key in (("sky", "sky"), ("read noise", "camera.read_noise")):
            (bound,) = simimg.precision(replace(one, {key: None}))
            expected = pytest.approx(bound.separation_arcsec, rel=1e-9)
            assert rows[part].separation_arcsec == expected
            assert rows[part].fwhm_arcsec == rows[""].fwhm_arcsec
            assert rows[part].separation_arcsec < rows[""].separation_arcsec
        assert "dark signal" not in rows

    def test_a_stated_image_quality_does_not_hide_what_the_telescope_costs(self):
        shaking = scene(STARS, overrides=["pointing.jitter=0.25 arcsec", "air.seeing=0.6 arcsec"])
        steady = width_costs(shaking)
        quality = {"air.seeing": None, "air.image_quality": f"{steady['whole']} arcsec"}
        still = width_costs(replace(shaking, quality))
        assert steady["motion of the aim"] > 0.05
        # The quality is that of a mean over directions without the pixel: about the same air.
        assert still["motion of the aim"] == pytest.approx(steady["motion of the aim"], rel=0.15)

    def test_shares_of_the_noise(self):
        def shares(sky):
            one = scene(STARS, overrides=[f"sky.electrons={sky}"])
            return noise_shares(one, assemble_train(one), simimg.limits(one).objects)[0]

        dim, bright = shares(30.0), shares(60.0)
        for one in (dim, bright):
            assert one.photons + one.sky + one.dark + one.read == pytest.approx(1.0)
        assert bright.sky / bright.photons == pytest.approx(2.0 * dim.sky / dim.photons)
        assert dim.sky / dim.read == pytest.approx(30.0 / 4.0**2)
        assert dim.dark == 0.0


class TestViews:
    def test_above_the_air_is_the_scene_without_its_air(self):
        one = scene()
        frame = simimg.expose(one)
        above, inside = views(one, frame)
        expected = simimg.expose(replace(one, {"air": None}))
        np.testing.assert_array_equal(above.frame.counts, expected.counts)
        assert inside.frame is frame
        assert above.frame.counts.max() > 2 * frame.counts.max()

    def test_all_are_drawn_on_one_stretch(self, monkeypatch, made):
        seen = []
        draw = reportpictures.draw_frame

        def watched(*arguments, stretch, **others):
            seen.append(stretch)
            draw(*arguments, stretch=stretch, **others)

        monkeypatch.setattr(reportpictures, "draw_frame", watched)
        facts = made.facts
        pictures = view_pictures(facts, views(facts.scene, facts.frame))
        assert [one.key for one in pictures] == ["view-above", "view-in-air"]
        assert seen[0] == seen[1] is not None
        assert seen[0].high > 2.0 * facts.light.values.max()

    def test_full_pixels_are_told(self, made):
        full = simimg.expose(scene(overrides=["camera.full_well=5000 electron"]))
        empty = View("empty", "Empty", "Nothing.", made.facts.frame)
        one, other = view_pictures(made.facts, [View("full", "Full", "Too bright.", full), empty])
        assert full.mask.any()
        assert re.search(r"Too bright\. [0-9]+ pixels are full\.", one.caption)
        # Of the piece that is shown, not of the frame.
        rows, columns = full.counts.shape
        assert View("v", "V", "V.", full).full_pixels((0, columns, 0, rows)) > 0
        assert View("v", "V", "V.", full).full_pixels((0, 3, 0, 3)) == 0
        assert "full" not in other.caption

    def test_corrected_air_is_seen_uncorrected_too(self):
        ways = ["correction.actuators=20", "air.seeing=0.8 arcsec"]
        one = scene(overrides=ways)
        frame = simimg.expose(one)
        above, blurred, corrected = views(one, frame)
        assert [v.key for v in (above, blurred, corrected)] == ["above", "uncorrected", "in-air"]
        peaks = [int(v.frame.counts.max()) for v in (above, blurred, corrected)]
        assert peaks[1] < 0.7 * peaks[2]
        assert peaks[2] < peaks[0]
        found = simimg.limits(one)
        rows = {row.part: row for row in width_budget(one, found, None)}
        plain = simimg.limits(replace(one, {"correction": None}))
        without = rows["correction of the air"].fwhm_arcsec
        assert without == pytest.approx(plain.delivered.fwhm_arcsec, rel=1e-6)
        assert rows["air"].fwhm_arcsec < rows[""].fwhm_arcsec < without


class TestFiles:
    def test_whole_or_not_at_all(self, tmp_path, made):
        path = tmp_path / "page.html"
        write_report(made, path)
        assert path.read_text(encoding="utf-8") == made.html
        with pytest.raises(InputError, match="exists already"):
            write_report(made, path)
        other = changed(made, html="other")
        write_report(other, path, overwrite=True)
        assert path.read_text() == "other"
        assert [one.name for one in tmp_path.iterdir()] == ["page.html"]
