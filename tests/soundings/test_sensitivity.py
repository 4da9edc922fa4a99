"""Derivatives of end points, and the table of variances: against many digits, closed forms, drawn errors."""

from __future__ import annotations

import math
import sys
from pathlib import Path

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.casts import read_blocks
from ocean_sound.demo.survey import synthetic_survey
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.profile.speeds import speeds_of_block
from ocean_sound.soundings import _kernels_sensitivity as kernels
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings.changing import water_change
from ocean_sound.soundings.radius import TVU_FACTOR, thu_95_from_covariance
from ocean_sound.soundings.sensitivity import FLOOR, NO_CHANGE, NO_UNCERTAINTY, TOLERANCE, beam_moves, path_uncertainty

sys.path.insert(0, str(Path(__file__).parent))
from test_beam_table import waters

pytestmark = pytest.mark.kernels

DEPTH = np.array([0.0, 12.0, 12.5, 60.0, 400.0, 1000.0])
SPEED = np.array([1502.0, 1502.0, 1481.0, 1480.0, 1487.5, 1499.0])
STEP = mpmath.mpf(10) ** -20


def marched(depth, speed, p, time, source):
    """Where a beam of ray parameter p is after a time; speeds may be mpmath numbers."""
    z, c = [mpmath.mpf(float(value)) for value in depth], [mpmath.mpf(value) for value in speed]
    layer = max(j for j in range(len(z) - 1) if z[j] <= source)
    at, left, across = mpmath.mpf(float(source)), mpmath.mpf(float(time)), mpmath.mpf(0)
    while True:
        g = (c[layer + 1] - c[layer]) / (z[layer + 1] - z[layer])
        here, there = c[layer] + g * (at - z[layer]), c[layer + 1]
        k1, k2 = mpmath.sqrt(1 - (p * here) ** 2), mpmath.sqrt(1 - (p * there) ** 2)
        flat = abs(g) < mpmath.mpf(10) ** -50
        through = (z[layer + 1] - at) / (here * k1) if flat else mpmath.log(there / here * (1 + k1) / (1 + k2)) / g
        if through >= left or layer == len(z) - 2:
            break
        across += (z[layer + 1] - at) * p * here / k1 if flat else p * (there - here) * (there + here) / (g * (k1 + k2))
        left, layer, at = left - through, layer + 1, z[layer + 1]
    if flat:
        return at + here * k1 * left, across + here * left * p * here
    end = 2 / (mpmath.exp(g * left) * (1 - k1) / here + mpmath.exp(-g * left) * (1 + k1) / here)
    k2 = mpmath.tanh(mpmath.atanh(k1) - g * left)
    return at + (end - here) / g, across + p * (end - here) * (end + here) / (g * (k1 + k2))


def differences(depth, speed, p, time, source):
    """Derivatives of depth and distance across with the speed at each level, and with p, by differences."""
    with mpmath.workdps(90):  # 90 digits leave 50 of the differences
        p, found = mpmath.mpf(p), []
        for j in range(len(depth) + 1):
            ends = []
            for step in (STEP, -STEP):
                moved = [mpmath.mpf(float(value)) + (step if i == j else 0) for i, value in enumerate(speed)]
                by_p = p + (step if j == len(depth) else 0)
                ends.append(marched(depth, moved, by_p, time, source))
            found.append([(a - b) / (2 * STEP) for a, b in zip(*ends, strict=True)])
        return np.array(found, dtype=float).T


def check_moves(depth, speed, sine, reach, source):
    water = Profile(depth, speed)
    there = beam_times(water, math.degrees(math.asin(sine)), reach, transducer_depth=source)
    if there.status != 0:
        return
    moves = beam_moves(water, sine, reach, transducer_depth=source)
    z, x = differences(depth, speed, sine / float(water.at(source)), float(there.time), source)
    whole = np.hypot(z[:-1], x[:-1]).max()
    np.testing.assert_allclose(moves.depth[0], z[:-1], rtol=1e-8, atol=1e-10 * whole)
    np.testing.assert_allclose(moves.across[0], x[:-1], rtol=1e-8, atol=1e-10 * whole)
    whole = math.hypot(z[-1], x[-1])
    assert moves.depth_by_slowness[0] == pytest.approx(z[-1], rel=1e-8, abs=1e-10 * whole)
    assert moves.across_by_slowness[0] == pytest.approx(x[-1], rel=1e-8)


