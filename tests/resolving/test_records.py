"""The record's names, which other programs read."""

from __future__ import annotations

import json
from dataclasses import FrozenInstanceError
from math import nan

import pytest

from simimg.resolving.records import CriterionVerdict, PairMeasurement, PairTruth

NAMES = {
    "label",
    "x",
    "y",
    "ra_deg",
    "dec_deg",
    "separation_arcsec",
    "separation_error_arcsec",
    "separation_low_arcsec",
    "separation_high_arcsec",
    "position_angle_deg",
    "position_angle_error_deg",
    "magnitude_difference",
    "magnitude_difference_error",
    "probability_single",
    "elongated",
    "ambiguous_180",
    "saddle_ratio",
    "saddle_ratio_error",
    "rayleigh",
    "sparrow",
    "truth",
    "advice",
}


def record(**changes):
    verdict = CriterionVerdict(limit_arcsec=0.9, probability=0.3, verdict="borderline")
    numbers = dict.fromkeys(NAMES - {"label", "advice", "truth", "rayleigh", "sparrow"}, 0.5)
    values = {**numbers, "label": "A", "rayleigh": verdict, "sparrow": verdict}
    return PairMeasurement(**(values | {"elongated": True, "ambiguous_180": False} | changes))


def test_names_of_the_document():
    document = record().to_dict()
    assert set(document) == NAMES
    assert set(document["sparrow"]) == {"limit_arcsec", "probability", "verdict"}
    assert document["truth"] is None


def test_what_is_not_finite_is_none():
    verdict = CriterionVerdict(limit_arcsec=float("inf"), probability=nan, verdict="unresolved")
    truth = PairTruth(separation_arcsec=0.3, position_angle_deg=10.0, magnitude_difference=nan)
    document = record(separation_arcsec=nan, sparrow=verdict, truth=truth).to_dict()
    assert document["separation_arcsec"] is None
    assert document["sparrow"]["limit_arcsec"] is None
    assert document["truth"]["magnitude_difference"] is None
    json.dumps(document, allow_nan=False)


def test_a_record_is_frozen():
    with pytest.raises(FrozenInstanceError):
        record().x = 3.0
