"""The Cramer-Rao bound against closed forms, an independent likelihood and the engine's images."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import minimize
from scipy.special import ndtr

import simimg
from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.errors import InputError
from simimg.imaging.basis import PsfBasis
from simimg.imaging.render import expected_image
from simimg.imaging.sources import Points, Sources
from simimg.resolving.bound import (
    pair_errors,
    pair_precision,
    precision,
    second_star_significance,
)
from simimg.resolving.expectation import Expectation, pairs_of
from simimg.resolving.psfmodel import PsfModel
from simimg.resolving.starfit import Cutout
from tests.study.pairs import AIR, SPACE, pair_scene

SIGMA = 1.6  # pixels
MAGNITUDE = 2.5 / np.log(10.0)
ARCSEC = np.pi / 180.0 / 3600.0


def star(x, y, columns, rows):
    """A round Gaussian seen through square pixels, by the normal integral."""
    across, up = (
        ndtr((np.arange(n) + 0.5 - at) / SIGMA) - ndtr((np.arange(n) - 0.5 - at) / SIGMA)
        for at, n in ((x, columns), (y, rows))
    )
    return up[:, None] * across


def gaussian_psf(half=14, oversampling=4):
    at = np.arange(-half * oversampling, half * oversampling + 1) / oversampling
    line = ndtr((at + 0.5) / SIGMA) - ndtr((at - 0.5) / SIGMA)
    return PsfModel.from_image(line[:, None] * line, oversampling=oversampling)


def expected(parameters, columns, rows):
    image = np.full((rows, columns), parameters[-1])
    for x, y, electrons in parameters[:-1].reshape(-1, 3):
        image = image + electrons * star(x, y, columns, rows)
    return image


def deviance(data, model, variance):
    """Twice the divergence of Poisson numbers shifted by the variance."""
    d, m = data + variance, model + variance
    return 2.0 * float((d * np.log(d / m) - d + m).sum())


def geometry_errors(covariance, stars):
    """Errors of separation, angle and magnitude difference by differences, not by formula."""

    def geometry(p):
        dx, dy = p[3] - p[0], p[4] - p[1]
        return np.array([np.hypot(dx, dy), np.arctan2(dy, dx), -2.5 * np.log10(p[5] / p[2])])

    p = np.ravel(stars)
    slopes = []
    for i in range(6):
        h = 1e-5 * max(1.0, abs(p[i]))
        slopes.append((geometry(p + h * np.eye(6)[i]) - geometry(p - h * np.eye(6)[i])) / (2 * h))
    slopes = np.array(slopes).T
    return np.sqrt(np.diag(slopes @ covariance[:6, :6] @ slopes.T))


STARS = np.array([[13.2, 12.6, 30000.0], [15.1, 13.7, 12000.0]])
SKY, VARIANCE = 80.0, 25.0


def gaussian_image():
    truth = np.append(STARS.ravel(), SKY)
    return Cutout.of(expected(truth, 28, 27), variance=VARIANCE, psf=gaussian_psf())


def test_bound_is_the_curvature_of_the_likelihood():
    truth = np.append(STARS.ravel(), SKY)
    data = expected(truth, 28, 27)
    steps = np.array([0.02, 0.02, 200.0, 0.02, 0.02, 200.0, 1.0])

    def at(*moves):
        p = truth.copy()
        for index, sign in moves:
            p[index] += sign * steps[index]
        return deviance(data, expected(p, 28, 27), VARIANCE)

    curvature = np.empty((7, 7))
    for i in range(7):
        for j in range(7):
            mixed = sum(s * t * at((i, s), (j, t)) for s in (-1, 1) for t in (-1, 1))
            curvature[i, j] = mixed / (4.0 * steps[i] * steps[j])
    covariance = np.linalg.inv(0.5 * curvature)
    found = pair_errors([gaussian_image()], stars=STARS, background=np.array([SKY]))
    # Differences of second order at these steps are good to 3e-4.
    assert_allclose(found, geometry_errors(covariance, STARS), rtol=2e-3)


def test_wide_pair_without_background_has_the_closed_form():
    # A point-sampled Gaussian: sigma / sqrt(N) for each coordinate of each star, all noise Poisson.
    at = np.arange(-60, 61) / 4.0
    psf = PsfModel.from_image(
        np.exp(-(at[:, None] ** 2 + at**2) / (2 * 4.0)) / (2 * np.pi * 4.0), oversampling=4
    )
    n, m = 250000.0, 90000.0
    stars = np.array([[20.3, 20.1, n], [60.3, 20.1, m]])
    images = []
    for x0 in (0, 40):
        image = np.zeros((41, 41))
        for x, y, electrons in stars:
            image += electrons * psf.evaluate(x - x0, y, columns=41, rows=41)[0]
        images.append(Cutout.of(image + 1e-4, variance=0.0, psf=psf, x0=x0))
    found = pair_errors(images, stars=stars, background=np.full(2, 1e-4))
    each = 2.0 / np.sqrt([n, m])
    closed = (
        np.hypot(*each),
        np.hypot(*each) / 40.0,
        MAGNITUDE * np.hypot(1.0 / np.sqrt(n), 1.0 / np.sqrt(m)),
    )
    # The faint floor that keeps the logarithms finite hides a thousandth of the wings.
    assert_allclose(found, closed, rtol=3e-3)


def test_equal_pair_without_background_is_root_two_times_one_star():
    at = np.arange(-60, 61) / 4.0
    psf = PsfModel.from_image(
        np.exp(-(at[:, None] ** 2 + at**2) / (2 * 4.0)) / (2 * np.pi * 4.0), oversampling=4
    )
    n = 1e5
    stars = np.array([[20.3, 20.1, n], [50.3, 20.1, n]])
    image = sum(n * psf.evaluate(x, y, columns=71, rows=41)[0] for x, y, _ in stars) + 1e-4
    cutout = Cutout.of(image, variance=0.0, psf=psf)
    separation = pair_errors([cutout], stars=stars, background=np.array([1e-4]))[0]
    assert_allclose(separation, np.sqrt(2.0) * 2.0 / np.sqrt(n), rtol=3e-3)


@pytest.mark.parametrize("apart", [0.4, 2.2, 7.0])
def test_significance_is_the_deviance_of_the_best_single_star(apart):
    stars = np.array([[13.2, 13.6, 9000.0], [13.2 + apart, 13.1, 4000.0]])
    truth = np.append(stars.ravel(), SKY)
    data = expected(truth, 34, 27)

    def single(p):
        return deviance(data, expected(p * [1, 1, 1e3, 10], 34, 27), VARIANCE)

    starts = [(*place, 11.0, 8.0) for place in (stars[0, :2], stars[1, :2], stars[:, :2].mean(0))]
    best = min(
        minimize(single, s, method="Nelder-Mead", options={"maxiter": 4000, "fatol": 1e-6}).fun
        for s in starts
    )
    image = Cutout.of(data, variance=VARIANCE, psf=gaussian_psf())
    assert_allclose(second_star_significance([image], stars=stars) ** 2, best, rtol=1e-3, atol=1e-3)


@pytest.mark.parametrize("text", [AIR, SPACE])
def test_bound_of_a_scene_against_the_engines_image(tmp_path, text):
    """Derivatives by differences of painted frames, the whole frame, plain variances."""
    scene = pair_scene(tmp_path, text)
    train = assemble_train(scene)
    found = inventory(scene, train=train)
    geometry, camera = found.geometry, scene.camera
    truth = np.array(
        [found.x[0], found.y[0], found.electrons[0], found.x[1], found.y[1], found.electrons[1]]
    )

    def painted(p):
        image = expected_image(
            train.basis,
            Sources(Points(p[[0, 3]], p[[1, 4]], p[[2, 5]])),
            columns=geometry.columns,
            rows=geometry.rows,
            pixel_scale=geometry.pixel_scale,
        )
        return np.asarray(image, dtype=np.float64)

    steps = np.array([0.01, 0.01, 1000.0, 0.01, 0.01, 1000.0])
    slopes = [
        ((painted(truth + h) - painted(truth - h)) / (2 * h.sum())).ravel() for h in np.diag(steps)
    ]
    slopes = np.array([*slopes, np.ones(slopes[0].size)])
    rounding = camera.gain**2 / 12.0
    variance = painted(truth).ravel() + scene.sky.electrons + camera.read_noise**2 + rounding
    covariance = np.linalg.inv((slopes / variance) @ slopes.T)
    separation, angle, difference = geometry_errors(covariance, truth.reshape(2, 3))
    bound = precision(scene)[0]
    # The cut-out holds less sky than the frame, which costs some thousandths.
    assert_allclose(
        [bound.separation_arcsec, bound.position_angle_deg, bound.magnitude_difference],
        [separation * geometry.pixel_scale / ARCSEC, np.degrees(angle), difference],
        rtol=0.01,
    )


def figures(bound):
    return np.array([bound.separation_arcsec, bound.position_angle_deg, bound.magnitude_difference])


def test_bound_falls_as_the_root_of_the_light(tmp_path):
    quiet = {"camera__read_noise": "0 electron", "camera__gain": "1 electron/adu"}
    once = precision(pair_scene(tmp_path, AIR, **quiet))[0]
    more = {"pair__0__electrons": ["720000 electron"] * 2, "sky__electrons": "540 electron"}
    nine = precision(pair_scene(tmp_path, AIR, **quiet, **more))[0]
    assert_allclose(figures(once) / figures(nine), 3.0, rtol=1e-6)
    assert_allclose(nine.expected_significance / once.expected_significance, 3.0, rtol=1e-4)


def test_exposures_fitted_together(tmp_path):
    scene = pair_scene(tmp_path)
    one, four = precision(scene)[0], precision(scene, exposures=4)[0]
    assert_allclose(figures(one) / figures(four), 2.0, rtol=1e-12)
    assert_allclose(four.expected_significance / one.expected_significance, 2.0, rtol=1e-12)


def test_what_makes_it_worse(tmp_path):
    plain = figures(precision(pair_scene(tmp_path))[0])
    saturated = pair_scene(tmp_path, camera__full_well="3500 electron")
    at_the_edge = pair_scene(tmp_path, pair__0__x=0.4)
    beside = pair_scene(
        tmp_path,
        AIR + '[[galaxy]]\nx = 25\ny = 24\nelectrons = "4000000 electron"\nsersic_index = 1\n'
        'effective_radius = "2 arcsec"\n',
    )
    for scene in (saturated, at_the_edge, beside):
        assert (figures(precision(scene)[0]) > 1.05 * plain).all()
    far = pair_scene(tmp_path, AIR + '[[star]]\nx = 1.0\ny = 46.0\nelectrons = "20000 electron"\n')
    assert_allclose(figures(precision(far)[0]), plain, rtol=0.01)


def test_faint_companion_stands_out_by_its_signal_to_noise(tmp_path):
    # Far apart: the square of the significance is that of the star alone, background free.
    scene = pair_scene(
        tmp_path,
        pair__0__electrons=["40000 electron", "900 electron"],
        pair__0__separation="4 arcsec",
        pair__0__x=20.0,
        sky__electrons="2000 electron",
    )
    alone = simimg.limits(scene).objects[0].stars[1].snr_fit
    # The bright star's light and the free background take some of it away.
    assert_allclose(precision(scene)[0].expected_significance, alone, rtol=0.06)


def test_turned_and_mirrored_detector_changes_nothing(tmp_path):
    # The pixel's squareness shows a little at this sampling.
    plain = figures(precision(pair_scene(tmp_path))[0])
    turned = pair_scene(tmp_path, camera__rotation="90 deg", camera__mirrored=True)
    assert_allclose(figures(precision(turned)[0]), plain, rtol=0.03)


def test_limits_carry_the_bound(tmp_path):
    scene = pair_scene(tmp_path)
    assert simimg.limits(scene).objects[0].bound == precision(scene)[0]
    shown = simimg.limits(scene).to_dict()["objects"][0]["bound"]
    assert shown == precision(scene)[0].to_dict()
    for absent in (
        pair_scene(tmp_path, camera=None),
        # Magnitudes need a time, which is not given.
        pair_scene(tmp_path, pair__0__electrons=None, pair__0__magnitudes=[12.0, 12.0]),
    ):
        assert simimg.limits(absent).to_dict()["objects"][0]["bound"] is None


def test_stars_of_a_catalogue_shine_on_a_pair_listed_or_not(tmp_path):
    (tmp_path / "stars.csv").write_text("px,py,e\n24,21,900000\n40,9,5000\n")
    beside = pair_scene(
        tmp_path,
        AIR + '[[catalogue]]\nfile = "stars.csv"\n'
        'columns = { x = "px", y = "py", electrons = "e" }\n',
    )
    bounds = [simimg.limits(beside, all_stars=every).objects[0].bound for every in (False, True)]
    assert bounds[0] == bounds[1]
    assert (figures(bounds[0]) > 1.1 * figures(precision(pair_scene(tmp_path))[0])).all()


def test_blocks_of_pixels_lose_nothing(tmp_path, monkeypatch):
    fine = {"camera__pixel_scale": "0.03 arcsec", "camera__pixels": [300, 290]}
    place = {"pair__0__x": 144.4, "pair__0__y": 151.3, "sky__electrons": "0.7 electron"}
    galaxy = (
        '[[galaxy]]\nx = 160\ny = 150\nelectrons = "400000 electron"\nsersic_index = 1\n'
        'effective_radius = "0.5 arcsec"\n'
    )
    scene = pair_scene(tmp_path, AIR + galaxy, **fine, **place)
    train = assemble_train(scene)
    view = Expectation.of(scene, train, inventory(scene, train=train))
    assert view.block == 2
    blocks = precision(scene)[0]
    monkeypatch.setattr("simimg.resolving.expectation._FINEST", 1e9)
    pixels = precision(scene)[0]
    # The edges of the square differ by a part of a block.
    assert_allclose(figures(blocks), figures(pixels), rtol=1e-3)
    assert_allclose(blocks.expected_significance, pixels.expected_significance, rtol=1e-3)
    assert (blocks.x, blocks.y) == (pixels.x, pixels.y) == (144.4, 151.3)


@pytest.mark.parametrize("side", ["0.0005 arcsec", "40 arcsec"])
def test_absurd_pixels_have_an_answer(tmp_path, side):
    scene = pair_scene(tmp_path, camera__pixel_scale=side, camera__pixels=[4000, 4000])
    assert figures(precision(scene)[0]).shape == (3,)


def test_pairs_without_an_answer(tmp_path):
    off = precision(pair_scene(tmp_path, pair__0__x=-300.0))[0]
    assert off.to_dict() == {
        "separation_arcsec": None,
        "position_angle_deg": None,
        "magnitude_difference": None,
        "expected_significance": 0.0,
    }
    none = pair_scene(tmp_path, "\n".join(AIR.split("\n")[:-8]) + "\n")
    assert none.pair == ()
    assert precision(none) == []
    with pytest.raises(ValueError, match="exposures must be 1"):
        precision(none, exposures=0)
    with pytest.raises(InputError, match=r"camera\.pixels"):
        precision(pair_scene(tmp_path, camera=None))


LOW_AIR = """
[telescope]
aperture = "1 m"
obstruction = 0.3

