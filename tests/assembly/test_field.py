"""Wavefronts, segments, what grows off the axis, measured PSFs and orbits, through a scene."""

import numpy as np
import pytest
from astropy.io import fits
from numpy.testing import assert_allclose

import simimg
from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.errors import InputError
from simimg.imaging.profile import psf_peak
from simimg.imaging.render import expected_image
from tests.assembly.scenes import TEXT, scene

HEAD = TEXT[: TEXT.index("[[star]]")]
NARROW = {"air": None, "sky": None, "band": {"centre": "550 nm", "width": "1 nm"}}


def image(s):
    train = assemble_train(s)
    columns, rows = s.camera.pixels
    return expected_image(
        train.basis,
        inventory(s, train=train).sources,
        columns=columns,
        rows=rows,
        pixel_scale=train.pixel_scale,
    )


@pytest.mark.parametrize(
    ("waves", "intensity"), [(1 / 8, 0.94964), (1 / 4, 0.81057), (1 / 2, 0.40528)]
)
def test_defocus_dims_the_axis_as_born_and_wolf_say(tmp_path, waves, intensity):
    """Sinc squared of the path at the edge: Born & Wolf, ch. 9; as a length at the focal plane."""
    length = waves * 550e-9 * 8 * (16 / 2) ** 2
    s = scene(
        tmp_path,
        **NARROW,
        telescope={
            "aperture": "2 m",
            "focal_length": "16 m",
            "wavefront": {"defocus": f"{length} m"},
        },
    )
    train = assemble_train(s)
    assert psf_peak(train.focal) / psf_peak(train.optics) == pytest.approx(intensity, abs=1e-4)
    assert any("out of focus" in note for note in simimg.limits(s).notes)


def test_strehl_from_the_psf_and_from_the_rms_side_by_side(tmp_path):
    def found(rms):
        terms = {"7": f"{rms} nm", "11": f"{rms} nm"}
        telescope = {"aperture": "2 m", "wavefront": {"zernike": terms}}
        return simimg.limits(scene(tmp_path, **NARROW, telescope=telescope))

    good = found(20)
    assert good.wavefront_rms_nm == pytest.approx(20 * np.sqrt(2), rel=1e-3)
    assert good.strehl_from_rms == pytest.approx(
        np.exp(-((2 * np.pi * good.wavefront_rms_nm / 550) ** 2))
    )
    assert good.strehl == pytest.approx(good.strehl_from_rms, abs=0.005)
    assert not any("Marechal" in note for note in good.notes)
    assert any("Marechal" in note for note in found(90).notes)


def test_an_aberrated_image_keeps_its_electrons(tmp_path):
    terms = {"4": "550 nm", "7": "300 nm"}
    s = scene(
        tmp_path,
        HEAD + "[[star]]\nelectrons = 1e6\n",
        **NARROW,
        telescope={"aperture": "0.5 m", "wavefront": {"zernike": terms}},
        camera__pixels=[301, 301],
        camera__pixel_scale="0.1 arcsec",
    )
    assert image(s).sum() == pytest.approx(1e6, rel=3e-3)


def test_the_same_mirror_every_time_and_another_by_another_seed(tmp_path):
    def peak(seed):
        polishing = {"rms": "60 nm", "seed": seed}
        telescope = {"aperture": "2 m", "wavefront": {"polishing": polishing}}
        return psf_peak(assemble_train(scene(tmp_path, **NARROW, telescope=telescope)).focal)

    assert peak(1) == peak(1)
    assert peak(1) != peak(2)


def test_a_file_pupil_is_the_built_one(tmp_path):
    size = 512
    y, x = (np.indices((size, size)) - (size - 1) / 2) / (size / 2)
    r = np.hypot(x, y)
    fits.writeto(tmp_path / "pupil.fits", ((r <= 1) & (r >= 0.3)).astype(np.float32))
    built = assemble_train(scene(tmp_path, **NARROW))
    mapped = assemble_train(
        scene(tmp_path, **NARROW, telescope={"aperture": "2 m", "pupil": "pupil.fits"})
    )
    assert mapped.pupil.area == pytest.approx(built.pupil.area, rel=1e-3)
    assert psf_peak(mapped.focal) == pytest.approx(psf_peak(built.focal), rel=1e-3)


