"""Notes beside the errors and bounds of pairs far closer than the PSF is wide; what they claim."""

from __future__ import annotations

from dataclasses import replace

import pytest
from numpy.testing import assert_allclose

import simimg
from simimg.resolving.bound import precision
from simimg.resolving.notes import bound_notes, measured_notes
from tests.resolving.scenes import pair, scene
from tests.resolving.test_records import record

GROW = "errors of the separation grow as 1/separation"


def test_bounds_do_grow_as_one_over_the_separation():
    """What the note says, against the bounds themselves."""
    light = (4e5, 4e5)
    bounds = [precision(scene(pair(f"{s} arcsec", 30.0, light)))[0] for s in (0.1, 0.2)]
    # The FWHM is 1 arcsec; at a fifth of it the next order of the expansion is a few per cent.
    errors = [bound.separation_arcsec for bound in bounds]
    assert_allclose(errors[0] / errors[1], 2.0, rtol=0.05)
    # The ratio, told by the third moment, goes with the cube.
    spreads = [bound.magnitude_difference for bound in bounds]
    assert_allclose(spreads[0] / spreads[1], 8.0, rtol=0.1)


@pytest.mark.parametrize(("separation", "said"), [(0.2, True), (0.45, True), (0.9, False)])
def test_limits_say_it_of_close_pairs(separation, said):
    found = simimg.limits(scene(pair(f"{separation} arcsec", 30.0, (4e5, 2e5), label="AB")))
    notes = [note for note in found.notes if GROW in note]
    assert len(notes) == said
    if said:
        ratio = separation / found.delivered.fwhm_arcsec
        assert notes[0].startswith(f"AB: at {ratio:.2g} of the FWHM")
        bound = found.objects[0].bound
        loose = bound.separation_arcsec > 0.2 * separation or bound.magnitude_difference > 0.15
        assert ("estimates scatter more" in notes[0]) == loose


def test_nothing_is_said_of_a_pair_without_bounds():
    assert bound_notes([(0.1, None)], fwhm_arcsec=1.0) == []


def test_a_measured_pair_is_told_its_interval():
    regular = record(separation_low_arcsec=float("nan"), separation_high_arcsec=float("nan"))
    assert measured_notes(regular, fwhm_arcsec=0.9) == []
    (close,) = measured_notes(regular, fwhm_arcsec=2.0)
    assert close.startswith("At 0.25 of the FWHM")
    assert GROW in close
    lopsided = replace(regular, separation_low_arcsec=0.0, separation_high_arcsec=0.113)
    (ends,) = measured_notes(lopsided, fwhm_arcsec=0.9)
    assert ends.endswith("from 0 to 0.113 arcsec.")
    single = replace(lopsided, separation_arcsec=float("nan"))
    assert measured_notes(single, fwhm_arcsec=2.0) == []
