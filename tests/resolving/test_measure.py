"""measure, from scene to record: pairs of TRUTH, places, finds; what is wrong is said."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.errors import InputError
from simimg.frame import Frame
from simimg.resolving.measure import measure, measure_all
from tests.resolving.scenes import frame, pair, scene, star


def within(record, *, errors=4.0):
    """Whether a record agrees with its truth to so many of its errors."""
    truth = record.truth
    turn = (record.position_angle_deg - truth.position_angle_deg + 180.0) % 360.0 - 180.0
    away = [
        (record.separation_arcsec - truth.separation_arcsec) / record.separation_error_arcsec,
        turn / record.position_angle_error_deg,
        (record.magnitude_difference - truth.magnitude_difference)
        / record.magnitude_difference_error,
    ]
    return bool(np.all(np.abs(away) < errors))


@pytest.mark.parametrize(("rotation", "mirrored"), [(0.0, False), (37.0, False), (200.0, True)])
@pytest.mark.parametrize("electrons", [(2e5, 1e5), (6e4, 2e5)])
def test_a_pair_of_truth_on_any_sky(rotation, mirrored, electrons):
    shot = frame(
        pair("1.3 arcsec", 290.0, electrons, "east = '2 arcsec'\nnorth = '-1 arcsec'"),
        rotation=rotation,
        mirrored=mirrored,
    )
    (record,) = measure(shot)
    assert record.label == "P"
    assert within(record)
    assert not record.ambiguous_180
    # TRUTH says which star is first, also where it is the fainter.
    assert np.sign(record.magnitude_difference) == np.sign(electrons[0] - electrons[1])
    first = shot.truth[0]
    # A hundredth of a pixel: several errors of stars this bright.
    assert_allclose([record.x, record.y], [first["x"], first["y"]], atol=0.02)
    assert_allclose(
        [record.ra_deg, record.dec_deg], [first["ra"], first["dec"]], atol=0.02 * 0.25 / 3600
    )
    sky = shot.wcs.pixel_to_world(record.x, record.y)
    assert_allclose([record.ra_deg, record.dec_deg], [sky.ra.deg, sky.dec.deg], atol=1e-9)
    assert record.probability_single < 1e-100


def test_the_start_is_blind():
    """What TRUTH says of separation and angle may be wrong without changing the answer."""
    shot = frame(pair("0.6 arcsec", 40.0, (2e5, 1e5)))
    (honest,) = measure(shot)
    table = shot.truth.copy()
    table["separation"][:] = 5.0
    table["position_angle"][:] = 1.0
    table["electrons"][:] = 7.0
    (misled,) = measure(replace(shot, truth=table))
    names = ("separation_arcsec", "position_angle_deg", "magnitude_difference")
    for name in (*names, "probability_single"):
        assert getattr(honest, name) == getattr(misled, name)
    assert misled.truth.separation_arcsec == 5.0
    assert within(honest)


@pytest.mark.parametrize("separation", [0.6, 1.0, 1.6, 2.4, 4.0, 9.0])
def test_close_and_wide_pairs(separation):
    (record,) = measure(frame(pair(f"{separation} arcsec", 75.0, (2e5, 1.2e5))))
    assert within(record)
    limit = record.rayleigh.limit_arcsec
    # Errors are a hundredth of the limit here, so that the verdicts are clear.
    assert record.rayleigh.verdict == ("resolved" if separation > limit else "unresolved")
    assert record.elongated == (separation < record.sparrow.limit_arcsec)


def test_limits_are_those_of_the_scene():
    shot = frame(pair("0.9 arcsec", 75.0, (2e5, 1.2e5)))
    (record,) = measure(shot)
    (own,) = simimg.limits(scene(pair("0.9 arcsec", 75.0, (2e5, 1.2e5)))).objects
    # The measured angle and magnitude difference are a little off those of the scene.
    assert_allclose(record.rayleigh.limit_arcsec, own.delivered.rayleigh_arcsec, rtol=1e-3)
    assert_allclose(record.sparrow.limit_arcsec, own.delivered.sparrow_arcsec, rtol=0.02)


def test_above_the_air():
    (record,) = measure(frame(pair("0.12 arcsec", 75.0, (2e5, 1e5)), air=False))
    assert within(record)
    assert record.rayleigh.verdict == record.sparrow.verdict == "resolved"
    # A deep saddle in the pixels too.
    assert record.saddle_ratio < 0.4


def test_places_one_record_each_in_order():
    objects = (
        pair("0.7 arcsec", 40.0, (2e5, 1e5), "x = 30\ny = 40")
        + star(1.5e5, "x = 66.4\ny = 30.2")
        + star(900, "x = 70\ny = 70")
    )
    shot = frame(objects)
    places = [(67.0, 29.0), (15.0, 75.0), (30.5, 41.0), (70.0, 70.5)]
    records = measure(shot, near=places)
    single, nothing, double, faint = records
    assert single.probability_single > 0.01
    assert_allclose([single.x, single.y], [66.4, 30.2], atol=0.1)
    assert single.rayleigh.verdict == single.sparrow.verdict == "unresolved"
    assert not single.elongated
    assert nothing.probability_single == 1.0
    assert np.isnan(nothing.separation_arcsec)
    assert (nothing.x, nothing.y) == (15.0, 75.0)
    assert nothing.to_dict()["separation_arcsec"] is None
    assert double.probability_single < 1e-50
    assert_allclose(double.separation_arcsec, 0.7, atol=4.0 * double.separation_error_arcsec)
    # Blind: of the fainter about the brighter.
    assert double.magnitude_difference > 0.0
    assert faint.probability_single > 0.01
    assert [record.truth for record in records] == [None] * 4
    everything = measure_all(shot, near=places)
    assert [record.label for record in everything[:5]] == ["P", "", "", "", ""]
    assert len(everything) == 5


def test_a_blind_pair_of_near_equals_may_be_half_a_turn_off():
    (record,) = measure(frame(pair("1.1 arcsec", 40.0, (5e4, 5e4))), near=[(47.5, 44.5)])
    assert record.ambiguous_180
    (clear,) = measure(frame(pair("1.1 arcsec", 40.0, (5e4, 2e4))), near=[(47.5, 44.5)])
    assert not clear.ambiguous_180


@pytest.mark.parametrize("separation", [2.1, 3.2])
def test_a_star_beside_the_disc_is_the_companion(separation):
    """Farther than two FWHM (0.88 arcsec each), near enough to be meant."""
    shot = frame(pair(f"{separation} arcsec", 120.0, (2e5, 8e4)))
    (record,) = measure(shot, near=[(47.5, 44.5)])
    assert_allclose(record.separation_arcsec, separation, atol=5.0 * record.separation_error_arcsec)
    assert record.rayleigh.verdict == "resolved"


def test_neighbours_are_allowed_for():
    """A close pair with two brighter stars in the skirts of its cutout."""
    objects = (
        pair("0.7 arcsec", 40.0, (1e5, 6e4))
        + star(4e5, "east = '3.6 arcsec'\nnorth = '1 arcsec'")
        + star(2e5, "east = '-2 arcsec'\nnorth = '4 arcsec'")
    )
    (record,) = measure(frame(objects))
    assert within(record)
    # Alone it would be measured with nearly the same error.
    (alone,) = measure(frame(pair("0.7 arcsec", 40.0, (1e5, 6e4))))
    assert record.separation_error_arcsec < 1.3 * alone.separation_error_arcsec


def test_a_saturated_core_is_left_out():
    shot = frame(
        pair("1.2 arcsec", 40.0, (9e5, 4e5)), overrides=["camera.full_well='40000 electron'"]
    )
    assert (shot.mask > 0).sum() >= 4
    for seen in (shot, replace(shot, mask=None)):
        (record,) = measure(seen)
        assert within(record)
        assert np.isnan(record.saddle_ratio)


def test_pairs_are_found_without_truth():
    objects = (
        pair("0.8 arcsec", 40.0, (2e5, 1e5), "x = 25\ny = 40")
        + star(3e5, "x = 70\ny = 25")
        + star(5e3, "x = 66\ny = 66")
    )
    shot = replace(frame(objects), truth=None)
    (record,) = measure(shot)
    assert_allclose([record.x, record.y], [25, 40], atol=0.1)
    assert_allclose(record.separation_arcsec, 0.8, atol=4.0 * record.separation_error_arcsec)
    assert record.label == ""
    assert record.truth is None


def test_a_galaxy_is_no_pair():
    galaxy = """
