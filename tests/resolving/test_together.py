"""Frames of one field fitted together: each adds what it knows, out of register or not."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.arrays import frozen
from simimg.errors import InputError
from simimg.resolving.alignment import frame_view, transferred
from simimg.resolving.asked import as_choice, as_frame
from simimg.resolving.cutout import Cutout
from simimg.resolving.given import Given
from simimg.resolving.layout import FIRST, Layout, View, turned
from simimg.resolving.measure import measure_frame
from simimg.resolving.pairfit import fit_pair, pair_geometry
from simimg.resolving.starfit import Likelihood, fit_stars
from simimg.resolving.together import measure_together
from tests.resolving import outsiders as out
from tests.resolving import scenes
from tests.resolving.psfs import expected, model

PAIR = ((12.2, 11.9, 30_000.0), (14.0, 13.1, 18_000.0))
TURN = np.array([[0.9, -0.4], [0.4, 0.9]]) * 1.1
SHIFT = (0.4, -0.3)


def views():
    """The first frame, one in poor register and dimmer, one turned and larger in scale."""
    moved = View(1, origin=frozen(np.array([2.0, -1.0])))
    spun = View(2, frozen(TURN), frozen(np.array([5.0, -6.0])), factor=0.5)
    return FIRST, moved, spun


def stack(rng=None, *, count=3, tilted=True):
    """Cutouts of frames with PSFs, backgrounds, places and brightnesses of their own."""
    kinds = ("air", "coarse", "air")
    cutouts = []
    for view, kind, sky in list(zip(views(), kinds, (40.0, 90.0, 10.0)))[:count]:
        psf = model(kind)
        stars = []
        for x, y, light in PAIR:
            px, py = view.place(x, y) if view.number else (x, y)
            off, dim = ((0.0, 0.0), 1.0) if view.number == 0 else (SHIFT, 0.8 * view.factor)
            stars.append((px + off[0], py + off[1], light * dim))
        image = expected(psf, stars, size=30, background=sky)
        if tilted:
            image = image + 0.3 * np.arange(30.0) - 0.2 * np.arange(30.0)[:, None]
        data = image if rng is None else rng.poisson(image) + 4.0 * rng.standard_normal(image.shape)
        cutouts.append(Cutout.of(data, variance=16.0, psf=psf, tilted=tilted, view=view))
    return cutouts


def vector(layout):
    """The truth of `stack`, as the fit's parameters."""
    result = np.zeros(layout.size)
    result[:6] = np.array(PAIR).ravel()
    for index, sky in enumerate((40.0, 90.0, 10.0)):
        # The level is that in the middle of 30 pixels, the rises go from there to the edge.
        result[layout.level[index]] = sky + (0.3 - 0.2) * 14.5
        result[layout.rise[index] : layout.rise[index] + 2] = 0.3 * 14.5, -0.2 * 14.5
        if index:
            result[layout.view[index] : layout.view[index] + 3] = *SHIFT, np.log(0.8)
    return result


def test_every_parameter_has_its_place():
    layout = Layout(2, [True, False, True, False], [0, 1, 1, 3])
    assert layout.level == (6, 7, 8, 9)
    assert layout.rise == (10, None, 12, None)
    assert layout.view == (None, 14, 14, 17)
    assert layout.size == 20
    assert layout.own[2] == (*range(6), 8, 12, 13, 14, 15, 16)


def test_the_derivatives_are_derivatives():
    """Of places, electrons, levels, rises, shifts and transparencies, by differences."""
    cutouts = stack()
    likelihood = Likelihood(cutouts, 2)
    truth = vector(likelihood.layout)
    for index, cutout in enumerate(cutouts):
        model_image, slopes = likelihood.jacobian(truth, index)
        assert_allclose(model_image, cutout.electrons.ravel(), atol=1e-9 * 30_000)
        for row, parameter in enumerate(likelihood.layout.own[index]):
            step = 1e-4 * max(1.0, abs(truth[parameter]))
            ahead, behind = (
                likelihood.jacobian(truth + sign * step * np.eye(truth.size)[parameter], index)[0]
                for sign in (1.0, -1.0)
            )
            numeric = (ahead - behind) / (2.0 * step)
            # Third derivatives of a PSF three pixels wide times the step squared.
            assert_allclose(slopes[row], numeric, atol=1e-5 * np.abs(slopes[row]).max() + 1e-9)


def test_second_derivatives_turn_with_the_frame():
    psf = model("air")

    def value(x, y):
        place = TURN @ np.array([x, y])
        return psf.evaluate(*place, columns=25, rows=25, order=0)[0]

    planes = turned(
        psf.evaluate(*(TURN @ np.array([12.0, 4.0])), columns=25, rows=25, order=2), TURN
    )
    h = 1e-3
    numeric = [
        (value(12 + h, 4) - 2 * value(12, 4) + value(12 - h, 4)) / h**2,
        (value(12 + h, 4 + h) - value(12 + h, 4 - h) - value(12 - h, 4 + h) + value(12 - h, 4 - h))
        / (4 * h**2),
        (value(12, 4 + h) - 2 * value(12, 4) + value(12, 4 - h)) / h**2,
    ]
    assert_allclose(planes[3:], numeric, atol=1e-5 * np.abs(planes[3:]).max())


