"""Limits of whole scenes: published values, hand calculations, the engine's own images."""

import json
from math import hypot, isnan, pi, radians

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import optimize

from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.imaging.render import expected_image
from simimg.imaging.sources import Sources, one_point
from simimg.resolving.criteria import fwhm, sparrow
from simimg.resolving.limits import limits
from simimg.scene.file import load_scene
from tests.imaging.test_profile import airy
from tests.reference import diffraction, turbulence

ARCSEC = radians(1.0 / 3600.0)

TELESCOPE = """
[telescope]
aperture = "{aperture}"
obstruction = {obstruction}
[band]
centre = "500 nm"
width = "0.5 nm"
"""
CAMERA = """
[camera]
pixels = [101, 81]
pixel_scale = "{pixel}"
read_noise = "5 electron"
dark_current = "0.01 electron/s"
bias = "500 adu"
gain = "2 electron/adu"
full_well = "80000 electron"
[exposure]
time = "60 s"
[sky]
electrons = 120
"""
AIR = '[air]\nseeing = "1 arcsec"\n'


@pytest.fixture
def scene(tmp_path):
    """Load a scene from text."""

    def load(text, **changes):
        path = tmp_path / "scene.toml"
        path.write_text(text)
        return load_scene(path, overrides=[f"{k}={v}" for k, v in changes.items()])

    return load


def telescope(aperture="2 m", obstruction=0.0):
    return TELESCOPE.format(aperture=aperture, obstruction=obstruction)


def camera(pixel="0.25 arcsec"):
    return CAMERA.format(pixel=pixel)


def star(**keys):
    return "[[star]]\n" + "".join(f"{k} = {v}\n" for k, v in keys.items())


def image_of(scene, *, rows):
    """The engine's image of some rows of a scene's inventory, alone."""
    train = assemble_train(scene)
    objects = inventory(scene, train=train)
    sources = objects.sources
    chosen = [objects.entry(row) for row in rows]
    shapes = tuple(s for s in sources.shapes if any(s.shape is e.shape for e in chosen))
    points = sources.points.chosen(
        np.isin(sources.points.x, [e.x for e in chosen if e.shape is None])
    )
    geometry = objects.geometry
    return expected_image(
        train.basis,
        Sources(points, shapes),
        columns=geometry.columns,
        rows=geometry.rows,
        pixel_scale=geometry.pixel_scale,
    )


# Diffraction and delivered limits


def test_clear_aperture_alone(scene):
    found = limits(scene(telescope()))
    unit = 500e-9 / 2.0 / ARCSEC
    for part in (found.diffraction, found.delivered):
        assert_allclose(part.fwhm_arcsec / unit, diffraction.FWHM, atol=1e-4)
        assert_allclose(part.rayleigh_arcsec / unit, diffraction.DARK_RINGS[0], atol=1e-4)
        assert_allclose(part.sparrow_arcsec / unit, diffraction.SPARROW_EQUAL, atol=1e-4)
    assert found.strehl == 1.0
    assert found.r0_m is None
    assert found.pixel_scale_arcsec is None
    assert_allclose(found.wavelength_nm, 500.0)
    assert_allclose(found.nyquist_pixel_arcsec, 0.5 * unit)
    assert_allclose(found.dawes_arcsec, diffraction.DAWES_ARCSEC_MM / 2000.0)
    assert any("No pixel" in note for note in found.notes)


@pytest.mark.parametrize("obstruction", diffraction.OBSTRUCTED)
def test_obstructed_aperture_alone(scene, obstruction):
    found = limits(scene(telescope(obstruction=obstruction)))
    unit = 500e-9 / 2.0 / ARCSEC
    ring, _, width, closest = diffraction.OBSTRUCTED[obstruction]
    tolerance = diffraction.OBSTRUCTED_ATOL
    for part in (found.diffraction, found.delivered):
        assert_allclose(part.fwhm_arcsec / unit, width, atol=tolerance)
        assert_allclose(part.sparrow_arcsec / unit, closest, atol=tolerance)
    assert_allclose(found.diffraction.rayleigh_arcsec / unit, ring, atol=tolerance)
    saddle = diffraction.SADDLE_SEPARATION_OBSTRUCTED.get(obstruction)
    if saddle is not None:
        assert_allclose(found.delivered.rayleigh_arcsec / unit, saddle, atol=tolerance)
    assert found.delivered.rayleigh_arcsec > found.diffraction.rayleigh_arcsec
    assert any("beyond the first dark ring" in note for note in found.notes)


