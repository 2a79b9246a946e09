"""The restored view: light kept, sharpened, and what is said of it."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.errors import InputError
from simimg.frame import Frame
from simimg.show.canvas import look
from simimg.show.figure import draw_figure, figure_parts, write_figure
from simimg.show.restored import REMARK, restore, sharpened
from tests.resolving.psfs import expected, model
from tests.show import drawn, frames


def kernel(psf, half=14):
    side = 2 * half + 1
    image = np.maximum(psf.evaluate(half, half, columns=side, rows=side, order=0)[0], 0)
    return image / image.sum()


def test_light_is_kept_and_drawn_together():
    psf = model("coarse")
    image = expected(psf, [(20, 20, 5e4), (24, 22, 3e4)], size=45, background=10.0)
    sharp = sharpened(image, kernel(psf), 40)
    # The iteration keeps the sum; at the edges the background is mirrored.
    assert_allclose(sharp.sum(), image.sum(), rtol=1e-3)
    assert sharp.min() >= 0.0
    # Stars whose brightest pixel had a quarter of their light have most of it there.
    for x, y, light in ((20, 20, 5e4), (24, 22, 3e4)):
        assert image[y, x] < 0.27 * light
        assert sharp[y, x] > 0.7 * light


def test_it_climbs_to_what_explains_the_data():
    """Blurred again the restored view comes ever closer to the data."""
    from scipy.signal import fftconvolve

    psf = model("air")
    image = expected(psf, [(20, 20, 5e4), (25, 21, 3e4)], size=45, background=10.0)
    off = []
    for iterations in (1, 10, 60):
        again = fftconvolve(sharpened(image, kernel(psf, 20), iterations), kernel(psf, 20), "same")
        off.append(np.abs(again - image)[8:-8, 8:-8].max())
    assert off[0] > 2 * off[1] > 4 * off[2]


def test_a_frame_with_a_pair():
    shot = frames.frame(overrides=['pair.0.separation="1.0 arcsec"'])
    subject = figure_parts(shot, measurement=frames.measurement(shot))[1]
    view = restore(shot, subject, iterations=60)
    left, right, bottom, top = subject.window
    assert view.values.shape == (top - bottom, right - left)
    assert (view.iterations, view.source) == (60, "scene")
    first, second = ((float(row["x"]) - left, float(row["y"]) - bottom) for row in shot.truth)
    steps = np.linspace(0.0, 1.0, 9)
    line = [
        view.values[
            round(first[1] + t * (second[1] - first[1])),
            round(first[0] + t * (second[0] - first[0])),
        ]
        for t in steps
    ]
    # Hardly a saddle in the frame, a deep one here: of stars five pixels apart.
    assert min(line[3:6]) < 0.5 * min(max(line[:3]), max(line[6:]))
    assert_allclose(view.values.sum(), 4.5e5, rtol=0.06)
    with pytest.raises(ValueError, match="1 or more"):
        restore(shot, subject, iterations=0)


def test_missing_pixels_are_filled_in():
    shot = frames.frame(frames.STARS)
    counts = shot.counts.astype(float)
    counts[30:33, 30:33] = np.nan
    bare = Frame(counts=counts, header=shot.header, psf=shot.psf, scene_files=shot.scene_files)
    subject = figure_parts(shot)[1]
    assert np.isfinite(restore(bare, subject, iterations=5).values).all()


def test_the_figure_says_what_it_is(tmp_path):
    shot = frames.frame()
    measured = frames.measurement(shot)
    caption = write_figure(shot, tmp_path / "f.png", measurement=measured, restored=12)
    assert "Upper right: the same, restored by 12 iterations of Richardson and Lucy" in caption
    assert REMARK in caption
    assert "Below: mean over a strip" in caption
    light, subject, profile, _ = figure_parts(shot, measurement=measured)
    with look():
        figure = draw_figure(shot, light, subject, profile, restore(shot, subject, iterations=12))
        figure.canvas.draw()
    picture = drawn.artist(figure, "restored")
    assert picture.get_array().shape == (
        subject.window[3] - subject.window[2],
        subject.window[1] - subject.window[0],
    )
    titles = [axes.get_title(loc="left") for axes in figure.axes]
    assert f"Richardson-Lucy, 12 iterations:\n{REMARK}" in titles
    # Without it nothing of the kind is said.
    assert REMARK not in write_figure(shot, tmp_path / "g.png", measurement=measured)


def test_a_frame_without_a_psf_is_refused(tmp_path):
    shot = Frame(counts=np.random.default_rng(1).normal(100, 5, (40, 40)), simulated=False)
    with pytest.raises(InputError, match="no star stands alone"):
        write_figure(shot, tmp_path / "f.png", restored=5)
    assert not list(tmp_path.iterdir())
