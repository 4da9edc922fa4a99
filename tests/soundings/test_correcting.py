"""Whole soundings: every beam against exact marches, an independent integrator, closed forms and pyproj."""

from __future__ import annotations

import importlib.util
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pyproj import Geod
from scipy.integrate import solve_ivp

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings.beams import HIT, TURNED, beam_positions, beam_times
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.columns import REASON, PingBlock
from ocean_sound.soundings.components import Component, Components
from ocean_sound.soundings.correcting import Corrector, Options
from ocean_sound.soundings.directions import beam_directions
from ocean_sound.soundings.geometry import seen_from_midpoint, taken_back
from ocean_sound.soundings.in_memory import correct_soundings
from ocean_sound.soundings.orders import holds, read_orders
from ocean_sound.soundings.sensitivity import path_uncertainty

_spec = importlib.util.spec_from_file_location("hard_waters", Path(__file__).with_name("test_beam_table.py"))
_tables = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(_tables)
waters = _tables.waters

pytestmark = pytest.mark.kernels

FLAT = Options(curvature=False)
DAY = np.datetime64("2026-05-01T00:00", "ns")
HOUR = np.timedelta64(3_600_000_000_000, "ns")


def block(time, angle=None, depth=4.0, /, **columns):
    """A block of one-way times (pings, beams) and angles; other columns by name, per ping or per beam."""
    time = np.atleast_2d(time)
    n, m = time.shape
    pings, beams = {"transducer_depth": np.array(np.broadcast_to(depth, n), float)}, {"two_way_travel_time": 2.0 * time}
    if angle is not None:
        beams["across_track_angle"] = np.array(np.broadcast_to(angle, (n, m)), float)
    for name, each in columns.items():
        values = np.asarray(each)
        if values.ndim == 2:
            beams[name] = values
        else:
            kind = values.dtype if values.dtype.kind == "M" else float
            pings[name] = np.array(np.broadcast_to(values, n), kind)
    return PingBlock(pings, beams)


def corrected(water, made, options=FLAT, **more):
    casts, depth = water if isinstance(water, list) else [water], made.pings["transducer_depth"]
    span = (float(np.nanmin(depth)), float(np.nanmax(depth)))
    longest = 2000.0 if "two_way_travel_time" not in made.beams else 800.0 * np.nanmax(made.of("two_way_travel_time"))
    more = {"deepest": longest} | more
    return Corrector(casts, options, transducer_depth_range=span, **more).correct(made)


def reasons(found):
    return [list(REASON)[code] for code in found["sounding_reason"].ravel()]


def random_survey(water, pings=60, beams=50, seed=5, largest=75.0):
    """Pings of a heaving transducer, and beams that end anywhere; some turn or run out of the water before."""
    random = np.random.default_rng(seed)
    source = random.uniform(2.0, 6.0, pings)
    angle = random.uniform(-largest, largest, (pings, beams))
    time = np.stack(
        [
            beam_times(water, row, random.uniform(depth, water.depth[-1], beams), transducer_depth=depth).time
            for row, depth in zip(angle, source, strict=True)
        ]
    )
    lost = np.isnan(time)
    time[lost] = random.uniform(0.0, 4.0 * water.depth[-1] / 1500.0, lost.sum())
    return source, angle, time


@pytest.mark.long
@pytest.mark.parametrize("name", waters())
def test_heaving_transducers_agree_with_exact_marches(name):
    water = Profile(*waters()[name])
    source, angle, time = random_survey(water)
    found = corrected(water, block(time, angle, source), Options(curvature=False, beyond_cast="flag"))
    for row, (depth, theta, t) in enumerate(zip(source, angle, time, strict=True)):
        exact = beam_positions(water, theta, t, transducer_depth=depth)
        hit = exact.status == HIT
        np.testing.assert_array_equal(np.isfinite(found["depth"][row]), hit)
        np.testing.assert_array_equal(found["sounding_reason"][row] == REASON["turned"], exact.status == TURNED)
        error = np.hypot(found["depth"][row] - exact.depth, found["across_track_distance"][row] - exact.across)
        assert error[hit].max() < 1e-3


