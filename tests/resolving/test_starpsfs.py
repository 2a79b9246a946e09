"""Each star's own PSF: displacement by colour, magnitude differences as detected, mistakes."""

import numpy as np
import pytest

import simimg
from simimg.assembly.objects import inventory
from simimg.errors import InputError
from simimg.imaging.basis import PsfBasis
from simimg.imaging.render import expected_image
from simimg.imaging.sources import Points, Sources
from simimg.resolving.starpsfs import StarPsfs, psf_notes

SCENE = """
[telescope]
aperture = "1 m"
[air]
seeing = "0.8 arcsec"
altitude = "40 deg"
parallactic_angle = "30 deg"
dispersion = {dispersion}
[band]
name = "B"
nodes = 2
[camera]
pixels = [72, 72]
pixel_scale = "0.25 arcsec"
[exposure]
time = "10 s"
[[pair]]
label = "P"
magnitudes = [13, 13.2]
separation = "2 arcsec"
position_angle = "30 deg"
{colours}
"""


def found(tmp_path, *, dispersion="true", colours='temperatures = ["20000 K", "3500 K"]'):
    path = tmp_path / "scene.toml"
    path.write_text(SCENE.format(dispersion=dispersion, colours=colours))
    return inventory(simimg.load_scene(path))


def centre(image):
    rows, columns = np.mgrid[: image.shape[0], : image.shape[1]]
    return np.array([(image * columns).sum(), (image * rows).sum()]) / image.sum()


def test_the_displacement_is_that_of_the_painted_images(tmp_path):
    objects = found(tmp_path)
    psfs = StarPsfs(objects)
    assert not psfs.shared
    kinds = [int(kind) for kind in objects.colour]
    centres = []
    for kind in kinds:
        star = Points(np.array([35.5]), np.array([35.5]), np.array([1.0]), np.array([kind]))
        image = expected_image(
            objects.train.basis, Sources(star), columns=72, rows=72, pixel_scale=psfs.pixel_scale
        )
        centres.append(centre(np.asarray(image, dtype=np.float64)))
    step = np.array(psfs.pair(0, 1).displacement) / psfs.pixel_scale
    assert np.hypot(*step) > 0.3
    # The wings that the frame cuts off weigh on the moments.
    np.testing.assert_allclose(step, centres[1] - centres[0], atol=0.01)
    (line,) = [note for note in psf_notes(psfs, catalogue=False) if "position angle" in note]
    # Red light is lifted least: away from the zenith, which lies at 30 degrees.
    assert "position angle 210 deg" in line
    # The mean has its light where the two images have theirs together.
    image = expected_image(
        PsfBasis((psfs.pair(0, 1).mean,)),
        Sources(Points(np.array([35.5]), np.array([35.5]), np.array([1.0]))),
        columns=72,
        rows=72,
        pixel_scale=psfs.pixel_scale,
    )
    share = objects.electrons / objects.electrons.sum()
    wanted = share[0] * centres[0] + share[1] * centres[1]
    np.testing.assert_allclose(centre(np.asarray(image, dtype=np.float64)), wanted, atol=0.01)


def test_one_colour_or_no_dispersion_displaces_nothing(tmp_path):
    assert StarPsfs(found(tmp_path, colours="")).shared
    psfs = StarPsfs(found(tmp_path, dispersion="false"))
    assert psfs.pair(0, 1).displacement == (0.0, 0.0)
    assert not any("position angle" in note for note in psf_notes(psfs, catalogue=False))


def test_limits_take_the_difference_that_is_detected(tmp_path):
    colours = 'temperatures = ["20000 K", "3500 K"]\nmagnitude_band = "V"'
    objects = found(tmp_path, dispersion="false", colours=colours)
    (pair,) = simimg.limits(simimg.load_scene(tmp_path / "scene.toml")).objects
    detected = 2.5 * np.log10(objects.electrons[0] / objects.electrons[1])
    assert pair.magnitude_difference == pytest.approx(detected, abs=1e-9)
    # In B the cool star is fainter than in V, where the catalogue says 0.2.
    assert pair.magnitude_difference > 1.0


def test_a_band_without_a_vega_zero_point_says_what_to_write(tmp_path):
    text = SCENE.format(dispersion="false", colours="")
    table = "# %ECSV 1.0\n# ---\n# datatype:\n# - {name: wavelength, unit: um, datatype: float64}\n"
    table += "# - {name: transmission, datatype: float64}\nwavelength transmission\n"
    (tmp_path / "far.ecsv").write_text(table + "5.0 0\n5.1 1\n5.9 1\n6.0 0\n")
    path = tmp_path / "scene.toml"
    path.write_text(text.replace('name = "B"', 'file = "far.ecsv"\nsystem = "Vega"'))
    with pytest.raises(InputError, match=r"scene\.toml: band\.system: .*write system = \"AB\""):
        simimg.limits(simimg.load_scene(path))


def test_a_catalogue_in_another_band_needs_temperatures(tmp_path):
    (tmp_path / "stars.csv").write_text("x,y,m\n10,10,12\n")
    more = '[[catalogue]]\nfile = "stars.csv"\ncolumns = { x = "x", y = "y", magnitude = "m" }\n'
    path = tmp_path / "scene.toml"
    text = SCENE.format(dispersion="false", colours="") + more
    path.write_text(text + 'magnitude_band = "R"\n')
    with pytest.raises(InputError, match=r"catalogue\[0\]\.magnitude_band: .*temperature"):
        inventory(simimg.load_scene(path))
    path.write_text(text + 'magnitude_band = "B"\n')
    assert len(inventory(simimg.load_scene(path))) == 3
