"""What every figure must have, at the width of a column and of a page, whatever it shows."""

from __future__ import annotations

import os

import numpy as np
import pytest
from matplotlib import colormaps

from simimg.scene.steps import steps_from_text
from simimg.show.canvas import look
from simimg.show.figure import draw_figure, figure_parts, write_figure
from simimg.show.optics import draw_optics, write_optics
from simimg.show.opticsview import optics_view
from simimg.show.restored import restore
from simimg.show.separationplot import draw_separations, write_separation_plot
from simimg.show.studycurves import draw_curves
from simimg.show.studymap import draw_map
from simimg.show.studyplot import write_study_plot
from simimg.show.studystrip import _draw, _views, write_study_strip
from simimg.study.separations import SeparationMap
from simimg.study.sweep import Varied, make, plan
from tests.show import drawn, frames
from tests.study.pairs import pair_scene

FULL = os.environ.get("SIMIMG_FULL_GRID") == "1"
WIDTHS = (80.0, 88.0, 169.0, 180.0, 400.0) if FULL else (88.0, 180.0)
SKY = ("frame", "restored", "optics", "strip")
ALL = (*SKY, "curves", "map", "separations")
PLAIN = {
    "transmission",
    "light over the peak's",
    "modulus of the transfer function",
    "share resolved",
    "residual (\N{GREEK SMALL LETTER SIGMA})",
}


def over(*keys):
    return [Varied(key, steps_from_text(values)) for key, values in keys]


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    """What the figures show, each made once."""
    scene = pair_scene(tmp_path_factory.mktemp("every"))
    one = plan(scene, vary=over(("telescope.aperture", "0.31 m:3 m:4:log")), trials=2)
    two = plan(
        scene,
        vary=over(("telescope.aperture", "0.5 m:3 m:3:log"), ("air.seeing", "0.4 arcsec,1 arcsec")),
    )
    shot = frames.frame(rotation=35.0)
    return {
        "scene": scene,
        "one": (one, make(one)),
        "two": make(two),
        "separations": separations(),
        "frame": shot,
        "parts": figure_parts(shot, measurement=frames.measurement(shot)),
        "measured": frames.measurement(shot),
        "optics": optics_view(scene),
    }


def separations():
    """A map as a set-up might have it, with what is not known at its ends."""
    difference, apart = np.linspace(0.0, 4.0, 5), np.geomspace(0.02, 4.0, 7)
    return SeparationMap(
        label="P",
        share=0.95,
        magnitude_difference=difference,
        rayleigh_limit=np.full(5, 1.0),
        sparrow_limit=np.array([0.7, 0.9, 1.2, 1.6, np.inf]),
        resolved_rayleigh=np.full(5, 1.04),
        resolved_sparrow=np.array([0.74, 0.95, 1.3, 1.8, np.nan]),
        shows=np.array([0.05, 0.08, 0.14, 0.25, np.nan]),
        separation=apart,
        contrast=np.array([np.nan, np.nan, 1.2, 2.5, 3.4, 4.0, 4.0]),
    )


def draw(made, name, width):
    if (name, width) not in made:
        with look():
            made[name, width] = _drawn(made, name, width)
            made[name, width].canvas.draw()
    return made[name, width]


def _drawn(made, name, width):
    if name in ("frame", "restored"):
        light, subject, profile, _ = made["parts"]
        view = restore(made["frame"], subject, iterations=3) if name == "restored" else None
        return draw_figure(made["frame"], light, subject, profile, view, width=width)
    if name == "optics":
        return draw_optics(made["optics"], ("pupil", "wavefront", "psf", "transfer"), width=width)
    if name == "strip":
        return _draw(_views(*made["one"]), made["one"][0], width)
    if name == "curves":
        return draw_curves(made["one"][1], width=width)
    if name == "map":
        return draw_map(made["two"], "bound_separation", 0.01, width=width)
    return draw_separations(made["separations"], made["scene"], width=width)


def write(made, name, path, width):
    if name in ("frame", "restored"):
        return write_figure(
            made["frame"],
            path,
            measurement=made["measured"],
            restored=3 if name == "restored" else None,
            width=width,
        )
    if name == "optics":
        return write_optics(made["scene"], path, width=width)
    if name == "strip":
        return write_study_strip(*made["one"], path, width=width)
    if name == "curves":
        return write_study_plot(made["one"][1], path, width=width)
    if name == "map":
        return write_study_plot(made["two"], path, width=width)
    return write_separation_plot(made["separations"], made["scene"], path, width=width)


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", ALL)
def test_it_can_be_read_at_its_width(made, name, width):
    figure = draw(made, name, width)
    size = figure.get_size_inches()[0] * 25.4
    # Frames side by side keep to 60 mm each, so that few of them fill no page.
    assert size == pytest.approx(width) if name != "strip" else size <= width + 1e-6
    assert drawn.outside(figure) == []
    assert drawn.overlaps(figure) == []
    assert min(text.get_fontsize() for text in drawn.texts(figure)) >= 6.5
    assert "simulated" in [text.get_text() for text in drawn.texts(figure)]