def integrated(water, source, sines, depths):
    """Times and distances across by an integrator that starts anew at each level, all beams at once."""
    nodes = np.concatenate(([source], water.depth[water.depth > source]))
    speed = np.interp(nodes, water.depth, water.speed)
    p, many = sines / speed[0], sines.size
    state = np.zeros(2 * many)
    for top, c, h, rise in zip(nodes[:-1], speed[:-1], np.diff(nodes), np.diff(speed), strict=True):
        way = np.clip(depths - top, 0.0, h)

        def slopes(s, _, way=way, c=c, g=rise / h):
            u = p * (c + g * s * way)
            k = np.sqrt(1.0 - u * u)
            across, time = way * u / k, way / ((c + g * s * way) * k)
            return np.where(np.tile(way, 2) > 0.0, np.concatenate((across, time)), 0.0)

        with np.errstate(invalid="ignore"):  # beams that ended above are kept where they are
            state = solve_ivp(slopes, (0.0, 1.0), state, method="DOP853", rtol=1e-11, atol=1e-12).y[:, -1]
    return state[many:], state[:many]


@pytest.mark.long
@pytest.mark.parametrize("name", waters())
def test_an_integrator_that_restarts_at_levels(name):
    depth, speed = (np.asarray(column, dtype=float) for column in waters()[name])
    water = Profile(depth[::10], speed[::10]) if depth.size > 10 else Profile(depth, speed)
    random = np.random.default_rng(2)
    sines = np.sin(np.radians(random.uniform(-75.0, 75.0, 200)))
    depths = random.uniform(10.0, water.depth[-1], 200)
    fastest = np.array([max(water.at(z), water.at(3.0), water.speed[water.depth < z].max()) for z in depths])
    down = np.abs(sines) * fastest / water.at(3.0) < 0.999
    time, across = integrated(water, 3.0, sines[down], depths[down])
    found = corrected(water, block(time, np.degrees(np.arcsin(sines[down])), [3.0]))
    error = np.hypot(found["depth"][0] - depths[down], found["across_track_distance"][0] - across)
    assert down.sum() > 100
    assert error.max() < 1e-3


@pytest.mark.long
@settings(max_examples=40)
@given(
    across=st.floats(-70.0, 70.0),
    along=st.floats(-15.0, 15.0),
    roll=st.floats(-45.0, 45.0),
    pitch=st.floats(-10.0, 10.0),
    surface=st.floats(1440.0, 1560.0),
    fan=st.booleans(),
    kind=st.sampled_from(["none", "level", "tilted", "curved"]),
)
def test_directions_are_those_of_vectors(across, along, roll, pitch, surface, fan, kind):
    water = Profile([0.0, 50.0, 300.0], [1500.0, 1490.0, 1495.0])
    extra = {} if kind == "none" else {"surface_sound_speed": surface}
    if kind == "tilted":
        extra |= {"face_roll": roll, "face_pitch": pitch}
    array = "curved" if kind == "curved" else "flat"
    angles = "tilted-fan" if fan else "cones"
    made = block([[0.1]], across, [4.0], along_track_angle=[[along]], **extra)
    found = corrected(water, made, Options(curvature=False, angles=angles, array=array, surface_speed_limit=1e3))
    steered = {} if kind in ("none", "curved") else {"surface_speed": surface, "speed": water.at(4.0)}
    if kind == "tilted":
        steered |= {"face_roll": roll, "face_pitch": pitch}
    beam = beam_directions(across, along, angles=angles, array=array, **steered)
    if beam.status != 0:
        assert found["sounding_reason"][0, 0] == int(beam.status) + REASON["no_travel_time"]
        return
    exact = beam_positions(water, np.degrees(np.arcsin(beam.sine)), 0.1, transducer_depth=4.0)
    x, y = beam.spread(exact.across)
    got = [found[name].item() for name in ("depth", "across_track_distance", "along_track_distance")]
    np.testing.assert_allclose(got, [exact.depth, x, y], atol=1e-3)


def test_a_wrong_layer_at_the_transducer_below_a_level_face():
    """(1 - tan²) h e/c down and 2 tan h e/c across, to first order: nothing down at 45 degrees."""
    h, e, c = 10.0, 0.1, 1500.0
    right, wrong = (Profile([0.0, h, h + 1e-6, 200.0], [c + x, c + x, c, c]) for x in (0.0, e))
    angle = np.array([0.0, 30.0, 45.0, 60.0, 65.0])
    time = 150.0 / c / np.cos(np.radians(angle))
    made = block(time, angle, [0.0], surface_sound_speed=c)
    before, after = (corrected(water, made) for water in (right, wrong))
    t = np.tan(np.radians(angle))
    down = after["depth"] - before["depth"]
    across = after["across_track_distance"] - before["across_track_distance"]
    np.testing.assert_allclose(down[0], (1.0 - t * t) * h * e / c, atol=2e-6)
    np.testing.assert_allclose(across[0], 2.0 * t * h * e / c, atol=2e-6)


