"""Adaptive optics of a scene: budget, Strehl ratio, and a PSF of its own for each star."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.assembly.correction import correction_figures, sensor_noise, sensor_photons
from simimg.assembly.fieldplaces import MOST_OWN
from simimg.assembly.objects import inventory
from simimg.assembly.report import LASER_NOTE, cautions, describe
from simimg.assembly.train import assemble_train
from simimg.errors import InputError
from simimg.imaging.basis import Transfer
from simimg.imaging.profile import psf_peak
from simimg.imaging.sources import Points
from simimg.resolving.starpsfs import StarPsfs
from tests.assembly.scenes import scene

ARCSEC = math.radians(1.0 / 3600.0)
BASE = """
title = "corrected"
[telescope]
aperture = "2 m"
[air]
seeing = "0.8 arcsec"
[[air.layer]]
height = "5 km"
wind = "10 m/s"
direction = "25 deg"
[correction]
actuators = 20
delay = "0 s"
aliasing = false
[band]
centre = "600 nm"
width = "1 nm"
[camera]
pixels = [64, 64]
pixel_scale = "0.03 arcsec"
bias = "300 adu"
[exposure]
seed = 4
[[star]]
electrons = 1e6
"""


def corrected(folder, **changes):
    return scene(folder, BASE, **changes)


def left(made, cause):
    """A cause's variance (rad2), and r0 and the wavelength (m)."""
    train = assemble_train(made)
    path = correction_figures(train.corrector, train.optics).budget_nm[cause] * 1e-9
    return (2.0 * math.pi * path / train.wavelength) ** 2, train.fried


class TestEachCauseAlone:
    """Published laws, within 3 %."""

    def test_fitting(self, tmp_path):
        """0.2313 (d/r0)^(5/3), computed from the spectrum."""
        found, r0 = left(corrected(tmp_path), "fitting")
        assert_allclose(found, 0.2313 * (0.1 / r0) ** (5.0 / 3.0), rtol=0.03)

    def test_delay(self, tmp_path):
        """(t/t0)^(5/3), t0 = 0.314 r0/v (Fried 1982; Roddier 1981)."""
        found, r0 = left(corrected(tmp_path, correction__delay="25 ms"), "lag")
        assert_allclose(found, (0.025 * 10.0 / (0.314 * r0)) ** (5.0 / 3.0), rtol=0.03)

    @pytest.mark.parametrize("airmass", [1.0, 1.6])
    def test_angle(self, tmp_path, airmass):
        """(theta/theta0)^(5/3), theta0 = 0.314 r0/h along the line of sight."""
        made = corrected(tmp_path, correction__guide_offset="10 arcsec", air__airmass=airmass)
        found, r0 = left(made, "anisoplanatism")
        theta0 = 0.314 * r0 / (5000.0 * airmass)
        assert_allclose(found, (10.0 * ARCSEC / theta0) ** (5.0 / 3.0), rtol=0.03)

    def test_what_there_is_not_is_nothing(self, tmp_path):
        budget = simimg.limits(corrected(tmp_path)).correction.budget_nm
        for cause in ("lag", "noise", "aliasing", "anisoplanatism", "cone", "tilt"):
            assert budget[cause] == 0.0
        assert budget["total"] == budget["fitting"]

    def test_noise_and_aliasing_are_switched_off(self, tmp_path):
        full = {"correction__guide_magnitude": 9, "correction__aliasing": True}
        whole = simimg.limits(corrected(tmp_path, **full)).correction.budget_nm
        assert min(whole["noise"], whole["aliasing"]) > 1.0
        quiet = simimg.limits(corrected(tmp_path, **full, correction__noise=False))
        assert quiet.correction.budget_nm["noise"] == 0.0
        assert quiet.correction.budget_nm["aliasing"] == whole["aliasing"]
        assert_allclose(
            whole["total"] ** 2 - whole["noise"] ** 2 - whole["aliasing"] ** 2,
            whole["fitting"] ** 2,
        )


@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"delay": "1 ms", "aliasing": True, "guide_magnitude": 7.0},
        {"guide_offset": "1 arcsec", "actuators": 30},
        {"guide": "laser", "tilt_star_offset": "2 arcsec", "actuators": 30},
    ],
)
def test_strehl_of_the_psf_is_that_of_the_variance(tmp_path, changes):
    """exp(-variance) without piston, for variances below 1 rad2 (Marechal): within 3 %."""
    made = corrected(tmp_path, **{f"correction__{k}": v for k, v in changes.items()})
    found = simimg.limits(made)
    assert 0.35 < found.correction.strehl < 0.95
    assert_allclose(found.correction.strehl, found.correction.strehl_from_variance, rtol=0.03)
    # The train's PSF, optics perfect here, is that of the budget.
    assert_allclose(found.strehl, found.correction.strehl, rtol=1e-4)


