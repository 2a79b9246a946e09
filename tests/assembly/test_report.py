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
    # Its image without noise is had all the same: a beam of 446 arcsec, nearly all in the frame.
    image = simimg.noise_free(dish)
    assert image.sum() == pytest.approx(1e5, rel=0.03)
    middle = image[40]
    assert (middle > 0.5 * middle.max()).sum() == pytest.approx(
        1.029 * 0.21 / 100 * 206264.806 / 100, abs=1
    )


def test_the_image_without_noise_is_what_a_frame_expects(tmp_path):
    import simimg

    plain = scene(tmp_path)
    frame = simimg.expose(plain, keep=["expected"])
    assert (simimg.noise_free(plain).astype("f4") == frame.expected).all()


def test_light_far_from_photon_counting_is_told_by_the_wavelength(tmp_path):
    import simimg
    from simimg.errors import InputError

    for centre, width, why in (("31 um", "1 um", "measure waves"), ("80 nm", "4 nm", "frees many")):
        far = scene(tmp_path, air=None, sky=None, band={"centre": centre, "width": width})
        with pytest.raises(InputError, match=f"counted photons.*{why}"):
            simimg.expose(far)


def test_a_wavefront_is_described(tmp_path):
    lines = {name: (value, remark) for name, value, remark in describe(scene(tmp_path)).lines}
    assert "wavefront" not in lines
    rough = scene(tmp_path, telescope__wavefront={"zernike": {"4": "40 nm", "7": "30 nm"}})
    found = describe(rough)
    lines = {name: (value, remark) for name, value, remark in found.lines}
    # Orthonormal terms add in squares: 50 nm; exp(-(2 pi 50/550)^2) = 0.722.
    assert lines["wavefront"][0] == "50 nm rms"
    assert "0.722" in lines["wavefront"][1]
    assert found.values["wavefront_rms_nm"] == pytest.approx(50, rel=1e-3)
    bad = scene(tmp_path, telescope__wavefront={"zernike": {"4": "300 nm"}})
    lines = {name: remark for name, _, remark in describe(bad).lines}
    assert "beyond the range" in lines["wavefront"]


def test_a_wavefront_too_steep_for_its_squares_is_warned_of(tmp_path):
    def folded(rms):
        terms = {"zernike": {"4": rms}}
        warnings = describe(scene(tmp_path, air=None, telescope__wavefront=terms)).warnings
        return any("folded back" in w for w in warnings)

    assert not folded("60 nm")
    assert folded("40 um")


def test_dispersion_is_described_and_warned_of(tmp_path):
    low = scene(tmp_path, air__airmass=2.0, air__dispersion=True, band__name="B")
    found = describe(low)
    lines = {name: value for name, value, _ in found.lines}
    assert float(lines["dispersion"].split()[0]) == pytest.approx(
        found.values["dispersion_arcsec"], rel=1e-2
    )
    assert any("more than a third of the FWHM" in w for w in found.warnings)
    high = describe(scene(tmp_path, air__airmass=1.02, air__dispersion=True)).warnings
    assert not any("third of the FWHM" in w for w in high)
    mended = scene(
        tmp_path,
        air__airmass=2.0,
        air__dispersion=True,
        air__dispersion_corrector=True,
        band__name="B",
    )
    assert "dispersion" not in {name for name, _, _ in describe(mended).lines}
