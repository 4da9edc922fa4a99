"""Directions of beams and their way back: against rotations, closed forms, a general solver, and round trips."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import fsolve
from scipy.spatial.transform import Rotation

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings.beams import BAD, BEYOND, HIT, TURNED
from ocean_sound.soundings.directions import (
    ANGLES,
    DIRECTION_STATUSES,
    NO_ANGLE,
    NO_ATTITUDE,
    NO_DIRECTION,
    NO_SPEED,
    NOT_AT_FACE,
    NOT_DOWNWARD,
    USABLE,
    beam_angles,
    beam_directions,
)
from ocean_sound.soundings.geometry import NOMINAL_SPEEDS, recorded_time, seen_from_midpoint, taken_back

_spec = importlib.util.spec_from_file_location("random_beams", Path(__file__).with_name("random_beams.py"))
random_beams = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(random_beams)

WATERS = random_beams.synthetic()


def unit(across, along, angles="cones"):
    """Forward, starboard, down."""
    a, b = np.radians(across), np.radians(along)
    if angles == "cones":
        return np.array([np.sin(b), np.sin(a), np.sqrt(1 - np.sin(a) ** 2 - np.sin(b) ** 2)])
    # Turn the athwartship fan about the starboard axis: right-handed in forward, starboard, down lifts the bow.
    return Rotation.from_rotvec([0, b, 0]).apply([0.0, np.sin(a), np.cos(a)])


def faced(vector, ratio, roll, pitch):
    """By brute force: turn into the face's frame, scale what lies along the face, and turn back."""
    face = Rotation.from_euler("ZYX", [0.0, pitch, roll], degrees=True)  # heading, pitch, roll: intrinsic
    x, y, _ = ratio * face.inv().apply(vector)
    return face.apply([x, y, np.sqrt(1.0 - x * x - y * y)])


# Directions


@given(across=st.floats(-70, 70), along=st.floats(-15, 15))
def test_cones_and_tilted_fans(across, along):
    for angles in ANGLES:
        found = beam_directions(across, along, angles=angles)
        expected = unit(across, along, angles)
        assert (found.forward, found.starboard) == pytest.approx(tuple(expected[:2]), abs=1e-14)
        assert found.sine == pytest.approx(np.hypot(*expected[:2]), abs=1e-14)
        assert found.status == USABLE


def test_the_two_meanings_of_the_along_track_angle_differ():
    cone, fan = (beam_directions(60.0, 10.0, angles=angles) for angles in ANGLES)
    assert cone.forward == pytest.approx(np.sin(np.radians(10.0)))
    assert fan.forward == pytest.approx(0.5 * np.sin(np.radians(10.0)))  # cos 60 of it
    assert cone.starboard == fan.starboard


def test_azimuth_and_spread():
    found = beam_directions([0.0, 30.0, -30.0, 0.0, 20.0], [0.0, 0.0, 0.0, -5.0, 20.0])
    assert found.azimuth == pytest.approx([0.0, 90.0, -90.0, 180.0, 45.0])
    across, along = found.spread([0.0, 10.0, 10.0, 10.0, 10.0])
    assert across == pytest.approx([0.0, 10.0, -10.0, 0.0, np.sqrt(50.0)])
    assert along == pytest.approx([0.0, 0.0, 0.0, -10.0, np.sqrt(50.0)])


@given(
    across=st.floats(-60, 60),
    along=st.floats(-10, 10),
    ratio=st.floats(0.98, 1.02),
    roll=st.floats(-45, 45),
    pitch=st.floats(-12, 12),
)
def test_a_tilted_face_against_rotations(across, along, ratio, roll, pitch):
    at_face = Rotation.from_euler("ZYX", [0.0, pitch, roll], degrees=True).inv().apply(unit(across, along))
    expected = faced(unit(across, along), ratio, roll, pitch) if at_face[2] > 0.3 else None
    given_to = {"speed": 1500.0 * ratio, "surface_speed": 1500.0, "face_roll": roll, "face_pitch": pitch}
    found = beam_directions(across, along, **given_to)
    if expected is None or expected[2] <= 0:
        return
    assert found.status == USABLE
    assert (found.forward, found.starboard) == pytest.approx(tuple(expected[:2]), abs=1e-12)
    for angles in ANGLES:
        there = beam_directions(across, along, angles=angles, **given_to)
        if there.status == USABLE:
            assert beam_angles(there, angles=angles, **given_to) == pytest.approx((across, along), abs=1e-8)