@pytest.mark.parametrize("tilted", [False, True])
def test_without_noise_the_truth_comes_back(tilted):
    cutouts = stack(tilted=tilted)
    start = [(12.9, 12.2), (13.6, 13.3)]
    fit = fit_stars(cutouts, places=start)
    assert fit.converged
    # Data at their expectation: the likelihood's own bias is a hundredth of an error or so.
    assert_allclose(fit.places, np.array(PAIR)[:, :2], atol=0.005)
    assert_allclose(fit.extras[-6:], [*SHIFT, np.log(0.8)] * 2, atol=0.01)


def test_estimates_scatter_as_their_errors_say():
    """60 draws of three unlike frames, the second star sought blindly in all of them."""
    rng = np.random.default_rng(6)
    figures = []
    for _ in range(60):
        fit = fit_pair(stack(rng), place=(13.0, 12.4), radius=6.5, geometry=False)
        two = pair_geometry(fit.double)
        dx, dy = np.array(PAIR[1][:2]) - PAIR[0][:2]
        truth = np.hypot(dx, dy), np.arctan2(dy, dx), 2.5 * np.log10(30 / 18)
        if two.magnitude_difference < 0:
            two = pair_geometry(fit.double, first=1, second=0)
        got = two.separation, two.angle, two.magnitude_difference
        figures.append((np.array(got) - truth) / two.errors)
    figures = np.array(figures)
    # Mean and scatter of 60 each, within three of their own errors.
    assert np.abs(figures.mean(axis=0)).max() < 3.0 / np.sqrt(60)
    assert np.abs(figures.std(axis=0) - 1.0).max() < 3.0 / np.sqrt(120)


def test_a_frame_adds_what_it_knows():
    """Information adds up: never less than each frame's, nor more than with register known."""
    errors = {}
    for name, cutouts in {
        "first": stack(count=1),
        "all": stack(),
        "in register": [replace(one, view=replace(one.view, free=False)) for one in stack(count=3)],
    }.items():
        likelihood = Likelihood(cutouts, 2)
        truth = vector(Likelihood(stack(), 2).layout)[: likelihood.size]
        if name == "first":
            truth = np.concatenate([truth[:6], [41.45, 4.35, -2.9]])
        fit = fit_stars(cutouts, places=np.array(PAIR)[:, :2])
        errors[name] = np.array(pair_geometry(fit).errors)
    assert (errors["all"] < errors["first"]).all()
    assert (errors["in register"] <= errors["all"] * 1.001).all()


@pytest.fixture(scope="module")
def shots():
    objects = scenes.pair("0.9 arcsec", 40.0, (4e4, 2e4))
    return [scenes.frame(objects, index=i) for i in range(4)]