@pytest.mark.parametrize("sine", [0.0, 1e-7, 0.3, -0.7, 0.97])
@pytest.mark.parametrize(("source", "reach"), [(0.0, 900.0), (5.0, 12.2), (12.3, 12.45), (3.0, 4.0), (60.0, 400.0)])
def test_against_differences_at_fifty_digits(sine, source, reach):
    check_moves(DEPTH, SPEED, sine, reach, source)


@given(
    steps=st.lists(st.floats(0.1, 300.0), min_size=2, max_size=6),
    speeds=st.lists(st.floats(1420.0, 1560.0), min_size=7, max_size=7),
    even=st.booleans(),
    sine=st.floats(-0.97, 0.97),
    places=st.tuples(st.floats(0.0, 0.9), st.floats(0.01, 1.0)),
)
@settings(max_examples=60)
def test_random_waters_against_differences(steps, speeds, even, sine, places):
    depth = np.concatenate(([0.0], np.cumsum(steps)))
    speed = np.full(depth.size, speeds[0]) if even else np.array(speeds[: depth.size])
    source = places[0] * depth[-1]
    check_moves(depth, speed, sine, source + places[1] * (depth[-1] - source), source)


@pytest.mark.parametrize("gradient", [0.0, 1e-13, -1e-9, 0.017])
def test_a_thick_layer_of_any_gradient(gradient):
    check_moves([0.0, 6000.0], [1500.0, 1500.0 + 6000.0 * gradient], 0.8, 5000.0, 10.0)


def test_the_series_meets_the_closed_form():
    for y in (0.0999999, 0.1000001, 0.3, 0.01):
        with mpmath.workdps(40):
            a = mpmath.mpf(y)
            exact = (1 / mpmath.sqrt(1 + a * a) - mpmath.asinh(a) / a) / (a * a)
        assert kernels.bend(y) == pytest.approx(float(exact), rel=1e-9)


@pytest.mark.parametrize("angle", [0.0, 20.0, 45.0, 65.0])
def test_a_wrong_layer_on_top_at_a_level_face(angle):
    """Derived for a level flat face: (1 - tan²) h e/c in depth, nothing at 45 degrees, and 2 tan h e/c across."""
    h, e, c = 8.0, 0.4, 1500.0
    water = Profile([0.0, h, h + 1e-9, 50.0], np.full(4, c))
    error = np.array([e, e, 0.0, 0.0])
    t = math.tan(math.radians(angle))
    moves = beam_moves(water, math.sin(math.radians(angle)), 50.0)
    assert moves.depth[0] @ error == pytest.approx((1.0 - t * t) * h * e / c, abs=1e-9)
    assert moves.across[0] @ error == pytest.approx(2.0 * t * h * e / c, abs=1e-9)


def test_one_speed_wrong_everywhere_by_array():
    """A kept angle: all lengths grow by e/c. A kept slowness: as above. A turned beam: it moves square to itself."""
    h, e, c = 90.0, 0.5, 1490.0
    doubt = path_uncertainty(Profile([10.0, 50.0, 200.0], np.full(3, c), np.full(3, e)), transducer_depth=10.0)
    for angle in (0.0, 30.0, -45.0, 70.0):
        sine, t = math.sin(math.radians(angle)), math.tan(math.radians(angle))
        kept = doubt.covariance(sine, h, slowness_per_speed=0.0)
        np.testing.assert_allclose(kept, _square((1 - t * t) * h * e / c, 2 * t * h * e / c), rtol=0.02, atol=1e-6)
        angled = doubt.covariance(sine, h, slowness_per_speed=-sine / c**2)
        np.testing.assert_allclose(angled, _square(h * e / c, t * h * e / c), rtol=0.01, atol=1e-9)
        steered = {"slowness_per_steering_speed": -sine / c**2, "steering_speed_uncertainty": 0.3}
        more = np.array(doubt.covariance(sine, h, slowness_per_speed=0.0, **steered)) - np.array(kept)
        turn = t * 0.3 / c
        np.testing.assert_allclose(more, _square(t * h * turn, -h * turn), rtol=0.01, atol=1e-9)


def _square(z, x):
    return z * z, z * x, x * x


def causes(water):
    """Invented shapes and noise for a profile."""
    levels = len(water)
    bend = np.gradient(water.speed, water.depth)
    shapes = {
        "equation": np.full(levels, 0.05),
        "temperature": 0.02 * (4.0 - 5.0 * water.depth / water.depth[-1]),
        "pressure": -0.3 * bend,
    }
    return Profile(water.depth, water.speed, shapes=shapes, noise=np.full(levels, 0.1), id="invented")