def test_turbulence_alone(scene):
    """A kilometre's aperture: nothing but the air is left."""
    found = limits(scene(telescope("1 km") + AIR))
    width = found.delivered.fwhm_arcsec
    # As a seeing monitor quotes it, at 500 nm and the zenith; the aperture adds 1e-4.
    assert_allclose(width, 1.0, atol=2e-4)
    assert_allclose(found.r0_m, turbulence.LONG_EXPOSURE_FWHM * 500e-9 / ARCSEC, rtol=1e-6)
    pairs = (
        (found.delivered.sparrow_arcsec, turbulence.KOLMOGOROV_SPARROW_FWHM),
        (found.ee50_arcsec, turbulence.KOLMOGOROV_EE50_FWHM),
        (found.ee80_arcsec, turbulence.KOLMOGOROV_EE80_FWHM),
    )
    for value, known in pairs:
        # The aperture's own light in the wings adds half of the last digit.
        assert_allclose(value / width, known, atol=1.5 * turbulence.KOLMOGOROV_ATOL)


def test_strehl_ratio_at_an_aperture_of_one_r0(scene):
    r0 = turbulence.LONG_EXPOSURE_FWHM * 500e-9 / ARCSEC
    found = limits(scene(telescope(f"{r0} m") + AIR))
    assert_allclose(
        found.strehl, turbulence.STREHL_AT_D_EQUAL_R0, atol=turbulence.STREHL_AT_D_EQUAL_R0_ATOL
    )
    # The pixel has no part in it.
    pixel = limits(scene(telescope(f"{r0} m") + AIR + camera("1 arcsec")))
    assert_allclose(pixel.strehl, found.strehl, rtol=1e-12)


@pytest.mark.parametrize("pixels", [0.5, 1.5, 3.0])
def test_a_pixel_widens_the_psf(scene, pixels):
    """Against the closed form averaged over the pixel's side and height by quadrature."""
    unit = 500e-9 / 2.0
    found = limits(scene(telescope() + camera(f"{pixels * unit / ARCSEC} arcsec")))
    nodes, weights = np.polynomial.legendre.leggauss(60)
    offset = 0.5 * pixels * nodes

    def averaged(t):
        return weights @ airy(np.hypot(t + offset[:, None], offset)) @ weights

    half = optimize.brentq(lambda t: averaged(t) - 0.5 * averaged(0.0), 0.01, 3.0)
    assert_allclose(found.delivered.fwhm_arcsec * ARCSEC / unit, 2.0 * half, rtol=1e-5)
    assert found.delivered.fwhm_arcsec > found.diffraction.fwhm_arcsec
    assert found.delivered.rayleigh_arcsec > found.diffraction.rayleigh_arcsec
    assert any("the pixel widens it" in note for note in found.notes)
    assert any("Undersampled" in note for note in found.notes) == (pixels >= 0.6)


def test_direction_matters_for_vanes_and_pixels(scene):
    vanes = telescope() + '[telescope.vanes]\ncount = 2\nwidth = "300 mm"\nangle = "0 deg"\n'
    along, across = (limits(scene(vanes), position_angle=a) for a in (0.5 * pi, 0.0))
    # The vanes lie along east and west: the aperture's halves stand apart in north and south.
    assert across.diffraction.fwhm_arcsec < 0.97 * along.diffraction.fwhm_arcsec
    assert across.diffraction.rayleigh_arcsec == along.diffraction.rayleigh_arcsec
    assert any("without its vanes" in note for note in along.notes)
    wide = telescope() + camera("0.2 arcsec")
    side, diagonal = (limits(scene(wide), position_angle=a) for a in (0.5 * pi, 0.25 * pi))
    assert diagonal.delivered.fwhm_arcsec > 1.1 * side.delivered.fwhm_arcsec
    assert diagonal.diffraction.fwhm_arcsec == pytest.approx(side.diffraction.fwhm_arcsec)
    turned = limits(
        scene(wide, **{"camera.rotation": "45 deg", "camera.mirrored": "true"}),
        position_angle=0.25 * pi,
    )
    assert turned.delivered.fwhm_arcsec == pytest.approx(side.delivered.fwhm_arcsec, rel=1e-6)


