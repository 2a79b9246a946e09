"""Frames that others made: measured correctly, whatever their headers say or leave out."""

from __future__ import annotations

import numpy as np
import pytest
from astropy.io import fits
from astropy.table import Table
from astropy.wcs import WCS
from numpy.testing import assert_allclose

import simimg
from simimg.errors import InputError
from simimg.frame import Frame
from simimg.resolving.given import Given
from simimg.resolving.measure import measure_frame
from simimg.resolving.readout import foreign_readout
from tests.resolving import outsiders as out

DOUBLE = out.pair(60.3, 58.7, 2.6, 25.0, (2.5e5, 1.2e5))
DIFFERENCE = 2.5 * np.log10(2.5 / 1.2)
# Without coordinates north is up and east left.
ANGLE = np.degrees(np.arctan2(-np.cos(np.radians(25.0)), np.sin(np.radians(25.0)))) % 360.0
KNOWN = {"gain": out.GAIN, "read_noise": out.READ_NOISE, "pixel_scale_arcsec": out.SCALE}


def sampled(oversampling=4, half=24, fwhm=out.FWHM):
    """The outsiders' PSF as an image."""
    axis = np.arange(-half * oversampling, half * oversampling + 1) / oversampling
    return out.moffat(fwhm)(axis[None, :], axis[:, None])


@pytest.fixture(scope="module")
def image():
    return out.expected([*out.STARS, *DOUBLE])


def away(record, *, separation=2.6 * out.SCALE, angle=ANGLE, difference=DIFFERENCE):
    """How many errors a record is from the truth in its three figures."""
    turn = (record.position_angle_deg - angle + 180.0) % 360.0 - 180.0
    return np.array(
        [
            (record.separation_arcsec - separation) / record.separation_error_arcsec,
            turn / record.position_angle_error_deg,
            (record.magnitude_difference - difference) / record.magnitude_difference_error,
        ]
    )


@pytest.mark.parametrize("choice", ["image", "profile", "stars"])
def test_a_frame_assembled_by_others_alone(image, choice):
    """Six noise draws: errors of the right size about the truth."""
    choices = {
        "image": {"psf": sampled(), "psf_oversampling": 4},
        "profile": {"psf": "profile"},
        "stars": {"psf_stars": [star[:2] for star in out.STARS]},
    }[choice]
    figures = []
    for seed in range(6):
        counts = out.exposed(image, seed)
        (record,) = simimg.measure(counts, near=[(60, 58)], **KNOWN, **choices)
        assert record.probability_single < 1e-20
        figures.append(away(record))
    figures = np.array(figures)
    # 18 figures: none beyond 4 errors; root mean square within 1 +/- 3 / sqrt(2 x 18), and
    # somewhat more where the PSF was measured from stars no brighter than 30 times the pair.
    assert np.abs(figures).max() < (4.0 if choice != "stars" else 5.0)
    most = {"image": 1.5, "profile": 1.6, "stars": 2.0}[choice]
    assert 0.5 < np.sqrt((figures**2).mean()) < most


def test_photutils_gives_the_same_separations_of_wide_pairs():
    from photutils.psf import ImagePSF, PSFPhotometry, SourceGrouper

    pairs = [
        out.pair(30.2, 62.6, 9.0, 70.0, (2e5, 1.5e5)),
        out.pair(82.4, 58.3, 11.0, -35.0, (3e5, 1e5)),
        out.pair(55.7, 20.9, 8.0, 160.0, (1.4e5, 1.2e5)),
    ]
    stars = [star for two in pairs for star in two]
    counts = out.exposed(out.expected(stars), 3)
    electrons = (counts - out.BIAS) * out.GAIN
    fit = PSFPhotometry(
        ImagePSF(sampled(), oversampling=4),
        (11, 11),
        grouper=SourceGrouper(min_separation=15.0),
        aperture_radius=5,
    )
    start = Table({"x": [s[0] for s in stars], "y": [s[1] for s in stars]})
    error = np.sqrt(np.maximum(electrons, 1.0) + out.READ_NOISE**2)
    theirs = fit(electrons - np.median(electrons), error=error, init_params=start)
    x, y = np.asarray(theirs["x_fit"]), np.asarray(theirs["y_fit"])
    ours = simimg.measure(
        counts, near=[two[0][:2] for two in pairs], psf=sampled(), psf_oversampling=4, **KNOWN
    )
    for index, record in enumerate(ours):
        i, j = 2 * index, 2 * index + 1
        apart = np.hypot(x[j] - x[i], y[j] - y[i]) * out.SCALE
        # Of the same pixels, but for the wings that a box of 11 leaves out: within one error.
        assert abs(record.separation_arcsec - apart) < record.separation_error_arcsec
        truth = np.hypot(*(np.array(pairs[index][1][:2]) - pairs[index][0][:2])) * out.SCALE
        assert abs(record.separation_arcsec - truth) < 4.0 * record.separation_error_arcsec