def test_a_wrong_speed_below_a_face_at_40_degrees():
    """All the way down: (1 - tan θ tan γ) h e/c and (tan θ + tan γ) h e/c, γ from the face's normal."""
    h, e, c, tau = 100.0, 0.1, 1500.0, 40.0
    right, wrong = (Profile([0.0, 500.0], [c + x, c + x]) for x in (0.0, e))
    angle = np.array([10.0, 40.0, 60.0, 70.0])
    time = h / c / np.cos(np.radians(angle))
    made = block(time, angle, [0.0], surface_sound_speed=c, face_roll=-tau)
    before, after = (corrected(water, made) for water in (right, wrong))
    t, g = np.tan(np.radians(angle)), np.tan(np.radians(angle - tau))
    np.testing.assert_allclose((after["depth"] - before["depth"])[0], (1.0 - t * g) * h * e / c, atol=2e-5)
    across = after["across_track_distance"] - before["across_track_distance"]
    np.testing.assert_allclose(across[0], (t + g) * h * e / c, atol=2e-5)


@pytest.mark.long
@pytest.mark.parametrize("latitude", [0.0, 47.0, -71.0, 89.9])
def test_positions_agree_with_geodesics(latitude):
    random = np.random.default_rng(3)
    angle = random.uniform(-70.0, 70.0, (20, 30))
    heading, longitude = random.uniform(0.0, 360.0, 20), random.uniform(179.0, 181.0, 20)
    water = Profile([0.0, 3000.0], [1500.0, 1500.0])
    time = random.uniform(0.01, 1.5, (20, 30))
    made = block(time, angle, latitude=latitude, longitude=longitude, heading=heading,
                 along_track_angle=random.uniform(-5.0, 5.0, (20, 30)))  # fmt: skip
    found = corrected(water, made, Options())
    x, y = found["across_track_distance"], found["along_track_distance"]
    azimuth = heading[:, None] + np.degrees(np.arctan2(x, y))
    lon, lat, _ = Geod(ellps="WGS84").fwd(
        np.broadcast_to(longitude[:, None], x.shape), np.full(x.shape, latitude), azimuth, np.hypot(x, y)
    )
    _, _, apart = Geod(ellps="WGS84").inv(lon, lat, found["sounding_longitude"], found["sounding_latitude"])
    assert np.abs(apart).max() < 1e-3


def test_curvature_is_in_it():
    water = Profile([0.0, 2000.0], [1500.0, 1500.0], latitude=45.0)
    made = block([1000.0 / 1500.0 / np.cos(np.radians(65.0))], 65.0, [0.0])
    curved, flat = (corrected(water, made, Options(curvature=on)) for on in (True, False))
    # the sphere's surface falls away by x²/(2 R), x = 1000 tan 65°
    fall = (1000.0 * np.tan(np.radians(65.0))) ** 2 / (2.0 * 6378101.0)
    assert (flat["depth"] - curved["depth"]).item() == pytest.approx(fall, rel=1e-3)
    assert 0.35 < fall < 0.4


def test_levels():
    made = block([0.02], 0.0, [4.0], water_level=36.0, transducer_height=41.5)
    found = corrected(Profile([0.0, 200.0], [1500.0, 1500.0]), made)
    assert found["depth"].item() == pytest.approx(34.0)
    assert found["reduced_depth"].item() == pytest.approx(-2.0)
    assert found["sounding_height"].item() == pytest.approx(11.5)


@pytest.mark.long
@pytest.mark.parametrize("name", ["thermocline", "noisy", "polar"])
@pytest.mark.parametrize("curvature", [False, True])
def test_there_and_back_again(name, curvature):
    """Corrected with one profile, taken back and corrected with the other, and back again."""
    first = Profile(*waters()[name])
    second = Profile(first.depth, first.speed + 3.0 * np.exp(-first.depth / 50.0))
    source, angle, time = random_survey(first, largest=65.0)
    made = block(time, angle, source, surface_sound_speed=first.at(source))
    options = Options(curvature=curvature)
    start = corrected(first, made, options)

    def again(found, before, after):
        names = ("depth", "across_track_distance", "along_track_distance")
        old = {name: found[name] for name in names}
        return corrected(
            after, PingBlock(made.pings, old), options, corrected_with=before, deepest=first.depth[-1] + 10.0
        )

    there = again(start, first, second)
    direct = corrected(second, made, options)
    back = again(there, second, first)
    whole = (start["sounding_flag"] == 1) | (start["sounding_flag"] == 2)
    whole &= np.isfinite(there["depth"]) & np.isfinite(back["depth"])
    assert whole.mean() > 0.6
    for one, other in ((there, direct), (back, start)):
        error = np.hypot(*(one[key] - other[key] for key in ("depth", "across_track_distance")))
        assert error[whole].max() < 1e-3


