import math
import subprocess
import sys
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from simimg.errors import InputError
from simimg.quantities import KINDS, QuantityError, parse_quantity, shown, unit_factor

# One rounding of a factor and one of a product: a few units in the last place.
ROUNDING = 1e-15

ARCSEC = math.pi / 648000


@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        ("0.8 arcsec", "angle", 0.8 * ARCSEC),
        ('0.8"', "angle", 0.8 * ARCSEC),
        ("35 mas", "angle", 0.035 * ARCSEC),
        ("-2 arcmin", "angle", -120 * ARCSEC),
        ("45°", "angle", math.pi / 4),
        ("1 rad", "angle", 1.0),
        ("12:30:00", "angle", 12.5 * 3600 * ARCSEC),
        ("12:30:00", "right ascension", 187.5 * 3600 * ARCSEC),
        ("12h30m", "right ascension", 187.5 * 3600 * ARCSEC),
        ("12h30m00.0s", "angle", 187.5 * 3600 * ARCSEC),
        ("187.5 deg", "right ascension", 187.5 * 3600 * ARCSEC),
        ("-00:30:00", "declination", -1800 * ARCSEC),
        ("-5d23m28s", "declination", -(5 * 3600 + 23 * 60 + 28) * ARCSEC),
        ("+5 23 28.5", "declination", (5 * 3600 + 23 * 60 + 28.5) * ARCSEC),
        ("5°23'28\"", "declination", (5 * 3600 + 23 * 60 + 28) * ARCSEC),
        ("2.0 m", "length", 2.0),
        ("2m", "length", 2.0),
        ("9 um", "length", 9e-6),
        ("9 \u00b5m", "length", 9e-6),
        ("9 \u03bcm", "length", 9e-6),
        ("550 nm", "length", 550e-9),
        ("5500 angstrom", "length", 550e-9),
        ("8 inch", "length", 0.2032),
        ("  1e3   mm ", "length", 1.0),
        ("\u22122 m", "length", -2.0),
        ("30 s", "time", 30.0),
        ("2 min", "time", 120.0),
        ("0.5 h", "time", 1800.0),
        ("10 degC", "temperature", 283.15),
        ("50 degF", "temperature", 283.15),
        ("283.15 K", "temperature", 283.15),
        ("760 mmHg", "pressure", 101325.0144354),
        ("780 hPa", "pressure", 78000.0),
        ("36 km/h", "speed", 10.0),
        ("30 arcsec/h", "angular rate", 30 * ARCSEC / 3600),
        ("15 arcsec / s", "angular rate", 15 * ARCSEC),
        ("0.1 deg/min", "angular rate", 6 * ARCSEC),
        ("-5 mas/yr", "angular rate", -0.005 * ARCSEC / (365.25 * 86400)),
        ("41.6 yr", "time", 41.6 * 365.25 * 86400),
        (1934.008, "Julian year", 1934.008),
        ("5 e-", "electrons", 5.0),
        ("5e-", "electrons", 5.0),
        ("5e3 electron", "electrons", 5000.0),
        ("0.02 electron/s", "electron rate", 0.02),
        ("72 e-/h", "electron rate", 0.02),
        ("0.02 e- / px / s", "electron rate", 0.02),
        ("1.4 electron/adu", "gain", 1.4),
        ("1.4 e-/ADU", "gain", 1.4),
        ("400 adu", "counts", 400.0),
        ("12.5 px", "pixels", 12.5),
        (12.5, "pixels", 12.5),
        (11, "magnitude", 11.0),
        ("11.2 mag", "magnitude", 11.2),
        ("11.2", "magnitude", 11.2),
        (21.4, "surface brightness", 21.4),
        ("21.4 mag/arcsec2", "surface brightness", 21.4),
        ("30 %", "ratio", 0.3),
        (0.3, "ratio", 0.3),
        (1.5, "number", 1.5),
        (5e5, "signal", 5e5),
    ],
)
def test_value(text, kind, value):
    assert_allclose(parse_quantity(text, kind), value, rtol=ROUNDING)


@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        # Astronomical unit (IAU 2012) and light year (Julian year) are exact by definition.
        ("1 au", "length", 149597870700.0),
        ("1 lyr", "length", 299792458.0 * 365.25 * 86400.0),
        ("2 pm2 / pm", "length", 2e-12),
        ("1 rad / kyr", "angular rate", 1 / (1000 * 365.25 * 86400.0)),
        ("1 fortnight", "time", 14 * 86400.0),
        ("1 kyr", "time", 1000 * 365.25 * 86400.0),
        ("3 electron / (min pix)", "electron rate", 0.05),
    ],
)
def test_units_outside_the_table_go_to_astropy(text, kind, value):
    assert_allclose(parse_quantity(text, kind), value, rtol=1e-14)