def test_limits_of_a_known_profile(image):
    """Sparrow's limit of this Moffat profile, by bisection of its own second derivative."""
    counts = out.exposed(image, 1)
    (record,) = simimg.measure(counts, near=[(60, 58)], psf=sampled(), psf_oversampling=4, **KNOWN)
    gamma = out.moffat().gamma.value
    # d2/dt2 (1 + t^2/g^2)^-b vanishes at t = g / sqrt(2 b + 1): half of Sparrow's equal limit.
    equal = 2.0 * gamma / np.sqrt(2.0 * out.POWER + 1.0) * out.SCALE
    # An equal pair's limit: of this pair, fainter by 0.8 magnitudes, it is somewhat larger.
    assert equal < record.sparrow.limit_arcsec < 1.6 * equal
    (single,) = simimg.measure(
        counts, near=[out.STARS[0][:2]], psf=sampled(), psf_oversampling=4, **KNOWN
    )
    # A quintic spline of four samples to the pixel: 1e-4 of the limit.
    if not np.isfinite(single.separation_arcsec):
        assert_allclose(single.sparrow.limit_arcsec, equal, rtol=1e-3)


class TestDirections:
    """Which way is north and how long is a second of arc."""

    @pytest.mark.parametrize("rotation", [0.0, 40.0, 250.0])
    @pytest.mark.parametrize("mirrored", [False, True])
    def test_any_coordinates(self, image, rotation, mirrored, tmp_path):
        c, s = np.cos(np.radians(rotation)), np.sin(np.radians(rotation))
        turn = np.array([[-c, s], [s, c]]) @ np.diag([-1.0 if mirrored else 1.0, 1.0])
        wcs = WCS(naxis=2)
        wcs.wcs.ctype = ["RA---TAN", "DEC--TAN"]
        wcs.wcs.crval, wcs.wcs.crpix = [210.0, 68.0], [65.0, 62.0]
        wcs.wcs.cd = turn * out.SCALE / 3600.0
        counts = out.exposed(image, 2).astype(np.uint16)
        fits.PrimaryHDU(counts, wcs.to_header()).writeto(tmp_path / "a.fits")
        frame = Frame.read(tmp_path / "a.fits")
        (record,) = simimg.measure(
            frame,
            near=[(60, 58)],
            gain=out.GAIN,
            read_noise=out.READ_NOISE,
            psf=sampled(),
            psf_oversampling=4,
        )
        sky = wcs.pixel_to_world([DOUBLE[0][0], DOUBLE[1][0]], [DOUBLE[0][1], DOUBLE[1][1]])
        there = sky[0].separation(sky[1]).arcsec, sky[0].position_angle(sky[1]).deg
        assert np.abs(away(record, separation=there[0], angle=there[1])).max() < 4.0
        assert_allclose([record.ra_deg, record.dec_deg], [sky[0].ra.deg, sky[0].dec.deg], atol=2e-5)

    def test_pixels_that_are_not_square(self, image):
        wcs = WCS(naxis=2)
        wcs.wcs.ctype = ["RA---TAN", "DEC--TAN"]
        wcs.wcs.crval, wcs.wcs.crpix = [10.0, 5.0], [65.0, 62.0]
        wcs.wcs.cdelt = [-0.5 / 3600.0, 0.25 / 3600.0]
        frame = Frame(counts=out.exposed(image, 2), wcs=wcs, simulated=False)
        found = measure_frame(frame, near=[(60, 58)], given=Given(gain=1.6, read_noise=6.0))
        sky = wcs.pixel_to_world([DOUBLE[0][0], DOUBLE[1][0]], [DOUBLE[0][1], DOUBLE[1][1]])
        there = sky[0].separation(sky[1]).arcsec, sky[0].position_angle(sky[1]).deg
        assert np.abs(away(found.pairs[0], separation=there[0], angle=there[1])).max() < 5.0
        # The limit is that of the pair's own line, too: 2.6 pixels are as far on the sky.
        ratio = found.pairs[0].rayleigh.limit_arcsec / there[0]
        plain = measure_frame(
            Frame(counts=out.exposed(image, 2), simulated=False),
            near=[(60, 58)],
            given=Given(**KNOWN),
        ).pairs[0]
        assert_allclose(ratio, plain.rayleigh.limit_arcsec / (2.6 * out.SCALE), rtol=1e-3)

    def test_old_coordinates_are_turned_to_ours(self, image):
        wcs = WCS(naxis=2)
        wcs.wcs.ctype = ["RA---TAN", "DEC--TAN"]
        wcs.wcs.crval, wcs.wcs.crpix = [120.0, 40.0], [65.0, 62.0]
        wcs.wcs.cdelt = [-out.SCALE / 3600.0, out.SCALE / 3600.0]
        wcs.wcs.radesys, wcs.wcs.equinox = "FK4", 1950.0
        frame = Frame(counts=out.exposed(image, 2), wcs=wcs, simulated=False)
        (record,) = simimg.measure(frame, near=[(60, 58)], gain=1.6, read_noise=6.0)
        there = wcs.pixel_to_world(DOUBLE[0][0], DOUBLE[0][1]).icrs
        # A hundredth of a pixel.
        assert_allclose([record.ra_deg, record.dec_deg], [there.ra.deg, there.dec.deg], atol=2e-6)

    def test_without_any_that_is_said(self, image):
        frame = Frame(counts=out.exposed(image, 1), simulated=False)
        found = measure_frame(frame, near=[(60, 58)], given=Given(**KNOWN))
        assert any("north is taken as up" in text for text in found.warnings)
        assert np.isnan(found.pairs[0].ra_deg)
        assert found.pairs[0].to_dict()["ra_deg"] is None

    def test_a_scale_is_asked_for(self, image):
        with pytest.raises(InputError, match="--pixel-scale"):
            simimg.measure(out.exposed(image, 1), near=[(60, 58)])

    @pytest.mark.parametrize(
        "cards",
        [
            {"PIXSCALE": 0.4},
            {"SECPIX1": -0.4},
            {"SCALE": "0.4"},
            {"XPIXSZ": 9.0, "FOCALLEN": 206.264806 * 9.0 / 0.4},
        ],
    )
    def test_a_scale_in_the_header(self, image, cards):
        frame = Frame(counts=out.exposed(image, 1), header=cards, simulated=False)
        (record,) = simimg.measure(frame, near=[(60, 58)], gain=1.6, read_noise=6.0)
        assert_allclose(record.separation_arcsec, 2.6 * 0.4, rtol=0.02)


