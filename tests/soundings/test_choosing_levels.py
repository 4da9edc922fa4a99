"""The choice of levels against trying all of them, and the fit of speeds against a linear program."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog

from ocean_sound.profile import Profile
from ocean_sound.soundings import _kernels_thin
from ocean_sound.soundings.fitting import dispensable, fitted, rounded_in_turn
from ocean_sound.soundings.thinning import _running

pytestmark = pytest.mark.kernels


def strayed(depth, speed, weight, kept, speeds):
    """The weighted integral of kept less true speed at each level, by summing layer by layer."""
    difference = np.interp(depth, depth[kept], speeds) - speed
    return np.concatenate(([0.0], np.cumsum(weight * 0.5 * (difference[1:] + difference[:-1]))))


def weights(depth, speed, angle=65.0):
    """sec²(angle)/c of each layer times its thickness."""
    mean = 0.5 * (speed[1:] + speed[:-1])
    sine = np.sin(np.radians(angle)) * mean / speed[0]
    return np.diff(depth) / (mean * (1.0 - sine**2))


def chosen(depth, speed, limit, bins=201):
    count, error = np.empty((depth.size, bins), dtype=np.int64), np.empty((depth.size, bins))
    level, bin_ = np.empty_like(count), np.empty_like(count)
    running = _running(Profile(depth, speed), depth, 65.0)
    at = _kernels_thin.fewest(depth, speed, running, limit, count, error, level, bin_)
    kept = [depth.size - 1]
    while kept[-1] > 0:
        before, at = level[kept[-1], at], bin_[kept[-1], at]
        kept.append(before)
    return np.array(kept[::-1])


@settings(max_examples=30)
@given(st.lists(st.floats(1480.0, 1520.0), min_size=2, max_size=9), st.sampled_from([0.005, 0.05, 0.3]))
def test_the_fewest_levels_against_trying_all(speeds, limit):
    speed = np.array(speeds)
    depth = np.linspace(0.0, 40.0, speed.size)
    weight = weights(depth, speed)
    kept = chosen(depth, speed, limit)
    assert np.abs(strayed(depth, speed, weight, kept, speed[kept])).max() <= limit * (1.0 + 1e-9)
    inner = range(1, depth.size - 1)
    fewest = next(
        size + 2
        for size in range(depth.size - 1)
        for some in combinations(inner, size)
        if np.abs(strayed(depth, speed, weight, [0, *some, depth.size - 1], speed[[0, *some, -1]])).max() <= limit
    )
    assert kept.size == fewest


def wavy():
    depth = np.linspace(0.0, 300.0, 121)
    return depth, 1500.0 - 8.0 * np.tanh((depth - 60.0) / 25.0) + 0.3 * np.sin(depth / 7.0)


@pytest.mark.parametrize("levels", [3, 6, 11])
def test_the_fit_against_a_linear_program(levels):
    depth, speed = wavy()
    kept = np.linspace(0, depth.size - 1, levels).round().astype(np.int64)
    weight = weights(depth, speed)
    fit = fitted(depth, speed, _running(Profile(depth, speed), depth, 65.0), kept)
    error = np.abs(strayed(depth, speed, weight, kept, fit.speed)).max()
    assert fit.error == pytest.approx(error, rel=1e-9)
    assert fit.speed[0] == speed[0]
    # Least t with |error| <= t at all levels; the error is linear in the speeds at the kept levels.
    matrix = np.array([strayed(depth, 0.0 * speed, weight, kept, row) for row in np.eye(levels)]).T[:, 1:]
    start = strayed(depth, speed, weight, kept, np.concatenate(([speed[0]], np.zeros(levels - 1))))
    ones = np.ones((depth.size, 1))
    best = linprog(
        np.append(np.zeros(levels - 1), 1.0),
        A_ub=np.block([[matrix, -ones], [-matrix, -ones]]),
        b_ub=np.concatenate((-start, start)),
        bounds=[(None, None)] * levels,
    )
    assert best.fun * (1.0 - 1e-6) <= error <= best.fun * 1.5
    assert error < np.abs(strayed(depth, speed, weight, kept, speed[kept])).max()


def test_the_most_dispensable_level_is_the_one_whose_loss_costs_least():
    depth, speed = wavy()
    running = _running(Profile(depth, speed), depth, 65.0)
    kept = np.array([0, 10, 20, 21, 40, 60, 90, 120])
    weight = weights(depth, speed)

    def squares(rest):
        matrix = np.array([strayed(depth, 0.0 * speed, weight, rest, row) for row in np.eye(rest.size)]).T
        start = strayed(depth, speed, weight, rest, np.append(speed[0], np.zeros(rest.size - 1)))
        return np.linalg.lstsq(matrix[:, 1:], -start, rcond=None)[1][0]

    costs = [squares(np.delete(kept, level)) for level in range(1, kept.size - 1)]
    assert dispensable(depth, speed, running, kept)[0] == 1 + int(np.argmin(costs))


@given(st.integers(2, 60), st.sampled_from([0, 1, 2]))
def test_rounding_in_turn_pays_its_debts(size, decimals):
    rng = np.random.default_rng(size)
    speed, weight = rng.uniform(1480.0, 1520.0, size), rng.uniform(0.5, 2.0, size)
    done = rounded_in_turn(speed, weight, lambda values: np.round(values, decimals))
    assert (done == np.round(done, decimals)).all()
    assert done[0] == np.round(speed[0], decimals)
    unit = 10.0**-decimals
    assert np.abs(np.cumsum((done - speed) * weight)).max() <= 2.0 * unit
    assert np.abs(done - speed).max() <= 2.0 * unit
