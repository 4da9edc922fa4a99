import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import VARIABLES
from ocean_sound.casts.names import meaning, read_head, split_unit
from ocean_sound.casts.units import accepted, conversions, from_name, is_unit, to_ours
from ocean_sound.errors import InputError
from ocean_sound.files import unit_text

# Exact by definition: pound-force 4.4482216152605 N and inch 0.0254 m (international yard and pound, 1959), fathom
# of six feet of 0.3048 m, zero Celsius at 273.15 K; IPTS-68 by Saunders (1990): t90 = t68 / 1.00024.
CASES = [
    ("temperature", "degF", 212.0, 100.0),
    ("temperature", "°F", 32.0, 0.0),
    ("temperature", "K", 283.15, 10.0),
    ("temperature", "kelvin", 273.15, 0.0),
    ("temperature", "IPTS-68", 10.0024, 10.0),
    ("temperature", "ITS-90, deg C", 10.0, 10.0),
    ("temperature", "Degrees Celsius", 10.0, 10.0),
    ("temperature", "degree_Celsius", 10.0, 10.0),
    ("sea_pressure", "MPa", 1.0, 100.0),
    ("sea_pressure", "kPa", 10.0, 1.0),
    ("sea_pressure", "hPa", 100.0, 1.0),
    ("sea_pressure", "mbar", 100.0, 1.0),
    ("sea_pressure", "bar", 1.0, 10.0),
    ("sea_pressure", "psi", 1.0, 0.6894757293168361),
    ("sea_pressure", "Pa", 1e4, 1.0),
    ("pressure", "decibars", 1.0, 1.0),
    ("depth", "ft", 1000.0, 304.8),
    ("depth", "fathoms", 1.0, 1.8288),
    ("depth", "metres", 5.0, 5.0),
    ("conductivity", "mS/cm", 42.914, 4.2914),
    ("conductivity", "µS/cm", 42914.0, 4.2914),
    ("conductivity", "S m-1", 4.2914, 4.2914),
    ("sound_speed", "ft/s", 5000.0, 1524.0),
    ("sound_speed", "m s^-1", 1500.0, 1500.0),
    ("salinity", "PSU", 35.0, 35.0),
]


@pytest.mark.parametrize(("name", "unit", "value", "expected"), CASES)
def test_conversions(name, unit, value, expected):
    converted, _ = to_ours(name, np.array([value]), unit, where="here")
    np.testing.assert_allclose(converted, [expected], rtol=1e-14, atol=1e-13)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_our_own_units_do_not_change_a_bit(value):
    column = np.array([value])
    for name in VARIABLES:
        assert to_ours(name, column, unit_text(name), where="here")[0] is column


def test_inputs_are_not_changed():
    for ways in conversions().values():
        for _, way in ways.values():
            if way is not None:
                column = np.array([10.0])
                way(column)
                assert column[0] == 10.0


def test_unknown_unit_names_what_is_accepted():
    with pytest.raises(
        InputError, match=r"f\.csv: unit 'furlong' is not known for depth; use one of m, ft, fathom, km"
    ):
        to_ours("depth", np.array([1.0]), "furlong", where="f.csv")


def test_grams_per_kilogram_are_not_guessed():
    with pytest.raises(InputError, match=r"absolute salinity or practical salinity.*--map"):
        to_ours("salinity", np.array([35.0]), "g/kg", where="f.csv")
    assert is_unit("salinity", "g kg-1")


def test_absolute_or_sea_pressure_is_not_guessed():
    with pytest.raises(
        InputError, match=r"pressure in kPa may be sea pressure or absolute pressure.*absolute_pressure"
    ):
        to_ours("pressure", np.array([35.0]), "kPa", where="f.csv")
    assert to_ours("pressure", np.array([350.0]), "kPa", where="f.csv", settled=True)[0][0] == 35.0
    assert to_ours("pressure", np.array([3.0]), "dbar", where="f.csv")[1] == "pressure taken as sea pressure"
    # TEOS-10 counts sea pressure from the standard atmosphere, 10.1325 dbar
    depth, note = from_name("absolute_pressure", np.array([20.1325]))
    assert depth[0] == pytest.approx(10.0, abs=1e-12)
    assert "standard atmosphere" in note


def test_what_was_assumed_is_noted():
    assert to_ours("temperature", np.array([3.0]), None, where="x")[1] == "temperature has no unit; taken as degC"
    assert to_ours("temperature", np.array([3.0]), "degC", where="x")[1] is None
    assert "practical" in to_ours("salinity", np.array([3.0]), "ppt", where="x")[1]
    assert from_name("height", np.array([-3.0]))[0][0] == 3.0


@pytest.mark.parametrize(
    ("cell", "name", "unit"),
    [
        ("Depth [m]", "depth", "m"),
        ("temp_degC", "temperature", "degC"),
        ("Temperature (°C)", "temperature", "°C"),
        ("Temperature [ITS-90, deg C]", "temperature", "ITS-90, deg C"),
        ("sal", "salinity", None),
        ("pressure dbar", "pressure", "dbar"),
        ("Pressure (absolute)", "absolute_pressure", None),
        ("Pressure (kPa)", "pressure", "kPa"),
        ("Absolute pressure [kPa]", "absolute_pressure", "kPa"),
        ("sound speed (m/s)", "sound_speed", "m/s"),
        ("SOUND_SPEED_m/s", "sound_speed", "m/s"),
        ("speed_of_sound_in_sea_water", "sound_speed", None),
        ('"Depth"', "depth", None),
        ("cond mS/cm", "conductivity", "mS/cm"),
        ("Depth []", "depth", None),
        ("Latitude", "latitude", None),
        ("Date/Time", "time", None),
        ("temperature_flag", None, None),
        ("Temperature QC", None, None),
        ("salinity (uncertainty)", None, None),
        ("potential temperature [degC]", None, None),
        ("oxygen [umol/kg]", None, None),
        ("water depth", None, None),  # how deep the sea is there, not how deep the probe
        ("", None, None),
    ],
)
def test_heads(cell, name, unit):
    head = read_head(cell)
    assert head.name == name
    if name is not None:
        assert head.unit == unit


def test_words():
    assert meaning("PSAL") == "salinity"
    assert meaning("T") is None
    assert split_unit("Z [ft]") == ("Z", "ft")
    assert re.search("PSS-78", accepted("salinity"))
