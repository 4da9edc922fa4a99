"""The measure of a change: bounded from above, and not by much."""

from __future__ import annotations

import importlib.util
import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions, beam_times, largest_shift
from ocean_sound.soundings.beams import HIT, below_transducer, carried_on

_spec = importlib.util.spec_from_file_location("random_beams", Path(__file__).with_name("random_beams.py"))
random_beams = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(random_beams)

pytestmark = pytest.mark.kernels


def densely(water, other, max_angle, transducer_depth=0.0):
    """The largest shift over 1500 times at each of 12 angles, without the kernel of the bound."""
    angles, largest = np.linspace(max_angle / 12, max_angle, 12), 0.0
    for angle in angles:
        end = beam_times(water, angle, min(water.depth[-1], other.depth[-1]), transducer_depth=transducer_depth).time
        times = np.linspace(0.0, float(end) * (1 - 1e-12), 1500)
        true = beam_positions(water, angle, times, transducer_depth=transducer_depth)
        instead = carried_on(below_transducer(other, transducer_depth), angle, times)
        assert (true.status == HIT).all()
        largest = max(largest, float(np.hypot(true.depth - instead.depth, true.across - instead.across).max()))
    return largest


@pytest.mark.long
@settings(max_examples=40)
@given(st.lists(st.floats(1440.0, 1540.0), min_size=4, max_size=12), st.floats(20.0, 60.0), st.floats(0.0, 9.0))
def test_the_bound_is_above_what_is_found_and_close(speeds, max_angle, transducer_depth):
    depth = np.linspace(0.0, 200.0, len(speeds))
    water, other = Profile(depth, speeds), Profile(depth[[0, 1, -1]], np.array(speeds)[[0, 1, -1]])
    shift = largest_shift(water, other, max_angle=max_angle, transducer_depth=transducer_depth)
    found = densely(water, other, max_angle, transducer_depth)
    assert found <= shift.distance + 1e-12
    assert shift.distance <= found * 1.005 + 2e-5


@pytest.mark.parametrize("angle", [10.0, 45.0, 65.0])
def test_a_layer_with_a_wrong_speed_against_first_order(angle):
    # Depth error (1 - tan²) h e/c and across error 2 tan h e/c (to first order): together sec² h e/c.
    h, e, c = 20.0, 0.01, 1500.0
    water = Profile([0, 10, 10 + h, 100], [c, c, c, c])
    wrong = Profile([0, 10 - 1e-6, 10, 10 + h, 10 + h + 1e-6, 100], [c, c, c + e, c + e, c, c])
    shift = largest_shift(water, wrong, max_angle=angle, allowance=1e-8)
    assert shift.distance == pytest.approx(h * e / c / math.cos(math.radians(angle)) ** 2, rel=1e-4)
    assert shift.angle == angle


def test_of_nothing_changed_and_of_whole_profiles_scaled():
    water = random_beams.synthetic()["thermocline"]
    assert largest_shift(water, water).distance < 1e-9
    # All speeds by a factor f at equal angles: each beam is farther along its own path, by f.
    faster = Profile(water.depth, water.speed * 1.0001)
    shift = largest_shift(Profile([0, 1000], [1500, 1500]), Profile([0, 1000], [1500.15, 1500.15]), max_angle=60.0)
    assert shift.distance == pytest.approx(1000.0 / math.cos(math.radians(60.0)) * 1e-4, abs=1e-5)
    assert largest_shift(water, faster).distance > 0.1


def test_beams_that_bend_to_the_horizontal_are_followed_until_then():
    water = Profile([0, 100, 2000], [1450, 1450, 1600])
    other = Profile([0, 100, 2000], [1450, 1450.1, 1600])
    shift = largest_shift(water, other, max_angle=80.0)
    # The steepest beam that stays within 87 degrees down to 2000 m has sin(angle) = sin(87) 1450/1600.
    steepest = math.degrees(math.asin(math.sin(math.radians(87.0)) * 1450.0 / 1600.0))
    assert shift.turning_angle == pytest.approx(steepest, abs=1e-9)
    assert np.isfinite(shift.distance)
    assert "bend to within 3 of the horizontal" in str(shift)
    assert largest_shift(water, other, max_angle=60.0).turning_angle is None


def test_what_is_said_and_what_is_refused():
    water = Profile([0, 100], [1500, 1500])
    said = str(largest_shift(water, Profile([0, 100], [1501, 1501]), max_angle=60.0, transducer_depth=2.0))
    assert said == (
        "no beam within 60 degrees of the vertical moves by more than 130.67 mm at equal angle and travel time, "
        "between 2 m (the transducer) and 100 m"
    )
    for angle in (0.0, 86.0, float("nan")):
        with pytest.raises(InputError, match=r"max_angle is .* degrees from the vertical: above 0 and at most 85"):
            largest_shift(water, water, max_angle=angle)
    with pytest.raises(InputError, match="allowance is 0 m: it must be above 0"):
        largest_shift(water, water, allowance=0.0)
