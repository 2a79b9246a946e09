"""Places on the sky and on the detector, against astropy's WCS and by hand."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.assembly.places import FieldGeometry

ARCSEC = np.pi / 180 / 3600


def geometry(**changes):
    return FieldGeometry(**{"columns": 200, "rows": 100, "pixel_scale": 0.2 * ARCSEC, **changes})


def test_north_is_up_and_east_is_left_by_default():
    g = geometry()
    assert g.to_pixels(0.0, 0.0) == pytest.approx((99.5, 49.5))
    assert g.to_pixels(0.0, 2 * ARCSEC) == pytest.approx((99.5, 59.5))
    assert g.to_pixels(2 * ARCSEC, 0.0) == pytest.approx((89.5, 49.5))


def test_a_mirrored_field_has_east_on_the_right():
    """One reflection more or less: common practice, a mirror image for an odd number of mirrors."""
    assert geometry(mirrored=True).to_pixels(2 * ARCSEC, 0.0) == pytest.approx((109.5, 49.5))


@pytest.mark.parametrize("mirrored", [False, True])
@pytest.mark.parametrize("degrees", [0, 30, 90, 180, 271])
def test_a_turned_detector_by_the_stated_formula(mirrored, degrees):
    rho, p = np.radians(degrees), -1 if mirrored else 1
    g = geometry(rotation=rho, mirrored=mirrored)
    east, north = 3.1 * ARCSEC, -1.7 * ARCSEC
    x, y = g.to_pixels(east, north)
    scale = g.pixel_scale
    assert x - 99.5 == pytest.approx(p * (-east * np.cos(rho) + north * np.sin(rho)) / scale)
    assert y - 49.5 == pytest.approx((east * np.sin(rho) + north * np.cos(rho)) / scale)
    assert_allclose(g.to_offsets(x, y), (east, north), rtol=1e-12)
    step = np.array(
        [np.cos(g.direction(np.arctan2(east, north))), np.sin(g.direction(np.arctan2(east, north)))]
    )
    along = np.array([x - 99.5, y - 49.5])
    assert_allclose(step, along / np.hypot(*along), atol=1e-12)
    assert g.position_angle(*along) == pytest.approx(np.arctan2(east, north) % (2 * np.pi))


@pytest.mark.parametrize("mirrored", [False, True])
@pytest.mark.parametrize("degrees", [0, 33, 200])
@pytest.mark.parametrize(("ra", "dec"), [(0, 0), (359.99, 60), (123, -88)])
def test_sky_coordinates_are_those_of_astropy(mirrored, degrees, ra, dec):
    g = geometry(
        rotation=np.radians(degrees), mirrored=mirrored, ra=np.radians(ra), dec=np.radians(dec)
    )
    x, y = np.array([0.0, 199.0, 20.3]), np.array([0.0, 99.0, 77.7])
    by_wcs = g.wcs().all_pix2world(x, y, 0)
    own = np.degrees(g.to_sky(x, y))
    # One part in 1e9 of a degree: double precision of angles.
    assert_allclose(own[0], by_wcs[0], atol=1e-9)
    assert_allclose(own[1], by_wcs[1], atol=1e-9)
    assert_allclose(g.from_sky(np.radians(by_wcs[0]), np.radians(by_wcs[1])), (x, y), atol=1e-5)


def test_the_far_side_of_the_sky_is_refused():
    with pytest.raises(ValueError, match="90 degrees"):
        geometry().from_sky(np.array([np.pi]), np.array([0.0]))


@pytest.mark.parametrize("distortion", [0.02, -0.02])
def test_distortion_moves_outwards_and_back(distortion):
    """Two per cent at 100 pixels, by the stated law; and the WCS says the same through SIP."""
    g = geometry(distortion=distortion / 100**2, ra=1.0, dec=0.4)
    east = 20.0 * ARCSEC
    x, y = g.to_pixels(np.array(-east), np.array(0.0))
    assert x - 99.5 == pytest.approx(100 * (1 + distortion))
    assert y == pytest.approx(49.5)
    assert_allclose(g.to_offsets(x, y), (-east, 0.0), atol=1e-15)
    xs, ys = np.meshgrid(np.linspace(0, 199, 9), np.linspace(0, 99, 7))
    by_wcs = g.wcs().all_pix2world(xs, ys, 0)
    own = np.degrees(g.to_sky(xs, ys))
    # What the ninth-order polynomial leaves.
    assert_allclose(own[0], by_wcs[0], atol=1e-5 * 0.2 / 3600)
    assert_allclose(own[1], by_wcs[1], atol=1e-5 * 0.2 / 3600)
    back = g.wcs().all_world2pix(*by_wcs, 0)
    assert_allclose(back, (xs, ys), atol=1e-4)


def test_a_written_frame_keeps_its_distortion(tmp_path):
    """astropy reads the SIP terms back, and finds each star where TRUTH says."""
    from astropy.io import fits
    from astropy.table import Table
    from astropy.wcs import WCS

    import simimg
    from tests.assembly.scenes import TEXT, scene

    field = {"distortion": 0.03, "radius": "12 arcsec"}
    text = TEXT + '[[star]]\neast = "-9 arcsec"\nnorth = "7 arcsec"\nmagnitude = 16\n'
    simimg.expose(scene(tmp_path, text, telescope__field=field)).write(tmp_path / "f.fits")
    with fits.open(tmp_path / "f.fits") as hdus:
        wcs, truth = WCS(hdus[0].header), Table(hdus["TRUTH"].data)
    assert wcs.sip is not None
    x, y = wcs.all_world2pix(truth["ra"], truth["dec"], 0, tolerance=1e-8)
    # What the ninth-order polynomial leaves of a distortion of three per cent.
    assert_allclose(x, truth["x"], atol=1e-5)
    assert_allclose(y, truth["y"], atol=1e-5)
    r = np.hypot(9, 7)
    assert np.hypot(truth["x"][1] - 50, truth["y"][1] - 40) == pytest.approx(
        r / 0.25 * (1 + 0.03 * (r / 12) ** 2)
    )
    assert simimg.Frame.read(tmp_path / "f.fits").wcs.sip is not None
