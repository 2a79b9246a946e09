"""Colour: polychromatic PSFs and electrons against brute force, apart from the engine."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import j1

import simimg
from simimg.assembly.brightness import photometry
from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.imaging.render import expected_image
from tests.assembly.scenes import TEXT, scene

ARCSEC = np.pi / 180 / 3600
PLANCK, LIGHT, BOLTZMANN = 6.62607015e-34, 299792458.0, 1.380649e-23
HEAD = TEXT[: TEXT.index("[[star]]")]
BROAD = {"band": {"centre": "600 nm", "width": "300 nm"}}


def blackbody(wavelength, kelvin):
    """f_nu of Planck's law, any scale."""
    x = PLANCK * LIGHT / (wavelength * BOLTZMANN * kelvin)
    return wavelength**-3.0 / np.expm1(x)


def airy_image(wavelengths, shares, *, diameter, obstruction, scale, x, y, columns, rows, order=6):
    """Sum of monochromatic images by direct quadrature over the pixels."""
    g, w = np.polynomial.legendre.leggauss(order)
    at_x = ((np.arange(columns)[:, None] + g / 2 - x) * scale).ravel()
    at_y = ((np.arange(rows)[:, None] + g / 2 - y) * scale).ravel()
    r = np.maximum(np.hypot(at_x[None, :], at_y[:, None]), 1e-12)
    total = 0.0
    for wavelength, share in zip(wavelengths, shares, strict=True):
        v = np.pi * diameter * r / wavelength
        amplitude = 2 * j1(v) / v - obstruction**2 * 2 * j1(obstruction * v) / (obstruction * v)
        area = np.pi * diameter**2 / 4 * (1 - obstruction**2)
        psf = (amplitude / (1 - obstruction**2)) ** 2 * area / wavelength**2
        total = total + share * psf
    total = total.reshape(rows, order, columns, order)
    return np.einsum("aibj,i,j->ab", total, w / 2, w / 2) * scale**2


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


@pytest.mark.parametrize("kelvin", [None, 3000, 20000])
def test_polychromatic_image_against_two_hundred_monochromatic_ones(tmp_path, kelvin):
    """1e-4 of the peak, over a band as wide as half its centre, above the air."""
    text = HEAD + "[[star]]\nelectrons = 1.0\nx = 20.3\ny = 19.6\n"
    text += f'temperature = "{kelvin} K"\n' if kelvin else ""
    s = scene(
        tmp_path,
        text,
        air=None,
        sky=None,
        **BROAD,
        camera__pixels=[42, 40],
        camera__pixel_scale="0.03 arcsec",
    )
    edges = np.linspace(450e-9, 750e-9, 201)
    middle = (edges[1:] + edges[:-1]) / 2
    # Photons a unit wavelength go as f_nu over the wavelength.
    shares = (blackbody(middle, kelvin) if kelvin else np.ones(200)) / middle
    direct = airy_image(
        middle,
        shares / shares.sum(),
        diameter=2.0,
        obstruction=0.3,
        scale=0.03 * ARCSEC,
        x=20.3,
        y=19.6,
        columns=42,
        rows=40,
    )
    assert_allclose(image(s), direct, rtol=0, atol=1e-4 * direct.max())


def test_a_hot_star_is_sharper_than_a_cool_one(tmp_path):
    peaks = []
    for kelvin in (3000, 20000):
        text = HEAD + f'[[star]]\nelectrons = 1.0\ntemperature = "{kelvin} K"\nx = 20\ny = 20\n'
        s = scene(
            tmp_path,
            text,
            air=None,
            sky=None,
            **BROAD,
            camera__pixels=[41, 41],
            camera__pixel_scale="0.03 arcsec",
        )
        peaks.append(image(s).max())
    assert peaks[1] > 1.05 * peaks[0]


def test_a_catalogue_of_every_temperature_is_mixed_within_its_error(tmp_path):
    """Stars of a catalogue, mixed from few members, against stars with a PSF of their own."""
    kelvin = [2500, 4000, 6500, 15000, 60000]
    rows = "\n".join(f"{30 + 60 * i},40,1e5,{t}" for i, t in enumerate(kelvin))
    (tmp_path / "stars.csv").write_text(f"x,y,electrons,temperature\n{rows}\n")
    settings = {
        "air": None,
        "sky": None,
        "camera__pixels": [320, 80],
        **BROAD,
        "camera__pixel_scale": "0.03 arcsec",
    }
    mixed = image(scene(tmp_path, HEAD + '[[catalogue]]\nfile = "stars.csv"\n', **settings))
    for i, t in enumerate(kelvin):
        own = (
            HEAD + f'[[star]]\nelectrons = 1e5\ntemperature = "{t} K"\nx = {30 + 60 * i}\ny = 40\n'
        )
        alone = image(scene(tmp_path, own, **settings))
        part = slice(10 + 60 * i, 51 + 60 * i)
        # The members' stated error, 2e-5, with room for the neighbours' wings of 1e-4.
        near = np.abs(mixed[20:61, part] - alone[20:61, part]).max()
        assert near < 2.5e-4 * alone.max()


