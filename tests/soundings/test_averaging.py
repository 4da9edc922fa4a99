"""Averages over bins and running means: exact integrals, and a shift that is measured."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import Cast
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import bin_levels, largest_shift, smooth

DEPTH = np.array([0.0, 3.0, 4.0, 17.0, 40.0, 41.0, 100.0])
WATER = Profile(DEPTH, [1500.0, 1502.0, 1490.0, 1489.0, 1485.0, 1486.0, 1487.5], np.full(7, 0.2), id="K")


@given(st.floats(0.5, 150.0))
def test_a_bin_has_the_mean_speed_of_its_depths(thickness):
    binned = bin_levels(WATER, thickness).profile
    edges = np.unique(np.minimum(np.append(np.arange(0.0, 100.0, thickness), 100.0), 100.0))
    assert binned.depth[1:-1] == pytest.approx(0.5 * (edges[1:] + edges[:-1]))
    means = [WATER.mean_speed(top, bottom) for top, bottom in pairwise(edges)]
    assert binned.speed[1:-1] == pytest.approx(means, abs=1e-8)
    assert binned.speed[[0, -1]].tolist() == [1500.0, 1487.5]


@given(st.floats(0.1, 300.0))
def test_smoothing_takes_the_mean_around_each_level(scale):
    smoothed = smooth(WATER, scale).profile
    half = np.minimum(0.5 * scale, np.minimum(DEPTH, 100.0 - DEPTH))
    means = [WATER.mean_speed(z - h, z + h) for z, h in zip(DEPTH, half, strict=True)]
    assert smoothed.speed == pytest.approx(means, abs=1e-9)
    assert (smoothed.depth == DEPTH).all()


@pytest.mark.parametrize("work", [bin_levels, smooth])
def test_straight_lines_stay_and_the_shift_is_that_of_the_exact_measure(work):
    line = Profile([0.0, 7.0, 100.0], [1500.0, 1500.7, 1510.0])
    done = work(line, 20.0)
    assert done.profile.speed == pytest.approx(line.at(done.profile.depth), abs=1e-9)
    assert done.shift.distance < 1e-8
    rough = work(WATER, 20.0, max_angle=50.0, transducer_depth=2.0)
    assert rough.shift == largest_shift(WATER, rough.profile, max_angle=50.0, transducer_depth=2.0)
    assert rough.shift.distance > 0.001
    assert (rough.profile.id, rough.profile.notes[-1].split(" ")[0]) == (
        "K",
        work(WATER, 1.0).profile.notes[-1].split()[0],
    )
    assert rough.profile.uncertainty == pytest.approx(0.2)


@pytest.mark.parametrize("work", [bin_levels, smooth])
def test_casts_too_and_refusals(work):
    values = {"depth": [0.0, 10.0, 20.0], "temperature": [12.0, 11.0, 9.0], "salinity": [35.0, 35.0, 35.0]}
    cast = Cast(id="A", values=values)
    assert work(cast, 5.0).profile.speed == pytest.approx(work(Profile.from_cast(cast), 5.0).profile.speed)
    with pytest.raises(InputError, match="is 0 m: a finite number above 0 would be right"):
        work(WATER, 0.0)
