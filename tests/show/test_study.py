"""Pictures of studies: what a reader measures on them is what the table says."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.scene.steps import steps_from_text
from simimg.show.canvas import look
from simimg.show.studycurves import draw_curves
from simimg.show.studymap import draw_map
from simimg.show.studystrip import _draw, _views
from simimg.study.sweep import Varied, make, plan
from tests.show.drawn import artist, overlaps, texts
from tests.study.pairs import pair_scene


def over(*keys):
    return [Varied(key, steps_from_text(values)) for key, values in keys]


@pytest.fixture(scope="module")
def one(tmp_path_factory):
    scene = pair_scene(tmp_path_factory.mktemp("one"))
    planned = plan(scene, vary=over(("telescope.aperture", "0.3 m:3 m:3:log")), trials=3)
    return planned, make(planned)


def laid_out(figure):
    figure.canvas.draw()
    return figure


def test_curves_are_those_of_the_table(one):
    _, made = one
    with look():
        figure = laid_out(draw_curves(made))
    for name in ("diffraction_rayleigh", "delivered_sparrow", "fraction_sparrow"):
        line = artist(figure, name)
        assert_allclose(line.get_xdata(), [0.3, 0.948683298, 3.0], rtol=1e-8)
        assert_allclose(line.get_ydata(), [row[name] for row in made.rows])
    assert [axes.get_xscale() for axes in figure.axes] == ["log", "log"]
    words = [text.get_text() for text in texts(figure)]
    assert "telescope.aperture (m)" in words
    assert "simulated" in words
    assert overlaps(figure) == []


def test_map_shows_values_at_their_places_and_the_boundary(tmp_path):
    vary = over(
        ("pair.0.separation", "0.5 arcsec:1.5 arcsec:3"), ("telescope.aperture", "0.5 m,2 m")
    )
    made = make(plan(pair_scene(tmp_path), vary=vary))
    with look():
        figure = laid_out(draw_map(made, "separation", 0.8))
    mesh = artist(figure, "map")
    assert_allclose(np.asarray(mesh.get_array()), [[0.5, 1.0, 1.5], [0.5, 1.0, 1.5]], rtol=1e-12)
    (lines,) = [one for one in figure.axes[0].collections if type(one).__name__ == "QuadContourSet"]
    ((path,),) = [one.get_paths() for one in [lines]]
    # The separation does not hang on the aperture: the line stands at 0.8 arcsec.
    assert_allclose(path.vertices[:, 0], 0.8, rtol=1e-9)
    assert "simulated" in [text.get_text() for text in texts(figure)]


def test_strip_shows_one_piece_of_sky_on_one_stretch(one):
    planned, made = one
    views = _views(planned, made)
    with look():
        figure = laid_out(_draw(views, planned))
    pictures = [artist(figure, f"frame-{number}") for number in range(3)]
    norms = {(one.norm.vmin, one.norm.vmax, one.norm.linear_width) for one in pictures}
    assert len(norms) == 1
    limits = {tuple(one.axes.get_xlim()) for one in pictures}
    assert len(limits) == 1
    # Arcseconds: the cut spans as many pixels as the scale says.
    left, right, _, _ = pictures[0].get_extent()
    assert right - left == pytest.approx(0.28 * pictures[0].get_array().shape[1], rel=1e-6)
    # The pair's middle is the origin: electrons' centroid there, within the noise.
    image = np.clip(views[2].values, 0, None)
    x = np.linspace(left, right, image.shape[1] * 2 + 1)[1::2]
    assert abs(float((image.sum(0) @ x) / image.sum())) < 0.15
    assert [view.words for view in views] == ["0.3 m", "0.9487 m", "3 m"]
    bar = artist(figure, "scale-bar")
    assert np.ptp(bar.get_xdata()) in (0.5, 1.0, 2.0)
    assert "simulated" in [text.get_text() for text in texts(figure)]
