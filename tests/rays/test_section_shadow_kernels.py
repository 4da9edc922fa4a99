"""What is filled in between neighbouring rays, on rays laid out by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.rays import _kernels_section_shadow as kernels
from ocean_sound.rays._kernels_section_shadow import LIMIT, SEABED, SURFACE, UNKNOWN

pytestmark = pytest.mark.kernels

TARGETS = np.arange(1.0, 7.0) * 100.0
GRID = np.arange(0.0, 101.0, 10.0)
BOTTOMS = np.full(6, 100.0)
CELL, MOST = 1.0, 100.0


@settings(max_examples=60)
@given(*[st.floats(-50.0, 50.0).map(lambda value: round(value, 3))] * 4)
def test_the_overshoot_of_a_cubic_is_that_of_its_values(a, b, slope_a, slope_b):
    t = np.linspace(0.0, 1.0, 4001)
    rise = b - a
    cubic = a + slope_a * t + (3 * rise - 2 * slope_a - slope_b) * t**2 + (slope_a + slope_b - 2 * rise) * t**3
    expected = max(cubic.max() - max(a, b), min(a, b) - cubic.min(), 0.0)
    assert kernels.overshoot(a, b, slope_a, slope_b) == pytest.approx(expected, abs=1e-4)


def bundle(depth, until, why, *, width=0.01, slope=0.0):
    """Rays a width apart, each at a depth for all ranges; until and why by class."""
    depth = np.repeat(np.asarray(depth, dtype=float)[:, None], TARGETS.size, axis=1)
    rays = depth.shape[0]
    return {
        "angles": np.arange(rays) * width,
        "depth": depth,
        "slope": np.full(depth.shape, slope),
        "bounces": np.zeros((2, rays, TARGETS.size), dtype=np.int32),
        "until": np.array(until, dtype=np.int64),
        "why": np.array(why, dtype=np.int64),
    }


def lit(rays):
    change = np.zeros((3, TARGETS.size, GRID.size + 1), dtype=np.int64)
    kernels.fill(rays["angles"], rays["depth"], rays["bounces"], rays["until"], rays["why"], TARGETS, BOTTOMS, GRID,
                 CELL, MOST, change)  # fmt: skip
    return np.cumsum(change, axis=2)[:, :, :-1] > 0


def flagged(rays, finest=1e-6):
    flags = np.zeros(rays["angles"].size - 1, dtype=bool)
    kernels.judge(np.arange(flags.size), rays["angles"], rays["depth"], rays["slope"], rays["until"], rays["why"],
                  TARGETS, CELL, MOST, finest, flags)  # fmt: skip
    return flags.tolist()


ALL, NONE = [[6, 6]] * 3, [[UNKNOWN, UNKNOWN]] * 3


def test_between_two_rays_all_is_reached_and_beyond_the_steepest_ones_too():
    found = lit(bundle([30.0, 60.0], ALL, NONE))
    assert found.all()  # between them, above the first and below the last
    assert flagged(bundle([30.0, 60.0], ALL, NONE)) == [False]
    # four rays of which the outer ones end at once: nothing is reached but between the inner ones
    until, why = [[0, 6, 6, 0]] * 3, [[LIMIT, UNKNOWN, UNKNOWN, LIMIT]] * 3
    found = lit(bundle([0.0, 30.0, 60.0, 100.0], until, why))
    assert np.array_equal(found, np.broadcast_to((GRID >= 30.0) & (GRID <= 60.0), found.shape))
    assert flagged(bundle([0.0, 30.0, 60.0, 100.0], until, why)) == [False, False, False]


def test_a_ray_that_has_just_touched_leaves_all_reached_up_to_the_boundary():
    # the lower of the inner rays meets the seabed after 3 ranges, its neighbour after 4
    until, why = [[0, 4, 3, 0]] * 3, [[LIMIT, SEABED, SEABED, LIMIT]] * 3
    found = lit(bundle([0.0, 30.0, 60.0, 100.0], until, why))
    assert np.array_equal(found[0, 2], (GRID >= 30.0) & (GRID <= 60.0))
    assert np.array_equal(found[0, 3], GRID >= 30.0)
    assert not found[0, 4].any()
    # the same at the surface
    found = lit(bundle([0.0, 30.0, 60.0, 100.0], until, [[LIMIT, SURFACE, SURFACE, LIMIT]] * 3))
    assert np.array_equal(found[0, 3], GRID <= 30.0)


def test_where_one_neighbour_ends_much_sooner_a_ray_in_between_is_needed():
    until, why = [[6, 1]] * 3, [[UNKNOWN, SEABED]] * 3
    assert flagged(bundle([30.0, 60.0], until, why)) == [True]
    assert flagged(bundle([30.0, 60.0], until, why, width=1e-7)) == [False]  # too near already
    # and nothing is taken to be reached beyond the touch
    rays = bundle([0.0, 30.0, 60.0, 100.0], [[0, 6, 1, 0]] * 3, [[LIMIT, UNKNOWN, SEABED, LIMIT]] * 3)
    assert not lit(rays)[0, 2].any()


def test_rays_that_part_beyond_measure_leave_a_gap_unless_they_met_the_seabed():
    rays = bundle([0.0, 30.0, 60.0, 100.0], [[0, 6, 6, 0]] * 3, [[LIMIT, UNKNOWN, UNKNOWN, LIMIT]] * 3, width=1e-5)
    assert flagged(rays)[1]
    found = lit(rays)
    # 30 m over 1e-5 rad is 30 to 5 thousand times as wide as straight rays at 100 to 600 m
    assert not found.any()
    rays["until"][0:2] = 0  # only by the seabed
    assert lit(rays)[2].any(axis=0).tolist() == ((GRID >= 30.0) & (GRID <= 60.0)).tolist()


def test_a_fold_between_two_rays_needs_one_in_between():
    assert flagged(bundle([30.0, 30.0], ALL, NONE, slope=1000.0)) == [True]  # by 0.96 m, up and down again
    assert flagged(bundle([30.0, 30.0], ALL, NONE, slope=500.0)) == [False]  # by less than half of the detail wanted


def test_a_bounce_between_neighbours_reaches_the_boundary_itself():
    rays = bundle([0.0, 30.0, 60.0, 100.0], [[0, 6, 6, 0]] * 3, [[LIMIT, UNKNOWN, UNKNOWN, LIMIT]] * 3)
    rays["bounces"][0, 1, 2:] = 1  # the upper ray has bounced from range 2 on, its neighbour from 3 on
    rays["bounces"][0, 2, 3:] = 1
    assert lit(rays)[0, :, 0].tolist() == [False, False, True, False, False, False]
    rays["bounces"][0, 2, :] = 0  # the neighbour never does: the last such ray is tangent
    assert not lit(rays)[0, 2, 0]
    rays["bounces"][1] = rays["bounces"][0]
    rays["bounces"][0] = 0
    rays["bounces"][1, 2, 3:] = 1
    assert lit(rays)[0, 2, -1]