def test_electrons_depend_on_colour_through_the_detector(tmp_path):
    """A detector that sees only the red half collects more of a cool star of the same magnitude."""
    (tmp_path / "qe.csv").write_text("wavelength,qe\n400,0\n599.9,0\n600.1,1\n800,1\n")
    s = scene(tmp_path, HEAD, **BROAD, camera__quantum_efficiency="qe.csv")
    light = photometry(s, area=1.0, airmass=None)
    flat = light.zero_point(0)
    by_hand = 3631e-26 / PLANCK * np.log(750 / 600) * 0.8
    assert flat == pytest.approx(by_hand, rel=2e-3)
    wavelengths = np.linspace(450e-9, 750e-9, 20001)
    for kelvin in (3000, 20000):
        photons = blackbody(wavelengths, kelvin) / wavelengths
        red = photons[wavelengths > 600e-9].sum() / photons.sum()
        all_light = 3631e-26 / PLANCK * np.log(750 / 450) * 0.8
        assert light.zero_point(kelvin) == pytest.approx(all_light * red, rel=2e-3)


def test_zero_points_of_many_temperatures_agree_with_each_alone(tmp_path):
    (tmp_path / "qe.csv").write_text("wavelength,qe\n400,0.2\n800,0.9\n")
    light = photometry(
        scene(tmp_path, HEAD, **BROAD, camera__quantum_efficiency="qe.csv"), area=1.0, airmass=None
    )
    kelvin = np.unique(np.geomspace(2000, 50000, 300).astype(int))
    many = light.electrons(np.full(kelvin.size, 15.0), kelvin)
    few = [float(light.electrons(15.0, int(k))) for k in kelvin[::37]]
    assert_allclose(many[::37], few, rtol=1e-5)


def test_a_magnitude_known_in_another_band_is_carried_over(tmp_path):
    """By hand: mean fluxes over the two bands against their zero fluxes (Bessell et al. 1998)."""

    def electrons(kelvin, band):
        text = HEAD.replace('name = "V"', 'name = "R"') + (
            f'[[star]]\nmagnitude = 15\ntemperature = "{kelvin} K"\n'
        )
        text += f'magnitude_band = "{band}"\n' if band else ""
        return float(inventory(scene(tmp_path, text)).electrons[0])

    def mean_flux(kelvin, centre, width):
        wavelength = np.linspace(centre - width / 2, centre + width / 2, 4001) * 1e-9
        return np.average(blackbody(wavelength, kelvin), weights=1 / wavelength)

    for kelvin in (3500, 9600):
        in_v = mean_flux(kelvin, 550.0, 89.3) / 3636
        in_r = mean_flux(kelvin, 655.6, 159.1) / 3064
        ratio = electrons(kelvin, "V") / electrons(kelvin, None)
        assert ratio == pytest.approx(in_r / in_v, rel=2e-3)
    assert electrons(3500, "V") > 2 * electrons(3500, None)


def test_two_stars_of_a_pair_have_their_own_colours(tmp_path):
    text = (
        HEAD
        + """
[[pair]]
electrons = [1e6, 1e6]
separation = "2 arcsec"
position_angle = "270 deg"
temperatures = ["20000 K", "2800 K"]
"""
    )
    s = scene(
        tmp_path,
        text,
        air=None,
        sky=None,
        **BROAD,
        camera__pixels=[161, 81],
        camera__pixel_scale="0.03 arcsec",
    )
    seen = image(s)
    first, second = seen[:, :113].max(), seen[:, 114:].max()
    assert first > 1.05 * second


def test_refraction_draws_colours_apart_along_the_parallactic_angle(tmp_path):
    """A hot star stands nearer to the zenith than a cool one by what Filippenko's formula says."""
    from simimg.air.refraction import altitude_from_airmass, differential_refraction

    air = {
        "seeing": "0.8 arcsec",
        "airmass": 1.5,
        "dispersion": True,
        "pressure": "80 kPa",
        "temperature": "7 degC",
        "parallactic_angle": "90 deg",
    }
    places = []
    for kelvin in (20000, 3000):
        text = HEAD + f'[[star]]\nelectrons = 1e6\ntemperature = "{kelvin} K"\nx = 50\ny = 40\n'
        s = scene(tmp_path, text, air=air, sky=None, **BROAD)
        seen = image(s)
        y, x = np.indices(seen.shape)
        places.append(np.array([(seen * x).sum(), (seen * y).sum()]) / seen.sum() * 0.25)
    wavelengths = np.linspace(450e-9, 750e-9, 4001)
    lifted = (
        differential_refraction(
            wavelengths,
            600e-9,
            zenith_distance=np.pi / 2 - altitude_from_airmass(1.5),
            pressure=80e3,
            temperature=280.15,
        )
        / ARCSEC
    )
    mean = []
    for kelvin in (20000, 3000):
        photons = blackbody(wavelengths, kelvin) / wavelengths
        mean.append((photons * lifted).sum() / photons.sum())
    step = places[0] - places[1]
    # A parallactic angle of 90 degrees points east, which is left.
    assert step[0] == pytest.approx(-(mean[0] - mean[1]), abs=0.003)
    assert abs(step[1]) < 0.003


def test_a_corrector_takes_the_dispersion_away(tmp_path):
    air = {"seeing": "0.8 arcsec", "airmass": 1.8, "dispersion": True}
    limits = simimg.limits(scene(tmp_path, HEAD, air=air, **BROAD))
    corrected = simimg.limits(
        scene(tmp_path, HEAD, air={**air, "dispersion_corrector": True}, **BROAD)
    )
    assert limits.dispersion_arcsec > 1.0
    assert any("draws the band out" in note for note in limits.notes)
    assert corrected.dispersion_arcsec == 0.0
    assert corrected.delivered.fwhm_arcsec < limits.delivered.fwhm_arcsec + 1e-9
