"""What moves: trails of the right length and direction, and no electron lost."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.assembly.objects import inventory
from simimg.assembly.train import assemble_train
from simimg.assembly.truth import truth_table
from simimg.errors import InputError
from simimg.imaging.render import expected_image
from tests.assembly.scenes import TEXT, scene

HEAD = TEXT[: TEXT.index("[[star]]")]
STAR = HEAD + '[[star]]\nlabel = "S"\nelectrons = 1e6\nx = 75\ny = 70\n'
FRAME = {"sky": None, "camera__pixels": [151, 141]}


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


def moments(seen):
    """Place, and second moments, of an image."""
    y, x = np.indices(seen.shape)
    total = seen.sum()
    mx, my = (seen * x).sum() / total, (seen * y).sum() / total
    dx, dy = x - mx, y - my
    near = np.hypot(dx, dy) < 60
    cut = seen * near
    return mx, my, *((cut * a * b).sum() / cut.sum() for a, b in ((dx, dx), (dy, dy), (dx, dy)))


def trail(moving, still):
    """Length (pixels) and angle (degrees from +x) of the trail, from the moments that it adds."""
    _, _, xx, yy, xy = (a - b for a, b in zip(moments(moving), moments(still), strict=True))
    angle = 0.5 * np.arctan2(2 * xy, xx - yy)
    # An even trail of length L has the variance L^2 / 12 along itself.
    along = xx * np.cos(angle) ** 2 + yy * np.sin(angle) ** 2 + xy * np.sin(2 * angle)
    return np.sqrt(12 * along), np.degrees(angle) % 180


@pytest.mark.parametrize("position_angle", [0, 60, 115])
def test_a_drift_draws_every_star_out(tmp_path, position_angle):
    drift = {"rate": "0.1 arcsec/s", "position_angle": f"{position_angle} deg"}
    still = image(scene(tmp_path, STAR, **FRAME))
    moving = image(scene(tmp_path, STAR, **FRAME, pointing={"drift": drift}))
    length, angle = trail(moving, still)
    assert length == pytest.approx(3.0 / 0.25, rel=5e-3)
    assert angle == pytest.approx((90 + position_angle) % 180, abs=0.3)
    assert moving.sum() == pytest.approx(still.sum(), rel=1e-4)


def test_a_moving_object_trails_while_the_stars_do_not(tmp_path):
    text = STAR + 'motion = { rate = "360 arcsec/h", position_angle = "45 deg" }\n'
    still = image(scene(tmp_path, STAR, **FRAME))
    moving = image(scene(tmp_path, text, **FRAME))
    length, angle = trail(moving, still)
    assert length == pytest.approx(3.0 / 0.25, rel=5e-3)
    assert angle == pytest.approx(135, abs=0.3)
    assert moving.sum() == pytest.approx(still.sum(), rel=1e-4)
    assert_allclose(moments(moving)[:2], moments(still)[:2], atol=1e-3)
    other = STAR.replace("y = 70", "y = 30").replace('"S"', '"T"')
    both = image(scene(tmp_path, text + other[other.index("[[star]]") :], **FRAME))
    alone = image(scene(tmp_path, other, **FRAME))
    assert_allclose(both - moving, alone, rtol=0, atol=1e-5 * both.max())


def test_following_the_object_lets_the_stars_trail(tmp_path):
    comet = '[[star]]\nlabel = "comet"\nelectrons = 1e6\nx = 75\ny = 70\n'
    comet += 'motion = { rate = "360 arcsec/h", position_angle = "45 deg" }\n'
    star = "[[star]]\nelectrons = 1e6\nx = 75\ny = 70\n"
    still = image(scene(tmp_path, STAR, **FRAME))
    followed = image(scene(tmp_path, HEAD + comet, **FRAME, pointing={"track": "comet"}))
    assert_allclose(followed, still, rtol=0, atol=1e-5 * still.max())
    both = image(scene(tmp_path, HEAD + comet + star, **FRAME, pointing={"track": "comet"}))
    length, angle = trail(np.maximum(both - followed, 0), still)
    assert length == pytest.approx(3.0 / 0.25, rel=5e-3)
    assert angle == pytest.approx(135, abs=0.3)


def test_jitter_is_a_gaussian_factor_of_each_axis(tmp_path):
    jitter = ["1 arcsec", "0.5 arcsec"]
    still = assemble_train(scene(tmp_path, STAR, **FRAME)).focal
    shaken = assemble_train(scene(tmp_path, STAR, **FRAME, pointing={"jitter": jitter})).focal
    arcsec = np.pi / 180 / 3600
    u = np.linspace(-3e4, 3e4, 13)[None, :]
    v = np.linspace(-3e4, 3e4, 11)[:, None]
    factor = np.exp(-2 * (np.pi * arcsec) ** 2 * (u**2 + (0.5 * v) ** 2))
    assert_allclose(shaken(u, v), still(u, v) * factor, rtol=1e-9)


def test_a_turning_field_draws_arcs_about_its_centre(tmp_path):
    """A star 40 pixels out turns through its own arc; the centre stays."""
    text = HEAD + "[[star]]\nelectrons = 1e6\nx = 115\ny = 70\n"
    still = image(scene(tmp_path, text, **FRAME))
    s = scene(tmp_path, text, **FRAME, pointing={"rotation_rate": "1000 arcsec/s"})
    turned = image(s)
    angle = np.radians(1000 * 30 / 3600)
    length, direction = trail(turned, still)
    chord = 40 * angle
    assert length == pytest.approx(chord, rel=0.01)
    assert direction == pytest.approx(90, abs=0.5)
    assert turned.sum() == pytest.approx(still.sum(), rel=1e-3)
    # The arc bends inwards: its light lies a little nearer to the centre than the star at rest.
    inwards = moments(turned)[0] - moments(still)[0]
    assert inwards == pytest.approx(40 * (np.sinc(angle / 2 / np.pi) - 1), abs=0.01)


def test_the_truth_is_the_place_at_mid_exposure(tmp_path):
    s = scene(tmp_path, STAR + 'motion = { rate = "360 arcsec/h" }\n', **FRAME)
    table = truth_table(inventory(s), assemble_train(s))
    assert table["x"][0] == 75
    assert table["y"][0] == 70


def test_a_hopeless_trail_is_refused(tmp_path):
    text = STAR + 'motion = { rate = "5 deg/s" }\n'
    with pytest.raises(InputError, match="trail"):
        image(scene(tmp_path, text, **FRAME, exposure__time="1000 s"))
