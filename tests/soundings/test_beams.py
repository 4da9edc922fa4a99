"""Beams: against arithmetic of 50 digits, an ODE integrator, closed forms, and invariants."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings.beams import BAD, BEYOND, HIT, TURNED

pytestmark = pytest.mark.kernels

DEPTH = np.array([0.0, 12.0, 12.5, 60.0, 400.0, 3000.0])
SPEED = np.array([1502.0, 1502.0, 1481.0, 1480.0, 1487.5, 1530.0])
WATER = Profile(DEPTH, SPEED)


def exact(depth, speed, angle, time, source=0.0):
    """Depth and distance across by 50 digits: in a layer artanh k falls by g t, and across is (k1 - k2)/(p g)."""
    with mpmath.workdps(50):
        z, c = [mpmath.mpf(float(value)) for value in depth], [mpmath.mpf(float(value)) for value in speed]
        layer = max(j for j in range(len(z) - 1) if z[j] <= source)
        at, left, across = mpmath.mpf(float(source)), mpmath.mpf(float(time)), mpmath.mpf(0)
        here = c[layer] + (c[layer + 1] - c[layer]) / (z[layer + 1] - z[layer]) * (at - z[layer])
        p = mpmath.sin(mpmath.radians(mpmath.mpf(float(angle)))) / here
        while True:
            g = (c[layer + 1] - c[layer]) / (z[layer + 1] - z[layer])
            k1, u2 = mpmath.sqrt(1 - (p * here) ** 2), p * c[layer + 1]
            k2 = mpmath.sqrt(1 - u2**2) if u2 < 1 else mpmath.mpf(0)
            through = (z[layer + 1] - at) / (here * k1) if g == 0 else mpmath.log(
                c[layer + 1] / here * (1 + k1) / (1 + k2)) / g  # fmt: skip
            if through >= left:
                break
            across += (z[layer + 1] - at) * u2 / k1 if g == 0 else _across(p, g, k1, k2)
            left -= through
            layer, at, here = layer + 1, z[layer + 1], c[layer + 1]
        if g == 0:
            return float(at + here * k1 * left), float(across + here * left * p * here)
        if p == 0:
            return float(at + here * mpmath.expm1(g * left) / g), 0.0
        k2 = mpmath.tanh(mpmath.atanh(k1) - g * left)
        below = (mpmath.sqrt(1 - k2**2) / p - here) / g
        return float(at + below), float(across + _across(p, g, k1, k2))


def _across(p, g, k1, k2):
    return (k1 - k2) / (p * g) if p else mpmath.mpf(0)


@pytest.mark.parametrize("angle", [0.0, 1e-6, 20.0, 45.0, 65.0, 78.0])
@pytest.mark.parametrize("time", [0.0, 0.004, 0.0081, 0.3, 1.2])
def test_against_fifty_digits(angle, time):
    found = beam_positions(WATER, angle, time)
    depth, across = exact(DEPTH, SPEED, angle, time)
    assert found.status == HIT
    assert found.depth == pytest.approx(depth, abs=2e-9)
    assert found.across == pytest.approx(across, abs=2e-9)


@pytest.mark.parametrize("gradient", [1e-12, -1e-12, 1e-7, 0.017, -2.0])
@pytest.mark.parametrize("angle", [0.0, 60.0])
def test_layers_of_any_gradient(gradient, angle):
    depth, speed = np.array([0.0, 100.0]), np.array([1500.0, 1500.0 + 100.0 * gradient])
    found = beam_positions(Profile(depth, speed), angle, 0.03, transducer_depth=7.0)
    assert (found.depth, found.across) == pytest.approx(exact(depth, speed, angle, 0.03, source=7.0), abs=1e-10)


def test_against_an_integrator_restarted_at_every_level():
    for angle in (10.0, 50.0, 70.0):
        state, begin, p = (
            np.array([0.0, 0.0, math.cos(math.radians(angle))]),
            0.0,
            math.sin(math.radians(angle)) / SPEED[0],
        )
        for top, base, c_top, c_base in zip(DEPTH, DEPTH[1:], SPEED, SPEED[1:], strict=False):
            g = (c_base - c_top) / (base - top)

            def slope(_, y, p=p, g=g, c_top=c_top, top=top):
                c = c_top + g * (y[1] - top)
                return [p * c * c, c * y[2], -g * (p * c) ** 2]  # dx/dt = c u, dz/dt = c k, dk/dt = -g u²

            def leaves(_, y, base=base):
                return y[1] - base

            leaves.terminal = True
            run = solve_ivp(slope, (begin, 10.0), state, method="DOP853", rtol=1e-12, atol=1e-13, events=leaves)
            state, begin = run.y[:, -1], run.t[-1]
            found = beam_positions(WATER, angle, begin * (1.0 - 1e-13))
            assert found.depth == pytest.approx(base, abs=1e-7)
            assert found.across == pytest.approx(state[0], abs=1e-7)


def test_a_beam_turns_where_the_closed_form_says():
    # From 70 degrees in a gradient of 0.5 /s: it turns after artanh(cos 70)/g, at depth c0 (1/sin 70 - 1)/g.
    water = Profile([0.0, 500.0], [1500.0, 1750.0])
    k, turns = math.cos(math.radians(70.0)), math.atanh(math.cos(math.radians(70.0))) / 0.5
    before, after = beam_positions(water, 70.0, turns * (1 - 1e-9)), beam_positions(water, 70.0, turns * (1 + 1e-9))
    assert before.depth == pytest.approx(1500.0 * (1.0 / math.sqrt(1 - k * k) - 1.0) / 0.5, abs=1e-6)
    assert (before.status, after.status) == (HIT, TURNED)
    assert np.isnan(after.depth)
    assert beam_times(water, 70.0, 300.0).status == TURNED


def test_what_becomes_of_beams():
    found = beam_positions(WATER, [0.0, 90.0, np.nan, 30.0, 30.0], [10.0, 0.1, 0.1, -0.1, np.inf])
    assert found.status.tolist() == [BEYOND, BAD, BAD, BAD, BAD]
    assert np.isnan(found.depth).all()
    times = beam_times(WATER, [0.0, 0.0, 95.0, 20.0], [3000.1, -1.0, 10.0, 3000.0])
    assert times.status.tolist() == [BEYOND, BAD, BAD, HIT]
    assert np.isnan(times.time[:3]).all()


def test_a_flat_array_keeps_sine_over_the_speed_it_was_steered_with():
    angle = math.degrees(math.asin(math.sin(math.radians(50.0)) * SPEED[0] / 1510.0))
    steered, as_it_is = beam_positions(WATER, 50.0, 0.5, surface_speed=1510.0), beam_positions(WATER, angle, 0.5)
    assert steered.depth == pytest.approx(as_it_is.depth, abs=1e-9)
    assert steered.across == pytest.approx(as_it_is.across, abs=1e-9)
    assert beam_positions(WATER, 75.0, 0.1, surface_speed=1400.0).status == BAD


@given(angle=st.floats(-75, 75), depth=st.floats(5.5, 2999.0))
def test_there_and_back_and_the_mirror(angle, depth):
    there = beam_times(WATER, angle, depth, transducer_depth=5.0)
    back = beam_positions(WATER, angle, there.time, transducer_depth=5.0)
    assert back.depth == pytest.approx(depth, abs=1e-8)
    assert back.across == pytest.approx(float(there.across), abs=1e-8)
    mirrored = beam_times(WATER, -angle, depth, transducer_depth=5.0)
    assert (mirrored.time, mirrored.across) == (there.time, -there.across)


@given(st.floats(1.0, 2999.0), st.floats(0.0, 70.0))
def test_splitting_a_layer_changes_nothing(at, angle):
    depth = np.unique([*DEPTH, at])
    split = Profile(depth, WATER.at(depth))
    whole, parted = (beam_positions(water, angle, 0.9) for water in (WATER, split))
    assert whole.depth == pytest.approx(parted.depth, abs=1e-8)
    assert whole.across == pytest.approx(parted.across, abs=1e-8)


def test_shapes_and_refusals():
    found = beam_positions(WATER, np.zeros((3, 1)), np.array([0.1, 0.2]))
    assert found.depth.shape == found.across.shape == found.status.shape == (3, 2)
    with pytest.raises(InputError, match="do not broadcast: angles \\(2,\\), times \\(3,\\)"):
        beam_positions(WATER, [0, 1], [0.1, 0.2, 0.3])
    with pytest.raises(InputError, match="transducer depth is 3000 m: it must be 0 or more, and above"):
        beam_positions(WATER, 0, 0.1, transducer_depth=3000.0)