def test_which_beams_a_tilted_face_can_have_against_rotations():
    rng = np.random.default_rng(2)
    seen = set()
    for across, along, roll, pitch, ratio in zip(
        rng.uniform(-85, 85, 500), rng.uniform(-85, 85, 500), rng.uniform(-45, 45, 500), rng.uniform(-45, 45, 500),
        rng.uniform(0.8, 1.2, 500), strict=True,
    ):  # fmt: skip
        found = beam_directions(
            across, along, speed=1500.0 * ratio, surface_speed=1500.0, face_roll=roll, face_pitch=pitch
        )
        if np.sin(np.radians(across)) ** 2 + np.sin(np.radians(along)) ** 2 >= 1.0:
            expected = NO_DIRECTION
        else:
            a, b, n = Rotation.from_euler("ZYX", [0.0, pitch, roll], degrees=True).inv().apply(unit(across, along))
            if n <= 0 or ratio * np.hypot(a, b) >= 1:
                expected = NOT_AT_FACE
            else:
                expected = USABLE if faced(unit(across, along), ratio, roll, pitch)[2] > 0 else NOT_DOWNWARD
        assert found.status == expected
        seen.add(expected)
    assert seen == {USABLE, NO_DIRECTION, NOT_AT_FACE, NOT_DOWNWARD}


def test_a_level_face_is_a_face_of_no_tilt():
    across = np.linspace(-65, 65, 27)
    steered = {"speed": 1510.0, "surface_speed": 1490.0}
    level, tilted = (
        beam_directions(across, 4.0, **steered),
        beam_directions(across, 4.0, face_roll=0.0, face_pitch=0.0, **steered),
    )
    assert level.starboard == pytest.approx(np.sin(np.radians(across)) * 1510.0 / 1490.0, abs=1e-15)
    assert tilted.starboard == pytest.approx(level.starboard, abs=1e-14)
    assert tilted.forward == pytest.approx(level.forward, abs=1e-14)


def test_signs_of_roll_and_pitch():
    # Starboard down turns the normal to port, bow up turns it forward; a beam along the normal is not turned.
    straight = {"speed": 1400.0, "surface_speed": 1500.0}
    port = beam_directions(-30.0, face_roll=30.0, **straight)
    ahead = beam_directions(0.0, 8.0, face_pitch=8.0, **straight)
    assert port.starboard == pytest.approx(-0.5, abs=1e-14)
    assert ahead.forward == pytest.approx(np.sin(np.radians(8.0)), abs=1e-14)


def test_a_curved_array_and_what_is_assumed_are_said():
    curved = beam_directions(50.0, array="curved", speed=1500.0, surface_speed=1400.0, face_roll=20.0)
    assert curved.starboard == pytest.approx(np.sin(np.radians(50.0)), abs=1e-15)
    assert curved.notes == ()
    assert "no speed of steering" in beam_directions(50.0).notes[0]
    steered = {"speed": 1500.0, "surface_speed": 1400.0}
    assert "no attitude of the face" in beam_directions(50.0, **steered).notes[0]
    assert beam_directions(50.0, face_roll=1.0, **steered).notes == ("no pitch of the face is given: it is taken as 0",)
    assert beam_directions(50.0, face_roll=1.0, face_pitch=0.0, **steered).notes == ()


