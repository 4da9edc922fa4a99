"""Two casts compared: parts that sum, single causes, first-order closed forms, and real casts."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.casts import Cast, read_casts
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions, beam_times, compare, refraction_errors
from ocean_sound.water import sound_speed, speed_derivative

PRESSURE = [0.0, 10.0, 50.0, 200.0]
TEMPERATURE = [18.0, 17.0, 12.0, 10.0]
SALINITY = [35.0, 35.1, 35.3, 35.2]


def cast(name="A", **changes):
    values = {"pressure": PRESSURE, "temperature": TEMPERATURE, "salinity": SALINITY} | changes
    return Cast(id=name, values=values, latitude=40.0, longitude=-30.0, time="2026-01-01")


def parts(comparison):
    return {
        name: comparison[f"speed_difference_by_{name}"].to_numpy() for name in ("temperature", "salinity", "pressure")
    }


@settings(max_examples=30)
@given(
    st.lists(st.tuples(st.floats(1.0, 30.0), st.floats(2.0, 38.0)), min_size=2, max_size=9),
    st.sampled_from(["teos10", "unesco", "mackenzie", "leroy", "del-grosso"]),
)
def test_the_parts_sum_to_the_whole(levels, equation):
    temperature, salinity = np.array(levels).T
    other = cast("B", pressure=np.linspace(0.0, 150.0, temperature.size), temperature=temperature, salinity=salinity)
    comparison = compare(cast(), other, equation=equation, angles=[0.0])
    assert sum(parts(comparison).values()) == pytest.approx(comparison["speed_difference"].to_numpy(), abs=1e-9)
    back = compare(other, cast(), equation=equation, angles=[0.0])
    for name, part in parts(comparison).items():
        assert parts(back)[name] == pytest.approx(-part, abs=1e-9)


def test_on_its_own_levels_each_speed_is_that_of_its_profile():
    other = cast("B", pressure=[3.0, 33.0, 150.0, 300.0])
    comparison = compare(cast(), other)
    for key, of in (("a", cast()), ("b", other)):
        profile = Profile.from_cast(of)
        here = np.isin(comparison["depth"], profile.depth)
        assert here.sum() >= 4
        speeds = comparison[f"speed_{key}"].to_numpy()[here]
        assert speeds == pytest.approx(profile.at(comparison["depth"].to_numpy()[here]), abs=1e-9)


def test_one_cause_alone_and_small_changes_against_the_derivatives():
    warm = parts(compare(cast(), cast("B", temperature=np.array(TEMPERATURE) + 0.01)))
    slope = speed_derivative(TEMPERATURE, SALINITY, by="temperature", pressure=PRESSURE, latitude=40.0, longitude=-30.0)
    # Warmer water is lighter: the levels of the two lie millimetres apart, so depths are not compared one by one.
    assert warm["temperature"].max() == pytest.approx(0.01 * slope.max(), rel=0.01)
    assert np.abs(warm["salinity"]).max() < 1e-5
    assert np.abs(warm["pressure"]).max() < 1e-4
    salt = parts(compare(cast(), cast("B", salinity=np.array(SALINITY) + 0.01)))
    slope = speed_derivative(TEMPERATURE, SALINITY, by="salinity", pressure=PRESSURE, latitude=40.0, longitude=-30.0)
    assert salt["salinity"].max() == pytest.approx(0.01 * slope.max(), rel=0.01)
    assert np.abs(salt["temperature"]).max() < 5e-4


def test_against_the_speeds_of_the_equation():
    comparison = compare(cast(), cast("B", temperature=np.array(TEMPERATURE) + 1.0))
    whole = sound_speed(19.0, 35.0, pressure=0.0, latitude=40.0, longitude=-30.0) - sound_speed(
        18.0, 35.0, pressure=0.0, latitude=40.0, longitude=-30.0
    )
    assert float(comparison["speed_difference"][0]) == pytest.approx(whole, abs=1e-9)


@pytest.mark.parametrize("angle", [0.0, 30.0, 45.0, 65.0])
def test_a_layer_of_another_speed_against_first_order(angle):
    # Depth error (1 - tan²) h e/c and across error 2 tan h e/c, to first order, where the layer is fast by e in a.
    h, e, c = 20.0, 0.01, 1500.0
    a = Profile([0, 10 - 1e-6, 10, 10 + h, 10 + h + 1e-6, 100], [c, c, c + e, c + e, c, c])
    errors = compare(a, Profile([0, 100], [c, c]), angles=[angle, -angle], depths=[80.0])
    tan = math.tan(math.radians(angle))
    assert float(errors["depth_error"][0, 0]) == pytest.approx((1 - tan**2) * h * e / c, rel=1e-3, abs=2e-8)
    assert float(errors["across_track_error"][0, 0]) == pytest.approx(2 * tan * h * e / c, rel=1e-3, abs=1e-9)
    assert float(errors["across_track_error"][0, 1]) == -float(errors["across_track_error"][0, 0])


def test_a_level_flat_array_keeps_sine_over_speed():
    a, b = Profile([0, 100], [1500, 1500]), Profile([0, 100], [1515, 1515])
    errors = refraction_errors(a, b, angles=[60.0], depths=[50.0], flat_array=True)
    there = beam_times(b, 60.0, 50.0)
    angle = math.degrees(math.asin(math.sin(math.radians(60.0)) * 1500.0 / 1515.0))
    found = beam_positions(a, angle, there.time)
    assert float(errors["depth_error"][0, 0]) == pytest.approx(float(found.depth) - 50.0, abs=1e-9)
    assert errors.attrs["beams_keep"].startswith("sin")


def test_what_becomes_of_beams_that_turn_or_leave():
    bent = Profile([0, 200], [1450, 1650])
    errors = refraction_errors(Profile([0, 200], [1500, 1500]), bent, angles=[0.0, 80.0], depths=[190.0])
    assert errors["status"].to_numpy().tolist() == [[0, 1]]
    assert np.isnan(errors["depth_error"][0, 1])
    far = refraction_errors(
        Profile([0, 200], [1900, 1900]), Profile([0, 200], [1500, 1500]), angles=[0.0], depths=[200.0]
    )
    assert far["status"].item() == 2
    near = refraction_errors(
        Profile([0, 200], [1515, 1515]), Profile([0, 200], [1500, 1500]), angles=[0.0], depths=[200.0]
    )
    assert near["depth_error"].item() == pytest.approx(2.0)


def test_profiles_have_no_parts_and_every_variable_its_units():
    comparison = compare(Profile.from_cast(cast()), cast("B"))
    assert "speed_difference_by_salinity" not in comparison
    assert dict(comparison.sizes) == {"depth": 4, "sounding_depth": 10, "angle": 6}
    assert (comparison.attrs["a"], comparison.attrs["b"]) == ("A", "B")
    for name, variable in compare(cast(), cast("B")).variables.items():
        assert "long_name" in variable.attrs, name
        assert name == "status" or variable.attrs["units"], name


def test_conductivity_and_assumed_salinity():
    temperature_only = Cast(id="X", values={"depth": [1.0, 20.0, 150.0], "temperature": [17.0, 15.0, 11.0]})
    comparison = compare(temperature_only, cast(), salinity=35.0, angles=[0.0])
    assert sum(parts(comparison).values()) == pytest.approx(comparison["speed_difference"].to_numpy(), abs=1e-9)
    conductive = Cast(
        id="C",
        values={"pressure": [1.0, 20.0, 150.0], "temperature": [17.0, 15.0, 11.0], "conductivity": [4.5, 4.3, 3.9]},
    )
    profile = Profile.from_cast(conductive)
    comparison = compare(conductive, cast(), angles=[0.0])
    here = np.isin(comparison["depth"], profile.depth)
    assert comparison["speed_a"].to_numpy()[here] == pytest.approx(
        profile.at(comparison["depth"].to_numpy()[here]), abs=1e-9
    )


def test_real_casts(real_data):
    first, second = read_casts(real_data / "exchange" / "BIOS20160721_ct1.zip")
    comparison = compare(first, second)
    profiles = [Profile.from_cast(one) for one in (first, second)]
    depth = comparison["depth"].to_numpy()
    whole = profiles[1].at(depth) - profiles[0].at(depth)
    assert np.abs(sum(parts(comparison).values()) - whole).max() < 0.01
    assert np.abs(parts(comparison)["temperature"]).max() > 1.0
    assert (comparison["status"] == 0).all()


def test_refusals():
    with pytest.raises(InputError, match="two casts that overlap in depth would be right"):
        compare(Profile([0, 10], [1500, 1500]), Profile([10, 20], [1500, 1500]))
    with pytest.raises(InputError, match="depth 300 m: below 0 m, the transducer, and down to 10 m"):
        compare(Profile([0, 10], [1500, 1500]), Profile([0, 20], [1500, 1500]), depths=[300.0])
    with pytest.raises(InputError, match="transducer depth is 12 m: from 0 m to above 10 m would be right"):
        compare(Profile([0, 10], [1500, 1500]), Profile([0, 20], [1500, 1500]), transducer_depth=12.0)
