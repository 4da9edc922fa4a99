import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts.where_when import read_position, read_time
from ocean_sound.errors import InputError


@pytest.mark.parametrize(
    ("text", "kind", "degrees"),
    [
        ("-34.125", "latitude", -34.125),
        ("34.125 S", "latitude", -34.125),
        ("34.125S", "latitude", -34.125),
        ("S 34.125", "latitude", -34.125),
        ("34 07.5 S", "latitude", -34.125),
        ("34°07.5'S", "latitude", -34.125),
        ("34°07'30\"S", "latitude", -34.125),
        ("34 7 30 South", "latitude", -34.125),
        ("-34 07.5", "latitude", -34.125),
        ("-0 30", "latitude", -0.5),
        ("151 30 E", "longitude", 151.5),
        ("1.5e1", "longitude", 15.0),
        ("8 W", "longitude", -8.0),
        ("352", "longitude", 352.0),
        ("+12.5", "latitude", 12.5),
    ],
)
def test_positions(text, kind, degrees):
    assert read_position(text, kind, where="x") == pytest.approx(degrees, abs=1e-12)


@pytest.mark.parametrize("text", ["", " ", "nan", "unknown"])
def test_a_blank_position_is_unknown(text):
    assert np.isnan(read_position(text, "latitude", where="x"))


@pytest.mark.parametrize(
    "text",
    ["north", "34 60.0 S", "34.5 30 S", "34 E", "-34 S", "34 07 30 1 S", "34 -7", "N34S", "somewhere", "1,2,3,4"],
)
def test_what_is_no_latitude(text):
    with pytest.raises(InputError, match=r"f\.csv: line 2: latitude is .*write it as decimal degrees"):
        read_position(text, "latitude", where="f.csv: line 2")


def test_off_the_earth():
    with pytest.raises(InputError, match="latitude is '91'; it must lie within 90 degrees"):
        read_position("91", "latitude", where="x")
    with pytest.raises(InputError, match="longitude is '400'"):
        read_position("400", "longitude", where="x")


@given(st.floats(-90, 90, allow_subnormal=False))
def test_decimal_positions_are_read_to_the_bit(latitude):
    assert read_position(repr(latitude), "latitude", where="x") == latitude


@pytest.mark.parametrize(
    ("text", "iso"),
    [
        ("2026-01-31T12:00:00Z", "2026-01-31T12:00:00"),
        ("2026-01-31 12:00", "2026-01-31T12:00"),
        ("2026-01-31 12:00 UTC", "2026-01-31T12:00"),
        ("2026-01-31T12:00+02:00", "2026-01-31T10:00"),
        ("2026-01-31T12:00:00.123456789Z", "2026-01-31T12:00:00.123456789"),
        ("2026/1/3 04:05", "2026-01-03T04:05"),
        ("20260131", "2026-01-31"),
        ("2026-01-31", "2026-01-31"),
        ("13/08/2015 06:38", "2015-08-13T06:38"),
        ("08/13/2015", "2015-08-13"),
        ("31.01.2026 12:00", "2026-01-31T12:00"),
        ("07/07/2026", "2026-07-07"),
    ],
)
def test_times(text, iso):
    assert read_time(text, where="x") == np.datetime64(iso, "ns")


def test_a_blank_time_is_unknown():
    assert np.isnat(read_time(" ", where="x"))


def test_a_date_with_two_meanings_is_an_error():
    with pytest.raises(InputError, match=r"'03/04/2026' may be 2026-04-03 or 2026-03-04; write it year first"):
        read_time("03/04/2026", where="x")


@pytest.mark.parametrize("text", ["0001-01-01", "1500-05-05 12:00", "9999-01-01"])
def test_a_time_that_numpy_would_wrap_round(text):
    with pytest.raises(InputError, match=rf"'{text}' is not a time of our days"):
        read_time(text, where="x")


@pytest.mark.parametrize("text", ["soon", "2026-13-01", "31/31/2026", "12.5", "2026-01-31T25:00"])
def test_what_is_no_time(text):
    with pytest.raises(InputError, match="is not a time; write it as"):
        read_time(text, where="x")


@given(st.integers(-9_000_000_000, 9_000_000_000), st.sampled_from(["", "Z"]))
def test_the_usual_form_is_read_as_any_other(second, zone):
    moment = np.datetime64(second, "s")
    usual = read_time(f"{moment}{zone}", where="here")
    assert usual == read_time(str(moment).replace("-", "/").replace("T", " "), where="here")
    assert usual == moment
