"""Frames as outsiders use them: found, photometered and placed with photutils and astropy."""

import numpy as np
import pytest
from astropy.coordinates import SkyCoord
from astropy.io import fits
from astropy.nddata import NDData
from astropy.table import Table
from astropy.wcs import WCS

import simimg
from tests.assembly.scenes import TEXT, scene


@pytest.fixture(scope="module")
def field(tmp_path_factory):
    """A frame of 25 bright stars on sub-pixel places, with its truth, as a FITS file."""
    folder = tmp_path_factory.mktemp("field")
    rng = np.random.default_rng(11)
    stars = TEXT[: TEXT.index("[[star]]")].replace("[101, 81]", "[320, 300]")
    for row in range(5):
        for column in range(5):
            x, y = 40 + 60 * column + rng.uniform(-5, 5), 36 + 57 * row + rng.uniform(-5, 5)
            stars += (
                f"[[star]]\nx = {x:.4f}\ny = {y:.4f}\nelectrons = {rng.uniform(2e6, 6e6):.1f}\n"
            )
    stars += '[pointing]\nra = "150 deg"\ndec = "-35 deg"\n'
    s = scene(
        folder,
        stars,
        camera__rotation="25 deg",
        camera__mirrored=True,
        camera__bit_depth=20,
        camera__gain="1 electron/adu",
    )
    simimg.expose(s, keep=("psf",)).write(folder / "field.fits")
    return folder / "field.fits"


def test_photutils_finds_every_star_through_the_wcs(field):
    from photutils.detection import DAOStarFinder

    with fits.open(field) as hdus:
        data = hdus[0].data.astype(float)
        wcs = WCS(hdus[0].header)
        truth = Table(hdus["TRUTH"].data)
    background = np.median(data)
    found = DAOStarFinder(threshold=500, fwhm=3.5)(data - background)
    assert len(found) == 25
    here = wcs.pixel_to_world(found["x_centroid"], found["y_centroid"])
    there = SkyCoord(truth["ra"], truth["dec"], unit="deg")
    _, offset, _ = there.match_to_catalog_sky(here)
    # The finder's centroids are good to a few hundredths of a pixel of 0.25 arcsec.
    assert offset.arcsec.max() < 0.05 * 0.25 * 2


def test_psf_photometry_recovers_places_and_light(field):
    """Within 0.01 pixel and 1 %, with the PSF that the frame brings and photutils' own fitter."""
    from photutils.psf import ImagePSF, PSFPhotometry

    with fits.open(field) as hdus:
        data = hdus[0].data.astype(float)
        wcs = WCS(hdus[0].header)
        truth = Table(hdus["TRUTH"].data)
        psf, oversampling = hdus["PSF"].data.astype(float), hdus["PSF"].header["OVERSAMP"]
    model = ImagePSF(psf, oversampling=oversampling)
    start = Table({"x": np.round(truth["x"]), "y": np.round(truth["y"])})
    error = np.sqrt(np.maximum(data, 1) + 16)
    background = np.median(data)
    fit = PSFPhotometry(model, (15, 15), aperture_radius=8)
    result = fit(NDData(data - background).data, error=error, init_params=start)
    ra, dec = wcs.all_pix2world(result["x_fit"], result["y_fit"], 0)
    back_x, back_y = wcs.all_world2pix(truth["ra"], truth["dec"], 0)
    np.testing.assert_allclose(result["x_fit"], back_x, atol=0.01)
    np.testing.assert_allclose(result["y_fit"], back_y, atol=0.01)
    np.testing.assert_allclose(ra, truth["ra"], atol=0.01 * 0.25 / 3600 * 1.3)
    np.testing.assert_allclose(dec, truth["dec"], atol=0.01 * 0.25 / 3600)
    # The median of the frame holds a little of the stars' wings too.
    np.testing.assert_allclose(result["flux_fit"], truth["electrons"], rtol=0.01)


def test_the_truth_agrees_with_the_wcs(field):
    with fits.open(field) as hdus:
        wcs, truth = WCS(hdus[0].header), Table(hdus["TRUTH"].data)
    x, y = wcs.all_world2pix(truth["ra"], truth["dec"], 0)
    np.testing.assert_allclose(x, truth["x"], atol=1e-6)
    np.testing.assert_allclose(y, truth["y"], atol=1e-6)
