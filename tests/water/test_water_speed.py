"""The door `sound_speed`: what goes in, what comes out, what is refused."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.water import (
    Bounds,
    Equation,
    OutOfRangeWarning,
    assumptions,
    depth_from_pressure,
    equations,
    find_equation,
    range_report,
    sound_speed,
    speed_of_columns,
    speeds_side_by_side,
)

NAMES = list(equations())
NEED_VERTICAL = [name for name in NAMES if equations()[name].vertical != "none"]


def quiet(*arguments, **options):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", OutOfRangeWarning)
        return sound_speed(*arguments, **options)


water = st.tuples(st.floats(0, 30), st.floats(0, 40), st.floats(0, 8000))
positions = st.tuples(st.floats(-80, 80), st.floats(-180, 180))


@settings(max_examples=25, deadline=None)
@given(st.lists(water, min_size=1, max_size=4), st.sampled_from(NAMES), positions)
def test_scalar_equals_array_equals_columns(states, name, position):
    t, s, p = (np.array(column) for column in zip(*states, strict=True))
    options = {"latitude": position[0], "longitude": position[1], "equation": name}
    together = quiet(t, s, pressure=p, **options)
    single = [quiet(*state[:2], pressure=state[2], **options) for state in states]
    assert all(isinstance(value, float) for value in single)
    # The array loops of the machine may fuse or reorder a product: one unit in the last place.
    np.testing.assert_allclose(together, single, rtol=1e-15)
    np.testing.assert_array_equal(together, speed_of_columns(t, s, pressure=p, **options))


@settings(max_examples=25, deadline=None)
@given(water, positions, st.sampled_from(NAMES), st.integers(-2, 2))
def test_longitude_turns(state, position, name, turns):
    t, s, p = state
    latitude, longitude = position
    there = quiet(t, s, pressure=p, latitude=latitude, longitude=longitude, equation=name)
    again = quiet(t, s, pressure=p, latitude=latitude, longitude=longitude + 360 * turns, equation=name)
    assert again == pytest.approx(there, abs=1e-6)


@settings(max_examples=25, deadline=None)
@given(water, st.sampled_from(NEED_VERTICAL))
def test_hemispheres_are_alike_without_an_atlas(state, name):
    t, s, p = state
    north, south = (quiet(t, s, depth=p, latitude=sign * 50.0, equation=name) for sign in (1, -1))
    assert north == south


@settings(max_examples=25, deadline=None)
@given(water, st.sampled_from(NEED_VERTICAL))
def test_depth_and_pressure_are_one_place(state, name):
    t, s, p = state
    by_pressure = quiet(t, s, pressure=p, latitude=30.0, equation=name)
    by_depth = quiet(t, s, depth=depth_from_pressure(p, 30.0), latitude=30.0, equation=name)
    assert by_depth == pytest.approx(by_pressure, abs=1e-7)


@settings(max_examples=25, deadline=None)
@given(st.floats(0, 29), st.floats(30, 39), st.floats(0, 3900), st.sampled_from(NEED_VERTICAL))
def test_speed_grows_with_temperature_salinity_and_depth(t, s, z, name):
    here = quiet(t, s, depth=z, equation=name)
    assert quiet(t + 0.5, s, depth=z, equation=name) > here
    assert quiet(t, s, depth=z + 10.0, equation=name) > here
    if "salinity" in equations()[name].arguments:
        assert quiet(t, s + 0.5, depth=z, equation=name) > here


@pytest.mark.parametrize("name", NAMES)
def test_missing_values_pass_and_inputs_stay(name):
    t, s, p = (
        np.array([10.0, np.nan, 10.0, 10.0]),
        np.array([35.0, 35.0, np.nan, 35.0]),
        np.array([5.0, 5.0, 5.0, np.nan]),
    )
    copies = [column.copy() for column in (t, s, p)]
    for column in (t, s, p):
        column.flags.writeable = False
    speed = quiet(t, s, pressure=p, latitude=10.0, longitude=-30.0, equation=name)
    assert np.isnan(speed).tolist() == [False, True, True, True]
    for column, copy in zip((t, s, p), copies, strict=True):
        np.testing.assert_array_equal(column, copy)


def test_shapes_broadcast_and_lists_are_taken():
    speed = sound_speed([[4.0], [8.0]], [34.0, 35.0, 36.0], pressure=0, equation="unesco")
    assert speed.shape == (2, 3)
    assert quiet([4, 8], 0, equation="marczak").shape == (2,)
    assert quiet(4, [0, 1, 2], equation="marczak").shape == (3,)
    assert sound_speed(np.array([]), 35.0, pressure=np.array([])).shape == (0,)
    assert np.isnan(sound_speed(np.ma.masked_greater([4.0, 99.0], 50.0), 35.0, pressure=0.0)).tolist() == [False, True]


def test_unknown_positions_fall_back_level_by_level():
    speed = sound_speed(10.0, 35.0, pressure=100.0, latitude=[30.0, np.nan, 30.0], longitude=[-40.0, -40.0, np.nan])
    assert speed[0] != speed[1]
    assert speed[1] == speed[2] == sound_speed(10.0, 35.0, pressure=100.0)
    by_depth = sound_speed(10.0, 35.0, depth=2000.0, latitude=[45.0, np.nan], equation="unesco")
    assert by_depth[0] == by_depth[1]
    # Beyond 86 degrees south the atlas has no water.
    assert sound_speed(-1.0, 34.0, pressure=10.0, latitude=-88.0, longitude=0.0) == sound_speed(
        -1.0, 34.0, pressure=10.0
    )


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"temperature": -5.1}, "temperature: -5.1 is impossible .* from -5 to 100 are accepted"),
        ({"temperature": 283.0}, "temperature: 283 is impossible .*kelvin"),
        ({"temperature": np.inf}, "temperature: inf is impossible"),
        ({"salinity": -0.01}, "salinity: -0.01 is impossible"),
        ({"salinity": [35.0, 35.0, -9.0]}, r"salinity: -9 at index 2 is impossible \(1 such of 3\)"),
        ({"pressure": -0.5}, "pressure: -0.5 is impossible .*in air"),
        ({"pressure": 12001.0}, "pressure: 12001 is impossible"),
        ({"latitude": 90.5}, "latitude: 90.5 is impossible .*exchanged"),
        ({"longitude": -np.inf}, "longitude: -inf is impossible"),
        ({"depth": 5.0}, "equation teos10: pressure and depth are both given; give exactly one"),
        ({"pressure": None}, r"equation teos10: neither pressure \(dbar\) nor depth \(m\) is given"),
        ({"pressure": None, "depth": -1.0}, "depth: -1 is impossible .*positive down"),
        ({"salinity": None}, "salinity: is None; give numbers"),
        ({"temperature": "warm"}, "temperature: numbers are needed, not str 'warm'"),
        ({"temperature": [None, "x"]}, "temperature: numbers are needed, not list"),
        ({"temperature": [1 + 2j]}, "temperature: numbers are needed"),
        ({"temperature": [1.0, 2.0], "salinity": [1.0, 2.0, 3.0]}, r"temperature \(2,\), salinity \(3,\)"),
        ({"equation": "mackensie"}, "'mackensie' is unknown; did you mean 'mackenzie'\\? known are teos10, "),
        ({"equation": "zzz"}, "'zzz' is unknown; known are teos10, "),
        ({"outside": "hide"}, "outside: 'hide' is unknown; 'keep' or 'mask'"),
    ],
)
def test_impossible_input_is_refused_in_one_line(change, message):
    arguments = {"temperature": 10.0, "salinity": 35.0, "pressure": 10.0, **change}
    with pytest.raises(InputError, match=message) as caught:
        sound_speed(arguments.pop("temperature"), arguments.pop("salinity"), **arguments)
    assert "\n" not in str(caught.value)


def test_outside_the_range():
    with pytest.warns(
        OutOfRangeWarning, match=r"^mackenzie: temperature 35 degC is outside its range 2 to 30 degC"
    ) as found:
        kept = sound_speed([10.0, 35.0, -1.0], 35.0, depth=0.0, equation="mackenzie")
    assert len(found) == 1
    assert found[0].filename == __file__
    assert np.isfinite(kept).all()
    masked = sound_speed([10.0, 35.0, -1.0], 35.0, depth=0.0, equation="mackenzie", outside="mask")
    assert np.isnan(masked).tolist() == [False, True, True]
    assert masked[0] == kept[0]


def test_columns_never_complain():
    t = np.array([10.0, -7.0, 10.0, 10.0, 10.0, 10.0])
    s = np.array([35.0, 35.0, -1.0, 35.0, 35.0, 35.0])
    p = np.array([10.0, 10.0, 10.0, -0.3, 99999.0, np.inf])
    for name in NAMES:
        speed = speed_of_columns(t, s, pressure=p, equation=name)
        assert np.isfinite(speed).tolist() == [True, False, False, True, False, False], name
    with pytest.raises(InputError, match="neither pressure"):
        speed_of_columns(t, s)


def test_range_report_names_each_variable():
    report = range_report("del-grosso", [10.0, 31.0, 10.0], [35.0, 35.0, 12.0], pressure=[0.0, 0.0, 9900.0])
    assert report.outside.tolist() == [False, True, True]
    assert report.count == 2
    assert [note.split(" is outside")[0] for note in report.notes] == [
        "del-grosso: temperature 31 degC",
        "del-grosso: salinity 12",
        "del-grosso: pressure 9900 dbar",
    ]
    assert not range_report("del-grosso", np.nan, np.nan, pressure=np.nan).outside.any()
    with pytest.raises(ValueError, match="read-only"):
        report.outside[0] = True


@pytest.mark.parametrize("name", ["bilaniuk-wong", "marczak"])
def test_fresh_water_at_the_surface_only(name):
    assert not range_report(name, 20.0, 0.0).notes
    (note,) = range_report(name, 20.0, 0.0, depth=10.0).notes
    assert "atmospheric pressure only" in note
    (note,) = range_report(name, 20.0, 0.3, pressure=0.0).notes
    assert f"{name}: salinity 0.3 is outside its range 0 only" in note


def test_the_funnel_of_teos10():
    """McDougall et al. (2003): inside it pressure narrows salinity and temperature; a deep fresh lake is outside."""
    inside = range_report(
        "teos10", [4.0, 25.0, -1.8, 10.0], [35.0, 0.0, 34.5, 35.0], pressure=[5000.0, 0.0, 300.0, 500.0]
    )
    assert not inside.outside.any()
    outside = range_report("teos10", [4.0, 25.0, -3.0], [0.1, 35.0, 34.5], pressure=[1500.0, 3000.0, 100.0])
    assert outside.outside.all()
    assert "funnel (3 of 3 values)" in outside.notes[0]
    # Water a few hundredths below its freezing point is measured under ice shelves and by noise.
    assert not range_report("teos10", -1.93, 34.5, pressure=5.0).outside.any()


def test_the_stated_error_of_the_polynomial_is_what_it_says():
    """0.057 m/s root mean square from the Gibbs function above 500 dbar, salinity 30 to 40; 0.013 below 1000 dbar."""
    import gsw

    random = np.random.default_rng(3)
    t, s, p = random.uniform(-2, 40, 60_000), random.uniform(30, 40, 60_000), random.uniform(0, 8000, 60_000)
    inside = ~range_report("teos10", t, s, pressure=p).outside
    sa = gsw.SR_from_SP(s)
    assert (gsw.infunnel(sa, gsw.CT_from_t(sa, t, p), p) == 1)[inside].mean() > 0.99
    departure = speed_of_columns(t, s, pressure=p) - speed_of_columns(t, s, pressure=p, equation="teos10-exact")
    rms = [np.sqrt(np.mean(departure[inside & where] ** 2)) for where in (p < 500, p > 1000)]
    assert rms[0] == pytest.approx(0.057, abs=0.004)
    assert rms[1] < 0.015
    assert np.hypot(0.035, 0.057) < equations()["teos10"].standard_error


def test_assumptions_are_said():
    def said(name, **given):
        return assumptions(name, **{"vertical": "pressure", "latitude": True, "longitude": True, **given})

    assert said("teos10") == ()
    assert said("unesco", latitude=False, longitude=False) == ()
    (line,) = said("teos10", longitude=False)
    assert "Reference Salinity" in line
    (line,) = said("unesco", vertical="depth", latitude=False)
    assert line == "pressure from depth by TEOS-10 for the standard ocean at latitude 45 degrees (no latitude is given)"
    (line,) = said("mackenzie")
    assert line == "depth from pressure by TEOS-10 for the standard ocean at the latitude given"
    (line,) = said("leroy", vertical="depth", latitude=False)
    assert line == "leroy: latitude 45 degrees (no latitude is given)"
    assert said("marczak", vertical=None, latitude=False) == ()


def test_the_registry_hands_out_copies_and_takes_equations():
    first = equations()
    first.clear()
    assert equations()
    assert find_equation(find_equation("coppens")).name == "coppens"
    with pytest.raises(TypeError, match="item assignment"):
        find_equation("coppens").range["depth"] = Bounds(0, 1, "m")
    own = Equation(
        name="constant",
        title="",
        function=lambda t: 1500.0 + 0.0 * t,
        arguments=("temperature",),
        temperature_scale="ITS-90",
        range={},
        standard_error=None,
        error_basis="",
        citation="",
    )
    assert sound_speed(10.0, 35.0, equation=own) == 1500.0


@pytest.mark.parametrize("name", NAMES)
def test_every_equation_is_described(name):
    equation = equations()[name]
    assert equation.title
    assert equation.citation
    assert equation.error_basis
    assert {"temperature", "salinity"} < set(equation.range)
    assert equation.vertical in ("pressure", "depth", "none")
    assert (equation.standard_error is None) or 0 < equation.standard_error < 0.3
    assert equation.function.__doc__


def test_side_by_side_is_quiet_and_marked():
    readings = speeds_side_by_side([10.0, 35.0], 35.0, pressure=10.0)
    assert list(readings) == NAMES
    for name, reading in readings.items():
        np.testing.assert_array_equal(reading.speed, quiet([10.0, 35.0], 35.0, pressure=10.0, equation=name))
        expected = range_report(name, [10.0, 35.0], 35.0, pressure=10.0)
        np.testing.assert_array_equal(reading.report.outside, expected.outside)
        assert reading.report.notes == expected.notes
    assert list(speeds_side_by_side(10.0, 0.0)) == ["bilaniuk-wong", "marczak"]
    with pytest.raises(InputError, match="equation unesco: neither pressure"):
        speeds_side_by_side(10.0, 0.0, names=["unesco"])
    with pytest.raises(InputError, match="temperature: -50 is impossible"):
        speeds_side_by_side(-50.0, 0.0)


def test_side_by_side_says_where_a_position_is_missing():
    partly = {"depth": 5.0, "latitude": [45.0, np.nan], "longitude": [np.nan, np.nan]}
    (reading,) = speeds_side_by_side(10.0, 35.0, **partly, names=["leroy"]).values()
    assert reading.assumptions == ("leroy: latitude 45 degrees (no latitude is given)",)
    partly["longitude"] = [3.0, 3.0]
    (reading,) = speeds_side_by_side(10.0, 35.0, **partly, names=["leroy"]).values()
    assert reading.assumptions == ("leroy: latitude 45 degrees (no latitude is given) in 1 of 2 values",)


@pytest.mark.parametrize("name", NAMES)
def test_equations_travel_to_workers(name):
    import pickle

    there = pickle.loads(pickle.dumps(equations()[name]))  # noqa: S301 - our own bytes
    assert there.function is equations()[name].function
    assert dict(there.range) == dict(equations()[name].range)
    with pytest.raises(TypeError, match="item assignment"):
        there.range["depth"] = Bounds(0, 1, "m")