class TestFrames:
    """From frames to records."""

    def test_errors_shrink_as_the_root_of_their_number(self, shots):
        (alone,) = simimg.measure(shots[0])
        for count in (2, 4):
            (record,) = measure_together(shots[:count]).answer.pairs
            for name in ("separation_arcsec", "position_angle_deg", "magnitude_difference"):
                error = name.replace("_arcsec", "_error_arcsec").replace("_deg", "_error_deg")
                error = "magnitude_difference_error" if name.startswith("mag") else error
                ratio = getattr(alone, error) / getattr(record, error)
                # Errors are those at each estimate, which differs by its own error.
                assert_allclose(ratio, np.sqrt(count), rtol=0.1)
                away = getattr(record, name) - getattr(record.truth, name)
                assert abs(away) < 4.0 * getattr(record, error)

    def test_frames_of_another_night(self, shots):
        """Turned, shifted, through worse air, and with coordinates half a pixel out."""
        others = []
        for seed in (21, 22):
            shot = scenes.frame(
                scenes.pair(
                    "0.9 arcsec", 40.0, (4e4, 2e4), "east = '1 arcsec'\nnorth = '-2 arcsec'"
                ),
                seed=seed,
                rotation=70.0,
                mirrored=True,
                overrides=['air.seeing="1.1 arcsec"'],
            )
            wcs = shot.wcs.deepcopy()
            east = (1.0 + 0.1) / 3600.0 / np.cos(np.radians(20.0))
            wcs.wcs.crval = wcs.wcs.crval - [east, -2.0 / 3600.0]
            others.append(replace(shot, wcs=wcs))
        found = measure_together([shots[0], *others])
        (record,) = found.answer.pairs
        (alone,) = simimg.measure(shots[0])
        turn = record.position_angle_deg - 40.0
        assert abs(record.separation_arcsec - 0.9) < 4.0 * record.separation_error_arcsec
        assert abs(turn) < 4.0 * record.position_angle_error_deg
        assert abs(record.magnitude_difference - 2.5 * np.log10(2)) < (
            4.0 * record.magnitude_difference_error
        )
        assert record.separation_error_arcsec < 0.9 * alone.separation_error_arcsec
        # The limits are those of the sum: between the sharp frame's and the blurred ones'.
        blurred = simimg.measure(others[0])[0].rayleigh.limit_arcsec
        assert alone.rayleigh.limit_arcsec < record.rayleigh.limit_arcsec < blurred
        assert [psf.source for psf in found.psfs] == ["scene"] * 3

    def test_plain_pixels_and_places(self):
        """Arrays without coordinates, a pixel or so out of register; singles stay single."""
        given = Given(gain=out.GAIN, read_noise=out.READ_NOISE, pixel_scale_arcsec=1.0)
        axis = np.arange(-80, 81) / 4.0
        psf = as_choice(out.moffat()(axis[None, :], axis[:, None]), oversampling=4)
        frames = []
        for seed, (dx, dy) in enumerate([(0.0, 0.0), (0.7, -0.4), (-0.6, 0.9)]):
            stars = [*out.STARS, *out.pair(60.3, 58.7, 2.6, 25.0, (3e4, 2e4))]
            image = out.expected([(x + dx, y + dy, e) for x, y, e in stars])
            frames.append(as_frame(out.exposed(image, seed)))
        near = [(60.0, 59.0), (22.0, 24.0)]
        found = measure_together(frames, near=near, given=given, psf=psf, names=["a", "b", "c"])
        pair, single = found.answer.pairs
        assert abs(pair.separation_arcsec - 2.6) < 4.0 * pair.separation_error_arcsec
        assert pair.probability_single < 1e-4
        assert single.probability_single > 0.01
        assert_allclose([pair.x, pair.y], [60.3, 58.7], atol=0.1)
        assert {text.split(":")[0] for text in found.answer.warnings} == {"a", "b", "c"}

    def test_what_is_wrong_with_any_frame_is_said(self, shots):
        elsewhere = shots[1].wcs.deepcopy()
        elsewhere.wcs.crval = [151.0, 20.0]
        lost = replace(shots[1], wcs=elsewhere)
        bare = replace(shots[2], scene_files=(), wcs=None, header={}, psf=None)
        with pytest.raises(InputError) as caught:
            measure_together([shots[0], lost, bare], names=["a", "b", "c"])
        assert [line.split(":")[0] for line in caught.value.lines] == ["b", "c"]
        assert "another field" in caught.value.lines[0]
        with pytest.raises(InputError, match="not on the frame"):
            measure_together(shots[:2], near=[(500.0, 3.0)])
        with pytest.raises(ValueError, match="two frames"):
            measure_together(shots[:1])


def test_places_go_from_frame_to_frame():
    """Through the sky, against astropy's own pixel_to_pixel."""
    from astropy.wcs.utils import pixel_to_pixel

    first = scenes.frame("")
    second = scenes.frame("", rotation=33.0, mirrored=True, overrides=['pointing.ra="150.001 deg"'])
    there = transferred((40.0, 31.0), first, second)
    assert_allclose(there, pixel_to_pixel(first.wcs, second.wcs, 40.0, 31.0), atol=1e-6)
    view = frame_view(2, (40.0, 31.0), first, second)
    for x, y in ((40.0, 31.0), (44.0, 27.0)):
        wanted = pixel_to_pixel(first.wcs, second.wcs, x, y)
        # Linear over a few pixels of a quarter arcsecond.
        assert_allclose(view.place(x, y), wanted, atol=1e-5)
    assert transferred((3.0, 4.0), replace(first, wcs=None), second) == (3.0, 4.0)


def test_single_objects_of_two_frames_are_told_once_and_better():
    """A star and a small galaxy: electrons at the first frame's scale, errors of both frames."""
    objects = scenes.star(1e5, "x = 25.3\ny = 60.1", label="S") + (
        '[[galaxy]]\nlabel = "G"\nx = 62.4\ny = 31.7\nelectrons = 60000\nsersic_index = 1.0\n'
        'effective_radius = "0.3 arcsec"\n'
    )
    one = scenes.frame(objects)
    longer = scenes.frame(objects, index=1)
    both = measure_together([one, longer]).answer
    assert [single.label for single in both.singles] == ["S", "G"]
    assert [single.verdict for single in both.singles] == ["point", "extended"]
    alone = measure_frame(one).singles
    for joint, single in zip(both.singles, alone):
        assert_allclose(joint.electrons_error, single.electrons_error / np.sqrt(2.0), rtol=0.02)
        assert abs(joint.electrons - single.electrons) < 3.0 * single.electrons_error
    assert_allclose(
        both.singles[1].width_error_arcsec, alone[1].width_error_arcsec / np.sqrt(2.0), rtol=0.1
    )


def test_a_pair_of_one_frame_is_no_single_star_of_another():
    objects = scenes.pair("0.6 arcsec", 40.0, (2e5, 1.5e5), "x = 45.3\ny = 44.1")
    bright = replace(scenes.frame(objects), truth=None)
    dim = scenes.frame(scenes.pair("0.6 arcsec", 40.0, (3e3, 1.5e3), "x = 45.3\ny = 44.1"), index=1)
    answer = measure_together([replace(dim, truth=None), bright]).answer
    assert len(answer.pairs) == 1
    assert answer.singles == ()
