"""Tables of measurements, read back by astropy and judged by fitsverify."""

from __future__ import annotations

import shutil
import subprocess

import numpy as np
import pytest
from astropy import units as u
from astropy.io import fits
from astropy.table import Table
from numpy.testing import assert_equal

from simimg.errors import InputError
from simimg.resolving.psfquality import PsfReport
from simimg.resolving.records import SingleMeasurement
from simimg.resolving.recordtable import Row, check_table, write_records
from tests.show import frames


@pytest.fixture(scope="module")
def rows():
    shot = frames.frame()
    ends = {"separation_low_arcsec": 0.55, "separation_high_arcsec": 0.7}
    good = frames.measurement(shot, label="A \N{GREEK SMALL LETTER ALPHA}", **ends)
    single = frames.measurement(
        shot, label="", separation_arcsec=np.nan, position_angle_deg=np.nan, elongated=False
    )
    psf = PsfReport(source="profile", reduced_chi_square=1.25, stars=7, fwhm_arcsec=0.9)
    none = PsfReport(source="scene", reduced_chi_square=np.nan, stars=0, fwhm_arcsec=0.9)
    alone = SingleMeasurement(
        x=3.0,
        y=4.5,
        electrons=1e4,
        electrons_error=120.0,
        verdict="extended",
        width_arcsec=0.2,
        width_error_arcsec=0.03,
        label="G",
    )
    return [Row("a.fits", good, psf), Row("b.fits", single, none), Row("b.fits", alone, none)]


@pytest.mark.parametrize("ending", ["ecsv", "fits"])
def test_it_comes_back_with_units(rows, ending, tmp_path):
    path = tmp_path / f"table.{ending}"
    write_records(rows, path, simulated=True, warnings=["one", "two"])
    table = Table.read(path, hdu=1) if ending == "fits" else Table.read(path)
    assert list(table["file"]) == ["a.fits", "b.fits", "b.fits"]
    assert list(table["kind"]) == ["pair", "pair", "single"]
    assert [str(one) for one in np.ma.filled(table["verdict"], "")] == ["", "", "extended"]
    width = np.ma.filled(np.ma.asarray(table["width_arcsec"], dtype=float), np.nan)
    assert_equal(width, [np.nan, np.nan, 0.2])
    assert table["width_arcsec"].unit == u.arcsec
    assert table["electrons"][2] == 1e4
    assert table["separation_arcsec"].unit == u.arcsec
    assert table["position_angle_deg"].unit == u.deg
    assert table["magnitude_difference"].unit == u.mag
    assert table["separation_arcsec"][0] == rows[0].record.separation_arcsec
    separation = np.ma.filled(np.ma.asarray(table["separation_arcsec"], dtype=float), np.nan)
    assert np.isnan(separation[1])
    for end in ("separation_low_arcsec", "separation_high_arcsec"):
        ends = np.ma.filled(np.ma.asarray(table[end], dtype=float), np.nan)
        assert ends[0] == getattr(rows[0].record, end)
        assert np.isnan(ends[1])
    assert list(table["elongated"]) == [True, False, False]
    verdicts = np.ma.filled(table["rayleigh_verdict"], "")
    assert list(verdicts) == ["unresolved", "unresolved", ""]
    assert table["sparrow_probability"][0] == rows[0].record.sparrow.probability
    truth = np.ma.filled(np.ma.asarray(table["truth_separation_arcsec"], dtype=float), np.nan)
    assert np.isnan(truth).all()
    assert table["psf_source"][0] == "profile"
    assert table["psf_reduced_chi_square"][0] == 1.25
    assert all(table[name].description for name in table.colnames) or ending == "fits"


def test_fits_says_that_it_is_simulated_and_what_was_warned(rows, tmp_path):
    write_records(rows, tmp_path / "t.fits", simulated=True, warnings=["no coordinates"])
    with fits.open(tmp_path / "t.fits", checksum=True) as hdus:
        assert hdus[0].header["SIMULATE"] is True
        assert hdus[1].name == "MEASURED"
        assert "no coordinates" in str(hdus[1].header["COMMENT"])
    if shutil.which("fitsverify") is None:
        pytest.skip("fitsverify is not installed")
    said = subprocess.run(
        ["fitsverify", "-q", tmp_path / "t.fits"], capture_output=True, text=True, check=False
    )
    assert said.stdout.startswith("verification OK"), said.stdout


@pytest.mark.parametrize("ending", ["ecsv", "fits"])
def test_the_same_bytes_each_time(rows, ending, tmp_path):
    paths = [tmp_path / f"{name}.{ending}" for name in "ab"]
    for path in paths:
        write_records(rows, path, simulated=False)
    assert paths[0].read_bytes() == paths[1].read_bytes()


def test_a_table_of_nothing(tmp_path):
    for ending in ("ecsv", "fits"):
        write_records([], tmp_path / f"empty.{ending}", simulated=False)
    assert len(Table.read(tmp_path / "empty.ecsv")) == 0


def test_other_endings_and_files_that_are_there_are_refused(rows, tmp_path):
    for name in ("t.csv", "t"):
        with pytest.raises(InputError, match=r"\.ecsv or \.fits"):
            write_records(rows, tmp_path / name, simulated=False)
    (tmp_path / "t.ecsv").write_text("precious")
    with pytest.raises(InputError, match="exists already"):
        write_records(rows, tmp_path / "t.ecsv", simulated=False)
    assert (tmp_path / "t.ecsv").read_text() == "precious"
    assert check_table(tmp_path / "t.ecsv", overwrite=True) == []
    assert sorted(path.name for path in tmp_path.iterdir()) == ["t.ecsv"]
