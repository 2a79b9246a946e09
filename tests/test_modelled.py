"""The page of what is modelled: its links lead somewhere, its sources stand in the docstrings."""

import re
from pathlib import Path

import pytest

PAGE = Path(__file__).parents[1] / "simimg" / "README.md"
TEXT = PAGE.read_text(encoding="utf-8")
ROWS = [line for line in TEXT.splitlines() if re.search(r"\| \[[a-z/]+\.py\]", line)]


def test_there_are_rows_of_every_department():
    assert len(ROWS) >= 25
    rooms = {room for row in ROWS for room in re.findall(r"\(([a-z]+)/[a-z]+\.py\)", row)}
    assert rooms >= {"light", "optics", "air", "sky", "camera", "imaging", "resolving", "study"}


def test_its_links_lead_somewhere():
    for link in re.findall(r"\]\(([^)#]+)\)", TEXT):
        assert (PAGE.parent / link).exists(), link


@pytest.mark.parametrize("row", ROWS, ids=[row.split("|")[1].strip()[:40] for row in ROWS])
def test_its_sources_are_those_of_the_module(row):
    *_, sources, modules, _ = (cell.strip() for cell in row.split("|"))
    files = re.findall(r"\(([a-z]+/[a-z]+\.py)\)", modules)
    assert files
    text = " ".join((PAGE.parent / file).read_text() for file in files)
    if re.search(r"[0-9]{4}", sources) is None:
        return
    for name in re.findall(r"[A-Z][A-Za-z']+", sources):
        assert name in text, f"{name} is not in {files}"
    for year in re.findall(r"(?:18|19|20)[0-9]{2}", sources):
        assert year in text, f"{year} is not in {files}"


def test_every_effect_of_the_detector_is_in_it():
    from simimg.scene.detector import Detector

    # Keys that only say more of another, and those of each amplifier's own level.
    lesser = {"hot_pixel_current", "flicker_current", "detector_thickness", "trail_length"}
    lesser |= {"em_full_well", "amplifier_gains", "amplifier_biases"}
    effects = set(Detector.model_fields) - lesser
    missing = sorted(one for one in effects if f"`{one}`" not in TEXT)
    assert missing == [], "add a row to the table of simimg/README.md"
