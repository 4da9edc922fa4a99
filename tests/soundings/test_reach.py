"""How far out beams hold an order: closed forms, what ends the angles, and the table of uncertainty by angle."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings.choosing import LAST_CHANGE
from ocean_sound.soundings.components import Component
from ocean_sound.soundings.orders import Order, holds, read_orders
from ocean_sound.soundings.reach import LIMITED_BY, largest_angle, uncertainty_by_angle

ORDERS = read_orders()
NAN = float("nan")


# --- the largest angle


def test_the_largest_angle_of_a_cosine_law():
    """TVU growing as tan² θ times depth, THU as tan θ: both ends are known."""
    angle, depth = np.linspace(0.0, 75.0, 1501), np.array([5.0, 20.0, 100.0, 400.0])
    tangent = np.tan(np.radians(angle))[:, np.newaxis]
    order = ORDERS["Special"]
    tvu, thu = 0.004 * tangent**2 * depth, 0.006 * tangent * depth
    reach = largest_angle(order, angle, depth, tvu, thu)
    of_tvu = np.degrees(np.arctan(np.sqrt(order.tvu(depth) / (0.004 * depth))))
    of_thu = np.degrees(np.arctan(order.thu(depth) / (0.006 * depth)))
    assert reach.angle == pytest.approx(np.minimum(75.0, np.minimum(of_tvu, of_thu)), abs=1e-4)
    assert (reach.angle <= np.minimum(of_tvu, of_thu) + 1e-9).all()  # a chord of a convex curve is on the safe side
    assert [LIMITED_BY[code] for code in reach.limited_by] == ["tvu", "tvu", "tvu", "thu"]
    assert not reach.holds_beyond.any()
    wide = largest_angle(order, angle, [1.0], 0.0, 0.0)
    assert (wide.angle.tolist(), wide.limited_by.tolist()) == ([75.0], [0])


def test_beams_that_hold_again_farther_out():
    """A speed wrong by e in h metres moves the depth by (1 - tan² θ) h e/c to first order: not at 45 degrees."""
    angle = np.linspace(0.0, 70.0, 701)
    moved = np.abs(1.0 - np.tan(np.radians(angle)) ** 2)[:, np.newaxis]
    order = Order("x", tvu_fixed=0.5)
    reach = largest_angle(order, angle, [10.0, 20.0], moved * [0.4, 0.6], NAN)
    assert reach.angle[0] == pytest.approx(math.degrees(math.atan(1.5)), abs=1e-3)
    assert np.isnan(reach.angle[1])
    assert [LIMITED_BY[code] for code in reach.limited_by] == ["tvu", "tvu"]
    assert reach.holds_beyond.tolist() == [False, True]


def test_what_ends_the_angles():
    angle, depth = [0.0, 10.0, 20.0], [1.0, 2.0, 3.0, 4.0, 5.0]
    order = Order("x", tvu_fixed=1.0, thu_fixed=1.0)
    tvu = np.array([[0.5, 0.5, 0.5, 2.0, NAN], [1.5, 0.5, NAN, 0.1, 0.1], [0.1, 1.0, 0.1, 0.1, 0.1]])
    thu = np.array([[0.5, 0.5, 0.5, 2.0, 0.5], [1.5, 0.5, 0.50, 0.1, 0.1], [0.1, 1.5, 0.1, 0.1, 0.1]])
    kept = tvu.copy()
    reach = largest_angle(order, angle, depth, tvu, thu)
    assert reach.angle == pytest.approx([5.0, 15.0, 0.0, NAN, NAN], nan_ok=True)
    assert [LIMITED_BY[code] for code in reach.limited_by] == [
        "tvu_and_thu",
        "thu",
        "unknown",
        "tvu_and_thu",
        "unknown",
    ]
    assert reach.holds_beyond.tolist() == [True, False, True, True, True]
    np.testing.assert_array_equal(tvu, kept)


@given(st.lists(st.floats(0.0, 3.0), min_size=3, max_size=9), st.lists(st.floats(0.0, 3.0), min_size=9, max_size=9))
def test_all_beams_up_to_the_angle_hold(tvu, thu):
    angle = np.arange(len(tvu)) * 8.0
    order = Order("x", tvu_fixed=1.0, thu_fixed=1.5)
    reach = largest_angle(order, angle, [10.0], np.array(tvu)[:, np.newaxis], np.array(thu[: len(tvu)])[:, np.newaxis])
    inside = angle <= reach.angle[0]
    held = holds(order, 10.0, tvu, thu[: len(tvu)]).both
    assert held[inside].all()
    first = next((at for at, good in enumerate(held) if not good), None)
    assert (first is None) == (reach.limited_by[0] == 0)
    if first:
        assert angle[first - 1] <= reach.angle[0] <= angle[first]


def test_a_limit_of_0_at_the_shore():
    order = Order("x", tvu_share=0.01)
    reach = largest_angle(order, [0.0, 10.0, 20.0], [0.0], [[0.0], [0.0], [0.1]], 1.0)
    assert (reach.angle.tolist(), reach.limited_by.tolist()) == ([10.0], [1])


def test_the_reach_as_a_dataset():
    reach = largest_angle(ORDERS["1a"], [0.0, 60.0], [10.0, 20.0], [[0.1, 0.1], [0.2, 9.0]], 1.0)
    dataset = reach.to_dataset()
    assert dataset["largest_angle"].dims == ("depth",)
    assert dataset["largest_angle"].values == pytest.approx(reach.angle)
    assert dataset["limited_by"].attrs["flag_meanings"].split() == list(LIMITED_BY)
    assert dataset["limited_by"].values.tolist() == [0, 1]
    assert dataset.attrs["order"] == "1a"


@pytest.mark.parametrize(
    ("given", "message"),
    [
        (([10.0, 0.0], [1.0], 0.1, 0.1), "angle: an increasing row of degrees from 0 to less than 90"),
        (([0.0, 90.0], [1.0], 0.1, 0.1), "angle: an increasing row"),
        (([-10.0, 0.0], [1.0], 0.1, 0.1), "angle: an increasing row"),
        (([0.0, NAN], [1.0], 0.1, 0.1), "angle: an increasing row"),
        (([], [1.0], 0.1, 0.1), "angle: an increasing row"),
        (([0.0, 10.0], 1.0, 0.1, 0.1), "depth: a row of finite metres"),
        (([0.0, 10.0], [NAN], 0.1, 0.1), "depth: a row of finite metres"),
        (([0.0, 10.0], [1.0], [[0.1, 0.1]] * 3, 0.1), r"tvu_95: its shape is \(3, 2\); \(2, 1\) for angle and depth"),
        (([0.0, 10.0], [1.0], 0.1, [[0.1], [-0.1]]), "thu_95: -0.1 at index 1, 0 is impossible"),
    ],
)
def test_tables_that_can_not_be_searched(given, message):
    with pytest.raises(InputError, match=message):
        largest_angle(ORDERS["2"], *given)


# --- the table of uncertainty by angle


def test_the_table_of_one_speed_in_closed_form():
    """Depth by (1 - tan²) h e/c, distance by 2 tan h e/c for a flat array; a curved one moves by e/c of each."""
    water = Profile([0.0, 200.0], [1500.0, 1500.0], shapes={"sound_speed": [0.6, 0.6]})
    depths = np.array([24.0, 104.0, 199.0])
    for flat in (True, False):
        table = uncertainty_by_angle(water, depths=depths, transducer_depth=4.0, flat_array=flat)
        tan = np.tan(np.radians(table["angle"].to_numpy()))[:, np.newaxis]
        down, share = depths - 4.0, 1.96 * 0.6 / 1500.0
        depth, across = (np.abs(1.0 - tan**2), 2.0 * tan) if flat else (np.ones_like(tan), tan)
        # within 2 % of it, or 1 % of the whole displacement, as `path_uncertainty` has it
        slack = 0.01 * np.hypot(depth, across) * down * share
        assert (np.abs(table["tvu_95"] - depth * down * share) <= 0.02 * depth * down * share + slack).all()
        assert (np.abs(table["thu_95"] - across * down * share) <= 0.02 * across * down * share + slack).all()


def test_the_table_with_change_steering_and_components():
    still = Profile([0.0, 100.0], [1500.0, 1500.0], shapes={"sound_speed": [0.0, 0.0]})
    straight = {"depths": [50.0], "max_angle": 60.0}
    change = {"change": ([0.0], [0.5])}
    moved = uncertainty_by_angle(still, **straight, change=change, changed=LAST_CHANGE)
    assert float(moved["tvu_95"][0, 0]) == pytest.approx(1.96 * 50.0 * 0.5 / 1500.0 * math.sqrt(LAST_CHANGE), rel=0.02)
    steered = uncertainty_by_angle(still, **straight, steering_speed_uncertainty=1.0)
    # at a fixed time: depth changes by tan² h e/c, from cos² = 1 - (p c)²
    assert float(steered["tvu_95"][-1, 0]) == pytest.approx(1.96 * 3.0 * 50.0 / 1500.0, rel=0.02)
    tide = Component("tide", "vertical", fixed=0.2, k=1.0)
    with_tide = uncertainty_by_angle(still, **straight, components=[tide])
    assert with_tide["tvu_95"].to_numpy() == pytest.approx(1.96 * 0.2)
    assert with_tide["thu_95"].to_numpy() == pytest.approx(0.0)


def test_of_several_casts_the_worst_counts_and_what_turns_is_unknown():
    def water(error, speed):
        return Profile([0.0, 50.0], [1500.0, speed], shapes={"sound_speed": [error, error]})

    few, more = water(0.2, 1500.0), water(0.4, 1500.0)
    alone, both = (uncertainty_by_angle(casts)["tvu_95"].to_numpy() for casts in ([more], [few, more, few]))
    np.testing.assert_array_equal(alone, both)
    turning = uncertainty_by_angle(water(0.2, 1700.0), depths=[10.0, 50.0])
    seen = np.isfinite(turning["tvu_95"].to_numpy())
    angle = turning["angle"].to_numpy()
    # a ray of slowness sin/1500 turns where the speed is 1500/sin
    np.testing.assert_array_equal(seen, np.sin(np.radians(angle))[:, np.newaxis] < 1500.0 / np.array([1540.0, 1700.0]))


def test_water_below_the_casts_is_less_certain():
    water = Profile([0.0, 50.0], [1500.0, 1495.0], shapes={"sound_speed": [0.2, 0.2]})
    near, far = uncertainty_by_angle(water, depths=[50.0, 150.0])["tvu_95"].to_numpy()[0]
    assert far > 3.3 * near  # three times the way at the same uncertainty would be three times as much
    default = uncertainty_by_angle(water, transducer_depth=10.0)["depth"].to_numpy()
    assert (default.size, default[0], default[-1]) == (20, 12.0, 50.0)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({"depths": [20.0, 10.0]}, "depths: an increasing row of metres below the transducer, at 4 m"),
        ({"depths": [4.0]}, "depths: an increasing row of metres"),
        ({"depths": [[10.0, NAN]]}, "depths: an increasing row of metres"),
        ({"profiles": []}, "there is no cast: give at least one"),
    ],
)
def test_tables_that_can_not_be_made(given, message):
    casts = given.pop("profiles", Profile([0.0, 50.0], [1500.0, 1495.0]))
    with pytest.raises(InputError, match=message):
        uncertainty_by_angle(casts, transducer_depth=4.0, **given)
