"""The figure of a telescope's optics: what it shows, and that it is the same each time."""

import subprocess
import sys

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.show.canvas import look
from simimg.show.optics import PANELS, draw_optics, optics_caption, write_optics
from simimg.show.opticsview import optics_view
from tests.assembly.scenes import scene
from tests.reference.diffraction import (
    BRIGHT_RING_INTENSITIES,
    BRIGHT_RINGS,
    DARK_RINGS,
    FWHM,
    TRANSFER_AT_HALF_CUTOFF,
)
from tests.show import drawn

ARCSEC = 180.0 * 3600.0 / np.pi

SEGMENTED = """
title = "hexagons"
[telescope]
name = "Driftglass 6 m"
aperture = "6 m"
[telescope.segments]
rings = 1
width = "2.2 m"
gap = "20 mm"
missing_centre = true
piston = "60 nm"
[telescope.wavefront]
zernike = { 7 = "40 nm" }
[band]
centre = "2.2 um"
width = "2 nm"
[camera]
pixel_scale = "0.03 arcsec"
rotation = "30 deg"
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("optics")


@pytest.fixture(scope="module")
def clear(folder):
    """A clear aperture above the air in one colour."""
    telescope = {"aperture": "2 m"}
    band = {"centre": "550 nm", "width": "1 nm"}
    return optics_view(scene(folder, air=None, telescope=telescope, band=band))


@pytest.fixture(scope="module")
def hexagons(folder):
    return optics_view(scene(folder, SEGMENTED))


@pytest.fixture(scope="module")
def blurred(folder):
    """Vanes and air."""
    vanes = {"count": 4, "width": "30 mm"}
    return optics_view(scene(folder, telescope__vanes=vanes, telescope__name="Saltmarsh 2 m"))


def figure(view, panels=PANELS):
    with look():
        made = draw_optics(view, panels)
        made.canvas.draw()
    return made


class TestWhatIsDrawn:
    def test_rings_of_a_clear_aperture(self, clear):
        """Born & Wolf, ch. 8.5: dark and bright rings, to the picture's step of 0.05 lambda/D."""
        image, half = clear.psf()
        middle = image.shape[0] // 2
        row = image[middle, middle:]
        step = half / middle / (550e-9 / 2.0)
        falls = np.flatnonzero((row[1:-1] < row[:-2]) & (row[1:-1] < row[2:])) + 1
        rises = np.flatnonzero((row[1:-1] > row[:-2]) & (row[1:-1] > row[2:])) + 1
        assert_allclose(falls[:3] * step, DARK_RINGS, atol=0.55 * step)
        assert_allclose(rises[:3] * step, BRIGHT_RINGS, atol=0.55 * step)
        # The peak of a ring is flat: half a step from it costs under a percent.
        assert_allclose(row[rises[:3]], BRIGHT_RING_INTENSITIES, rtol=0.01)

    def test_the_transfer_function_of_a_clear_aperture(self, clear):
        """Goodman, Fourier Optics: 0.391002 at half the cut-off, which is at D/lambda."""
        frequency, curves = clear.curves()
        assert [curve.key for curve in curves] == ["perfect", "pixel"]
        assert_allclose(frequency[-1], 2.0 / 550e-9, rtol=1e-12)
        half_way = np.interp(0.5 * frequency[-1], frequency, curves[0].values)
        # The middle lies between two of the curve's points.
        assert_allclose(half_way, TRANSFER_AT_HALF_CUTOFF, atol=1e-5)

    def test_the_air_takes_the_high_frequencies(self, blurred):
        frequency, curves = blurred.curves()
        by_key = {curve.key: curve.values for curve in curves}
        assert list(by_key) == ["perfect", "delivered", "pixel"]
        assert frequency[-1] < 0.4 * 2.0 / 550e-9
        assert (by_key["delivered"] <= by_key["perfect"] + 1e-9).all()
        assert (by_key["pixel"] <= by_key["delivered"] + 1e-9).all()

    def test_the_wavefront_is_level_where_light_passes(self, hexagons):
        path = hexagons.wavefront()
        pupil = hexagons.train.pupil
        assert np.isnan(path[len(path) // 2, len(path) // 2])
        lit = np.isfinite(path)
        weight = pupil.transmission[lit]
        mean = (weight * path[lit]).sum() / weight.sum()
        rms = np.sqrt((weight * path[lit] ** 2).sum() / weight.sum())
        assert abs(mean) < 1e-10
        # Squares of under 2 % transmission are left out.
        assert_allclose(rms, hexagons.train.aperture.rms, rtol=1e-3)

    def test_a_perfect_telescope_has_no_error(self, clear):
        assert np.nanmax(np.abs(clear.wavefront())) == 0.0
        assert clear.strehl == 1.0


class TestFigure:
    @pytest.mark.parametrize("name", ["clear", "hexagons", "blurred"])
    def test_it_can_be_read(self, name, request):
        made = figure(request.getfixturevalue(name))
        assert drawn.overlaps(made) == []
        assert drawn.outside(made) == []
        assert drawn.artist(made, "simulated").get_text() == "simulated"

    @pytest.mark.parametrize("panels", [("psf",), ("wavefront", "pupil"), PANELS[:3]])
    def test_only_what_is_asked_for(self, clear, panels):
        made = figure(clear, panels)
        assert len(made.axes) == len(panels)
        assert [axes.get_title(loc="left").split(":")[0].lower() for axes in made.axes] == list(
            panels
        )
        assert drawn.overlaps(made) == []
        assert drawn.outside(made) == []

    def test_every_picture_has_its_scale(self, hexagons):
        pupil, wavefront, psf, transfer = figure(hexagons).axes
        for axes, words in (
            (pupil, "transmission"),
            (wavefront, "optical path (nm)"),
            (psf, "light over the peak's"),
        ):
            (bar,) = axes.child_axes
            assert bar.get_ylabel() == words
        assert pupil.get_xlabel() == "x in the pupil (m)"
        left, right = pupil.get_xlim()
        assert right - left == pytest.approx(hexagons.side)
        assert psf.get_xlabel() == "x (mas)"
        assert transfer.get_xlabel() == "spatial frequency (cycles per arcsec)"
        assert "nm rms" in wavefront.get_title(loc="left")

    def test_its_bar_is_as_long_as_it_says(self, hexagons):
        made = figure(hexagons, ("psf",))
        x = drawn.artist(made, "scale-bar").get_xdata()
        (words,) = [one.get_text() for one in drawn.texts(made) if one.get_text().endswith(" mas")]
        assert x[1] - x[0] == pytest.approx(float(words.split()[0]))

    def test_north_follows_the_camera(self, hexagons):
        """North is turned by the rotation of +y, 30 degrees, from up towards the right."""
        arrow = drawn.artist(figure(hexagons, ("psf",)), "arrow-N")
        angle = np.radians(30.0)
        assert_allclose(drawn.direction(arrow), (np.sin(angle), np.cos(angle)), atol=1e-9)

    def test_a_dish_is_drawn_in_its_own_units(self, folder):
        dish = scene(
            folder,
            air=None,
            camera=None,
            telescope={"aperture": "100 m"},
            band={"centre": "21 cm", "width": "0.1 mm"},
            star__0={"electrons": 1},
            sky=None,
            exposure=None,
        )
        view = optics_view(dish)
        made = figure(view, ("psf", "transfer"))
        assert made.axes[0].get_xlabel() == "x (deg)"
        assert made.axes[1].get_xlabel() == "spatial frequency (cycles per deg)"
        assert "21 cm" in optics_caption(view, ("psf",))
        assert view.fwhm * ARCSEC == pytest.approx(FWHM * 0.21 / 100 * ARCSEC, rel=1e-4)


class TestFile:
    @pytest.mark.parametrize("ending", ["png", "pdf", "svg"])
    def test_the_same_bytes_each_time(self, folder, tmp_path, ending):
        scene(folder, SEGMENTED)
        code = (
            "import sys, simimg\n"
            "from simimg.show.optics import write_optics\n"
            "write_optics(simimg.load_scene(sys.argv[1]), sys.argv[2], what=['wavefront', 'psf'])"
        )
        made = []
        for seed in ("1", "2"):
            path = tmp_path / f"{seed}.{ending}"
            subprocess.run(
                [sys.executable, "-c", code, folder / "scene.toml", path],
                env={"PYTHONHASHSEED": seed, "PATH": ""},
                check=True,
            )
            made.append(path.read_bytes())
        assert made[0] == made[1]

    def test_its_caption_says_what_it_is(self, hexagons):
        words = optics_caption(hexagons, PANELS)
        for part in ("Simulated optics: hexagons.", "Driftglass 6 m", "segmented", "2200 nm"):
            assert part in words
        for part in ("Pupil:", "Wavefront:", "PSF:", "Transfer:", "above the atmosphere"):
            assert part in words
        assert "Pupil:" not in optics_caption(hexagons, ("psf",))

    @pytest.mark.parametrize("what", [[], ["psf", "rays"]])
    def test_words_that_are_no_panels(self, folder, tmp_path, what):
        with pytest.raises(ValueError, match="pupil, wavefront, psf, transfer"):
            write_optics(scene(folder), tmp_path / "f.png", what=what)
        assert list(tmp_path.iterdir()) == []
