"""The quick picture of a frame."""

import numpy as np
import pytest
from PIL import Image

from simimg.errors import InputError
from simimg.frame import Frame
from simimg.show.preview import preview_shades, write_preview
from tests.show import frames


def picture(frame, path, **choices):
    write_preview(frame, path, **choices)
    with Image.open(path) as image:
        image.load()
        return np.array(image), image


def plain(counts, *, simulated=False):
    return Frame(counts=counts, simulated=simulated)


def test_y_is_up_and_small_frames_are_enlarged(tmp_path):
    made = frames.frame(frames.STARS.replace('"-1.5 arcsec"', '"4 arcsec"'))
    shades, image = picture(made, tmp_path / "a.png")
    assert image.mode == "L"
    assert shades.shape == (56 * 6, 64 * 6)
    # The faint star is 12.5 pixels to the left of the middle and 20 above it.
    row, column = (55 - 47) * 6 + 3, 19 * 6 + 3
    around = shades[row - 20 : row + 20, column - 20 : column + 20]
    assert around.max() > shades[-row - 20 : -row + 20, column - 20 : column + 20].max() + 60


def test_a_large_frame_keeps_its_pixels(tmp_path):
    counts = np.random.default_rng(6).normal(0.0, 1.0, (300, 500)).astype("f4")
    counts[10, 20] = 500.0
    shades, _ = picture(plain(counts), tmp_path / "a.png")
    assert shades.shape == (300, 500)
    assert shades[299 - 10, 20] == 255


def test_the_word_stands_in_the_corner(tmp_path):
    counts = np.random.default_rng(6).normal(0.0, 1.0, (400, 500)).astype("f4")
    real, image = picture(plain(counts), tmp_path / "real.png")
    made, marked = picture(plain(counts, simulated=True), tmp_path / "made.png")
    rows, columns = np.nonzero(real != made)
    assert columns.min() < 8
    assert columns.max() < 90
    assert rows.min() > 375
    assert (made[375:, :90] == 255).sum() > 60
    assert marked.text["Comment"] == "A simulated frame."
    assert "Comment" not in image.text


@pytest.mark.parametrize("shape", [(1, 1), (1, 3000), (2000, 2), (3, 3)])
def test_a_narrow_frame_has_room_for_the_word(shape, tmp_path):
    shades, _ = picture(plain(np.ones(shape, "f4"), simulated=True), tmp_path / "a.png")
    assert shades.shape[0] >= 20
    assert shades.shape[1] >= 72
    assert (shades == 255).sum() > 60


def test_pixels_without_a_number_are_black():
    counts = np.random.default_rng(7).normal(50.0, 5.0, (500, 500)).astype("f4")
    counts[100, 200] = np.nan
    counts[101, 200] = np.inf
    shades = preview_shades(plain(counts))
    assert shades[100, 200] == 0
    assert shades[101, 200] == 0
    assert preview_shades(plain(np.full((3, 3), np.nan, "f4"))).max() == 0


def test_same_bytes_twice_and_nothing_else(tmp_path):
    made = frames.frame()
    write_preview(made, tmp_path / "a.png")
    write_preview(made, tmp_path / "b.PNG")
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.PNG").read_bytes()
    assert len(list(tmp_path.iterdir())) == 2


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("a.jpg", "a preview is a PNG picture; end its name in .png"),
        ("a", "a preview is a PNG picture"),
        ("no/a.png", "does not exist"),
        ("there.png", "exists already"),
    ],
)
def test_refused(name, words, tmp_path):
    (tmp_path / "there.png").write_bytes(b"mine")
    with pytest.raises(InputError, match=words):
        write_preview(None, tmp_path / name)
    assert (tmp_path / "there.png").read_bytes() == b"mine"
    assert len(list(tmp_path.iterdir())) == 1


def test_overwrite(tmp_path):
    path = tmp_path / "there.png"
    path.write_bytes(b"mine")
    shades, _ = picture(frames.frame(), path, overwrite=True)
    assert shades.size
