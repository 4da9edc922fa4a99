"""Rays through one profile against closed forms, independent integrators and invariants."""

from __future__ import annotations

import math
import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays import trace, trace_fan

sys.path.insert(0, str(Path(__file__).parent))
from oracles import integrate_ray, precise_ray

pytestmark = pytest.mark.kernels

REACHED, SPLIT, AT_SURFACE, AT_SEABED = range(4)


def random_profile(seed, levels=12, deepest=400.0):
    """A rough profile with ducts, steps of gradient and an uneven spacing."""
    rng = np.random.default_rng(seed)
    depth = np.concatenate(([0.0], np.cumsum(rng.uniform(5.0, 2.0 * deepest / levels, levels - 1))))
    return Profile(depth, 1500.0 + np.cumsum(rng.normal(0.0, 4.0, levels)))


def munk(levels=501, deepest=5000.0):
    depth = np.linspace(0.0, deepest, levels)
    eta = 2.0 * (depth - 1300.0) / 1300.0
    return Profile(depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta))))


# --- independent integrators


@pytest.mark.parametrize("seed", range(8))
def test_end_points_agree_with_an_ode_integrator_restarted_at_nodes(seed):
    rng = np.random.default_rng(100 + seed)
    water = random_profile(seed)
    source = float(rng.uniform(0.05, 0.95) * water.depth[-1])
    angles = np.concatenate((rng.uniform(-25, 25, 4), rng.uniform(-70, 70, 2)))
    distance = float(rng.uniform(1000, 4000))
    fan = trace_fan(water, source_depth=source, launch_angles=angles, max_range=distance)
    for i, angle in enumerate(angles):
        x, z, t, s, arrival, turns, surface, bottom = integrate_ray(water.depth, water.speed, source, angle, distance)
        assert fan.status[i] == REACHED
        assert fan.range[i] == distance
        assert x == pytest.approx(distance, abs=1e-8)
        assert fan.depth[i] == pytest.approx(z, abs=1e-6)
        assert fan.travel_time[i] == pytest.approx(t, abs=1e-9)
        assert fan.path_length[i] == pytest.approx(s, abs=1e-6)
        assert fan.arrival_angle[i] == pytest.approx(arrival, abs=1e-6)
        assert (fan.turns[i], fan.surface_bounces[i], fan.seabed_bounces[i]) == (turns, surface, bottom)


@pytest.mark.parametrize("angle", [1e-9, -1e-7, 1e-5, -1e-3, 0.05, -0.4, 3.0, 11.0])
@pytest.mark.parametrize("source", [900.0, 1303.7])
def test_grazing_rays_are_exact_for_a_launch_angle_next_to_the_one_asked(angle, source):
    """Backward error: the end point is the exact one of a ray launched within 1e-14 rad, or of rounded outputs."""
    water = munk(201)
    fan = trace_fan(water, source_depth=source, launch_angles=angle, max_range=60_000.0)
    depth, time, slope = precise_ray(water.depth, water.speed, source, angle, 60_000.0)
    miss = abs(float(depth - fan.depth[0]))
    rounding = 4 * np.spacing(fan.depth[0])
    assert max(miss - rounding, 0.0) / abs(float(slope)) < 1e-14
    assert fan.travel_time[0] == pytest.approx(float(time), abs=1e-12)


# --- closed forms


def test_isovelocity_rays_are_straight():
    water = Profile([0.0, 60.0, 100.0], [1500.0, 1500.0, 1500.0])
    angles = np.array([-80.0, -30.0, -2.0, 2.0, 30.0, 80.0])
    fan = trace_fan(water, source_depth=40.0, launch_angles=angles, max_range=1000.0)
    folded = np.abs((40.0 + 1000.0 * np.tan(np.radians(angles)) + 100.0) % 200.0 - 100.0)
    np.testing.assert_allclose(fan.depth, folded, atol=1e-9)
    np.testing.assert_allclose(fan.path_length, 1000.0 / np.cos(np.radians(angles)), rtol=1e-14)
    np.testing.assert_allclose(fan.travel_time, fan.path_length / 1500.0, rtol=1e-14)