def test_bad_values_have_a_reason_and_no_direction():
    nan = np.nan
    found = beam_directions(
        [nan, 90.0, 80.0, 20.0, 20.0, 20.0, 20.0, 75.0, 85.0, 20.0, 20.0],
        [0.0, 0.0, 80.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, nan, 0.0],
        speed=[1500.0] * 8 + [1510.0, 1500.0, 1500.0],
        surface_speed=[1500.0, 1500.0, 1500.0, nan, 0.0, 1500.0, 1500.0, 1400.0, 1500.0, 1500.0, np.inf],
        face_roll=[0.0, 0.0, 0.0, 0.0, 0.0, nan, 80.0, 0.0, 5.0, 0.0, 0.0],
        face_pitch=0.0,
    )
    assert found.status.tolist() == [
        NO_ANGLE, NO_ANGLE, NO_DIRECTION, NO_SPEED, NO_SPEED, NO_ATTITUDE, NOT_AT_FACE,
        NOT_AT_FACE, NOT_AT_FACE, NO_ANGLE, NO_SPEED,
    ]  # fmt: skip
    assert np.isnan(found.forward).all()
    assert np.isnan(found.sine).all()
    assert beam_directions(75.0, speed=1500.0, surface_speed=1400.0).status == NOT_AT_FACE
    # A face rolled up to starboard sends this beam over the horizontal when the water is faster than thought.
    over = beam_directions(86.0, speed=1650.0, surface_speed=1500.0, face_roll=-40.0)
    assert over.status == NOT_DOWNWARD
    assert len(DIRECTION_STATUSES) == 7


def test_pings_against_beams_and_inputs_unchanged():
    across = np.linspace(-60, 60, 5)
    roll = np.array([[0.0], [3.0]])
    before = across.copy()
    across.setflags(write=False)
    found = beam_directions(across, speed=1500.0, surface_speed=1490.0, face_roll=roll, face_pitch=1.0)
    assert found.forward.shape == found.starboard.shape == found.status.shape == (2, 5)
    assert (across == before).all()
    one = beam_directions(across[3], speed=1500.0, surface_speed=1490.0, face_roll=3.0, face_pitch=1.0)
    assert one.starboard == found.starboard[1, 3]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"angles": "cone"}, "angles is 'cone': cones or tilted-fan would be right"),
        ({"array": "round"}, "array is 'round': flat or curved would be right"),
        ({"surface_speed": 1500.0}, "surface_speed is given without speed"),
        ({"speed": [1.0, 2.0], "face_roll": [0.0, 1.0, 2.0]}, r"do not broadcast: .*speed \(2,\), face_roll \(3,\)"),
    ],
)
def test_refusals(arguments, message):
    with pytest.raises(InputError, match=message):
        beam_directions(10.0, **arguments)


# What an error of speed does, to first order (derived at the head of directions.py)

THICKNESS, BOTTOM, ERROR, SPEED = 20.0, 100.0, 1e-3, 1500.0


def shift(theta, roll, thickness):
    """How far a sounding moves when the speed of the top layer is taken too high, through the package's own path."""
    truth, wrong = Profile([0, 300], [SPEED, SPEED]), Profile(
        [0, thickness, thickness + 1e-9, 300], [SPEED + ERROR, SPEED + ERROR, SPEED, SPEED])  # fmt: skip
    time = beam_times(truth, theta, BOTTOM).time
    found = beam_directions(theta, speed=SPEED + ERROR, surface_speed=SPEED, face_roll=roll, face_pitch=0.0)
    moved = beam_positions(wrong, np.degrees(np.arcsin(found.sine)), time)
    return moved.depth - BOTTOM, moved.across - BOTTOM * np.tan(np.radians(theta))


@pytest.mark.parametrize("theta", [0.0, 10.0, 30.0, 45.0, 60.0, 70.0])
def test_a_level_face_to_first_order(theta):
    # Closed form, derived in the head of directions.py: (1 - tan²) h e/c and 2 tan h e/c.
    tan = np.tan(np.radians(theta))
    scale = THICKNESS * ERROR / SPEED
    assert shift(theta, 0.0, THICKNESS) == pytest.approx(((1 - tan**2) * scale, 2 * tan * scale), abs=1e-4 * scale)