CHANGE = {"first": ([0.0, 50.0, 100.0], [3.0, -2.0, 0.5]), "second": ([20.0], [1.0])}


def exact_covariance(water, sine, below, source, by_speed, shapes, noise):
    """The slow way: derivatives with respect to all levels times all errors."""
    water = water.to_surface()
    moves = beam_moves(water, sine, source + below, transducer_depth=source)
    weight = np.array([np.interp(source, water.depth, row) for row in np.eye(len(water))])
    turned = by_speed[:, np.newaxis] * weight
    z = moves.depth + moves.depth_by_slowness[:, np.newaxis] * turned
    x = moves.across + moves.across_by_slowness[:, np.newaxis] * turned
    zz, zx, xx = z**2 @ noise**2, (z * x) @ noise**2, x**2 @ noise**2
    for shape in shapes:
        zz, zx, xx = zz + (z @ shape) ** 2, zx + (z @ shape) * (x @ shape), xx + (x @ shape) ** 2
    return zz, zx, xx


def largest_miss(found, exact):
    """As `path_uncertainty` states it; both must be unknown at the same places."""
    for a, b in zip(found, exact, strict=True):
        np.testing.assert_array_equal(np.isnan(a), np.isnan(b))
    least = FLOOR**2 * (exact[0] + exact[2])
    z, x = np.maximum(exact[0], least), np.maximum(exact[2], least)
    wrong = (abs(found[0] - exact[0]) / z, abs(found[2] - exact[2]) / x, abs(found[1] - exact[1]) / np.sqrt(z * x))
    return 0.5 * max(np.nanmax(each) for each in wrong)


