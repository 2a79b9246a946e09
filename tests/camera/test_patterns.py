"""Fixed patterns, shutter, bleeding, cosmic rays: means and variances against theory."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.stats import kstest

from simimg.camera.bleeding import bleed
from simimg.camera.chain import CameraSettings, record
from simimg.camera.cosmicrays import PER_METRE, cosmic_hits
from simimg.camera.fixed import fixed_patterns
from simimg.camera.masks import BAD_COLUMN, BLEEDING, COSMIC_RAY, DEAD, FLICKERING, HOT, SATURATED
from simimg.camera.settings import CosmicRays, Patterns, Shutter
from simimg.camera.shutter import shutter_pattern

SHAPE = (300, 400)


def response(**what):
    return fixed_patterns(SHAPE, Patterns(**what), 5, 0.0).response.astype(float)


def test_flat_has_its_rms_and_a_mean_of_one():
    flat = response(flat_rms=0.02)
    assert flat.mean() == pytest.approx(1.0, abs=4 * 0.02 / math.sqrt(flat.size))
    assert flat.std() == pytest.approx(0.02, rel=4 / math.sqrt(2 * flat.size))


def test_flat_response_scales_mean_and_the_lights_own_variance():
    settings = CameraSettings(patterns=Patterns(flat_rms=0.1), bias=100.0, bit_depth=20, serial=3)
    light = np.full(SHAPE, 900.0)
    flat = fixed_patterns(SHAPE, settings.patterns, 3, 0.0).response.astype(float)
    frames = np.array(
        [record(light, settings=settings, seed=7, frame=i).counts - 100.0 for i in range(60)]
    )
    residual = (frames - 900.0 * flat) / np.sqrt(900.0 * flat)
    count = residual.size
    assert abs(residual.mean()) < 4.0 / math.sqrt(count)
    assert residual.var() == pytest.approx(1.0, abs=4.0 * math.sqrt(2.0 / count))
    # Forgetting the response would show.
    assert ((frames - 900.0) / 30.0).var() > 5.0


def test_the_serial_number_fixes_the_patterns_and_the_seed_does_not():
    settings = CameraSettings(patterns=Patterns(flat_rms=0.05, dead_fraction=0.01), serial=3)
    light = np.full(SHAPE, 1e6)
    one, other = (record(light, settings=settings, seed=seed).counts for seed in (1, 2))
    third = record(
        light,
        settings=CameraSettings(patterns=settings.patterns, serial=4),
        seed=1,
    ).counts
    assert np.corrcoef(one.ravel(), other.ravel())[0, 1] > 0.99
    assert abs(np.corrcoef(one.ravel(), third.ravel())[0, 1]) < 0.02


def test_vignetting_is_lost_in_the_corners():
    flat = response(vignetting=0.3)
    assert_allclose(flat[[0, 0, -1, -1], [0, -1, 0, -1]], 0.7, rtol=1e-5)
    assert flat[SHAPE[0] // 2, SHAPE[1] // 2] == pytest.approx(1.0, abs=1e-4)
    # Quadratic: half way to a corner a quarter of it.
    assert flat[75, 100] == pytest.approx(1.0 - 0.3 / 4, abs=1e-3)


def test_dust_throws_rings():
    flat = response(dust_rings=12)
    assert 0.8 < flat.min() < 0.99
    assert flat.max() == 1.0
    assert 0.01 < (flat < 0.995).mean() < 0.4


def test_dark_pattern_has_its_mean_and_rms():
    fixed = fixed_patterns(SHAPE, Patterns(dark_rms=0.3), 5, 2.0)
    assert fixed.currents.mean() == pytest.approx(2.0, rel=5 * 0.3 / math.sqrt(120000))
    assert fixed.currents.std() == pytest.approx(0.6, rel=0.03)
    assert fixed.currents.min() > 0.0
    settings = CameraSettings(
        time=50.0, dark_current=2.0, patterns=Patterns(dark_rms=0.3), serial=5, bias=9.0,
        bit_depth=20,
    )  # fmt: skip
    counts = np.array(
        [record(np.zeros(SHAPE), settings=settings, seed=1, frame=i).counts for i in range(40)]
    )
    mean = 50.0 * fixed.currents.astype(float)
    residual = (counts - 9.0 - mean) / np.sqrt(mean)
    assert residual.var() == pytest.approx(1.0, abs=4 * math.sqrt(2 / residual.size))


def test_hot_pixels_are_so_many_and_so_hot():
    fixed = fixed_patterns(SHAPE, Patterns(hot_fraction=0.01, hot_current=30.0), 8, 0.5)
    hot = (fixed.mask & HOT) > 0
    count = hot.sum()
    assert abs(count - 1200) < 4 * math.sqrt(1200)
    extra = fixed.currents[hot].astype(float) - 0.5
    assert kstest(extra, "expon", args=(0, 30.0)).pvalue > 1e-3
    assert kstest(extra, "expon", args=(0, 20.0)).pvalue < 1e-6
    assert_allclose(fixed.currents[~hot], 0.5)


def test_flickering_pixels_jump_between_two_levels():
    patterns = Patterns(flickering_fraction=0.02, flicker_current=5.0)
    settings = CameraSettings(time=1e4, patterns=patterns, serial=2, bit_depth=31)
    fixed = fixed_patterns(SHAPE, patterns, 2, 0.0)
    strong = fixed.flicker > 2.0
    dark = np.zeros(SHAPE)
    frames = np.array(
        [record(dark, settings=settings, seed=1, frame=i).counts[strong] for i in range(80)]
    )
    on = frames > 0.5e4 * fixed.flicker[strong]
    count = on.size
    assert on.mean() == pytest.approx(0.5, abs=4 * 0.5 / math.sqrt(count))
    assert (frames[~on] == 0).all()
    assert_allclose((frames / (1e4 * fixed.flicker[strong]))[on].mean(), 1.0, rtol=1e-3)
    assert ((fixed.mask & FLICKERING) > 0).sum() == (fixed.flicker > 0).sum()
    still = record(dark, settings=settings, seed=1).counts[fixed.flicker == 0.0]
    assert (still == 0).all()


def test_dead_pixels_and_bad_columns_respond_less():
    patterns = Patterns(dead_fraction=0.01, bad_columns=3)
    settings = CameraSettings(patterns=patterns, serial=4, bit_depth=20)
    recorded = record(np.full(SHAPE, 1e4), settings=settings, seed=1)
    dead, bad = (recorded.mask & DEAD) > 0, (recorded.mask & BAD_COLUMN) > 0
    assert (recorded.counts[dead] == 0).all()
    assert abs(dead.sum() - 1200) < 4 * math.sqrt(1200)
    assert len(np.unique(np.flatnonzero(bad.any(axis=0)))) == 3
    assert recorded.counts[bad & ~dead].max() < 0.52e4
    assert recorded.counts[~bad & ~dead].mean() == pytest.approx(1e4, rel=1e-3)
    # From some row on to the last.
    for column in np.flatnonzero(bad.any(axis=0)):
        first = int(bad[:, column].argmax())
        assert bad[first:, column].all()


def test_bleeding_conserves_charge_and_keeps_to_its_column():
    electrons = np.full((101, 7), 100.0)
    electrons[50, 3] = 100.0 + 20 * 900.0
    before = electrons.sum()
    full, taken = bleed(electrons, 1000.0)
    assert electrons.sum() == before
    assert electrons.max() == 1000.0
    assert full[:, 3].sum() == 20 + (electrons[:, 3] == 1000.0).sum() - 20
    assert 19 <= full.sum() <= 21
    rows = np.flatnonzero(taken[:, 3])
    assert rows.min() + rows.max() == pytest.approx(100, abs=1)
    assert not taken[:, [0, 1, 2, 4, 5, 6]].any()


def test_bleeding_is_lost_only_at_the_edges():
    electrons = np.full((11, 1), 900.0)
    electrons[0, 0] = 1000.0 + 5000.0
    bleed(electrons, 1000.0)
    # All of the excess that goes down is lost, of that which goes up what finds no room.
    assert_array_equal(electrons[:, 0], 1000.0)
    many = np.full((40, 3), 500.0)
    many[20] = 5000.0
    total = many.sum()
    bleed(many, 1000.0)
    assert many.sum() == total


def test_bleeding_marks_what_took_charge():
    settings = CameraSettings(full_well=1000.0, bleeding=True)
    light = np.full((60, 40), 10.0)
    light[30, 20] = 6000.0
    recorded = record(light, settings=settings, seed=3)
    assert (recorded.mask[30, 20] & SATURATED) > 0
    assert (recorded.mask[31, 20] & BLEEDING) > 0
    assert recorded.mask[:, 19].max() == 0
    hard = record(light, settings=CameraSettings(full_well=1000.0), seed=3)
    assert hard.counts[31, 20] < 40


@pytest.mark.parametrize(("kind", "middle", "corner"), [("iris", 1.0, 0.6), ("blade", 0.8, 1.0)])
def test_shutters_expose_by_place(kind, middle, corner):
    pattern = shutter_pattern((101, 101), Shutter(kind=kind, travel=0.2), time=1.0)
    assert pattern[50, 50] == pytest.approx(middle, rel=1e-6)
    assert pattern[0, 0] == pytest.approx(corner, rel=1e-6)
    assert pattern[0, 100] == pytest.approx(0.6, rel=1e-6)
    # The longer the exposure, the less it shows.
    longer = shutter_pattern((101, 101), Shutter(kind=kind, travel=0.2), time=100.0)
    assert longer.min() == pytest.approx(1.0 - 0.4 / 100.0, rel=1e-6)


def test_a_shutter_dims_light_and_not_the_dark_signal():
    settings = CameraSettings(
        time=1.0, dark_current=500.0, shutter=Shutter(kind="blade", travel=0.5), bit_depth=20
    )
    dark = record(np.zeros((64, 200)), settings=settings, seed=1).counts
    lit = record(np.full((64, 200), 1e5), settings=settings, seed=1).counts
    assert dark[:, -20:].mean() == pytest.approx(500.0, rel=0.01)
    assert lit[:, 0].mean() == pytest.approx(1e5, rel=0.01)
    assert lit[:, -1].mean() == pytest.approx(500.0, rel=0.1)


RAYS = CosmicRays(rate=2e6, pixel_size=1e-5, thickness=2e-5)


def test_cosmic_rays_come_at_their_rate():
    # Few enough that hits stay apart: count them where there is one layer of pixels between.
    expected = RAYS.rate * 0.1 * 100 * 100 * 1e-10
    hits = [
        cosmic_hits((100, 100), RAYS, time=0.1, rng=np.random.default_rng(i))[0].any()
        for i in range(3000)
    ]
    # The chance of any: 1 - exp(-mean), tracks that begin inside always leave charge.
    chance = 1.0 - math.exp(-expected)
    assert np.mean(hits) == pytest.approx(chance, abs=4 * math.sqrt(chance / 3000))


def test_tracks_have_the_length_and_the_charge_of_their_slant(monkeypatch):
    monkeypatch.setattr("simimg.camera.cosmicrays.STARS", 0.0)
    shape, lengths, charges = (801, 801), [], []
    one = CosmicRays(rate=1e-30, pixel_size=1e-5, thickness=2e-5)

    class Single:
        """A generator that draws one hit, in the middle."""

        def __init__(self, seed):
            self.rng = np.random.default_rng(seed)

        def poisson(self, mean):
            assert mean >= 0.0
            return 1

        def uniform(self, low, high):
            if low == -0.5:
                return 0.5 * (low + high)
            return self.rng.uniform(low, high)

        def __getattr__(self, name):
            return getattr(self.rng, name)

    for seed in range(1500):
        charge, hit = cosmic_hits(shape, one, time=1.0, rng=Single(seed))
        rows, columns = np.nonzero(hit)
        lengths.append(math.hypot(np.ptp(rows), np.ptp(columns)))
        charges.append(charge.sum())
    # cos(theta) = sqrt(U): tan(theta) has the distribution 1 - 1 / (1 + t^2); in pixels, of a layer
    # two pixels thick. Rounded to pixels: within one and a half of them.
    for share in (0.25, 0.5, 0.75, 0.9):
        tangent = math.sqrt(1.0 / (1.0 - share) - 1.0)
        assert np.quantile(lengths, share) == pytest.approx(2.0 * tangent, abs=1.0)
    # The least slant frees some 80 electrons a micrometre at the most probable.
    vertical = np.array(charges)[np.array(lengths) <= 1.0]
    counts, edges = np.histogram(vertical, bins=np.arange(400, 4000, 200))
    mode = 0.5 * (edges[counts.argmax()] + edges[counts.argmax() + 1])
    assert mode == pytest.approx(PER_METRE * 2e-5, rel=0.25)
    # Straggling to one side.
    assert np.mean(vertical) > np.median(vertical)


def test_stars_have_several_tracks(monkeypatch):
    monkeypatch.setattr("simimg.camera.cosmicrays.STARS", 1.0)
    charge, hit = cosmic_hits((200, 200), RAYS, time=5.0, rng=np.random.default_rng(3))
    assert charge[hit].mean() > 2 * PER_METRE * 1e-5
    assert (charge == np.rint(charge)).all()


def test_cosmic_rays_are_marked_and_threads_change_nothing():
    settings = CameraSettings(
        time=3.0,
        cosmic_rays=RAYS,
        full_well=5000.0,
        bleeding=True,
        patterns=Patterns(flat_rms=0.01, hot_fraction=0.01, flickering_fraction=0.01),
        read_noise=4.0,
        bias=100.0,
        serial=9,
    )
    light = np.full((200, 150), 300.0)
    light[100, 70] = 5e4
    one = record(light, settings=settings, seed=5)
    many = record(light, settings=settings, seed=5, threads=4)
    assert_array_equal(one.counts, many.counts)
    assert_array_equal(one.mask, many.mask)
    hit = (one.mask & COSMIC_RAY) > 0
    assert hit.any()
    quiet = record(
        light,
        settings=CameraSettings(**{**settings.__dict__, "cosmic_rays": None}),
        seed=5,
    )
    # Where no ray fell nothing has changed, bleeding columns apart.
    same = ~(hit | ((one.mask & (BLEEDING | SATURATED)) > 0))
    assert_array_equal(one.counts[same], quiet.counts[same])
    assert (one.counts[hit].astype(float) > quiet.counts[hit]).mean() > 0.95


@pytest.mark.parametrize(
    ("kind", "wrong"),
    [
        (Patterns, {"flat_rms": -0.1}),
        (Patterns, {"hot_fraction": 1.0}),
        (Patterns, {"dark_rms": math.nan}),
        (CosmicRays, {"pixel_size": 1e-5, "rate": 0.0}),
        (Shutter, {"travel": 1.0, "kind": "door"}),
        (Shutter, {"kind": "iris", "travel": 0.0}),
    ],
)
def test_settings_out_of_range(kind, wrong):
    with pytest.raises(ValueError, match=list(wrong)[-1]):
        kind(**wrong)