[telescope.field]
radius = "9 arcsec"
coma = "50 nm"
curvature = "40 nm"

[air]
seeing = "0.8 arcsec"
altitude = "40 deg"
parallactic_angle = "30 deg"
dispersion = true

[band]
name = "B"
nodes = 2

[camera]
pixels = [72, 72]
pixel_scale = "0.25 arcsec"
read_noise = "5 electron"
gain = "1.4 electron/adu"

[sky]
electrons = "150 electron"

[exposure]
time = "10 s"
seed = 3

[[pair]]
x = 50.3
y = 46.8
magnitudes = [12.5, 13.2]
separation = "0.9 arcsec"
position_angle = "40 deg"
temperatures = ["20000 K", "3500 K"]

[[star]]
x = 36.0
y = 52.5
magnitude = 13.0
temperature = "20000 K"
"""


@pytest.fixture(scope="module")
def in_low_air(tmp_path_factory):
    path = tmp_path_factory.mktemp("low") / "scene.toml"
    path.write_text(LOW_AIR)
    scene = simimg.load_scene(path)
    train = assemble_train(scene)
    return scene, train, inventory(scene, train=train)


def painted_by(basis, found, points):
    geometry = found.geometry
    image = expected_image(
        basis,
        Sources(points),
        columns=geometry.columns,
        rows=geometry.rows,
        pixel_scale=geometry.pixel_scale,
    )
    return np.asarray(image, dtype=np.float64)


def test_stars_of_two_colours_off_the_axis_have_a_psf_each(in_low_air):
    """The image about the pair, and the bound, against images that the engine paints."""
    scene, train, found = in_low_air
    view = Expectation.of(scene, train, found)
    (pair,) = pairs_of(found)
    (image,) = view.cutouts(pair)
    rows, columns = image.electrons.shape
    left, bottom = int(image.x0), int(image.y0)
    box = slice(bottom, bottom + rows), slice(left, left + columns)
    whole = painted_by(train.basis, found, found.points)[box] + 150.0
    # The engine mixes the field's PSFs from those of some places, to 1e-3 of the peak here.
    assert_allclose(image.electrons, whole, atol=1e-3 * whole.max())
    # The PSF of the first object in the middle of the field for all would not do.
    common = painted_by(PsfBasis((train.effective,)), found, found.points)[box] + 150.0
    assert np.abs(common - whole).max() > 0.02 * whole.max()
    # Derivatives by differences of the images of each star alone, whose PSF goes along with it.
    ours, h = (pair[1].partner, pair[0].partner), 0.02

    def alone(row, dx=0.0, dy=0.0):
        x, y, light = found.x[row], found.y[row], found.electrons[row]
        basis = PsfBasis((train.star(int(found.colour[row]), float(x), float(y)),))
        moved = Points(np.array([x + dx]), np.array([y + dy]), np.array([light]))
        return painted_by(basis, found, moved)[box].ravel()

    slopes = [
        slope
        for row in ours
        for slope in (
            (alone(row, dx=h) - alone(row, dx=-h)) / (2 * h),
            (alone(row, dy=h) - alone(row, dy=-h)) / (2 * h),
            alone(row) / found.electrons[row],
        )
    ]
    slopes = np.array([*slopes, np.ones(whole.size)])
    variance = whole.ravel() + 25.0 + 1.4**2 / 12.0
    covariance = np.linalg.inv((slopes / variance) @ slopes.T)
    stars = np.column_stack([found.x, found.y, found.electrons])[[*ours]]
    separation, angle, difference = geometry_errors(covariance, stars)
    bound = pair_precision(view, pair)
    assert_allclose(
        [bound.separation_arcsec, bound.position_angle_deg, bound.magnitude_difference],
        [separation * 0.25, np.degrees(angle), difference],
        rtol=2e-3,
    )