@pytest.mark.long
@pytest.mark.parametrize("name", waters())
@pytest.mark.parametrize("changing", [False, True])
def test_the_table_is_within_two_per_cent(name, changing):
    water, source, count = causes(Profile(*waters()[name])), 3.0, 1200
    doubt = path_uncertainty(water, transducer_depth=source, change=CHANGE if changing else None)
    random = np.random.default_rng(4)
    sine = np.sin(np.radians(random.uniform(-75.0, 75.0, count)))
    below = random.uniform(0.0, water.depth[-1] - source, count)
    below[:200] *= 0.01
    kept = np.repeat([0.0, 1.0, np.nan], count // 3)
    by_speed = -sine / doubt.water.source_speed**2 * np.where(np.isnan(kept), random.uniform(0, 1, count), kept)
    change = 0.4 * changing
    found = doubt.covariance(sine, below, slowness_per_speed=by_speed, change=change)
    shapes = list(water.shapes.values())
    if changing:
        shapes += [math.sqrt(change) * np.interp(water.depth, *shape) for shape in CHANGE.values()]
    exact = exact_covariance(water, sine, below, source, by_speed, shapes, water.noise)
    assert largest_miss(found, exact) < TOLERANCE
    assert doubt.error < TOLERANCE
    assert doubt.nbytes < 4e6


@pytest.mark.long
def test_real_casts(real_data):
    """Some real Argo casts of each file, by their own uncertainty, as far as they know it."""
    random, seen = np.random.default_rng(8), 0
    for path in sorted((real_data / "argo").glob("*.nc"))[::4]:
        for block in read_blocks(path):
            columns = speeds_of_block(block)
            for index in range(0, len(block), 40):
                if columns.reasons[index]:
                    continue
                water, source = columns.profile(index).to_surface(), 3.3
                doubt = path_uncertainty(water, transducer_depth=source)
                below = random.uniform(0.0, doubt.known_to - source, 100)
                sine = np.sin(np.radians(random.uniform(-75.0, 75.0, below.size)))
                by_speed = -sine / doubt.water.source_speed**2 * random.uniform(0.0, 1.0, below.size)
                found = doubt.covariance(sine, below, slowness_per_speed=by_speed)
                shapes = [np.nan_to_num(shape) for shape in water.shapes.values()]
                exact = exact_covariance(water, sine, below, source, by_speed, shapes, np.nan_to_num(water.noise))
                assert largest_miss(found, exact) < TOLERANCE
                seen += 1
    assert seen > 5


def test_a_small_table_and_beams_beyond_it():
    water = causes(Profile(DEPTH, SPEED))
    doubt = path_uncertainty(water, transducer_depth=5.0, change=CHANGE, max_angle=60.0)
    sine = np.array([0.0, 0.2, -0.6, 0.86, 0.87, 0.3, -0.98])
    below = np.array([1.0, 80.0, 300.0, 990.0, 7.2, np.nextafter(doubt.table[2][3], 100.0), 0.3])
    shapes = [*water.shapes.values(), *(2.0 * np.interp(DEPTH, *shape) for shape in CHANGE.values())]
    for part in (0.0, 1.0, -3.0):
        by_speed = -part * sine / 1502.0**2
        found = doubt.covariance(sine, below, slowness_per_speed=by_speed, change=4.0)
        exact = exact_covariance(water, sine, below, 5.0, by_speed, shapes, water.noise)
        assert largest_miss(found, exact) < TOLERANCE
        np.testing.assert_allclose([column[-1] for column in found], [column[-1] for column in exact], rtol=1e-9)


def test_a_tilted_face_near_nadir():
    """There the ray parameter follows the speed however steep the beam: -sin(tilt)/(cos(angle - tilt) c²)."""
    water, angles = causes(Profile(DEPTH, SPEED)), np.array([-10.0, -1e-6, 0.0, 1e-3, 5.0, 29.0, 31.0, 70.0])
    sine, tilt = np.sin(np.radians(angles)), np.radians(40.0)
    by_speed = -np.sin(tilt) / np.cos(np.radians(angles) - tilt) / 1502.0**2
    below = np.full(sine.size, 333.0)
    found = path_uncertainty(water).covariance(sine, below, slowness_per_speed=by_speed)
    exact = exact_covariance(water, sine, below, 0.0, by_speed, water.shapes.values(), water.noise)
    assert largest_miss(found, exact) < TOLERANCE


def test_half_the_noise_in_twice_the_levels_is_not_alike_but_shapes_are():
    water = Profile(DEPTH, SPEED, shapes={"a": np.linspace(0.1, 0.3, 6), "b": np.linspace(-0.2, 0.2, 6)})
    more = np.unique(np.concatenate((DEPTH, np.linspace(0.0, 1000.0, 41))))
    sine, below = np.linspace(-0.9, 0.9, 7), 700.0
    one, split = (path_uncertainty(each).covariance(sine, below, slowness_per_speed=0.0) for each in (
        water, water.at_levels(more)))  # fmt: skip
    np.testing.assert_allclose(one, split, rtol=0.06, atol=1e-5)
    noisy, finer = (Profile(z, water.at(z), shapes={}, noise=np.full(z.size, 0.1)) for z in (DEPTH, more))
    coarse, fine = (path_uncertainty(each).covariance(0.5, below, slowness_per_speed=0.0)[0] for each in (noisy, finer))
    assert fine < 0.2 * coarse


@given(st.floats(0.0, 2.0 * math.pi), st.floats(-0.9, 0.9))
@settings(max_examples=20)
def test_mixing_independent_shapes_changes_nothing(turn, sine):
    a, b = np.linspace(0.1, 0.3, 6), np.array([-0.2, 0.1, 0.3, 0.0, 0.1, 0.2])
    mixed = {"a": math.cos(turn) * a + math.sin(turn) * b, "b": math.cos(turn) * b - math.sin(turn) * a}
    found = [
        path_uncertainty(Profile(DEPTH, SPEED, shapes=shapes), max_angle=5.0).covariance(
            sine, 600.0, slowness_per_speed=-sine / SPEED[0] ** 2
        )
        for shapes in ({"a": a, "b": b}, mixed)
    ]
    np.testing.assert_allclose(*found, rtol=0.05, atol=1e-6)


@pytest.mark.long
@pytest.mark.parametrize("kept", ["slowness", "angle"])
@pytest.mark.parametrize("angle", [0.0, -65.0])
def test_drawn_errors(kept, angle):
    """Errors drawn by shapes and noise, beams marched exactly: deviations within 5 %, intervals hold 95 %."""
    water, source, draws, depth = causes(Profile(DEPTH, SPEED)), 3.0, 3000, 380.0
    there = beam_times(water, angle, depth, transducer_depth=source)
    sine, c = math.sin(math.radians(angle)), SPEED[0]
    by_speed = 0.0 if kept == "slowness" else -sine / c**2
    zz, _, xx = path_uncertainty(water, transducer_depth=source).covariance(
        sine, depth - source, slowness_per_speed=by_speed
    )
    random = np.random.default_rng(11)
    errors = np.empty((2, draws))
    for n in range(draws):
        error = sum(random.normal() * shape for shape in water.shapes.values())
        error = error + water.noise * random.normal(size=len(water))
        true = Profile(water.depth, water.speed - error)
        steering = c if kept == "slowness" else None
        end = beam_positions(true, angle, there.time, transducer_depth=source, surface_speed=steering)
        errors[:, n] = depth - end.depth, there.across - end.across
    assert np.abs(errors.mean(axis=1)).max() < 0.1 * math.sqrt(zz + xx)
    assert errors[0].std() == pytest.approx(math.sqrt(zz), rel=0.05)
    assert 0.93 < np.mean(np.abs(errors[0]) < TVU_FACTOR * math.sqrt(zz)) < 0.97
    if angle:
        assert errors[1].std() == pytest.approx(math.sqrt(xx), rel=0.05)
        assert 0.93 < np.mean(np.abs(errors[1]) < thu_95_from_covariance(xx, 0.0)) < 0.97


def test_what_is_not_known_is_not_invented():
    bare = path_uncertainty(Profile(DEPTH, SPEED))
    assert bare.notes == (NO_UNCERTAINTY, NO_CHANGE)
    assert np.isnan(bare.covariance(0.3, [0.0, 10.0], slowness_per_speed=0.0)).all()
    partly = Profile(DEPTH, SPEED, shapes={"a": [0.1, 0.1, 0.1, 0.2, np.nan, 0.1]})
    doubt = path_uncertainty(partly, transducer_depth=2.0, change=CHANGE)
    assert doubt.notes == (
        "the profile does not know its uncertainty below 60 m, so that of a sounding is unknown there",
    )
    assert doubt.known_to == 60.0
    found = doubt.covariance(0.3, [57.9, 58.1, -0.1, np.nan], slowness_per_speed=0.0)
    np.testing.assert_array_equal(np.isnan(found), [[False, True, True, True]] * 3)
    top = path_uncertainty(Profile(DEPTH, SPEED, [np.nan, 0.1, 0.1, 0.1, 0.1, 0.1]), transducer_depth=2.0)
    assert "at the transducer" in top.notes[0]
    assert np.isnan(top.covariance(0.0, 1.0, slowness_per_speed=0.0)).all()


def test_impossible_beams_are_nan_and_others_are_not_touched():
    polar = causes(Profile([0.0, 50.0, 300.0, 400.0, 500.0], [1440.0, 1450.0, 1505.0, 1514.0, 1520.0]))
    doubt = path_uncertainty(polar)
    sine = np.array([0.96, 0.96, 0.5, 1.0, np.nan, 0.5, 0.5, 0.5])
    below = np.array([450.0, 100.0, 501.0, 10.0, 10.0, 10.0, 10.0, 10.0])
    by_speed = np.array([0.0, 0.0, 0.0, 0.0, 0.0, np.nan, 0.0, 0.0])
    change = np.array([0.0, 0.0, 0.0, 0.0, 0.0, 0.0, np.nan, 0.0])
    found = np.isnan(doubt.covariance(sine, below, slowness_per_speed=by_speed, change=change))
    assert found.tolist() == [[True, False, True, True, True, True, True, False]] * 3
    assert np.isnan(beam_moves(polar, [0.96, 1.0, 0.1], [450.0, 1.0, 501.0]).depth).all()


def test_the_sides_mirror_and_single_numbers_come_back_as_such():
    doubt = path_uncertainty(causes(Profile(DEPTH, SPEED)), change=CHANGE)
    options = {"steering_speed_uncertainty": 0.4, "change": 0.5}
    port, starboard = (
        doubt.covariance(s, 200.0, slowness_per_speed=-s / 1e7, slowness_per_steering_speed=-s / 1e7, **options)
        for s in (-0.8, 0.8)
    )
    assert (port[0], -port[1], port[2]) == starboard
    assert np.ndim(port[0]) == 0
    zero = doubt.covariance(0.5, 0.0, slowness_per_speed=0.0)
    assert zero == (0.0, 0.0, 0.0)


def test_nothing_wrong_gives_no_variance():
    sure = path_uncertainty(Profile(DEPTH, SPEED, np.zeros(6)))
    assert sure.covariance(0.5, 100.0, slowness_per_speed=0.0) == (0.0, 0.0, 0.0)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"max_angle": 90.0}, "max_angle is 90 degrees"),
        ({"transducer_depth": 1000.0}, "transducer depth is 1000 m"),
        ({"change": {"a": ([1.0, 0.0], [1.0, 1.0])}}, "change 'a': increasing depths"),
        ({"change": {"a": ([0.0, 1.0], [1.0, np.nan])}}, "change 'a': increasing depths"),
    ],
)
def test_impossible_requests(options, message):
    with pytest.raises(InputError, match=message):
        path_uncertainty(causes(Profile(DEPTH, SPEED)), **options)