@pytest.mark.parametrize("gradient", [1e-12, -1e-12, 1e-9, 1e-5])
def test_a_vanishing_gradient_is_as_good_as_any_other(gradient):
    """Against the series of the vertical time ln(1 + g z/c0)/g = (z/c0)(1 - y/2 + y²/3), y = g z/c0."""
    bottom = 1000.0
    water = Profile([0.0, bottom], [1500.0, 1500.0 + gradient * bottom])
    fan = trace_fan(water, source_depth=0.0, launch_angles=90.0, max_range=10.0, max_seabed_bounces=0)
    y = (water.speed[1] - 1500.0) / 1500.0
    assert fan.status[0] == AT_SEABED
    assert fan.travel_time[0] == pytest.approx(bottom / 1500.0 * (1 - y / 2 + y * y / 3), rel=1e-15)
    slanted = trace_fan(water, source_depth=0.0, launch_angles=30.0, max_range=500.0)
    straight = 500.0 * math.tan(math.radians(30.0))
    # to first order the ray drops by g x²/(2 c cos²) less than a straight one
    sag = gradient * 500.0**2 / (2 * 1500.0 * math.cos(math.radians(30.0)) ** 2)
    assert slanted.depth[0] == pytest.approx(straight - sag, abs=1e-10 + abs(sag) * 1e-5)


def test_a_vertical_ray_takes_the_vertical_travel_time_of_the_profile():
    water = random_profile(3)
    fan = trace_fan(water, source_depth=0.0, launch_angles=90.0, max_range=100.0, max_seabed_bounces=0)
    assert fan.travel_time[0] == pytest.approx(water.travel_time(), rel=1e-14)
    assert fan.depth[0] == water.depth[-1]
    assert fan.range[0] == pytest.approx(0.0, abs=1e-10)


@pytest.mark.long
def test_layers_of_an_n2_linear_medium_close_in_as_the_square_of_their_thickness():
    """n²-linear, c = c0/sqrt(1 - 2 g0 z/c0): a parabola with its vertex at (c0 sin 2θ/(2 g0), c0 sin²θ/(2 g0)), and
    travel time s/c0² - (2 g0/c0³)(q s²/2 - g0 s³/(6 c0³)) there (Pedersen and Gordon 1972, JASA 51, 323).
    """
    c0, g0 = 1500.0, 0.016
    time_errors, depth_errors = [], []
    for layers in (250, 500, 1000):
        depth = np.linspace(0.0, 1500.0, layers + 1)
        water = Profile(depth, c0 / np.sqrt(1 - 2 * g0 * depth / c0))
        off = []
        for angle in np.linspace(5.0, 10.0, 41):
            theta = math.radians(angle)
            vertex = c0 * math.sin(2 * theta) / (2 * g0)
            lowest = c0 * math.sin(theta) ** 2 / (2 * g0)
            q = math.sin(theta) / c0
            s = q * c0**3 / g0
            time = s / c0**2 - (2 * g0 / c0**3) * (q * s**2 / 2 - g0 * s**3 / (6 * c0**3))
            fan = trace_fan(water, source_depth=0.0, launch_angles=angle, max_range=vertex)
            off.append((fan.travel_time[0] - time, fan.depth[0] - lowest))
        time_errors.append(np.sqrt(np.mean(np.square(off), axis=0))[0])
        depth_errors.append(np.sqrt(np.mean(np.square(off), axis=0))[1])
    for errors in (time_errors, depth_errors):
        assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.2)
        assert errors[1] / errors[2] == pytest.approx(4.0, rel=0.2)
    assert time_errors[2] < 1e-6
    assert depth_errors[2] < 1e-3


# --- invariants

launch = st.floats(-75.0, 75.0).filter(lambda angle: abs(angle) > 1e-3)
seeds = st.integers(0, 10_000)


@settings(max_examples=60, deadline=None)
@given(seed=seeds, angle=launch, part=st.floats(0.01, 0.99))
def test_a_ray_sent_back_from_its_end_takes_the_same_time(seed, angle, part):
    water = random_profile(seed)
    there = trace_fan(water, source_depth=part * water.depth[-1], launch_angles=angle, max_range=3000.0)
    assume(there.status[0] == REACHED and 1e-3 < there.depth[0] < water.depth[-1] - 1e-3)
    assume(abs(there.arrival_angle[0]) > 0.05)
    back = trace_fan(
        water, source_depth=there.depth[0], launch_angles=-there.arrival_angle[0], max_range=there.range[0]
    )
    # how far the end moves for one rounding of the angle it starts with
    near = trace_fan(
        water, source_depth=there.depth[0], launch_angles=-there.arrival_angle[0] + 1e-9, max_range=there.range[0]
    )
    give = 1e-9 + 1e-4 * abs(near.depth[0] - back.depth[0])
    assert back.depth[0] == pytest.approx(there.source_depth, abs=give)
    assert back.travel_time[0] == pytest.approx(there.travel_time[0], abs=1e-9 + give / 1500.0)
    assert back.arrival_angle[0] == pytest.approx(-angle, abs=1e-5 + give)
    assert (back.turns[0], back.surface_bounces[0], back.seabed_bounces[0]) == (
        there.turns[0],
        there.surface_bounces[0],
        there.seabed_bounces[0],
    )