def test_pupil_from_a_map(scene, tmp_path):
    """An annulus drawn on a map has the dark ring of an annulus, as first minimum of its cut."""
    from astropy.io import fits

    y, x = np.indices((512, 512)) / 512.0 - (511 / 1024)
    radius = np.hypot(x, y)
    fits.writeto(tmp_path / "map.fits", ((radius < 0.5) & (radius > 0.15)).astype(np.float32))
    text = telescope().replace("obstruction = 0.0\n", 'pupil = "map.fits"\n')
    found = limits(scene(text), position_angle=0.7)
    ring, _, width, closest = diffraction.OBSTRUCTED[0.3]
    unit = 500e-9 / 2.0 / ARCSEC
    # Drawn in steps on 512 pixels: good to a few 1e-4.
    assert_allclose(found.diffraction.rayleigh_arcsec / unit, ring, rtol=1e-3)
    assert_allclose(found.diffraction.fwhm_arcsec / unit, width, rtol=1e-3)
    assert_allclose(found.diffraction.sparrow_arcsec / unit, closest, rtol=1e-3)
    assert any("first minimum" in note for note in found.notes)


def test_position_angle_must_be_finite(scene):
    with pytest.raises(ValueError, match="position_angle"):
        limits(scene(telescope()), position_angle=float("nan"))


# Signal to noise


def test_snr_of_a_star_is_that_of_the_ccd_equation(scene):
    """With the noise area summed from the engine's image of a star on a pixel's centre."""
    from astropy.stats import signal_to_noise_oir_ccd

    loaded = scene(telescope() + AIR + camera() + star(electrons=6000, x=50, y=40))
    train = assemble_train(loaded)
    image = expected_image(
        train.basis,
        Sources(one_point(50.0, 50.0, 1.0)),
        columns=101,
        rows=101,
        pixel_scale=0.25 * ARCSEC,
    )
    area = 1.0 / float((image**2).sum())
    known = signal_to_noise_oir_ccd(60.0, 100.0, 2.0, 0.01, 5.0, area)
    (found,) = limits(loaded).objects
    # What lies outside 101 pixels adds nothing to the sum of squares.
    assert_allclose(found.snr, known, rtol=1e-5)
    variance = 120.0 + 0.6 + 25.0
    known_fit = 6000.0 * np.sqrt((image**2 / (6000.0 * image + variance)).sum())
    assert_allclose(found.snr_fit, known_fit, rtol=1e-4)
    assert found.snr_fit < found.snr


def test_snr_does_not_depend_on_the_sub_pixel_place(scene):
    text = telescope() + AIR + camera()
    a, b = limits(
        scene(text + star(electrons=5e4, x=50, y=40) + star(electrons=5e4, x=20.5, y=30.5))
    ).objects
    assert a.snr == b.snr
    assert a.snr_fit == b.snr_fit
    assert a.peak_electrons > b.peak_electrons


def test_snr_where_one_noise_rules(scene):
    """Photons alone: the root of their number. Background alone: both definitions agree."""
    quiet = camera().replace('read_noise = "5 electron"\n', "").replace("electrons = 120", "")
    quiet = quiet.replace('dark_current = "0.01 electron/s"\n', "").replace("[sky]\n", "")
    (photons,) = limits(scene(telescope() + AIR + quiet + star(electrons=10000))).objects
    assert_allclose([photons.snr, photons.snr_fit], 100.0, rtol=1e-9)
    (faint,) = limits(scene(telescope() + AIR + camera() + star(electrons=1))).objects
    assert_allclose(faint.snr_fit, faint.snr, rtol=2e-3)


def test_peaks_are_the_brightest_pixels_of_the_image(scene):
    loaded = scene(
        telescope()
        + AIR
        + camera("0.4 arcsec")
        + star(electrons=3e4, x=30.3, y=44.45)
        + star(electrons=2e4, x=70.5, y=20.02)
        + '[[pair]]\nelectrons = [4e4, 3e4]\nseparation = "0.7 arcsec"\nposition_angle = "25 deg"\n'
        'x = 50.2\ny = 40.9\n[[galaxy]]\nelectrons = 1e6\neffective_radius = "2 arcsec"\n'
        "sersic_index = 2\naxis_ratio = 0.6\nx = 80.3\ny = 60.6\n"
    )
    found = limits(loaded).objects
    for one, rows in zip(found, ([0], [1], [2, 3], [4])):
        brightest = float(image_of(loaded, rows=rows).max())
        # The engine promises 1e-5 of the brightest peak.
        assert_allclose(one.peak_electrons, brightest, rtol=3e-5)