@pytest.mark.parametrize("kept", ["slowness", "angle"])
@pytest.mark.parametrize("heave", [0.3, 1.0, 2.0])
def test_a_deeper_transducer_is_as_a_table_of_its_own(heave, kept):
    shapes = {"t": [0.5, 0.5, 0.2, 0.1, 0.1], "e": [0.07] * 5}
    water = Profile([0, 8, 14, 30, 80], [1512, 1511.5, 1497, 1492, 1493], shapes=shapes, noise=[0.05] * 5)
    change = {"surface": ([0.0, 12.0, 20.0], [1.0, 0.7, 0.0])}
    top, deeper = (path_uncertainty(water, transducer_depth=3.0 + h, change=change) for h in (0.0, heave))
    sine = np.sin(np.radians(np.linspace(-70.0, 70.0, 57)))
    ratio = water.at(3.0) / water.at(3.0 + heave)
    turned = -np.abs(sine) / water.at(3.0 + heave) ** 2
    more = {
        "slowness_per_speed": turned if kept == "angle" else 0.0, "change": 0.4,
        "slowness_per_steering_speed": turned, "steering_speed_uncertainty": 0.2,
    }  # fmt: skip
    for depth in (15.0, 33.0, 75.0):
        below = depth - 3.0 - heave
        found = top.covariance(sine * ratio, below, heave=heave, **more)
        exact = deeper.covariance(sine, below, **more)
        whole = np.sqrt(exact[0] + exact[2])
        for a, b in zip(found[::2], exact[::2], strict=True):
            miss = np.abs(np.sqrt(a) - np.sqrt(b)) / np.maximum(np.sqrt(b), 0.05 * whole)
            assert miss.max() < (0.02 if depth > 20.0 else 0.05)  # of two tables, each within 2 %
        # by the depth below the transducer alone, as if the water moved along, it would not do
        if heave > 0.5 and kept == "slowness":
            moved = top.covariance(sine, below, **more)[0]
            assert np.abs(np.sqrt(moved / exact[0]) - 1.0).max() > 0.02