@settings(max_examples=60, deadline=None)
@given(seed=seeds, angle=launch, part=st.floats(0.01, 0.99))
def test_water_turned_upside_down_gives_the_mirrored_ray(seed, angle, part):
    water = random_profile(seed)
    deepest = water.depth[-1]
    turned = Profile(deepest - water.depth[::-1], water.speed[::-1])
    source = part * deepest
    ray = trace_fan(water, source_depth=source, launch_angles=angle, max_range=2000.0)
    mirror = trace_fan(turned, source_depth=deepest - source, launch_angles=-angle, max_range=2000.0)
    assert mirror.depth[0] == pytest.approx(deepest - ray.depth[0], abs=1e-5)
    assert mirror.travel_time[0] == pytest.approx(ray.travel_time[0], abs=1e-8)
    assert mirror.surface_bounces[0] == ray.seabed_bounces[0]


@settings(max_examples=60, deadline=None)
@given(seed=seeds, angle=launch, part=st.floats(0.01, 0.99), cuts=st.lists(st.floats(0.001, 0.999), max_size=6))
def test_splitting_layers_changes_nothing(seed, angle, part, cuts):
    water = random_profile(seed)
    depth = np.unique(np.concatenate((water.depth, np.array(cuts) * water.depth[-1])))
    assume(np.diff(depth).min() > 1e-3)
    fine = Profile(depth, water.at(depth))
    source = part * water.depth[-1]
    whole = trace_fan(water, source_depth=source, launch_angles=angle, max_range=2000.0)
    split = trace_fan(fine, source_depth=source, launch_angles=angle, max_range=2000.0)
    assert split.depth[0] == pytest.approx(whole.depth[0], abs=1e-5)
    assert split.travel_time[0] == pytest.approx(whole.travel_time[0], abs=1e-8)


@settings(max_examples=40, deadline=None)
@given(seed=seeds, angle=launch, part=st.floats(0.0, 1.0))
def test_every_point_of_a_path_is_the_end_of_a_shorter_ray(seed, angle, part):
    water = random_profile(seed)
    arguments = {"source_depth": part * water.depth[-1], "launch_angles": angle}
    whole = trace_fan(water, max_range=2500.0, points=23, **arguments)
    assert whole.path_range[0, 0] == pytest.approx(0.0, abs=1e-9)
    assert whole.path_range[0, -1] == whole.range[0]
    assert whole.path_depth[0, -1] == whole.depth[0]
    for i in range(1, 23):
        shorter = trace_fan(water, max_range=whole.path_range[0, i], **arguments)
        assert shorter.travel_time[0] == pytest.approx(whole.travel_time[0] * i / 22, abs=1e-9)
        steep = abs(math.tan(math.radians(shorter.arrival_angle[0])))
        assert shorter.depth[0] == pytest.approx(whole.path_depth[0, i], abs=1e-6 * (1 + steep))


def test_snells_constant_holds_along_each_ray():
    water = munk()
    angles = np.linspace(-15, 15, 31)
    fan = trace_fan(water, source_depth=1000.0, launch_angles=angles, max_range=77_000.0)
    speed_there = water.at(fan.depth)
    np.testing.assert_allclose(
        np.cos(np.radians(fan.arrival_angle)) / speed_there, np.cos(np.radians(angles)) / water.at(1000.0), rtol=1e-14
    )


# --- statuses


def test_a_ray_tangent_to_a_speed_maximum_splits():
    water = Profile([0.0, 100.0, 200.0], [1490.0, 1500.0, 1480.0])
    tangent = math.degrees(math.acos(1495.0 / 1500.0))
    fan = trace_fan(water, source_depth=50.0, launch_angles=[tangent, 0.9999 * tangent], max_range=5000.0)
    assert fan.status.tolist() == [SPLIT, REACHED]
    assert fan.depth[0] == 100.0
    assert fan.arrival_angle[0] == 0.0
    # half an arc of constant gradient: tan θ c/g
    assert fan.range[0] == pytest.approx(math.tan(math.radians(tangent)) * 1495.0 / 0.1, rel=1e-12)


def test_a_level_ray_splits_on_a_maximum_stays_on_an_axis_and_bends_elsewhere():
    top = Profile([0.0, 100.0, 200.0], [1490.0, 1500.0, 1480.0])
    axis = Profile([0.0, 100.0, 200.0], [1500.0, 1490.0, 1500.0])
    assert trace_fan(top, source_depth=100.0, launch_angles=0.0, max_range=500.0).status[0] == SPLIT
    along = trace_fan(axis, source_depth=100.0, launch_angles=0.0, max_range=500.0, points=3)
    assert (along.depth[0], along.travel_time[0], along.turns[0]) == (100.0, 500.0 / 1490.0, 0)
    assert along.path_range[0].tolist() == [0.0, 250.0, 500.0]
    bending = trace_fan(top, source_depth=40.0, launch_angles=0.0, max_range=100.0)
    # a circle of radius c/g: depth falls by R - sqrt(R² - x²), upward where speed grows with depth
    radius = 1494.0 / 0.1
    assert bending.depth[0] == pytest.approx(40.0 - (radius - math.sqrt(radius**2 - 100.0**2)), abs=1e-9)