class TestReadout:
    """Gain, noise, bias and unusable pixels, from headers and pixels."""

    def of(self, counts, given=None, **header):
        return foreign_readout(
            Frame(counts=counts, header=header, simulated=False), given or Given()
        )

    @pytest.mark.parametrize(
        ("header", "gain"),
        [
            ({"GAIN": 1.6}, 1.6),
            ({"EGAIN": 1.6, "GAIN": 120}, 1.6),
            ({"CCDGAIN": "1.6"}, 1.6),
            ({"EPADU": 1.6}, 1.6),
            ({"GAIN": (0.625, "ADU per electron")}, 1.6),
            ({"GAIN": (0.625, "[DN/e-]")}, 1.6),
            ({"GAIN": (1.6, "electrons/ADU")}, 1.6),
            ({"GAIN": (1.6, "e-/adu, exposure amplifier")}, 1.6),
            ({"GAIN": 300}, 1.0),
            ({"GAIN": 0.0}, 1.0),
            ({"GAIN": 1.6, "BUNIT": "electron"}, 1.0),
            ({"BUNIT": "adu/s", "GAIN": 1.6, "EXPTIME": 20.0}, 32.0),
            ({"BUNIT": "e-/s", "EXPOSURE": 20.0}, 20.0),
            ({}, 1.0),
        ],
    )
    def test_gains_by_any_name(self, image, header, gain):
        assert self.of(out.exposed(image, 1), **header).gain == pytest.approx(gain)

    @pytest.mark.parametrize(
        ("header", "noise"),
        [
            ({"RDNOISE": 6.0}, 6.0),
            ({"READNOIS": 6.0}, 6.0),
            ({"RON": 6.0}, 6.0),
            ({"ENOISE": "6.0"}, 6.0),
            ({"RDNOISE": (3.75, "read noise in ADU")}, 6.0),
        ],
    )
    def test_read_noises_by_any_name(self, image, header, noise):
        readout = self.of(out.exposed(image, 1), GAIN=1.6, **header)
        assert_allclose(readout.variance, noise**2 + 1.6**2 / 12.0)

    def test_what_the_user_says_goes_first(self, image):
        given = Given(gain=2.0, read_noise=3.0, saturation=900.0, bias=480.0)
        readout = self.of(out.exposed(image, 1), given, GAIN=1.6, RDNOISE=6.0, SATURATE=6e4)
        assert (readout.gain, readout.bias, readout.saturation) == (2.0, 480.0, 900.0)

    def test_the_bias_follows_from_the_noise(self, image):
        readout = self.of(out.exposed(image, 1), GAIN=1.6, RDNOISE=6.0)
        # The scatter of a few thousand pixels: 2 %, of 290 electrons squared.
        sky = (readout.backdrop.level - readout.bias) * 1.6
        assert_allclose(sky, out.SKY, rtol=0.1)
        assert any("no bias level is told" in text for text in readout.notes)

    def test_a_sky_taken_off_is_put_back(self, image):
        counts = out.exposed(image, 1) - out.BIAS - out.SKY / out.GAIN + 0.5
        readout = self.of(counts, GAIN=1.6, RDNOISE=6.0)
        assert_allclose((readout.backdrop.level - readout.bias) * 1.6, out.SKY, rtol=0.1)
        assert any("taken off" in text for text in readout.notes)

    def test_no_bias_where_none_is_needed(self, image):
        readout = self.of(out.exposed(image, 1, bias=0.0), GAIN=1.6, RDNOISE=6.0)
        assert readout.bias == 0.0
        assert not readout.notes

    def test_calibrated_frames_tell_their_gain(self):
        rng = np.random.default_rng(1)
        # 20,000 photons a pixel in units of a thousandth: the noise gives the scale away.
        readout = self.of(rng.poisson(20_000.0, (120, 120)) / 1234.5)
        assert_allclose(readout.gain, 1234.5, rtol=0.05)
        assert any("the gain is not known" in text for text in readout.notes)

    def test_noise_that_does_not_fit_the_header_is_said(self, image):
        readout = self.of(out.exposed(image, 1), GAIN=1.6, RDNOISE=25.0, BIASLVL=500.0)
        assert any("scatters by" in text for text in readout.notes)

    def test_overscan_and_trim_sections(self, image):
        counts = np.pad(out.exposed(image, 1), ((0, 0), (0, 20)))
        rng = np.random.default_rng(2)
        counts[:, -20:] = np.rint(rng.normal(out.BIAS, 6.0 / 1.6, (124, 20)))
        readout = self.of(counts, GAIN=1.6, TRIMSEC="[1:130,1:124]", BIASSEC="[133:150, 1:124]")
        assert readout.barred[:, 130:].all()
        assert not readout.barred[:, :130].any()
        assert readout.bias == out.BIAS
        assert_allclose(np.sqrt(readout.variance), 6.0, rtol=0.1)

    def test_full_pixels_are_found(self, image):
        full = np.minimum(out.exposed(image, 1), 4095).astype(np.uint16)
        readout = self.of(np.where(image > 6000, 4095, full).astype(np.uint16))
        assert readout.saturation == 4095
        assert self.of(out.exposed(image, 1)).saturation == np.inf

    def test_a_frame_of_nothing_is_refused(self):
        with pytest.raises(InputError, match="no pixel counts"):
            self.of(np.full((20, 20), 7.0), Given(saturation=5.0))

    @pytest.mark.parametrize(
        "wrong",
        [{"gain": 0.0}, {"gain": np.inf}, {"read_noise": -1.0}, {"pixel_scale_arcsec": np.nan}],
    )
    def test_what_the_user_says_is_checked(self, wrong):
        with pytest.raises(InputError, match=next(iter(wrong))):
            Given(**wrong)


