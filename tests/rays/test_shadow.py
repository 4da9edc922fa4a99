"""Shadow zones against the geometry of circles and against fans of single rays."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays import find_shadow, shadow_zones, trace_fan

pytestmark = pytest.mark.kernels


def random_profile(seed, levels=9):
    rng = np.random.default_rng(seed)
    depth = np.concatenate(([0.0], np.cumsum(rng.uniform(10.0, 60.0, levels - 1))))
    return Profile(depth, 1500.0 + np.cumsum(rng.normal(0.0, 4.0, levels)))


def depths_at(water, source, angles, distance, **limits):
    fan = trace_fan(water, source_depth=source, launch_angles=angles, max_range=distance, **limits)
    return np.where(fan.status == 0, fan.depth, np.nan)


def in_shadow(shadow, name, depth, distance):
    rows = shadow.intervals[name]
    rows = rows[rows[:, 0] == depth]
    return bool(np.any((rows[:, 1] < distance) & (distance < rows[:, 2])))


def test_downward_refraction_casts_a_shadow_behind_the_ray_tangent_to_the_surface():
    """Rays are circles of radius c0/|g| about a centre at that depth: the tangent one touches the surface at
    sqrt(zs (2R - zs)) and has come down to z a further sqrt(z (2R - z)) on.
    """
    water = Profile([0.0, 200.0], [1530.0, 1500.0])
    radius, source = 1530.0 / 0.15, 40.0
    depths = np.array([0.0, 10.0, 75.0, 150.0])
    shadow = find_shadow(water, source_depth=source, max_range=5000.0, depths=depths)
    edge = np.sqrt(source * (2 * radius - source)) + np.sqrt(depths * (2 * radius - depths))
    for depth, expected in zip(depths, edge, strict=True):
        rows = shadow.intervals["no_bounce"][shadow.intervals["no_bounce"][:, 0] == depth]
        assert rows.shape == (1, 3)
        assert rows[0, 1] == pytest.approx(expected, abs=0.01)
        assert rows[0, 2] == 5000.0


def test_isovelocity_water_has_no_shadow_and_a_surface_source_has_the_direct_field():
    still = Profile([0.0, 100.0], [1500.0, 1500.0])
    shadow = find_shadow(still, source_depth=30.0, max_range=2000.0)
    assert shadow.summary() == {"no_bounce": 0.0, "surface_bounces": 0.0}


def test_a_surface_duct_traps_rays_and_leaves_a_gap_below_it():
    duct = Profile([0.0, 50.0, 300.0], [1500.0, 1505.0, 1480.0])
    shadow = find_shadow(duct, source_depth=10.0, max_range=20_000.0, depths=[25.0, 60.0, 150.0])
    # in the duct sound carries on with the surface's help, to any range; just below it there is a gap, then nothing
    assert not in_shadow(shadow, "surface_bounces", 25.0, 19_000.0)
    assert in_shadow(shadow, "surface_bounces", 60.0, 10_000.0)
    assert in_shadow(shadow, "no_bounce", 60.0, 10_000.0)


@pytest.mark.long
@pytest.mark.parametrize("limits", [("no_bounce", 0), ("surface_bounces", 10_000)], ids=lambda item: item[0])
@settings(max_examples=15, deadline=None)
@given(seed=st.integers(0, 10_000), part=st.floats(0.02, 0.98), distance=st.floats(300.0, 6000.0))
def test_no_ray_arrives_in_a_shadow(limits, seed, part, distance):
    name, surface = limits
    water = random_profile(seed)
    source = part * water.depth[-1]
    angles = np.linspace(-60.0, 60.0, 801)
    arrives = depths_at(water, source, angles, distance, max_surface_bounces=surface, max_seabed_bounces=0)
    arrives = np.unique(arrives[np.isfinite(arrives)])
    if arrives.size == 0:
        return
    shadow = find_shadow(water, source_depth=source, max_range=distance * 1.1, depths=arrives)
    # an edge at a fold lies between two rays of the fan, to second order in their step: allow 0.2 m of range
    inner = shadow.intervals[name]
    wrong = [
        depth for depth, start, end in inner if start + 0.2 < distance < end - 0.2 and depth in set(arrives.tolist())
    ]
    assert wrong == []


@pytest.mark.long
@settings(max_examples=15, deadline=None)
@given(seed=st.integers(0, 10_000), part=st.floats(0.02, 0.98))
def test_where_it_is_not_shadow_two_neighbouring_rays_pass_on_either_side(seed, part):
    water = random_profile(seed)
    source = part * water.depth[-1]
    depths = np.linspace(0.03, 0.97, 7) * water.depth[-1]
    distance = 2500.0
    shadow = find_shadow(water, source_depth=source, max_range=3000.0, depths=depths)
    # ranges change fastest near the rays that just touch a level of faster water: a dense fan there, a coarse one
    # elsewhere
    faster = water.speed[water.speed > water.at(source)]
    touching = np.degrees(np.arccos(water.at(source) / faster))
    near = (touching[:, None] + np.outer([-1.0, 1.0], np.logspace(-10, 0, 2000)).ravel()).ravel()
    angles = np.sort(np.concatenate((np.linspace(-89.9, 89.9, 20_001), near, -near)))
    arrives = depths_at(water, source, angles, distance, max_surface_bounces=0, max_seabed_bounces=0)
    for depth in depths:
        rows = shadow.intervals["no_bounce"][shadow.intervals["no_bounce"][:, 0] == depth]
        clear = all(not (start - 5.0 < distance < end + 5.0) for _, start, end in rows)
        if clear:
            above = arrives > depth
            known = np.isfinite(arrives)
            assert any(known[i] and known[j] and above[i] != above[j] for i, j in pairwise(range(arrives.size)))


@pytest.mark.long
def test_masks_and_intervals_say_the_same():
    water = random_profile(5)
    shadow = find_shadow(water, source_depth=20.0, max_range=8000.0)
    for name, mask in shadow.masks.items():
        for row, depth in zip(mask[::10], shadow.depth[::10], strict=True):
            assert row[:-1].tolist() == [in_shadow(shadow, name, depth, distance) for distance in shadow.range[:-1]]
        # allowing more paths never darkens anything
    assert not np.any(shadow.masks["surface_bounces"] & ~shadow.masks["no_bounce"])


@pytest.mark.long
def test_a_munk_profile_has_its_first_convergence_zone_where_its_cycle_says():
    """Rays of a shallow source come back to its depth after one cycle (the cycle lengths are checked elsewhere)."""
    depth = np.linspace(0.0, 5000.0, 501)
    eta = 2.0 * (depth - 1300.0) / 1300.0
    water = Profile(depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta))))
    shadow = find_shadow(water, source_depth=200.0, max_range=70_000.0, depths=[200.0])
    rows = shadow.intervals["no_bounce"]
    cycles = []
    for angle in np.linspace(0.5, 8.0, 16):
        fan = trace_fan(water, source_depth=200.0, launch_angles=angle, max_range=70_000.0, points=20_001)
        crossing = np.flatnonzero((fan.path_depth[0, 1:] < 200.0) & (fan.path_depth[0, :-1] >= 200.0))
        cycles.append(fan.path_range[0, crossing[0]])
    for start in cycles:
        assert not np.any((rows[:, 1] + 5.0 < start) & (start < rows[:, 2] - 5.0))
    assert in_shadow(shadow, "no_bounce", 200.0, min(cycles) - 3000.0)


def test_the_dataset_says_that_shadow_is_not_silence():
    zones = shadow_zones(random_profile(1), source_depth=20.0, max_range=3000.0, depths=[5.0, 50.0], ranges=[0.0, 10.0])
    assert "Shadow is not silence" in zones.attrs["comment"]
    assert zones.shadow_no_bounce.dims == ("depth", "range")
    assert set(np.unique(zones.interval_paths)) <= {0, 1}


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"max_range": 0.0}, "max_range is 0 m"),
        ({"depths": [5.0, 4.0]}, "depths must be a list of increasing"),
        ({"depths": [5.0, 1e6]}, "depths go from 5 to 1e.06 m: they must lie between 0 and"),
        ({"ranges": [-5.0, 4.0]}, "ranges go from -5"),
        ({"source_depth": math.nan}, "source depth nan m"),
    ],
)
def test_impossible_arguments_are_told(change, message):
    with pytest.raises(InputError, match=message):
        find_shadow(random_profile(1), **({"source_depth": 10.0, "max_range": 500.0} | change))