@pytest.mark.parametrize("electrons", ["[3e5, 1.5e5]", "[3e12, 1.5e12]"])
def test_long_names_and_large_numbers_at_any_width(electrons):
    bright = [
        f"pair.0.electrons={electrons}",
        "camera.full_well='1e12 electron'",
        "camera.bit_depth=31",
        "camera.gain='900 electron/adu'",
        f"telescope.name='{'M' * 60}'",
    ]
    shot = frames.frame(overrides=bright)
    measured = frames.measurement(shot, label="W" * 60)
    light, subject, profile, _ = figure_parts(shot, measurement=measured)
    for width in (80.0, 88.0, 169.0, 170.0, 400.0):
        with look():
            figure = draw_figure(shot, light, subject, profile, width=width)
            figure.canvas.draw()
        assert drawn.outside(figure) == [], width
        assert drawn.overlaps(figure) == [], width
        ((power, label),) = [
            (label.partition(" / ")[2], label)
            for label in (axes.get_ylabel() for axes in figure.axes)
            if label.startswith("electrons per pixel")
        ]
        assert (power == "10\u2079") == ("e12" in electrons), label


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", SKY)
def test_every_picture_has_directions_and_a_scale(made, name, width):
    figure = draw(made, name, width)
    pictures = [axes for axes in figure.axes if axes.get_images()]
    assert pictures
    for number, axes in enumerate(pictures):
        gids = [one.get_gid() or "" for one in axes.findobj()]
        for mark in ("arrow-N", "arrow-E"):
            assert sum(gid.startswith(mark) for gid in gids) == 1
        # Frames side by side have one scale, which the first shows.
        bars = sum(gid.startswith("scale-bar") for gid in gids)
        assert bars == (1 if name != "strip" or number == 0 else 0)
    # Names within a figure are names within its SVG: each stands once.
    named = [one.get_gid() for one in figure.findobj() if one.get_gid()]
    assert len(named) == len(set(named))


@pytest.mark.parametrize("name", ALL)
def test_every_axis_says_its_unit(made, name):
    figure = draw(made, name, 88.0)
    every = [axes for top in figure.axes for axes in (top, *top.child_axes)]
    labels = [words for axes in every for words in (axes.get_xlabel(), axes.get_ylabel()) if words]
    assert labels
    for words in labels:
        assert "(" in words or " per pixel" in words or words in PLAIN or words.endswith(" m"), (
            words
        )


@pytest.mark.parametrize("name", [*SKY, "map"])
def test_colours_survive_grey_print(made, name):
    figure = draw(made, name, 88.0)
    maps = {
        one.get_cmap().name
        for axes in figure.axes
        for one in (*axes.get_images(), *axes.collections)
        if one.get_array() is not None
    }
    assert maps
    for colours in maps:
        assert _steps_of_grey(colours).min() > 0.0


def test_a_map_that_grey_print_does_not_show_is_refused():
    """The same measure refuses maps whose lightness turns back."""
    assert _steps_of_grey("RdBu_r").min() < 0.0
    assert _steps_of_grey("jet").min() < 0.0


def _steps_of_grey(name):
    """Changes of the luminance along a colour map (ITU-R BT.709)."""
    red, green, blue, _ = colormaps[name](np.linspace(0.0, 1.0, 64)).T
    return np.diff(0.2126 * red**2.2 + 0.7152 * green**2.2 + 0.0722 * blue**2.2)


@pytest.mark.parametrize("ending", ["png", "pdf", "svg"])
@pytest.mark.parametrize("name", ["restored", "strip", "curves", "map", "separations"])
def test_the_same_bytes_twice(made, name, ending, tmp_path):
    one, two = tmp_path / f"one.{ending}", tmp_path / f"two.{ending}"
    caption = write(made, name, one, 88.0)
    assert write(made, name, two, 88.0) == caption
    assert "imulat" in caption
    assert "\n" not in caption
    content = one.read_bytes()
    assert content == two.read_bytes()
    for clock in (b"CreationDate", b"ModDate", b"<dc:date>"):
        assert clock not in content
    if ending == "svg":
        assert b'id="simulated"' in content


@pytest.mark.parametrize("width", [79.9, 400.1, float("nan")])
@pytest.mark.parametrize("name", ALL)
def test_widths_out_of_range(made, name, width, tmp_path):
    with pytest.raises(ValueError, match="80 to 400 mm wide"):
        write(made, name, tmp_path / "f.png", width)
    assert list(tmp_path.iterdir()) == []