def test_a_deeper_transducer_in_water_of_one_speed():
    water = Profile([0, 100], [1500, 1500], shapes={"e": [0.3, 0.3]})
    table = path_uncertainty(water, transducer_depth=2.0)
    sine = np.sin(np.radians([0.0, 20.0, 60.0]))
    zz, _, xx = table.covariance(sine, 40.0, slowness_per_speed=0.0, heave=5.0)
    tan = np.tan(np.radians([0.0, 20.0, 60.0]))
    np.testing.assert_allclose(np.sqrt(zz), np.abs(1.0 - tan**2) * 40.0 * 0.3 / 1500.0, rtol=2e-3)
    np.testing.assert_allclose(np.sqrt(xx), 2.0 * tan * 40.0 * 0.3 / 1500.0, rtol=2e-3, atol=1e-9)


def test_arguments_that_do_not_broadcast():
    with pytest.raises(InputError, match=r"sine \(2,\), depth \(3,\)"):
        beam_moves(Profile(DEPTH, SPEED), [0.0, 0.1], [1.0, 2.0, 3.0])
    with pytest.raises(InputError, match="do not broadcast"):
        path_uncertainty(causes(Profile(DEPTH, SPEED))).covariance([0.0, 0.1], [1.0, 2.0, 3.0], slowness_per_speed=0.0)


def test_a_change_that_cancels_at_a_depth_does_not_swell_the_table():
    """The change of this thermocline adds up to nothing some metres down, where its share of the error is nothing."""
    survey = synthetic_survey(kind="internal tide", pings=1, beams=1, cast_every=2.0)
    change = water_change(survey.profiles)
    plain, whole = (
        path_uncertainty(survey.profiles[0], transducer_depth=3.4, change=given) for given in (None, change)
    )
    assert len(change) >= 1
    assert whole.error < 0.02
    assert whole.nbytes < 6 * plain.nbytes