@pytest.mark.parametrize("theta", [5.0, 20.0, 40.0, 60.0, 75.0])
def test_a_face_at_forty_degrees_to_first_order(theta):
    # The normal points 40 degrees to starboard (roll -40). In the top layer as if level, then all the way with the
    # slowness off by -e sin τ/(c² cos γ): the whole path turns by δ = -(e/c) sin τ/(cos γ cos θ), about the transducer.
    t, tilt = np.radians(theta), np.radians(40.0)
    gamma, e = t - tilt, ERROR / SPEED
    turn = -e * np.sin(tilt) / (np.cos(gamma) * np.cos(t))
    down = (1 - np.tan(t) ** 2) * THICKNESS * e - BOTTOM * np.tan(t) * turn
    out = 2 * np.tan(t) * THICKNESS * e + BOTTOM * turn
    size = BOTTOM * e
    assert shift(theta, -40.0, THICKNESS) == pytest.approx((down, out), abs=2e-3 * size)
    # Wrong down to the seabed: the beam turns by e/c tan γ at the face and is e/c too long.
    whole = ((1 - np.tan(t) * np.tan(gamma)) * size, (np.tan(t) + np.tan(gamma)) * size)
    assert shift(theta, -40.0, 250.0) == pytest.approx(whole, abs=2e-3 * size)


# Soundings taken back


@pytest.mark.parametrize("name", WATERS)
def test_taken_back_and_corrected_anew_within_a_millimetre(name):
    old, new = WATERS[name], WATERS["noisy thermocline"]
    rng = np.random.default_rng(3)
    n = 400
    angle, azimuth = rng.uniform(-75, 75, n), np.radians(rng.uniform(-180, 180, n))
    time = rng.uniform(0.001, 1.0, n) * min(old.depth[-1], 999.0) / 1500.0
    surface = 1495.0
    first = beam_positions(old, angle, time, transducer_depth=5.0, surface_speed=surface)
    hit = first.status == HIT
    assert hit.mean() > 0.5
    back = taken_back(
        old, first.depth, first.across * np.sin(azimuth), first.across * np.cos(azimuth), transducer_depth=5.0
    )
    assert (back.status == np.where(hit, HIT, BAD)).all()
    assert back.time[hit] == pytest.approx(time[hit], abs=1e-9)
    # Steered with the old water's speed at the transducer: sin/speed is what the array had measured.
    again = beam_positions(
        new, np.degrees(np.arcsin(back.directions.sine)), back.time, transducer_depth=5.0, surface_speed=back.speed
    )
    direct = beam_positions(new, np.abs(angle), time, transducer_depth=5.0, surface_speed=surface)
    same = hit & (direct.status == HIT)
    assert (again.status[hit] == direct.status[hit]).all()
    assert again.depth[same] == pytest.approx(direct.depth[same], abs=1e-6)
    assert again.across[same] == pytest.approx(direct.across[same], abs=1e-6)
    across, along = back.directions.spread(np.abs(first.across))
    assert across[hit] == pytest.approx((first.across * np.sin(azimuth))[hit], abs=1e-9)
    assert along[hit] == pytest.approx((first.across * np.cos(azimuth))[hit], abs=1e-9)


def test_every_beam_that_arrives_is_found_however_flat():
    # A thin fast layer, in which the flat beams that get through it are nearly horizontal; transducer inside a layer.
    water = Profile([0, 10, 10.5, 11, 200, 1000], [1450, 1450, 1600, 1450, 1440, 1500])
    rng = np.random.default_rng(5)
    angle, time = rng.uniform(-89.5, 89.5, 4000), rng.uniform(1e-4, 1.2, 4000)
    first = beam_positions(water, angle, time, transducer_depth=3.3)
    hit = first.status == HIT
    assert hit.sum() > 1500
    back = taken_back(water, first.depth[hit], first.across[hit], transducer_depth=3.3)
    assert (back.status == HIT).all()
    again = beam_positions(water, np.degrees(np.arcsin(back.directions.starboard)), back.time, transducer_depth=3.3)
    assert again.depth == pytest.approx(first.depth[hit], abs=1e-7)
    assert again.across == pytest.approx(first.across[hit], abs=1e-7)


