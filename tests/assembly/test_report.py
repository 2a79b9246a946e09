"""What a scene means, in words and figures."""

import pytest

from simimg.assembly.report import cautions, describe
from tests.assembly.scenes import TEXT, scene


def test_every_default_is_listed(tmp_path):
    """Take each key away that the file gives and has a default: it must then be listed."""
    listed = {key for key, _, _ in describe(scene(tmp_path)).defaults}
    assert {
        "camera.dark_current",
        "camera.full_well",
        "camera.bit_depth",
        "exposure.count",
    } <= listed
    assert "camera.gain" not in listed
    for key in (
        "camera.gain",
        "camera.read_noise",
        "camera.bias",
        "telescope.throughput",
        "telescope.obstruction",
        "air.extinction",
        "air.airmass",
        "exposure.seed",
        "camera.quantum_efficiency",
    ):
        without = {
            k for k, _, _ in describe(scene(tmp_path, **{key.replace(".", "__"): None})).defaults
        }
        assert key in without


def test_the_figures_are_those_of_the_train(tmp_path):
    values = describe(scene(tmp_path)).to_dict()
    assert values["pixel_scale_arcsec"] == pytest.approx(0.25)
    assert values["wavelength_nm"] == pytest.approx(550)
    assert values["seeing_arcsec"] == pytest.approx(0.9)
    assert values["r0_m"] == pytest.approx(0.1124, rel=1e-3)


def test_a_low_bias_is_warned_of(tmp_path):
    warnings = describe(scene(tmp_path, camera__bias="8 adu")).warnings
    assert any("clip at zero" in w for w in warnings)
    assert not any("clip at zero" in w for w in describe(scene(tmp_path)).warnings)


def test_a_converter_that_ends_before_the_well_is_warned_of(tmp_path):
    warnings = describe(scene(tmp_path, camera__full_well="200000 electron")).warnings
    assert any("before the full well" in w for w in warnings)


def test_undersampling_is_warned_of(tmp_path):
    warnings = describe(scene(tmp_path, camera__pixel_scale="0.8 arcsec")).warnings
    assert any("undersampled" in w for w in warnings)


def test_every_scene_is_called_a_simulation_and_the_sun_brings_its_caution(tmp_path):
    assert "simulation" in " ".join(cautions(scene(tmp_path)))
    assert "unfiltered" not in " ".join(cautions(scene(tmp_path)))
    assert "unfiltered" in " ".join(
        cautions(scene(tmp_path, title="A sunspot near the limb"))
        + (cautions(scene(tmp_path, title="The Sun at noon")))
    )
    bright = scene(tmp_path, TEXT.replace("magnitude = 17", "magnitude = -26.7"))
    assert "unfiltered" in " ".join(cautions(bright))


def test_a_star_that_saturates_is_warned_of(tmp_path):
    bright = scene(tmp_path, star__0__magnitude=9)
    assert any(w.startswith("1 star saturates") for w in describe(bright).warnings)
    assert not any("saturate" in w for w in describe(scene(tmp_path)).warnings)


def test_a_band_that_the_air_shuts_out_is_warned_of(tmp_path):
    """Common practice: ozone below 300 nm, water vapour at 1.4 um."""
    for centre, word in (("250 nm", "ozone"), ("1.4 um", "water vapour")):
        band = {"centre": centre, "width": "20 nm"}
        warnings = describe(scene(tmp_path, band=band)).warnings
        assert any("the air is shut" in w and word in w for w in warnings)
        above = describe(scene(tmp_path, band=band, air=None)).warnings
        assert not any("the air is shut" in w for w in above)
    assert not any("the air is shut" in w for w in describe(scene(tmp_path)).warnings)


def test_a_radio_dish_has_limits_and_no_counts(tmp_path):
    """1.2197 lambda/D at 21 cm through 100 m; and expose says why it does not count photons."""
    import simimg
    from simimg.errors import InputError

    dish = scene(
        tmp_path,
        air=None,
        telescope={"aperture": "100 m"},
        band={"centre": "21 cm", "width": "1 mm"},
        camera__pixel_scale="100 arcsec",
        star__0={"electrons": 1e5},
        sky=None,
    )
    limits = simimg.limits(dish)
    dark_ring = 1.21967 * 0.21 / 100 * 206264.806
    assert limits.diffraction.rayleigh_arcsec == pytest.approx(dark_ring, rel=1e-4)
    with pytest.raises(InputError, match="not that of counted photons"):
        simimg.expose(dish)
