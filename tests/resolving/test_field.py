"""A field's singles: light and verdicts; a small disc is extended, and no pair."""

from __future__ import annotations

from numpy.testing import assert_allclose

from simimg.resolving.measure import measure_frame
from tests.resolving.scenes import frame, star

DISC = """
[[disc]]
label = "D"
x = 60.2
y = 30.4
electrons = 400000
diameter = "0.45 arcsec"
"""


def test_stars_are_points_and_a_disc_of_half_a_fwhm_is_extended_and_no_pair():
    shot = frame(star(2e5, "x = 25.3\ny = 60.1", label="S") + DISC)
    found = measure_frame(shot)
    assert found.pairs == ()
    singles = {single.label: single for single in found.singles}
    assert set(singles) == {"D", "S"}
    assert singles["S"].verdict == "point"
    assert singles["D"].verdict == "extended"
    for label, light in (("S", 2e5), ("D", 4e5)):
        error = singles[label].electrons_error
        assert_allclose(singles[label].electrons, light, atol=4.0 * error)
    # A uniform disc's standard deviation along an axis is a quarter of its diameter.
    error = singles["D"].width_error_arcsec
    assert_allclose(singles["D"].width_arcsec, 0.45 / 4.0, atol=4.0 * error)