def test_beams_that_just_do_not_turn():
    # In 0.1 /s from 1500: at sine u the beam turns at 15000 (1/u - 1) m, and is then 15000 cos/u m out.
    water = Profile([0.0, 1000.0], [1500.0, 1600.0])
    depth = 500.0
    u = 15000.0 / (15000.0 + depth)
    farthest = 15000.0 * np.sqrt(1 - u * u) / u
    found = taken_back(water, depth, farthest * np.array([0.999, 0.99999, 1.000001]))
    assert found.status.tolist() == [HIT, HIT, TURNED]
    again = beam_times(water, np.degrees(np.arcsin(found.directions.sine[:2])), depth)
    assert again.across == pytest.approx(farthest * np.array([0.999, 0.99999]), abs=1e-5)
    assert np.isnan(found.time[2])


def test_what_becomes_of_positions():
    water = WATERS["thermocline"]
    found = taken_back(
        water, [500.0, 2000.0, 3.0, 5.0, np.nan, 500.0, 500.0], [0.0, 0.0, 0.0, 1.0, 0.0, np.nan, 10.0],
        transducer_depth=[5.0, 5.0, 5.0, 5.0, 5.0, 5.0, np.nan],
    )  # fmt: skip
    assert found.status.tolist() == [HIT, BEYOND, BAD, BAD, BAD, BAD, BAD]
    assert found.directions.sine[0] == 0.0
    assert found.time[0] == pytest.approx(float(beam_times(water, 0.0, 500.0, transducer_depth=5.0).time), abs=1e-15)
    assert np.isnan(found.time[1:]).all()
    assert (found.directions.status == np.where(found.status == HIT, USABLE, NO_DIRECTION)).all()
    with pytest.raises(InputError, match="transducer depth is 2000 m"):
        taken_back(water, 500.0, transducer_depth=2000.0)
    with pytest.raises(InputError, match=r"do not broadcast: depth \(2,\), across \(3,\)"):
        taken_back(water, [1.0, 2.0], [1.0, 2.0, 3.0])


def test_each_ping_has_its_own_transducer_depth():
    water, heave = WATERS["thermocline"], np.array([[4.0], [5.5], [4.7]])
    across = np.linspace(-200.0, 300.0, 6)
    together = taken_back(water, 150.0, across, 20.0, transducer_depth=heave)
    assert together.time.shape == (3, 6)
    for row, depth in enumerate(heave[:, 0]):
        alone = taken_back(water, 150.0, across, 20.0, transducer_depth=depth)
        assert (together.time[row] == alone.time).all()
        assert (together.directions.starboard[row] == alone.directions.starboard).all()
        assert (together.speed[row] == water.at(depth)).all()


def test_depths_recorded_at_a_nominal_speed():
    assert list(NOMINAL_SPEEDS) == ["1500 m/s", "4800 ft/s"]
    assert list(NOMINAL_SPEEDS.values()) == pytest.approx([1500.0, 1463.04], abs=1e-12)
    time = recorded_time([754.0, 3.0], added=4.0)
    assert time == pytest.approx([0.5, np.nan], nan_ok=True)
    # A vertical beam of that time has gone as deep as the harmonic mean of the speed says.
    water = Profile([0.0, 1000.0], [1480.0, 1500.0])
    depth = float(beam_positions(water, 0.0, time[0]).depth)
    assert water.harmonic_mean_speed(0.0, depth) * time[0] == pytest.approx(depth, abs=1e-9)
    with pytest.raises(InputError, match="nominal speed is 4800 m/s: between 1000 and 3000"):
        recorded_time(100.0, speed=4800.0)


# Transmission and reception apart