class TestPixels:
    """Kinds of numbers, missing pixels, sloping skies."""

    @pytest.mark.parametrize("kind", ["i2", "u2", "i4", "u4", "i8", "f4", "f8", ">f4", ">i2"])
    def test_kinds_of_numbers(self, image, kind):
        counts = np.minimum(out.exposed(image, 1), 32767).astype(kind)
        (record,) = simimg.measure(
            counts, near=[(60, 58)], psf=sampled(), psf_oversampling=4, **KNOWN
        )
        assert np.abs(away(record)).max() < 4.0

    def test_eight_bits(self):
        stars = [(x, y, e / 200.0) for x, y, e in (*out.STARS, *DOUBLE)]
        image = out.expected(stars, sky=20.0)
        counts = np.minimum(np.random.default_rng(1).poisson(image), 255).astype(np.uint8)
        (record,) = simimg.measure(
            counts,
            near=[(60, 58)],
            psf=sampled(),
            psf_oversampling=4,
            gain=1.0,
            read_noise=0.0,
            pixel_scale_arcsec=out.SCALE,
        )
        assert np.abs(away(record)).max() < 4.0

    @pytest.mark.parametrize("how", ["nan", "infinite", "masked array", "mask", "full"])
    def test_missing_pixels_do_not_count(self, image, how):
        counts = out.exposed(image, 1)
        bad = np.random.default_rng(8).random(counts.shape) < 0.04
        bad[58, 60] = True
        spoilt = np.where(bad, {"nan": np.nan, "infinite": np.inf}.get(how, 6e4), counts)
        choices = {"psf": sampled(), "psf_oversampling": 4, **KNOWN}
        if how == "masked array":
            spoilt = np.ma.masked_array(spoilt, bad)
        elif how == "mask":
            choices["mask"] = bad
        elif how == "full":
            choices["saturation"] = 6e4
        (record,) = simimg.measure(spoilt, near=[(60, 58)], **choices)
        assert np.abs(away(record)).max() < 4.0

    @pytest.mark.parametrize("slope", [(2.0, -1.0), (-4.0, 3.0)])
    def test_a_sloping_sky(self, slope):
        """Up to 500 electrons from edge to edge, as much as the sky itself."""
        image = out.expected([*out.STARS, *DOUBLE], sky=700.0, slope=slope)
        found = measure_frame(
            Frame(counts=out.exposed(image, 4), simulated=False),
            near=[(60, 58)],
            given=Given(**KNOWN),
        )
        assert np.abs(away(found.pairs[0])).max() < 4.0
        # Nothing is found that is not there, nor is the PSF thought bad.
        assert len(found.pairs) == 1
        assert not any("do not trust" in text for text in found.warnings)

    def test_the_plane_matters(self):
        """A level instead of a plane would bend the answer."""
        from dataclasses import replace

        from simimg.resolving.asked import as_choice, as_frame
        from simimg.resolving.observation import observe
        from simimg.resolving.starfit import fit_stars

        image = out.expected(DOUBLE, sky=900.0, slope=(-8.0, 5.0))
        seen = observe(
            as_frame(image),
            given=Given(gain=1.0, read_noise=6.0, pixel_scale_arcsec=0.4),
            psf=as_choice(sampled(), oversampling=4),
        )
        cut = seen.cutout(60.0, 58.0, 14.0)
        box = (
            slice(int(cut.y0), int(cut.y0) + cut.electrons.shape[0]),
            slice(int(cut.x0), int(cut.x0) + cut.electrons.shape[1]),
        )
        sloping = replace(cut, electrons=seen.electrons(box))
        level = replace(sloping, tilted=False)
        places = [star[:2] for star in DOUBLE]
        truth = np.array(places)
        offs = [
            np.abs(fit_stars([one], places=places).places - truth).max()
            for one in (cut, sloping, level)
        ]
        # The data are without noise; what the plane leaves is the spline's own error.
        assert max(offs[:2]) < 2e-3 < 0.05 < offs[2]


def test_arrays_that_are_no_image_are_refused():
    for wrong in (np.zeros(5), np.zeros((2, 2, 2)), np.zeros((3, 3), complex), [["a"]], []):
        with pytest.raises(InputError, match="two-dimensional"):
            simimg.measure(wrong, pixel_scale_arcsec=1.0)
    with pytest.raises(InputError, match="no finite pixel"):
        simimg.measure(np.full((9, 9), np.nan), pixel_scale_arcsec=1.0)
    with pytest.raises(InputError, match="mask"):
        simimg.measure(np.zeros((9, 9)), mask=np.zeros((3, 3), bool), pixel_scale_arcsec=1.0)
    with pytest.raises(InputError, match="not on the frame"):
        simimg.measure(np.zeros((9, 9)), near=[(20, 3)], pixel_scale_arcsec=1.0)