@pytest.mark.long
def test_taken_back_as_exactly_as_by_marches():
    water = Profile(*waters()["thermocline"])
    source, angle, time = random_survey(water, pings=8)
    exact = [beam_positions(water, a, t, transducer_depth=z) for a, t, z in zip(angle, time, source, strict=True)]
    depth, across = np.stack([beams.depth for beams in exact]), np.stack([beams.across for beams in exact])
    back = taken_back(water, depth, across, transducer_depth=source[:, None])
    old = {"depth": depth, "across_track_distance": across}
    found = corrected(water, PingBlock({"transducer_depth": source}, old), corrected_with=water)
    hit = back.status == 0
    assert hit.mean() > 0.9
    assert np.abs(found["depth"] - depth)[hit].max() < 1e-3
    assert np.abs(found["across_track_distance"] - across)[hit].max() < 1e-3


@pytest.mark.long
def test_moving_transducers():
    water = Profile(*waters()["thermocline"], latitude=50.0)
    angle = np.linspace(-65.0, 65.0, 41)
    time = 400.0 / 1500.0 / np.cos(np.radians(angle))
    north = 3.0 / 111_229.0  # degrees a second of 3 m/s at this latitude
    made = block(time, angle, [4.0], latitude=50.0, longitude=-10.0, heading=0.0, reception_longitude=-10.0,
                 reception_latitude=50.0 + 0.6 * north, along_track_angle=np.full((1, 41), 2.0))  # fmt: skip
    found = corrected(water, made)
    moved, beams = 0.6 * 3.0, beam_directions(angle, 2.0)
    seen, tau = seen_from_midpoint(water, beams, time, 0.0, moved, transducer_depth=4.0)
    exact = beam_positions(water, np.degrees(np.arcsin(seen.sine)), tau, transducer_depth=4.0)
    x, y = seen.spread(exact.across)
    np.testing.assert_allclose(found["depth"][0], exact.depth, atol=2e-3)
    np.testing.assert_allclose(found["across_track_distance"][0], x, atol=2e-3)
    np.testing.assert_allclose(found["along_track_distance"][0], y + 0.5 * moved, atol=3e-3)


def two_casts():
    """Six hours apart, and 5 m/s."""
    depth = np.array([0.0, 20.0, 40.0, 300.0])
    return [
        Profile(depth, [1500 + e, 1500 + e, 1490, 1492], np.full(4, 0.3), time=DAY + at * HOUR, id=str(at))
        for at, e in ((0, 0.0), (6, 5.0))
    ]


SCALES = Scales(8 * 3600.0, np.inf)


@pytest.mark.long
def test_casts_are_blended_over_positions():
    casts = two_casts()
    when = DAY + np.array([0, 3, 6]) * HOUR
    time, angle = np.full((3, 5), 0.1), np.array([-60.0, -30.0, 0.0, 30.0, 60.0])
    made = block(time, angle, time=when)
    found = corrected(casts, made, scales=SCALES)
    each = [corrected(cast, made) for cast in casts]
    for name in ("depth", "across_track_distance"):
        first, last = (one[name][0] for one in each)
        np.testing.assert_allclose(found[name], [first, 0.5 * (first + last), last], atol=1e-9)
    assert found["cast_used"][[0, 2], 0].tolist() == [0, 1]
    assert found["cast_weight"][:, 0].tolist() == [1.0, 0.5, 1.0]