def test_with_the_loop_off_it_is_the_seeing_exactly(tmp_path):
    (tmp_path / "off").mkdir()
    plain = scene(tmp_path / "off", BASE, correction=None)
    path = tmp_path / "scene.toml"
    path.write_text(BASE)
    off = simimg.load_scene(path, without=["correction"])
    u = np.linspace(-3e6, 3e6, 41)
    one, other = (assemble_train(each).effective(u, u[:, None]) for each in (plain, off))
    assert (one == other).all()
    assert simimg.limits(off).correction is None
    # A laser below every layer shows the loop nothing: the seeing, by another way.
    blind = corrected(
        tmp_path, correction__guide="laser", correction__laser_height="2 km", air__layer=[
            {"height": "5 km"}
        ], correction__tilt_star_offset="1 deg",
    )  # fmt: skip
    train = assemble_train(blind)
    seeing = assemble_train(plain)
    tilt_only = train.corrector.towards(0.0, 0.0)
    assert tilt_only.loop.laser_height == pytest.approx(2000.0)
    assert_allclose(train.fried, seeing.fried)


def test_frames_without_a_correction_are_what_they_were(tmp_path):
    """Layers and a correction taken away leave no trace in the counts."""
    (tmp_path / "plain").mkdir()
    text = BASE[: BASE.index("[[air.layer]]")] + BASE[BASE.index("[band]") :]
    plain = simimg.expose(scene(tmp_path / "plain", text))
    off = simimg.expose(corrected(tmp_path, correction=None))
    assert (plain.counts == off.counts).all()
    assert (simimg.expose(corrected(tmp_path)).counts != off.counts).any()


FAR = {
    "star": [{"electrons": 1e6}, {"electrons": 1e6, "east": "9 arcsec"}],
    "camera__pixels": [700, 64],
}


