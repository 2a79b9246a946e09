"""The same pairs and singles whatever the number of processes."""

from __future__ import annotations

from simimg.resolving import crew
from simimg.resolving.finding import search_field
from simimg.resolving.observation import observe
from tests.resolving.scenes import frame, pair, star


def test_two_workers_find_what_one_finds(monkeypatch):
    monkeypatch.setattr(crew, "_LEAST", 1)
    objects = pair("0.7 arcsec", 10.0, (8e4, 5e4), "x = 25.0\ny = 60.0")
    observation = observe(frame(objects + star(1e5, "x = 65.2\ny = 30.1")))
    results = []
    for workers in (1, 2):
        found = search_field(observation, workers=workers)
        assert (len(found.pairs), len(found.singles)) == (1, 1)
        vector = found.pairs[0].double.vector.tolist()
        results.append((vector, found.singles[0].wide.variance))
        assert found.pairs[0].cutouts[0].psf is observation.psf
    assert results[0] == results[1]
