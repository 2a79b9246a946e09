"""Where a PSF comes from: every source gives the same pair; a wrong one is found out."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.errors import InputError
from simimg.frame import PsfImage
from simimg.resolving.asked import as_choice
from simimg.resolving.measure import measure_frame
from simimg.resolving.observation import observe
from simimg.resolving.psfsource import PsfChoice, usable_image
from tests.resolving import scenes

SINGLES = [(14, 14, 4e5), (80, 12, 3e5), (15, 78, 5e5), (82, 76, 3.5e5), (48, 12, 2.5e5)]


@pytest.fixture(scope="module")
def shot():
    """A pair and five single stars, with the PSF extension."""
    objects = scenes.pair("1.0 arcsec", 40.0, (8e4, 5e4)) + "".join(
        f"[[star]]\nx = {x}.3\ny = {y}.6\nelectrons = {light}\n" for x, y, light in SINGLES
    )
    return simimg.expose(scenes.scene(objects), keep=("psf",), threads=1)


CHOICES = {
    "scene": PsfChoice(source="scene"),
    "extension": PsfChoice(source="extension"),
    "stars": PsfChoice(source="stars", stars=tuple((x, y) for x, y, _ in SINGLES)),
    "profile": PsfChoice(source="profile"),
}


@pytest.fixture(scope="module")
def found(shot):
    answers = {name: measure_frame(shot, psf=choice) for name, choice in CHOICES.items()}
    answers["file"] = measure_frame(shot, psf=as_choice(shot.psf))
    return answers


def test_every_source_gives_the_same_pair(found):
    exact = found["scene"].pairs[0]
    for name, answer in found.items():
        pair = answer.pairs[0]
        assert answer.psf.source == name
        # The same pixels: what differs is the PSF. Of the extension it is the same PSF, cut off at
        # 16 pixels; a Moffat profile is not that of turbulence.
        most = {"scene": 0.0, "extension": 0.1, "file": 0.1, "stars": 1.5, "profile": 2.5}[name]
        for key in ("separation", "position_angle", "magnitude_difference"):
            key, error = (
                ("magnitude_difference", "magnitude_difference_error")
                if key.startswith("mag")
                else {
                    "separation": ("separation_arcsec", "separation_error_arcsec"),
                    "position_angle": ("position_angle_deg", "position_angle_error_deg"),
                }[key]
            )
            away = abs(getattr(pair, key) - getattr(exact, key)) / getattr(exact, error)
            assert away <= most, (name, key)
        rtol = 0.07 if name == "profile" else 0.02
        for criterion in ("rayleigh", "sparrow"):
            limits = [getattr(p, criterion).limit_arcsec for p in (pair, exact)]
            assert_allclose(*limits, rtol=rtol)


def test_how_well_single_stars_fit_is_said(found):
    for name in ("scene", "extension", "file"):
        psf = found[name].psf
        assert psf.stars == 5
        # The median of five stars of some 80 pixels each: 1 within three of its errors.
        assert_allclose(psf.reduced_chi_square, 1.0, atol=3 * 1.25 * np.sqrt(2.0 / 80 / 5))
        assert not found[name].warnings
    # A PSF is not judged by the stars that it was made from; of a profile with its few parameters
    # that does no harm.
    assert found["stars"].psf.stars == 0
    assert found["stars"].psf.to_dict()["reduced_chi_square"] is None
    assert found["profile"].psf.stars == 5


@pytest.mark.parametrize("width", [0.85, 1.2])
def test_a_wrong_psf_is_found_out(shot, width):
    scene = scenes.scene("", overrides=[f'air.seeing="{0.9 * width} arcsec"'])
    wrong = simimg.expose(scene, keep=("psf",), threads=1).psf
    answer = measure_frame(shot, psf=as_choice(wrong))
    assert answer.psf.reduced_chi_square > 3.0
    (doubt,) = [text for text in answer.warnings if "do not trust the verdict" in text]
    assert "P" in doubt
    assert "17" in doubt
    # So bad a PSF makes a single star double: the warning is needed.
    (single,) = simimg.measure(shot, near=[SINGLES[2][:2]], psf=wrong)
    assert (single.probability_single < 1e-3) == (width < 1.0)


def test_a_faint_pair_can_be_trusted_with_a_psf_that_is_a_little_off():
    """The misfit grows with the light: what ruins a bright pair does nothing to a faint one."""
    wrong = simimg.expose(
        scenes.scene("", overrides=['air.seeing="0.91 arcsec"']), keep=("psf",), threads=1
    ).psf
    doubted = []
    for light in (6e5, 4e3):
        objects = scenes.pair("1.6 arcsec", 40.0, (light, 0.6 * light)) + "".join(
            f"[[star]]\nx = {x}.3\ny = {y}.6\nelectrons = {e}\n" for x, y, e in SINGLES
        )
        answer = measure_frame(scenes.frame(objects), psf=as_choice(wrong))
        doubted.append(any("do not trust" in text for text in answer.warnings))
    assert doubted == [True, False]


def test_one_faint_star_is_too_noisy_a_psf(shot):
    answer = measure_frame(shot, psf=PsfChoice(source="stars", stars=((48.3, 12.6),)))
    assert any("has their noise" in text for text in answer.warnings)


def test_the_first_source_that_there_is(shot):
    assert observe(shot).sourced.source == "scene"
    bare = replace(shot, scene_files=())
    assert observe(bare).sourced.source == "extension"
    assert observe(replace(bare, psf=None)).sourced.source == "profile"


def test_pairs_are_not_taken_for_single_stars(shot):
    """The profile is fitted to what is not to be measured."""
    bare = replace(shot, scene_files=(), psf=None, truth=None)
    sourced = observe(bare, apart=[(47.5, 44.5)]).sourced
    away = [np.hypot(x - 47.5, y - 44.5) for x, y in sourced.stars]
    assert len(sourced.stars) == 5
    assert min(away) > 20.0


@pytest.mark.parametrize(
    ("choice", "said"),
    [
        (PsfChoice(source="extension"), "no PSF extension"),
        (PsfChoice(source="stars", stars=((3.0, 60.0),)), "shows no"),
        (PsfChoice(source="stars", stars=((300.0, 60.0), (-5.0, 1.0))), "is not on the frame"),
    ],
)
def test_what_is_not_there_is_said(shot, choice, said):
    with pytest.raises(InputError, match=said) as caught:
        measure_frame(replace(shot, psf=None), psf=choice)
    assert len(caught.value.lines) == len(choice.stars or (1,))


def test_no_star_to_take_a_profile_from():
    frame = simimg.expose(scenes.scene(""), threads=1)
    with pytest.raises(InputError, match="no star stands alone"):
        observe(replace(frame, scene_files=()))
    with pytest.raises(InputError, match="carries no scene"):
        observe(replace(frame, scene_files=()), psf=PsfChoice(source="scene"))


class TestImages:
    """Images of a PSF as people have them."""

    def gaussian(self, columns, rows, x, y, width=3.0):
        across, along = np.arange(columns) - x, (np.arange(rows) - y)[:, None]
        return np.exp(-4.0 * np.log(2.0) * (across**2 + along**2) / width**2)

    @pytest.mark.parametrize(
        ("columns", "rows", "x", "y"),
        [
            (31, 31, 15, 15),
            (32, 32, 16.0, 16.0),
            (32, 32, 15.5, 15.5),
            (40, 31, 18.0, 15.0),
            (31, 31, 16.3, 14.4),
            (33, 33, 17.0, 15.0),
        ],
    )
    def test_the_star_comes_to_the_middle(self, columns, rows, x, y):
        image = usable_image(PsfImage(7.0 * self.gaussian(columns, rows, x, y), 1), "p")
        side = image.shape[0]
        assert image.shape == (side, side)
        assert side % 2 == 1
        middle = (side - 1) / 2
        # Centred to a few hundredths of a pixel, which a measured place may be off by; no wider.
        wanted = self.gaussian(side, side, middle, middle)
        assert_allclose(image, wanted / wanted.sum(), atol=2e-3)
        assert_allclose((image**2).sum(), (wanted**2).sum() / wanted.sum() ** 2, rtol=1e-3)
        assert_allclose(image.sum(), 1.0)

    def test_unit_light_at_any_oversampling(self):
        image = usable_image(PsfImage(self.gaussian(61, 61, 30, 30, 12.0), 4), "p")
        assert_allclose(image.sum(), 16.0)

    def test_small_images_are_given_room(self):
        assert usable_image(PsfImage(self.gaussian(5, 5, 2, 2), 1), "p").shape == (9, 9)

    @pytest.mark.parametrize(
        "image", [np.full((9, 9), np.nan), np.zeros((9, 9)), -np.ones((9, 9)), np.ones((2, 30))]
    )
    def test_what_is_no_psf_is_refused(self, image):
        with pytest.raises(InputError, match="psf: p:"):
            usable_image(PsfImage(image, 1), "p")

    def test_nonsense_is_refused(self):
        for wrong in ("moffat", np.zeros((3, 3, 3)), np.array([["a"]])):
            with pytest.raises(InputError, match="frame: psf"):
                as_choice(wrong)
        with pytest.raises(InputError, match="oversampling"):
            as_choice(np.ones((9, 9)), oversampling=0)
        with pytest.raises(InputError, match="one of the two"):
            as_choice("profile", stars=[(1, 2)])
        for wrong in ({"source": "guess"}, {"source": "file"}, {"stars": ((1.0, 2.0),)}):
            with pytest.raises(ValueError, match=r"PSF|stars"):
                PsfChoice(**wrong)