def test_signal_of_pairs_and_shapes_from_their_own_image(scene):
    loaded = scene(
        telescope()
        + AIR
        + camera("0.4 arcsec")
        + '[[pair]]\nelectrons = [4e4, 3e4]\nseparation = "0.7 arcsec"\nx = 50.2\ny = 40.9\n'
        '[[disc]]\nelectrons = 2e5\ndiameter = "6 arcsec"\nx = 48.7\ny = 38.2\n'
    )
    variance = 120.0 + 0.6 + 25.0
    found = limits(loaded).objects
    for one, rows, total in zip(found, ([0, 1], [2]), (7e4, 2e5)):
        share = image_of(loaded, rows=rows).astype(float) / total
        area = 1.0 / (share**2).sum()
        assert_allclose(one.snr, total / np.sqrt(total + area * variance), rtol=1e-4)
        fit = total * np.sqrt((share**2 / (total * share + variance)).sum())
        assert_allclose(one.snr_fit, fit, rtol=3e-4)


def test_a_wide_pair_counts_as_two_stars(scene):
    """The formula for stars apart joins on to that of one image."""
    text = telescope() + AIR + camera("0.4 arcsec")
    pair = '[[pair]]\nelectrons = [4e4, 3e4]\nseparation = "{}"\n'
    near = limits(scene(text + pair.format("19.5 arcsec"))).objects[0]
    far = limits(scene(text + pair.format("23 arcsec"))).objects[0]
    assert_allclose([near.snr, near.snr_fit], [far.snr, far.snr_fit], rtol=1e-3)
    assert_allclose(hypot(*(one.snr_fit for one in far.stars)), far.snr_fit, rtol=1e-9)


@pytest.mark.parametrize(
    ("changes", "electrons", "saturated"),
    [
        # The well ends at 80000; sky and dark signal of 120.6 count, too.
        ({}, 79_000.0, False),
        ({}, 79_890.0, True),
        # The converter ends at (4095 - 500) x 2 = 7190 electrons.
        ({"camera.bit_depth": "12"}, 7_000.0, False),
        ({"camera.bit_depth": "12"}, 7_080.0, True),
        ({"camera.full_well": '"1e9 electron"', "camera.gain": '"0.5 electron/adu"'}, 6e4, True),
    ],
)
def test_saturation(scene, changes, electrons, saturated):
    text = telescope() + AIR + camera("0.4 arcsec")
    unit = limits(scene(text + star(electrons=1e6))).objects[0].peak_electrons / 1e6
    (one,) = limits(scene(text + star(electrons=electrons / unit), **changes)).objects
    assert_allclose(one.peak_electrons, electrons, rtol=1e-9)
    assert one.saturated is saturated


def test_a_star_off_the_frame_saturates_nothing(scene):
    (one,) = limits(scene(telescope() + AIR + camera() + star(electrons=1e9, x=-30, y=2))).objects
    assert one.saturated is False


# Objects


def test_pairs_have_limits_of_their_own(scene):
    text = telescope(obstruction=0.3) + AIR + camera("1.2 arcsec")
    pair = (
        '[[pair]]\nlabel = "SR-1"\nmagnitudes = [11, {}]\nseparation = "1.5 arcsec"\n'
        'position_angle = "{} deg"\n'
    )
    found = limits(scene(text + pair.format(13, 90) + pair.format(9, 90) + pair.format(11, 45)))
    faint, swapped, equal = found.objects
    assert faint.magnitude_difference == pytest.approx(2.0)
    assert (faint.separation_arcsec, faint.position_angle_deg) == pytest.approx((1.5, 90.0))
    # Along the direction of the table, with the table's Rayleigh limit, but another Sparrow limit.
    assert faint.delivered.fwhm_arcsec == found.delivered.fwhm_arcsec
    assert faint.delivered.rayleigh_arcsec == found.delivered.rayleigh_arcsec
    assert faint.delivered.sparrow_arcsec > 1.2 * found.delivered.sparrow_arcsec
    # A symmetric PSF does not mind which star is the fainter.
    assert swapped.delivered == faint.delivered
    # Along the diagonal of the pixels.
    assert equal.delivered.fwhm_arcsec > found.delivered.fwhm_arcsec
    assert equal.diffraction.sparrow_arcsec == pytest.approx(found.diffraction.sparrow_arcsec)


