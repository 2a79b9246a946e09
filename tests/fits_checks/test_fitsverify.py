"""Every file passes the verifier of the FITS standard that others maintain, with no warning."""

import shutil
import string
import subprocess

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from simimg.fits.cards import check_header
from simimg.frame import Frame
from tests.fits_checks import examples

pytestmark = pytest.mark.skipif(
    shutil.which("fitsverify") is None, reason="the Debian package fitsverify is not installed"
)


def verify(path):
    """The verifier's complaints, and its closing line."""
    run = subprocess.run(["fitsverify", str(path)], capture_output=True, text=True, check=False)
    lines = [line for line in run.stdout.splitlines() if line.startswith("***")]
    assert lines, run.stdout + run.stderr
    return lines


CLEAN = ["**** Verification found 0 warning(s) and 0 error(s). ****"]


def test_the_verifier_can_fail(tmp_path):
    path = tmp_path / "frame.fits"
    examples.frame().write(path)
    content = bytearray(path.read_bytes())
    content[content.index(b"BITPIX") + 29] ^= 1
    path.write_bytes(content)
    assert verify(path) != CLEAN


def test_every_part(tmp_path):
    path = tmp_path / "frame.fits"
    examples.frame().write(path)
    assert verify(path) == CLEAN


@pytest.mark.parametrize("dtype", ["u1", "u2", "i4", "f4", "u4", "i8"])
def test_counts_alone(tmp_path, dtype):
    path = tmp_path / "frame.fits"
    Frame(counts=np.arange(12).reshape(3, 4).astype(dtype)).write(path)
    assert verify(path) == CLEAN


def test_empty_truth_and_wide_mask(tmp_path):
    path = tmp_path / "frame.fits"
    counts = np.zeros((4, 5), "i4")
    frame = examples.frame(counts, truth=examples.truth()[:0], mask=np.full((4, 5), 300, "u2"))
    frame.write(path)
    assert verify(path) == CLEAN


STANDARD = """
AUTHOR OBJECT OBSERVER ORIGIN REFERENC TELESCOP INSTRUME EPOCH EQUINOX BLOCKED BLANK DATAMAX
DATAMIN DATE DATE-OBS MJD-AVG MJD-OBS TTYPE1 TDISP3 TCRPX2 WCSAXES CNAME1 SPECSYS OBSGEO-X RESTFRQ
LATPOLE VELANGL EXTVER INHERIT PTYPE1 PSCAL1 GROUPS LONGSTRN CONTINUE HIERARCH COMMENT HISTORY
TITLE A_ORDER PV1_1 CROTA2 THEAP TFIELDS
"""
KEYWORDS = st.one_of(
    st.text(string.ascii_uppercase + string.digits + "-_", min_size=1, max_size=8),
    st.sampled_from(STANDARD.split()),
)
VALUES = st.one_of(
    st.booleans(),
    st.integers(-(2**63), 2**63),
    st.floats(allow_nan=False, allow_infinity=False),
    st.text(max_size=200),
)


@settings(
    max_examples=60,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(extra=st.dictionaries(KEYWORDS, VALUES, max_size=12))
def test_any_header_that_is_let_through(tmp_path, extra):
    bad = {line.split(": ")[1].removeprefix("header.") for line in check_header(extra, "s")}
    header = {key: value for key, value in extra.items() if key not in bad}
    path = tmp_path / "frame.fits"
    frame = Frame(counts=np.zeros((2, 2), "u2"), header=header, wcs=examples.wcs(2, 2))
    frame.write(path, overwrite=True)
    assert verify(path) == CLEAN
    back = Frame.read(path)
    for key, value in header.items():
        if not isinstance(value, str):
            # Twenty characters hold twelve digits beside a sign, a point and a long exponent.
            assert back.value(key) == pytest.approx(value, rel=1e-11, abs=0)