[[galaxy]]
sersic_index = 1
effective_radius = "1.5 arcsec"
axis_ratio = 0.4
position_angle = "30 deg"
electrons = 1e6
"""
    assert measure(frame(galaxy)) == []


def test_an_empty_frame_has_nothing():
    assert measure(frame("")) == []


def test_a_frame_read_back_gives_the_same_answer(tmp_path):
    shot = frame(pair("0.9 arcsec", 40.0, (2e5, 1e5)))
    shot.write(tmp_path / "pair.fits")
    again = Frame.read(tmp_path / "pair.fits")
    assert measure(again) == measure(shot)


def test_pairs_that_leave_the_frame_are_not_measured():
    shot = frame(
        pair("0.9 arcsec", 90.0, (2e5, 1e5), "x = 200\ny = 40")
        + pair("2 arcsec", 90.0, (2e5, 1e5), "x = 3\ny = 40")
        + pair("0.8 arcsec", 0.0, (2e5, 1e5), "x = 50\ny = 40", label="in")
    )
    assert [record.label for record in measure(shot)] == ["in"]


def test_a_pair_at_the_edge_is_measured_as_well_as_it_shows():
    shot = frame(pair("0.9 arcsec", 0.0, (2e5, 1e5), "x = 1\ny = 40"))
    (record,) = measure(shot)
    assert within(record, errors=5.0)


def test_mistakes_are_named():
    shot = frame(pair("0.9 arcsec", 40.0, (2e5, 1e5)))
    with pytest.raises(InputError) as caught:
        measure(shot, near=[(-3.0, 5.0), (10.0, 10.0), (np.nan, 2.0)])
    assert len(caught.value.lines) == 2
    assert all("not on the frame" in line for line in caught.value.lines)
    with pytest.raises(InputError, match="nor a pixel scale"):
        measure(replace(shot, scene_files=(), wcs=None, header={}))


def test_exposures_differ_and_the_same_one_repeats():
    objects = pair("0.5 arcsec", 40.0, (3e4, 2e4))
    first, again, second = (measure(frame(objects, index=i))[0] for i in (0, 0, 1))
    assert first == again
    assert first.separation_arcsec != second.separation_arcsec