@pytest.mark.parametrize(
    ("text", "kind", "what", "mend"),
    [
        (2.0, "length", "bare number 2.0", '"2.0 m"'),
        ("2.0", "length", "bare number 2.0", '"2.0 m"'),
        (3, "time", "bare number 3", '"3 s"'),
        (0.9, "angle", "bare number 0.9", '"0.9 arcsec"'),
        ("2 s", "length", "unit of time", '"2 m"'),
        ("2 mms", "length", "unknown unit", '"mm"'),
        ("2 parsnip", "length", "unknown unit", '"2 m"'),
        ("2 kg", "length", "unknown unit", '"2 m"'),
        ("2 m**9999999999", "length", "unknown unit", '"2 m"'),
        ("2 (((((((", "length", "unknown unit", '"2 m"'),
        (2.0, "angular rate", "bare number 2.0", '"2.0 arcsec/s"'),
        ("2 arcsec", "angular rate", "unit of angle", '"30 arcsec/h"'),
        ("2 h/s", "angular rate", "unknown unit", '"30 arcsec/h"'),
        ("1934 yr", "Julian year", "takes no unit", "1934.0"),
        ("two m", "length", "is not a length", '"2 m"'),
        ("2,5 m", "length", "unknown unit", '"2 m"'),
        ("", "length", "empty", '"2 m"'),
        ("   ", "length", "empty", '"2 m"'),
        ("9" * 101 + " m", "length", "103 characters", '"2 m"'),
        ("nan m", "length", "finite", "finite"),
        ("-inf m", "length", "finite", "finite"),
        ("1e308 km", "length", "finite", "finite"),
        ("1e999 m", "length", "finite", "finite"),
        (math.nan, "magnitude", "finite", "finite"),
        (math.inf, "ratio", "finite", "finite"),
        (10**400, "number", "finite", "finite"),
        (True, "number", "must be a number", "1.5"),
        (None, "length", "must be a length", '"2 m"'),
        ([2.0], "length", "array of 1", '"2 m"'),
        ({"m": 2}, "length", "a table", '"2 m"'),
        ("12:60:00", "angle", "below 60", "05:34:32"),
        ("12:00:60", "angle", "below 60", "05:34:32"),
        ("1.5 kg", "number", "takes no unit", "1.5"),
    ],
)
def test_refusal_says_what_and_mend(text, kind, what, mend):
    with pytest.raises(QuantityError) as caught:
        parse_quantity(text, kind)
    assert what in caught.value.what
    assert mend in caught.value.mend
    assert isinstance(caught.value, InputError)
    assert caught.value.exit_code == 2
    assert caught.value.lines == (f"{caught.value.what}; {caught.value.mend}",)


def test_every_unit_in_the_tables_agrees_with_astropy():
    from astropy import units as u

    own = {"e", "e-", "ke-", "AA", "A", "h", "in", "as", "DN", "ADU", "micron", "mmHg"}
    compared = 0
    for kind in ("angle", "length", "time", "pressure", "speed"):
        form = KINDS[kind]
        for unit, factor in form.units.items():
            if unit in own:
                continue
            try:
                with u.imperial.enable():
                    expected = u.Unit(unit).to(form.astropy[0])
            except ValueError:
                continue
            compared += 1
            assert_allclose(factor, expected, rtol=1e-14, err_msg=unit)
    assert compared > 40


def test_common_units_do_not_import_astropy():
    code = (
        "import sys; from simimg.quantities import parse_quantity as p; p('0.8 arcsec', 'angle');"
        "p('1.4 electron/adu', 'gain'); p('05:34:32', 'right ascension'); "
        "sys.exit('astropy' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


def test_unit_factor():
    assert_allclose(unit_factor("mas", "angle"), ARCSEC / 1000, rtol=ROUNDING)
    with pytest.raises(QuantityError, match="unit of time"):
        unit_factor("s", "length")


@pytest.mark.parametrize("kind", KINDS)
def test_each_example_is_good(kind):
    assert math.isfinite(parse_quantity(KINDS[kind].example, kind))


@given(st.floats(-1e12, 1e12), st.sampled_from(["um", "mm", "m", "km", "inch"]))
def test_numbers_come_through_as_they_are(number, unit):
    exact = Fraction(repr(number)) * Fraction(str(KINDS["length"].units[unit]))
    value = parse_quantity(f"{number!r} {unit}", "length")
    assert_allclose(value, float(exact), rtol=1e-14, atol=1e-300)


@settings(deadline=None)
@given(
    st.one_of(st.text(max_size=120), st.integers(), st.floats(), st.booleans(), st.none()),
    st.sampled_from(sorted(KINDS)),
)
def test_anything_gives_a_finite_number_or_a_line(text, kind):
    value, line = 0.0, "; "
    try:
        value = parse_quantity(text, kind)
    except QuantityError as error:
        (line,) = error.lines
    assert math.isfinite(value)
    assert "; " in line
    assert line.isprintable()


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (True, "true"),
        (7, "7"),
        (10**300, "a huge number"),
        (0.5, "0.5"),
        ("a\x1b[2Jb", '"a\\x1b[2Jb"'),
        ("x" * 100, '"' + "x" * 40 + '..."'),
        ({}, "a table"),
        ([1, 2], "an array of 2"),
        (None, "a value of type NoneType"),
    ],
)
def test_what_is_shown_of_a_strangers_value(value, text):
    assert shown(value) == text


def test_a_quantity_error_survives_pickling():
    import pickle

    error = pickle.loads(pickle.dumps(QuantityError("is wrong", "write right")))
    assert (error.what, error.mend) == ("is wrong", "write right")