@pytest.mark.parametrize(("across", "along"), [(0.0, 0.0), (0.0, 5.0), (60.0, 0.0), (-65.0, 4.0), (30.0, -8.0)])
def test_apart_in_isovelocity_water_against_a_solver(across, along):
    # The three conditions themselves: both distances add up, one cone at transmission, the other at reception.
    c, tau, moved = 1500.0, 2.0, np.array([20.0, 3.0, 0.0])  # forward, starboard
    sent, heard = -0.5 * moved, 0.5 * moved
    sin_a, sin_b = np.sin(np.radians(across)), np.sin(np.radians(along))

    def off(point):
        to, fro = point - sent, point - heard
        ranges = np.linalg.norm(to), np.linalg.norm(fro)
        return [sum(ranges) - 2 * c * tau, to[0] - sin_b * ranges[0], fro[1] - sin_a * ranges[1]]

    truth = fsolve(off, c * tau * unit(across, along), xtol=1e-13)
    beam, time = seen_from_midpoint(Profile([0, 4000], [c, c]), beam_directions(across, along), tau, moved[1], moved[0])
    found = beam_positions(Profile([0, 4000], [c, c]), np.degrees(np.arcsin(beam.sine)), time)
    x, y = beam.spread(found.across)
    # 2e-5 of the slant range is left out.
    assert (float(y), float(x), float(found.depth)) == pytest.approx(tuple(truth), abs=2e-5 * c * tau)
    plain = c * tau * unit(across, along)
    assert np.abs(np.array([y, x, found.depth]) - truth).max() < 0.03 * np.abs(plain - truth).max()


@pytest.mark.parametrize("name", ["thermocline", "fresh over salt", "surface duct"])
def test_apart_in_layered_water(name):
    # From where it was sent and from where it was heard, the exact beams to the sounding must have the cones measured.
    water, tau, along_way, across_way = WATERS[name], 0.3, 3.0, 0.4
    across, along = np.array([-60.0, -20.0, 5.0, 40.0]), np.array([0.0, 2.0, -3.0, 1.0])
    measured = beam_directions(across, along)
    beam, time = seen_from_midpoint(water, measured, tau, across_way, along_way, transducer_depth=3.0)
    found = beam_positions(water, np.degrees(np.arcsin(beam.sine)), time, transducer_depth=3.0)
    x, y = beam.spread(found.across)
    sent = taken_back(water, found.depth, x + 0.5 * across_way, y + 0.5 * along_way, transducer_depth=3.0)
    heard = taken_back(water, found.depth, x - 0.5 * across_way, y - 0.5 * along_way, transducer_depth=3.0)
    small = (1.5 / (1500.0 * tau)) ** 2  # relative, second order
    assert sent.directions.forward == pytest.approx(measured.forward, abs=5 * small)
    assert heard.directions.starboard == pytest.approx(measured.starboard, abs=5 * small)
    assert sent.time + heard.time == pytest.approx(2 * tau, abs=5 * small * tau * 0.1)


def test_standing_still_changes_nothing_and_lost_beams_are_handed_back():
    water, measured = WATERS["thermocline"], beam_directions([0.0, 50.0, np.nan])
    beam, time = seen_from_midpoint(water, measured, [0.1, 0.2, 0.1], 0.0, 0.0)
    assert beam.starboard == pytest.approx(measured.starboard, abs=1e-15, nan_ok=True)
    assert time == pytest.approx([0.1, 0.2, 0.1])
    beam, time = seen_from_midpoint(water, measured, [10.0, 0.0, 0.1], 1.0, 5.0)
    assert (beam.starboard[:2] == measured.starboard[:2]).all()
    assert beam.status.tolist() == measured.status.tolist()
    assert (time == [10.0, 0.0, 0.1]).all()
    with pytest.raises(InputError, match=r"do not broadcast: directions \(3,\), times \(2,\)"):
        seen_from_midpoint(water, measured, [0.1, 0.2], 1.0, 5.0)