def test_segments_out_of_phase_dim_the_image(tmp_path):
    def strehl(piston):
        segments = {"rings": 2, "width": "1.2 m", "gap": "6 mm", "piston": f"{piston} nm"}
        telescope = {"aperture": "5.8 m", "segments": segments}
        return simimg.limits(scene(tmp_path, **NARROW, telescope=telescope))

    assert strehl(0).strehl == pytest.approx(1.0)
    shaken = strehl(40)
    assert shaken.wavefront_rms_nm == pytest.approx(40, rel=0.05)
    assert shaken.strehl == pytest.approx(shaken.strehl_from_rms, abs=0.02)


def test_the_psf_changes_over_the_field(tmp_path):
    """The corner loses what the wavefront there takes; the axis keeps its peak."""
    field = {"coma": "60 nm", "curvature": "40 nm", "radius": "10 arcsec"}
    places = [(50, 40), (90, 40), (10, 76)]
    peaks = []
    for x, y in places:
        text = HEAD + f"[[star]]\nelectrons = 1e6\nx = {x}\ny = {y}\n"
        s = scene(tmp_path, text, **NARROW, telescope={"aperture": "0.5 m", "field": field})
        peaks.append(image(s).max())
    r = np.hypot(40 * 0.25, 0) / 10
    rms = np.hypot(60 * r, 40 * r * r)
    plain = HEAD + "[[star]]\nelectrons = 1e6\nx = 50\ny = 40\n"
    perfect = image(scene(tmp_path, plain, **NARROW, telescope={"aperture": "0.5 m"})).max()
    assert peaks[0] == pytest.approx(perfect, rel=2e-3)
    # Pixels of half a lambda/D blur the loss a little.
    assert peaks[1] / perfect == pytest.approx(np.exp(-((2 * np.pi * rms / 550) ** 2)), abs=0.05)
    assert peaks[2] < peaks[1]


def test_a_measured_psf_takes_the_place_of_optics_and_air(tmp_path):
    """A Gaussian PSF from a file gives the Gaussian's image, pixel and all."""
    y, x = (np.indices((121, 121)) - 60) / 4.0
    sigma = 1.5
    fits.writeto(tmp_path / "psf.fits", np.exp(-(x**2 + y**2) / (2 * sigma**2)))
    text = HEAD + "[[star]]\nelectrons = 1e6\nx = 50.3\ny = 40.1\n"
    s = scene(tmp_path, text, air=None, sky=None, psf={"file": "psf.fits", "oversampling": 4})
    seen = image(s)
    y, x = np.indices(seen.shape)
    direct = (
        1e6 / (2 * np.pi * sigma**2) * np.exp(-((x - 50.3) ** 2 + (y - 40.1) ** 2) / (2 * sigma**2))
    )
    # The samples are summed, not integrated: 1e-4 of the peak.
    assert_allclose(seen, direct, rtol=0, atol=1e-4 * direct.max())
    frame = simimg.expose(s)
    assert frame.counts.max() > 1000


def test_a_pair_stands_on_its_orbit_at_the_date(tmp_path):
    """Meeus, Astronomical Algorithms, example 57.a: 318.4 degrees, 0.411 arcsec at 1980.0."""
    text = (
        HEAD.replace("seed = 4", 'seed = 4\nstart = "1980-01-01T12:00:00"')
        + """
[[pair]]
electrons = [1e6, 5e5]
orbit = { period = "41.623 yr", periastron = 1934.008, eccentricity = 0.2763, \
semi_major_axis = "0.907 arcsec", inclination = "59.025 deg", node = "23.717 deg", \
argument = "219.907 deg" }
"""
    )
    first, second = inventory(scene(tmp_path, text)).entries
    assert np.degrees(first.position_angle) == pytest.approx(318.424, abs=0.05)
    assert np.degrees(first.separation) * 3600 == pytest.approx(0.41102, abs=1e-4)
    step = np.hypot(second.x - first.x, second.y - first.y) * 0.25
    assert step == pytest.approx(0.41102, abs=1e-4)


def test_an_orbit_needs_a_date(tmp_path):
    text = (
        HEAD
        + """
[[pair]]
electrons = [1e6, 5e5]
orbit = { period = "41.6 yr", periastron = 1934.0, eccentricity = 0.28, \
semi_major_axis = "0.9 arcsec", inclination = "59 deg", node = "24 deg", argument = "220 deg" }
"""
    )
    with pytest.raises(InputError, match=r"exposure\.start"):
        simimg.expose(scene(tmp_path, text))