def test_pair_in_electrons_and_its_criteria(scene):
    from simimg.imaging.profile import psf_cut

    loaded = scene(telescope() + '[[pair]]\nelectrons = [1e5, 4e4]\nseparation = "1 arcsec"\n')
    (one,) = limits(loaded).objects
    cut = psf_cut(assemble_train(loaded).effective, 0.0)
    difference = 2.5 * np.log10(2.5)
    assert one.magnitude_difference == pytest.approx(difference)
    assert_allclose(one.delivered.sparrow_arcsec * ARCSEC, sparrow(cut, difference), rtol=1e-6)
    assert_allclose(one.delivered.fwhm_arcsec * ARCSEC, fwhm(cut), rtol=1e-6)
    assert one.electrons == (1e5, 4e4)
    assert (one.peak_electrons, one.saturated, one.snr) == (None, None, None)


def test_a_companion_too_faint_to_speak_of(scene):
    found = limits(
        scene(telescope() + '[[pair]]\nelectrons = [1e9, 1e3]\nseparation = "1 arcsec"\n')
    )
    assert isnan(found.objects[0].delivered.sparrow_arcsec)
    assert found.to_dict()["objects"][0]["delivered"]["sparrow_arcsec"] is None


def test_magnitudes_need_a_time(scene):
    text = telescope() + AIR + camera().replace('[exposure]\ntime = "60 s"\n', "")
    known, unknown = limits(scene(text + star(electrons=1e4) + star(magnitude=12))).objects
    assert known.electrons == 1e4
    assert known.snr > 0
    assert (unknown.electrons, unknown.snr, unknown.peak_electrons) == (None, None, None)


def test_catalogues_are_listed_when_asked_for(scene, tmp_path):
    rows = "".join(f"{i % 100},{i % 80},{1000 + i}\n" for i in range(300))
    (tmp_path / "stars.csv").write_text("x,y,electrons\n" + rows)
    loaded = scene(
        telescope()
        + AIR
        + camera()
        + star(electrons=1e4, label='"own"')
        + '[[catalogue]]\nfile = "stars.csv"\n'
    )
    assert [one.label for one in limits(loaded).objects] == ["own"]
    found = limits(loaded, all_stars=True).objects
    assert len(found) == 301
    # Many stars' fits are interpolated: the same as one by one.
    alone = limits(scene(telescope() + AIR + camera() + star(electrons=1150))).objects[0]
    assert found[151].electrons == 1150
    assert_allclose(found[151].snr, alone.snr, rtol=1e-9)
    assert_allclose(found[151].snr_fit, alone.snr_fit, rtol=1e-5)


def test_json_keys(scene):
    found = limits(
        scene(
            telescope()
            + AIR
            + camera()
            + star(electrons=1e4)
            + '[[pair]]\nelectrons = [1e5, 4e4]\nseparation = "1 arcsec"\n'
        )
    ).to_dict()
    assert json.loads(json.dumps(found, allow_nan=False)) == found
    assert set(found) == {
        "wavelength_nm",
        "pixel_scale_arcsec",
        "r0_m",
        "position_angle_deg",
        "diffraction",
        "delivered",
        "dawes_arcsec",
        "strehl",
        "strehl_from_rms",
        "wavefront_rms_nm",
        "dispersion_arcsec",
        "ee50_arcsec",
        "ee80_arcsec",
        "nyquist_pixel_arcsec",
        "air",
        "correction",
        "objects",
        "notes",
    }
    for part in (found["diffraction"], found["delivered"]):
        assert set(part) == {"fwhm_arcsec", "rayleigh_arcsec", "sparrow_arcsec"}
    single = {"label", "kind", "electrons", "peak_electrons", "saturated", "snr", "snr_fit"}
    assert set(found["objects"][0]) == single
    assert set(found["objects"][1]) == single | {
        "separation_arcsec",
        "position_angle_deg",
        "magnitude_difference",
        "diffraction",
        "delivered",
        "bound",
        "stars",
    }
    assert set(found["objects"][1]["bound"]) == {
        "separation_arcsec",
        "position_angle_deg",
        "magnitude_difference",
        "expected_significance",
    }
    assert found["objects"][1]["electrons"] == [1e5, 4e4]
    assert found["position_angle_deg"] == 90.0


def test_a_pixel_that_leaves_nothing_of_the_optics(scene):
    """500 lambda/D: a square, whose limits are its side."""
    side = 500 * 500e-9 / 2.0 / ARCSEC
    found = limits(scene(telescope() + camera(f"{side} arcsec") + star(electrons=1e4)))
    assert_allclose(found.delivered.fwhm_arcsec, side, rtol=1e-3)
    assert_allclose(found.delivered.sparrow_arcsec, side, rtol=1e-2)
    assert_allclose(found.objects[0].peak_electrons, 1e4, rtol=1e-2)