@pytest.mark.long
def test_no_step_where_casts_change():
    depth = np.array([0.0, 20.0, 40.0, 300.0])
    casts = [
        Profile(depth, [1500 + e, 1500 + e, 1490, 1492], np.full(4, 0.3), time=DAY + 3 * at * HOUR)
        for at, e in enumerate([0.0, 6.0, -4.0, 5.0, 1.0])
    ]
    minutes = DAY + np.arange(0, 720) * (HOUR // 60)
    found = corrected(casts, block(np.full((720, 1), 0.2), 65.0, time=minutes), scales=Scales(4 * 3600.0, np.inf))
    step = np.abs(np.diff(found["depth"][:, 0]))
    assert np.ptp(found["depth"]) > 0.5
    assert step.max() < np.ptp(found["depth"]) / 50.0
    # what the water did since a cast grows with the root of time: its square makes no step
    assert np.abs(np.diff(found["tvu_95"][:, 0] ** 2.0)).max() < 0.05 * found["tvu_95"].max() ** 2


@pytest.mark.long
def test_too_far_is_not_used_and_said():
    casts = two_casts()
    when = np.array([DAY + 3 * HOUR, DAY + 40 * HOUR, np.datetime64("NaT")])
    found = corrected(casts, block(np.full((3, 2), 0.1), [0.0, 40.0], time=when), scales=SCALES)
    assert reasons(found)[::2] == ["none", "no_cast_near_enough", "no_time_or_position"]
    assert np.isnan(found["depth"][1:]).all() and found["cast_used"][1:].max() == -1  # noqa: PT018


@pytest.mark.long
def test_one_cast_of_the_blend_ends_before():
    deep, shallow = two_casts()
    shallow = Profile([0.0, 20.0, 60.0], [1505, 1505, 1490], np.full(3, 0.3), time=shallow.time)
    minutes = DAY + np.arange(0, 361, 10) * (HOUR // 60)
    made = block(np.full((minutes.size, 1), 0.1), 10.0, time=minutes)
    found = corrected([deep, shallow], made, Options(curvature=False, beyond_cast="flag"), scales=SCALES)
    weight = np.where(found["cast_used"] == 0, found["cast_weight"], 1.0 - found["cast_weight"])[:, 0]
    told = np.array(reasons(found))
    assert set(told[weight == 1.0]) == {"none"}
    assert set(told[(weight < 1.0) & (weight >= 0.5)]) == {"served_in_part"}
    assert set(told[weight < 0.5]) == {"beyond_the_cast"}
    alone = corrected(deep, made)["depth"]
    np.testing.assert_allclose(found["depth"][weight >= 0.5], alone[weight >= 0.5], atol=1e-9)
    assert np.isnan(found["depth"][weight < 0.5]).all()


def test_beyond_the_cast():
    water = Profile([3.0, 20.0, 100.0], [1500.0, 1490.0, 1485.0], [0.2, 0.2, 0.2])
    made = block([[0.02, 0.05, 0.1], [0.02, 0.05, 0.1]], [0.0, 10.0, 20.0], [4.0, 1.0])
    found = corrected(water, made)
    assert reasons(found) == ["none", "none", "completed_below_the_cast"] + ["completed_above_the_cast"] * 2 + [
        "completed_below_the_cast"
    ]
    assert np.isfinite(found["depth"]).all()
    # water of constant temperature and salinity: 0.016 to 0.018 1/s under growing pressure (any equation)
    inside = corrected(Profile([3.0, 20.0, 100.0, 200.0], [1500, 1490, 1485, 1486.7]), made)
    np.testing.assert_allclose(found["depth"][:, 2], inside["depth"][:, 2], atol=0.01)
    assert (found["tvu_95"][:, 2] > 1.5 * found["tvu_95"][:, 1]).all()
    refused = corrected(water, made, Options(curvature=False, beyond_cast="flag"))
    assert reasons(refused) == ["none", "none", "beyond_the_cast"] + ["beyond_the_cast"] * 3
    np.testing.assert_array_equal(np.isnan(refused["depth"]), [[False, False, True], [True] * 3])


@pytest.mark.long
def test_every_failure_has_its_reason_and_no_numbers():
    water = Profile(*waters()["polar"])
    angle = np.array([[10.0, np.nan, 90.0, 60.0, 74.0, 10.0, 10.0]])
    time = np.array([[0.1, 0.1, 0.1, 0.1, 2.0, np.nan, 0.1]])
    along = np.array([[0.0, 0.0, 0.0, 40.0, 0.0, 0.0, 0.0]])
    bad = np.zeros((1, 7), bool)
    bad[0, 6] = True
    made = block(time, angle, [3.0], along_track_angle=along, latitude=60.0, longitude=0.0, heading=0.0)
    made = PingBlock(made.pings, made.beams, impossible=bad)
    found = corrected(water, made, orders=read_orders())
    assert reasons(found) == [
        "uncertainty_unknown", "no_angle", "no_angle", "no_direction", "turned", "no_travel_time", "impossible_value",
    ]  # fmt: skip
    assert found["sounding_flag"].tolist() == [[2, 9, 9, 4, 4, 9, 4]]
    for name in ("depth", "across_track_distance", "along_track_distance", "sounding_latitude", "sounding_longitude",
                 "tvu_95", "thu_95"):  # fmt: skip
        assert np.isnan(found[name][0, 1:]).all(), name
    assert not found["orders_held_by_sound_speed"][0, 1:].any()


def test_what_pings_lack():
    water = Profile([0.0, 20.0, 300.0], [1500.0, 1490.0, 1485.0], [0.2, 0.2, 0.2])
    made = block(np.full((4, 1), 0.1), 30.0, [3.0, np.nan, 3.0, 3.0], surface_sound_speed=[1498.0, 1498, np.nan, 1490],
                 latitude=[np.nan, 60.0, 60.0, 60.0], longitude=0.0, heading=0.0)  # fmt: skip
    found = corrected(water, made)
    assert reasons(found) == ["position_missing", "no_transducer_depth", "no_speed", "surface_speed_differs"]
    assert np.isnan(found["depth"][:, 0]).tolist() == [False, True, True, False]


def test_faces_that_can_not_send():
    water = Profile([0.0, 300.0], [1500.0, 1500.0], [0.2, 0.2])
    made = block([[0.1, 0.1, 0.1]], [-60.0, 50.0, 85.0], [3.0], surface_sound_speed=1480.0, face_roll=-40.0,
                 face_pitch=0.0)  # fmt: skip
    found = corrected(water, made, Options(curvature=False, surface_speed_limit=50.0))
    assert reasons(found) == ["not_at_face", "none", "none"]
    made = block([[0.1]], [30.0], [3.0], surface_sound_speed=1480.0, face_roll=np.nan)
    assert reasons(corrected(water, made)) == ["no_attitude"]


def test_uncertainty_is_that_of_the_path():
    water = Profile([0, 20, 40, 200], [1510, 1510, 1490, 1492], shapes={"t": [0.3, 0.3, 0.1, 0.1]}, noise=[0.1] * 4)
    angle = np.array([-65.0, -40.0, 5.0, 45.0, 60.0])
    time = 0.1 / np.cos(np.radians(angle)) * 0.8
    doubt = path_uncertainty(water, transducer_depth=3.0)
    for array, slope in (("flat", 0.0), ("curved", 1.0)):
        options = Options(curvature=False, array=array, steering_speed_uncertainty=0.25, surface_speed_limit=99)
        found = corrected(water, block(time, angle, [3.0], surface_sound_speed=1509.0), options)
        ratio = 1510.0 / 1509.0 if array == "flat" else 1.0
        sine = np.abs(np.sin(np.radians(angle))) * ratio
        zz, _, xx = doubt.covariance(
            sine, found["depth"][0] - 3.0, slowness_per_speed=-slope * sine / 1510.0**2,
            slowness_per_steering_speed=(slope - 1.0) * sine / 1510.0 / 1509.0, steering_speed_uncertainty=0.25,
        )  # fmt: skip
        np.testing.assert_allclose(found["depth_uncertainty"][0], np.sqrt(zz), rtol=1e-4)
        np.testing.assert_allclose(found["tvu_95"][0], 1.96 * np.sqrt(zz), rtol=1e-4)
        np.testing.assert_allclose(found["thu_95"][0], 1.96 * np.sqrt(xx), rtol=1e-4)


def test_a_speed_of_steering_that_is_not_known():
    """Of one speed, at a fixed time: the depth changes by tan² h e/c with the speed of steering, and not if curved."""
    water = Profile([0.0, 200.0], [1500.0, 1500.0], shapes={"t": [0.0, 0.0]})
    angle = np.array([-60.0, 0.0, 45.0])
    made = block(50.0 / 1500.0 / np.cos(np.radians(angle)), angle, [3.0])
    for array, counts in (("flat", 1.0), ("curved", 0.0)):
        found = corrected(water, made, Options(curvature=False, array=array, steering_speed_uncertainty=0.5))
        np.testing.assert_allclose(found["depth"][0], 53.0, atol=1e-3)
        exact = counts * np.tan(np.radians(angle)) ** 2 * 50.0 * 0.5 / 1500.0
        np.testing.assert_allclose(found["depth_uncertainty"][0], exact, rtol=0.02, atol=1e-9)
    notes = [
        Corrector(
            [water], Options(steering_speed_uncertainty=known), transducer_depth_range=(0, 5), steered=False
        ).notes
        for known in (None, 0.5)
    ]
    assert any(note.endswith("stands for it, without uncertainty") for note in notes[0])
    assert any(note.endswith("at the transducer stands for it") for note in notes[1])
    assert not any("steered" in note for note in Corrector([water], transducer_depth_range=(0, 5)).notes)


@settings(max_examples=25)
@given(
    across=st.floats(-65.0, 65.0), along=st.floats(-8.0, 8.0), roll=st.floats(-40.0, 40.0), pitch=st.floats(-8.0, 8.0)
)
def test_slowness_of_a_tilted_face_changes_as_by_differences(across, along, roll, pitch):
    from ocean_sound.soundings import _kernels_correct as kernels

    def slowness(speed, surface):
        beam = beam_directions(
            across, along, speed=speed, surface_speed=surface, face_roll=roll, face_pitch=pitch, array="flat"
        )
        return float(beam.sine) / speed, int(beam.status)

    start, status = slowness(1500.0, 1495.0)
    if status or start * 1500.0 < 0.02 or start * 1500.0 > 0.98:
        return
    r, q = np.radians(roll), np.radians(pitch)
    one = [np.array([[value]]) for value in (0.1, across, along, 1495.0, np.sin(r), np.cos(r), np.sin(q), np.cos(q))]
    work, out = np.empty((8, 1)), np.empty((4, 1))
    kernels.direct_chunk(0, 1, tuple(one), np.array([0, 1, 0, 0, 0, 0]), np.array([1500.0]), work, *out)
    step = 0.01
    by_speed = (slowness(1500.0 + step, 1495.0)[0] - slowness(1500.0 - step, 1495.0)[0]) / (2 * step)
    by_surface = (slowness(1500.0, 1495.0 + step)[0] - slowness(1500.0, 1495.0 - step)[0]) / (2 * step)
    scale = 1e-4 / 1500.0**2
    assert out[2, 0] == pytest.approx(by_speed, rel=1e-4, abs=scale)
    assert out[3, 0] == pytest.approx(by_surface, rel=1e-4, abs=scale)


def test_orders_and_components_are_those_of_the_tables():
    water = Profile([0, 20, 40, 200], [1510, 1510, 1490, 1492], np.full(4, 0.6))
    angle = np.linspace(-70.0, 70.0, 60)
    time = np.stack([z / 1500.0 / np.cos(np.radians(angle)) for z in (8.0, 40.0, 120.0)])
    others = Components((
        Component("tide", "vertical", fixed=0.05, k=1.0),
        Component("roll", "vertical", share_per_degree=1e-4, level=95.0),
        Component("place", "horizontal", fixed=0.8, share=0.005, level=95.0),
    ))  # fmt: skip
    orders = read_orders()
    found = corrected(water, block(time, angle, [2.0, 2.0, 2.0]), orders=orders, components=others)
    depth = found["depth"]
    slant = np.degrees(np.arctan2(np.abs(found["across_track_distance"]), depth - 2.0))
    np.testing.assert_allclose(
        found["total_tvu_95"], others.tvu_95(depth, slant, (found["tvu_95"] / 1.96) ** 2.0), rtol=1e-5
    )
    np.testing.assert_allclose(
        found["total_thu_95"], others.thu_95(depth, slant, (found["thu_95"] / 1.96) ** 2.0), rtol=1e-5
    )
    for bit, order in enumerate(orders.values()):
        alone = holds(order, depth, found["tvu_95"], found["thu_95"]).both
        whole = holds(order, depth, found["total_tvu_95"], found["total_thu_95"]).both
        np.testing.assert_array_equal(found["orders_held_by_sound_speed"] >> bit & 1, alone)
        np.testing.assert_array_equal(found["orders_held"] >> bit & 1, whole)
    assert 0 < np.count_nonzero(found["orders_held"] == 31) < depth.size


@pytest.mark.long
def test_layout_blocks_and_threads_change_nothing():
    casts = two_casts()
    random = np.random.default_rng(4)
    n, m = 30, 37
    time, angle = random.uniform(0.02, 0.15, (n, m)), random.uniform(-60.0, 60.0, (n, m))
    source = random.uniform(2.0, 5.0, n)
    extra = {
        "time": DAY + np.arange(n) * (HOUR // 5),
        "latitude": 50.0,
        "longitude": 3.0,
        "heading": np.arange(n) * 7.0,
    }
    made = block(time, angle, source, **extra)
    corrector = Corrector(
        casts, FLAT, transducer_depth_range=(2.0, 5.0), scales=SCALES, orders=read_orders(), deepest=200.0
    )
    whole = corrector.correct(made)
    flat = PingBlock(
        {name: np.repeat(values, m) for name, values in made.pings.items()},
        {name: values.reshape(-1, 1) for name, values in made.beams.items()},
    )
    single = corrector.correct(flat)
    with ThreadPoolExecutor(2) as pool:
        parts = list(pool.map(lambda start: corrector.correct(made.part(start, start + 7)), range(0, n, 7)))
    for name, values in whole.items():
        np.testing.assert_array_equal(single[name].reshape(n, m), values, err_msg=name)
        np.testing.assert_array_equal(np.concatenate([part[name] for part in parts]), values, err_msg=name)


def test_a_single_beam_echo_sounder_and_recorded_depths():
    water = Profile([0.0, 1000.0], [1500.0, 1517.0], [0.3, 0.3])
    time = beam_times(water, 0.0, [500.0, 900.0], transducer_depth=5.0).time
    found = corrected(water, block(time[:, None], None, [5.0, 5.0]))
    np.testing.assert_allclose(found["depth"][:, 0], [500.0, 900.0], atol=1e-3)
    # the harmonic mean of a speed that grows by g a metre is g h / ln(c2/c1)
    at = 1500.0 + 0.017 * np.array([5.0, 500.0, 900.0])
    harmonic = 0.017 * np.array([495.0, 895.0]) / np.log(at[1:] / at[0])
    np.testing.assert_allclose(found["harmonic_mean_speed"][:, 0], harmonic, rtol=1e-6)
    recorded = PingBlock({"transducer_depth": np.full(2, 5.0)}, {"recorded_depth": (5.0 + 1463.04 * time)[:, None]})
    options = Options(curvature=False, recorded_speed=1463.04, recorded_added=5.0)
    np.testing.assert_allclose(corrected(water, recorded, options)["depth"], found["depth"], atol=1e-9)


@pytest.mark.long
def test_a_dataset():
    import xarray as xr

    casts = two_casts()
    angle = np.linspace(-60.0, 60.0, 5)
    beams = xr.Dataset(
        {
            "two_way_travel_time": (("ping", "beam"), np.full((3, 5), 0.2)),
            "across_track_angle": (("ping", "beam"), np.tile(angle, (3, 1))),
            "transducer_depth": ("ping", [4.0, 4.2, 3.8]),
            "time": ("ping", DAY + np.array([0, 3, 6]) * HOUR),
            "gain": ("ping", [1, 2, 3]),
        }
    )
    before = beams.copy(deep=True)
    found = correct_soundings(beams, casts, scales=SCALES, orders=["1a"], curvature=False)
    xr.testing.assert_identical(beams, before)
    want = corrected(
        casts, block(np.full((3, 5), 0.1), angle, [4.0, 4.2, 3.8], time=beams["time"].values), scales=SCALES
    )
    np.testing.assert_allclose(found["depth"], want["depth"], atol=1e-9)
    assert found["gain"].values.tolist() == [1, 2, 3]
    assert found["cast_id"].values.tolist() == ["0", "6"]
    assert found["orders_held_by_sound_speed"].attrs["flag_meanings"] == "1a"
    assert 0.0 < found.attrs["table_error"] < 1e-3


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"angles": "cone"}, "angles is 'cone': cones or tilted-fan would be right"),
        ({"beyond_cast": "extend"}, "beyond_cast is 'extend': complete or flag would be right"),
        ({"recorded_speed": 15.0}, "nominal speed is 15 m/s"),
        ({"surface_speed_limit": -1.0}, "surface_speed_limit is -1"),
    ],
)
def test_options_that_are_none(change, message):
    with pytest.raises(InputError, match=message):
        Options(**change)


def test_impossible_work_is_refused():
    water, none = Profile([0.0, 100.0], [1500.0, 1490.0]), {"transducer_depth": np.full(1, 3.0)}
    with pytest.raises(InputError, match="there is no cast"):
        Corrector([], transducer_depth_range=(0.0, 1.0))
    with pytest.raises(InputError, match="transducer_depth_range is"):
        Corrector([water], transducer_depth_range=(3.0, 1.0))
    corrector = Corrector([water], transducer_depth_range=(3.0, 5.0))
    with pytest.raises(InputError, match="transducer_depth: 2 m is above 3 m"):
        corrector.correct(block([0.01], 0.0, [2.0]))
    with pytest.raises(InputError, match="across_track_angle is missing, and pings have 2 beams"):
        corrector.correct(block([[0.01, 0.01]], None, [3.0]))
    with pytest.raises(InputError, match="two_way_travel_time is missing"):
        corrector.correct(PingBlock(none, {"across_track_angle": np.ones((1, 1))}))