def test_limits_of_bounces_end_a_ray_where_it_touches():
    water = Profile([0.0, 100.0], [1500.0, 1500.0])
    arguments = {"source_depth": 50.0, "launch_angles": [45.0, -45.0], "max_range": 1000.0}
    free = trace_fan(water, **arguments)
    assert free.seabed_bounces.tolist() == [5, 5]
    assert free.surface_bounces.tolist() == [5, 5]
    absorbed = trace_fan(water, max_seabed_bounces=0, **arguments)
    assert absorbed.status.tolist() == [AT_SEABED, AT_SEABED]
    np.testing.assert_allclose(absorbed.range, [50.0, 150.0], rtol=1e-14)
    assert absorbed.surface_bounces.tolist() == [0, 1]
    np.testing.assert_allclose(absorbed.arrival_angle, [45.0, 45.0], rtol=1e-14)
    twice = trace_fan(water, max_surface_bounces=2, **arguments)
    assert twice.status.tolist() == [AT_SURFACE, AT_SURFACE]
    np.testing.assert_allclose(twice.range, [550.0, 450.0], rtol=1e-13)
    assert twice.surface_bounces.tolist() == [2, 2]
    assert twice.seabed_bounces.tolist() == [3, 2]


def test_travel_time_uncertainty_is_that_of_one_shift_of_speed():
    base = munk(101)
    shifted = Profile(base.depth, base.speed * (1 + 1e-6))
    water = Profile(base.depth, base.speed, uncertainty=base.speed * 1e-6)
    angles = np.linspace(-12, 12, 7)
    fan = trace_fan(water, source_depth=1000.0, launch_angles=angles, max_range=50_000.0)
    moved = trace_fan(shifted, source_depth=1000.0, launch_angles=angles, max_range=50_000.0)
    np.testing.assert_allclose(fan.travel_time_uncertainty, fan.travel_time - moved.travel_time, rtol=2e-5)
    assert trace_fan(base, source_depth=1.0, launch_angles=1.0, max_range=1.0).travel_time_uncertainty is None


def test_the_dataset_carries_units_and_meanings():
    rays = trace(munk(51), source_depth=100.0, launch_angles=[-5, 5], max_range=9000.0, points=11)
    assert dict(rays.sizes) == {"ray": 2, "point": 11}
    assert rays.travel_time.attrs["units"] == "s"
    assert rays.path_depth.dims == ("ray", "point")
    assert len(rays.status.attrs["flag_meanings"].split()) == len(rays.status.attrs["flag_values"]) == 7
    assert all("long_name" in rays[name].attrs or "standard_name" in rays[name].attrs for name in rays.variables)


def test_inputs_are_not_changed_and_a_scalar_equals_a_list():
    angles = np.array([3.0, -4.0])
    angles.flags.writeable = False
    water = munk(51)
    pair = trace_fan(water, source_depth=10.0, launch_angles=angles, max_range=5000.0)
    single = trace_fan(water, source_depth=10.0, launch_angles=-4.0, max_range=5000.0)
    assert angles.tolist() == [3.0, -4.0]
    assert single.depth[0] == pair.depth[1]


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"source_depth": -1.0}, r"source depth -1 m is above the surface: .* between 0 and 5000 m"),
        ({"source_depth": 6000.0}, "source depth 6000 m is below the seabed"),
        ({"source_depth": math.nan}, "source depth nan m"),
        ({"max_range": -5.0}, "max_range is -5 m: .*positive"),
        ({"max_range": math.inf}, "max_range is inf m"),
        ({"launch_angles": [0.0, 91.0]}, "launch angle 1 is 91 degrees: .*-90 to 90"),
        ({"launch_angles": math.nan}, "launch angle 0 is nan"),
        ({"launch_angles": []}, "launch_angles has the shape"),
        ({"points": 1}, "points is 1: it must be 0"),
        ({"seabed_depth": 9000.0}, "seabed depth 9000 m is outside the profile"),
        ({"max_seabed_bounces": -1}, "max_seabed_bounces is -1"),
    ],
)
def test_impossible_arguments_are_told_one_by_one(change, message):
    arguments = {"source_depth": 100.0, "launch_angles": 3.0, "max_range": 1000.0} | change
    with pytest.raises(InputError, match=message):
        trace_fan(munk(51), **arguments)