class TestAnisoplanatism:
    def test_each_star_has_the_psf_of_its_distance(self, tmp_path):
        made = corrected(tmp_path, **FAR)
        found = inventory(made)
        psfs = StarPsfs(found)
        assert not psfs.shared
        near, far = (psf_peak(psfs.star(row)) for row in (0, 1))
        aside = corrected(tmp_path, correction__guide_offset="9 arcsec",
                          correction__guide_position_angle="-90 deg")  # fmt: skip
        assert_allclose(far, psf_peak(assemble_train(aside).effective), rtol=1e-6)
        assert far < 0.3 * near
        # The engine's weights give each star its own member.
        basis = found.train.basis
        shares = basis.weights(found.points)
        assert_allclose(shares, [[1.0, 0.0], [0.0, 1.0]])
        assert_allclose(psf_peak(basis.members[1]), far, rtol=1e-12)

    def test_the_frame_shows_it(self, tmp_path):
        frame = simimg.expose(corrected(tmp_path, **FAR), keep=["expected"])
        near, far = (
            float(frame.expected[30:34, round(x) - 2 : round(x) + 3].max())
            for x in frame.truth["x"]
        )
        assert far < 0.4 * near

    @pytest.mark.parametrize("rotation", ["0 deg", "35 deg"])
    @pytest.mark.parametrize("mirrored", [False, True])
    def test_images_are_drawn_out_towards_the_guide_star(self, tmp_path, rotation, mirrored):
        """Two rays displaced along s differ most in the tilt along s (Roddier 1981)."""
        made = corrected(
            tmp_path,
            correction__guide_offset="5 arcsec",
            correction__guide_position_angle="70 deg",
            camera__rotation=rotation,
            camera__mirrored=mirrored,
        )
        train = assemble_train(made)
        geometry = inventory(made, train=train).geometry
        size = 0.4 * 2.0 / train.wavelength

        def along(position_angle):
            angle = geometry.direction(math.radians(position_angle))
            return float(train.focal(size * math.cos(angle), size * math.sin(angle)))

        values = {one: along(one) for one in range(0, 180, 10)}
        assert min(values, key=values.get) == 70
        # The square of control lies along east and north, aslant to it.
        assert_allclose(values[60], values[80], rtol=2e-3)
        assert values[160] > 1.05 * values[70]

    def test_lag_draws_images_out_along_the_wind(self, tmp_path):
        train = assemble_train(corrected(tmp_path, correction__delay="10 ms"))
        size = 0.4 * 2.0 / train.wavelength

        def along(position_angle):
            angle = math.radians(position_angle + 90.0)  # north up, east left
            return float(train.focal(size * math.cos(angle), size * math.sin(angle)))

        assert min(range(0, 180, 5), key=along) == 25

    def test_turbulence_at_the_telescope_is_the_same_for_all(self, tmp_path):
        made = corrected(tmp_path, **FAR, air__layer=[{"height": "0 m"}])
        assert len(assemble_train(made).basis.members) == 1

    def test_many_stars_share_the_psfs_of_rings(self, tmp_path):
        """Between the rings: within 4 % of the peak of the star's own PSF."""
        stars = [
            {"electrons": 1e5, "x": 20 + 25 * (k % 6), "y": 15 + 25 * (k // 6)}
            for k in range(MOST_OWN + 12)
        ]
        made = corrected(
            tmp_path, star=stars, camera__pixels=[180, 180], camera__pixel_scale="0.06 arcsec",
            correction__guide_offset="2 arcsec",
        )  # fmt: skip
        train = assemble_train(made)
        assert MOST_OWN < len(train.basis.members) <= 1 + 8 * 10
        x, y = np.array([80.0, 95.0, 120.5, 33.0]), np.array([90.0, 97.0, 141.0, 20.0])
        shares = train.basis.weights(Points(x, y, np.ones(4)))
        assert_allclose(shares.sum(axis=1), 1.0)
        peaks = np.array([psf_peak(one) for one in train.basis.members])
        own = [psf_peak(train.star(0, a, b)) for a, b in zip(x, y, strict=True)]
        assert_allclose(shares @ peaks, own, rtol=0.04)


class TestGuideStar:
    def test_photons_and_noise(self, tmp_path):
        """R of magnitude 8: 3064 Jy / h over the band's width, by 0.3 x pitch^2 / rate."""
        correction = corrected(tmp_path, correction__guide_magnitude=8).correction
        photons = sensor_photons(correction, pitch=0.1)
        assert 5.0 < photons < 50.0
        fainter = correction.model_copy(update={"guide_magnitude": 10.5})
        assert_allclose(sensor_photons(fainter, pitch=0.1), 0.1 * photons)
        one, other = (
            sensor_noise(each, pitch=0.1, fried=0.15, at=600e-9) for each in (correction, fainter)
        )
        assert_allclose(other, 10.0 * one)

    def test_a_laser_costs_cone_and_leaves_tilt_to_a_star(self, tmp_path):
        laser = corrected(
            tmp_path, correction__guide="laser", correction__tilt_star_offset="20 arcsec"
        )
        budget = simimg.limits(laser).correction.budget_nm
        assert budget["cone"] > 1.0
        assert budget["tilt"] > 1.0
        assert budget["anisoplanatism"] == 0.0
        higher = corrected(
            tmp_path, correction__guide="laser", correction__laser_height="180 km"
        )  # fmt: skip
        found = simimg.limits(higher).correction.budget_nm
        # (h/H)^(5/6) in path, by the leading term.
        assert_allclose(found["cone"] / budget["cone"], 0.5 ** (5.0 / 6.0), rtol=0.1)
        assert found["tilt"] == 0.0

    def test_lasers_bring_their_caution(self, tmp_path):
        assert LASER_NOTE in cautions(corrected(tmp_path, correction__guide="laser"))
        assert LASER_NOTE not in cautions(corrected(tmp_path))


def test_check_says_what_corrects_and_where_it_cannot(tmp_path):
    meaning = describe(corrected(tmp_path, correction__guide_magnitude=8))
    lines = {name: (value, remark) for name, value, remark in meaning.lines}
    assert lines["correction"][0] == "20 actuators across"
    assert "photons a measurement" in lines["correction"][1]
    assert {"correction.rate", "correction.sensor_band"} <= {key for key, _, _ in meaning.defaults}
    above = describe(corrected(tmp_path, air=None))
    assert any("nothing to correct" in one for one in above.warnings)


def test_tilt_removed_contradicts_a_correction(tmp_path):
    with pytest.raises(InputError, match="tilt_removed"):
        corrected(tmp_path, air__tilt_removed="near")


def test_a_correction_does_not_narrow_what_the_image_quality_says_of_the_air(tmp_path):
    plain, made = (
        corrected(tmp_path, air={"image_quality": "0.7 arcsec"}, **changes)
        for changes in ({"correction": None}, {})
    )
    assert_allclose(assemble_train(plain).seeing, assemble_train(made).seeing)
    assert isinstance(assemble_train(made).effective, Transfer)
