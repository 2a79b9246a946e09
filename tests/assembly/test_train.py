"""The train: which transfer function a scene gets."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import j1

from simimg.assembly.train import assemble_train, half_light_width, scene_airmass
from simimg.errors import InputError
from simimg.imaging.profile import psf_cut
from tests.assembly.scenes import scene

ARCSEC = np.pi / 180 / 3600


def test_clear_aperture_has_the_width_of_the_airy_pattern(tmp_path):
    """1.02899 lambda/D, computed from (2 J1(v) / v)^2 = 1/2."""
    s = scene(tmp_path, air=None, telescope={"aperture": "2 m"})
    train = assemble_train(s)
    assert half_light_width(train.optics) == pytest.approx(1.02899 * 550e-9 / 2, rel=1e-5)


def test_seeing_scales_with_wavelength_and_airmass(tmp_path):
    """r0 goes as wavelength^(6/5) and airmass^(-3/5) (Roddier 1981)."""
    train = assemble_train(scene(tmp_path))
    r0 = 0.9758634 * 500e-9 / (0.9 * ARCSEC) * (550 / 500) ** 1.2 * 1.2**-0.6
    assert train.fried == pytest.approx(r0, rel=1e-9)


def test_a_large_telescope_delivers_the_kolmogorov_width(tmp_path):
    s = scene(tmp_path, telescope={"aperture": "200 m"}, band={"centre": "550 nm", "width": "1 nm"})
    train = assemble_train(s)
    assert half_light_width(train.focal) == pytest.approx(
        0.9758634 * 550e-9 / train.fried, rel=2e-4
    )


def test_image_quality_is_delivered(tmp_path):
    s = scene(tmp_path, air={"image_quality": "0.8 arcsec", "airmass": 1.5, "outer_scale": "20 m"})
    train = assemble_train(s)
    assert half_light_width(train.focal) == pytest.approx(0.8 * ARCSEC, rel=1e-6)
    # A finite outer scale sharpens, wavelength and airmass blur: the monitor would say more.
    assert train.seeing > 0.6 * ARCSEC


def test_image_quality_sharper_than_diffraction_is_refused(tmp_path):
    s = scene(tmp_path, air={"image_quality": "0.03 arcsec"})
    with pytest.raises(InputError, match=r"air.image_quality: is sharper than the optics"):
        assemble_train(s)


def test_airmass_of_an_altitude(tmp_path):
    """Pickering 2002: 1.9932 at 30 degrees."""
    s = scene(tmp_path, air={"seeing": "1 arcsec", "altitude": "30 deg"})
    assert scene_airmass(s.air) == pytest.approx(1.9932, abs=5e-5)


def test_removing_tilt_sharpens(tmp_path):
    long = assemble_train(scene(tmp_path, air__seeing="2 arcsec", telescope__aperture="0.3 m"))
    short = assemble_train(
        scene(
            tmp_path,
            air={"seeing": "2 arcsec", "tilt_removed": "near"},
            telescope__aperture="0.3 m",
        )
    )
    assert half_light_width(short.focal) < 0.7 * half_light_width(long.focal)


def test_vanes_leave_the_core_and_throw_spikes(tmp_path):
    s = scene(
        tmp_path,
        air=None,
        telescope={
            "aperture": "2 m",
            "obstruction": 0.3,
            "vanes": {"count": 4, "width": "30 mm", "angle": "0 deg"},
        },
    )
    train = assemble_train(s)
    along = psf_cut(train.optics, 0.0)
    diagonal = psf_cut(train.optics, np.pi / 4)
    far = np.linspace(12, 25, 400) * train.wavelength / 2
    assert along(far).mean() > 3 * diagonal(far).mean()
    plain = assemble_train(scene(tmp_path, air=None))
    width = half_light_width(plain.optics)
    assert half_light_width(train.optics) == pytest.approx(width, rel=0.01)


def test_the_wing_law_is_an_envelope(tmp_path):
    """Above the air the law stays above every ring of the Airy pattern, at most threefold."""
    s = scene(tmp_path, air=None, telescope={"aperture": "2 m"})
    train = assemble_train(s)
    theta = np.linspace(10, 60, 20000) * train.wavelength / 2
    v = np.pi * theta * 2 / train.wavelength
    airy = (2 * j1(v) / v) ** 2 * np.pi / train.wavelength**2
    law = train.optics.wings(theta)
    assert np.all(airy <= law * 1.01)
    assert np.max(airy / law) > 1 / 3


@pytest.mark.parametrize("seeing", [0.5, 1.5])
def test_the_turbulent_wing_law_holds_far_out(tmp_path, seeing):
    s = scene(tmp_path, air__seeing=f"{seeing} arcsec", telescope__aperture="60 m")
    train = assemble_train(s)
    theta = np.linspace(12, 20, 9) * train.wavelength / train.fried
    cut = psf_cut(train.focal, 0.3, reach=float(theta[-1]))
    # Next order of the expansion is some ten per cent at a dozen FWHM.
    assert_allclose(train.focal.wings.mean(theta), cut(theta), rtol=0.25)
