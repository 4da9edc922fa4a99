"""Ranges and places by travel times: closed forms of straight rays and of one gradient, and Monte Carlo."""

from __future__ import annotations

import math

import numpy as np
import pytest
from pyproj import Geod

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.section import Section
from ocean_sound.sensors.dilution import dilution_map
from ocean_sound.sensors.direct import Direct, Tabulated
from ocean_sound.sensors.locating import locate
from ocean_sound.sensors.ranging import ranges_from_times, travel_times
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.timing import Timing

GEOD = Geod(ellps="WGS84")
STILL = Profile([0.0, 300.0], [1500.0, 1500.0])
C1, G = 1500.0, 0.05
BENT = Profile([0.0, 600.0], [C1, C1 + G * 600.0])
PLAIN = Timing(two_way=False)


def bent_time(distance, source, receiver):
    """Closed form in one gradient; the published check `ray.cg.twopoint` is of this."""
    squares = np.square(distance) + (receiver - source) ** 2
    return np.arccosh(1.0 + G**2 * squares / (2.0 * (C1 + G * source) * (C1 + G * receiver))) / G


def bent_range(time, source, receiver):
    squares = 2.0 * (C1 + G * source) * (C1 + G * receiver) * (np.cosh(G * time) - 1.0) / G**2
    return math.sqrt(squares - (receiver - source) ** 2)


def around(count, distance, depth, *, latitude=32.0, longitude=-64.0, turn=7.0):
    """Stations evenly around a place."""
    sites = []
    for i in range(count):
        lon, lat, _ = GEOD.fwd(longitude, latitude, turn + 360.0 * i / count, distance)
        sites.append(Site(f"S{i}", lat, lon, depth))
    return sites


def distances(sites, latitude, longitude):
    return np.array([GEOD.inv(site.longitude, site.latitude, longitude, latitude)[2] for site in sites])


def test_the_published_time_between_two_points():
    """acosh(1 + g²(dx² + dz²)/(2 c1 c2))/g at c1 1500, g 0.05, dx 1000, dz 500: `ray.cg.twopoint` of the values."""
    found = travel_times(BENT, source_depth=0.0, receiver_depth=500.0, ranges=[1000.0])
    assert float(found["travel_time"][0]) == pytest.approx(0.7391791997, abs=2e-10)


def test_time_and_range_in_one_gradient():
    times = np.array([0.35, 0.74, 1.5, 2.6])
    found = ranges_from_times(BENT, times, source_depth=0.0, receiver_depth=500.0, timing=PLAIN)
    expected = [bent_range(t, 0.0, 500.0) for t in times]
    np.testing.assert_allclose(found["horizontal_range"], expected, atol=2e-6)
    straight = np.sqrt((BENT.harmonic_mean_speed(0.0, 500.0) * times) ** 2 - 500.0**2)
    np.testing.assert_allclose(found["straight_range_error"], straight - expected, atol=2e-6)


@pytest.mark.parametrize(
    ("source", "receiver", "distance", "delay", "drift"),
    [
        (0.0, 0.0, 1.0, 0.0, 0.0), (0.0, 300.0, 4000.0, 0.5, 1e-5), (300.0, 0.0, 5.0, 2.0, -1e-5),
        (150.0, 151.0, 15_000.0, 0.1, 0.0), (290.0, 3.5, 19_999.0, 0.0, 3e-7), (20.0, 140.0, 1000.0, 0.35, 0.0),
    ],
)  # fmt: skip
def test_straight_rays_give_straight_ranges(source, receiver, distance, delay, drift):
    slant = math.hypot(distance, receiver - source)
    clock = Timing(turn_around=delay, drift=drift)
    shown = (2.0 * slant / 1500.0 + delay) * (1.0 + drift)
    found = ranges_from_times(STILL, shown, source_depth=source, receiver_depth=receiver, timing=clock)
    assert float(found["slant_range"][0]) == pytest.approx(slant, abs=2e-6)
    assert abs(float(found["straight_range_error"][0])) < 1e-4


def test_straight_up_is_found_and_less_is_refused():
    found = ranges_from_times(STILL, 2.0 * 200.0 / 1500.0, source_depth=50.0, receiver_depth=250.0)
    assert float(found["horizontal_range"][0]) < 0.01
    assert float(found["slant_range"][0]) == pytest.approx(200.0, abs=1e-6)
    with pytest.raises(InputError, match=r"time 0, 0\.1 s one way: is less than straight from 50 m to 250 m"):
        ranges_from_times(STILL, 0.2, source_depth=50.0, receiver_depth=250.0)


def test_clocks():
    two = Timing(turn_around=0.05, drift=2e-6, timing_uncertainty=2e-5, turn_around_uncertainty=1e-5)
    one = Timing(two_way=False, offset=-0.003, drift=5e-8, offset_uncertainty=1e-4, drift_uncertainty=1e-9)
    for clock in (two, one):
        np.testing.assert_allclose(clock.one_way(clock.measured(1.25, elapsed=1e5), elapsed=1e5), 1.25, rtol=1e-14)
    assert two.own == pytest.approx(0.5 * math.hypot(2e-5, 1e-5))
    np.testing.assert_allclose(one.shared(np.array([1.0]), elapsed=1e5), [[1e-4], [1e-4]])


def test_uncertainty_of_straight_rays():
    """One error of the speed throughout: sigma(range)/range = sigma(c)/c; timing: c sigma(t); depth: tan(angle)."""
    water = Profile([0.0, 100.0, 300.0], [1500.0] * 3, shapes={"salinity": [-0.4] * 3, "temperature": [0.3] * 3})
    clock = Timing(two_way=False, timing_uncertainty=1e-4)
    found = ranges_from_times(
        water, 1.0, source_depth=20.0, receiver_depth=260.0, timing=clock, depth_uncertainty=2.0
    ).isel(measurement=0)
    level = math.sqrt(1500.0**2 - 240.0**2)
    parts = {"timing": 0.15 * 1500.0 / level, "sound_speed": 0.5 * 1500.0 / level, "depth": 2.0 * 240.0 / level}
    for name, part in parts.items():
        assert float(found[f"horizontal_range_uncertainty_by_{name}"]) == pytest.approx(part, rel=1e-6)
    assert float(found["horizontal_range_uncertainty"]) == pytest.approx(math.hypot(*parts.values()), rel=1e-6)
    # the straight distance does not depend on the depth where rays are straight
    assert float(found["slant_range_uncertainty"]) == pytest.approx(math.hypot(0.15, 0.5), rel=1e-6)


def test_sensitivity_is_the_change_of_the_time_with_the_water():
    """Against profiles that were changed, in a duct whose rays turn."""
    depth = np.array([0.0, 50.0, 120.0, 200.0, 400.0])
    speed = np.array([1510.0, 1500.0, 1490.0, 1495.0, 1500.0])
    shape = np.array([0.5, -0.3, 0.8, 0.1, 0.4])
    for distance in (300.0, 2000.0):
        rays = Direct(Profile(depth, speed), 60.0, 150.0).at([distance])
        ends = [
            Direct(Profile(depth, speed + sign * 1e-3 * shape), 60.0, 150.0).at([distance]).time[0] for sign in (1, -1)
        ]
        assert float((rays.by_level @ shape)[0]) == pytest.approx((ends[0] - ends[1]) / 2e-3, rel=2e-4)


def test_slowness_is_the_change_of_the_time_with_place():
    rays = Direct(BENT, 100.0, 400.0).at([1500.0])
    step = 0.5
    along = bent_time(1500.0 + step, 100.0, 400.0) - bent_time(1500.0 - step, 100.0, 400.0)
    down = bent_time(1500.0, 100.0, 400.0 + step) - bent_time(1500.0, 100.0, 400.0 - step)
    assert rays.along[0] == pytest.approx(along / (2 * step), rel=1e-6)
    assert rays.down[0] == pytest.approx(down / (2 * step), rel=1e-6)


@pytest.mark.parametrize("distance", [0.0, 0.01, 0.29, 0.31, 5.0])
def test_rays_that_are_nearly_straight_up(distance):
    """On both sides of where the first terms of a steep ray are enough (0.3 m here)."""
    rays = Direct(BENT, 400.0, 100.0).at([distance])
    distance = max(distance, 1e-3)
    assert rays.time[0] == pytest.approx(bent_time(distance, 400.0, 100.0), abs=1e-11)
    step = 1e-3
    along = bent_time(distance + step, 400.0, 100.0) - bent_time(distance - step, 400.0, 100.0)
    assert rays.along[0] == pytest.approx(along / (2 * step), abs=2e-10)
    # an error of the speed in proportion to it makes the time shorter by the same part
    speeds = Direct(BENT, 400.0, 100.0).column.speed
    assert float(rays.by_level[0] @ speeds) == pytest.approx(-rays.time[0], rel=1e-6)


def test_ranging_wants_a_profile():
    section = Section.from_profile(STILL, max_range=1000.0)
    with pytest.raises(InputError, match="water is a Section: ranging takes one profile"):
        travel_times(section, source_depth=1.0, receiver_depth=2.0, ranges=[1.0])
    with pytest.raises(InputError, match="receiver depth is 900 m: 0 to 300 m, within the profile"):
        travel_times(STILL, source_depth=1.0, receiver_depth=900.0, ranges=[1.0])


def test_uncertainty_that_is_not_known_matters_only_where_sound_goes():
    water = Profile([0.0, 50.0, 100.0, 300.0], [1500.0] * 4, [0.3, 0.3, 0.3, np.nan])
    above, below = (
        travel_times(water, source_depth=20.0, receiver_depth=depth, ranges=[500.0]) for depth in (90.0, 200.0)
    )
    assert float(above["travel_time_uncertainty"][0]) == pytest.approx(float(above["travel_time"][0]) * 0.3 / 1500.0)
    assert np.isnan(below["travel_time_uncertainty"][0])


def test_no_direct_ray_in_the_shadow():
    # circles about a centre C1/G above the surface: the last ray between 100 m and 400 m turns on the seabed
    last = sum(math.sqrt((C1 / G + 600.0) ** 2 - (C1 / G + z) ** 2) for z in (100.0, 400.0))
    found = travel_times(BENT, source_depth=100.0, receiver_depth=400.0, ranges=[0.999 * last, 1.001 * last])
    assert np.isfinite(found["travel_time"]).values.tolist() == [True, False]
    with pytest.raises(InputError, match="no direct ray takes so long, sound comes by surface or seabed alone"):
        ranges_from_times(BENT, 20.0, source_depth=100.0, receiver_depth=400.0, timing=PLAIN)


def test_tables_agree_with_rays():
    direct = Direct(BENT, 100.0, 400.0)
    table = Tabulated(direct, 10_000.0, tolerance=1e-7)
    x = np.linspace(3.0, 9900.0, 700)
    found = table.at(x)
    lit = np.isfinite(found.time)
    np.testing.assert_allclose(found.time[lit], bent_time(x, 100.0, 400.0)[lit], atol=2e-7)
    last = sum(math.sqrt((C1 / G + 600.0) ** 2 - (C1 / G + z) ** 2) for z in (100.0, 400.0))
    assert np.array_equal(lit, x < last)
    assert table.held.sum() < 200


@pytest.mark.parametrize(("latitude", "longitude"), [(32.0, -64.0), (-18.0, 179.995)])
def test_place_in_one_gradient(latitude, longitude):
    """Times by the closed form, over geodesics; also across the date line."""
    sites = around(4, 2500.0, 590.0, latitude=latitude, longitude=longitude)
    lon, lat, _ = GEOD.fwd(longitude, latitude, 200.0, 900.0)
    times = bent_time(distances(sites, lat, lon), 590.0, 10.0)
    found = locate(BENT, sites, PLAIN.measured(times), target_depth=10.0, timing=PLAIN).isel(fix=0)
    assert GEOD.inv(lon, lat, float(found["longitude"]), float(found["latitude"]))[2] < 1e-4
    assert float(found["misfit"]) < 1e-6
    assert not found["ambiguous"]


def test_place_with_unknown_clock_and_depth():
    sites = [*around(5, 2500.0, 590.0), Site("middle", 32.0, -64.0, 300.0)]
    lon, lat, _ = GEOD.fwd(-64.0, 32.0, 200.0, 900.0)
    depths = np.array([site.depth for site in sites])
    times = bent_time(distances(sites, lat, lon), depths, 130.0) + 2.75
    found = locate(BENT, sites, times, target_depth=60.0, timing=PLAIN, unknown_offset=True, unknown_depth=True).isel(
        fix=0
    )
    assert GEOD.inv(lon, lat, float(found["longitude"]), float(found["latitude"]))[2] < 1e-3
    assert float(found["clock_offset"]) == pytest.approx(2.75, abs=1e-6)
    assert float(found["target_depth"]) == pytest.approx(130.0, abs=5e-3)


def test_two_stations_leave_two_places_unless_a_start_is_given():
    sites = around(2, 1000.0, 50.0, turn=90.0)
    lon, lat, _ = GEOD.fwd(-64.0, 32.0, 0.0, 800.0)
    times = np.hypot(distances(sites, lat, lon), 100.0) / 1500.0
    found = locate(STILL, sites, times, target_depth=150.0, timing=PLAIN)
    assert bool(found["ambiguous"][0])
    assert np.isnan(found["misfit"][0])
    near = locate(STILL, sites, times, target_depth=150.0, timing=PLAIN, start=(32.005, -64.0)).isel(fix=0)
    assert GEOD.inv(lon, lat, float(near["longitude"]), float(near["latitude"]))[2] < 1e-3


@pytest.mark.parametrize("count", [3, 4, 5, 8])
@pytest.mark.parametrize("offset", [False, True])
def test_dilution_of_regular_polygons(count, offset):
    """2/sqrt(N) at the middle, with the clock known or not: the columns of the three unknowns are at right angles."""
    sites = around(count, 3000.0, 100.0)
    found = dilution_map(
        STILL, sites, latitude=[32.0], longitude=[-64.0], target_depth=100.0, timing=PLAIN, unknown_offset=offset
    ).squeeze()
    assert float(found["dilution"]) == pytest.approx(2.0 / math.sqrt(count), rel=1e-6)
    # distances known within 0.15 m each (1e-4 s): both variances are 2 sigma²/N; 95 % of a round normal is 2.4477
    expected = math.sqrt(-2.0 * math.log(0.05)) * 0.15 * math.sqrt(2.0 / count)
    assert float(found["error_major_95"]) == pytest.approx(expected, rel=1e-6)
    assert float(found["error_minor_95"]) == pytest.approx(expected, rel=1e-6)


def test_an_error_of_the_speed_alone():
    """From two stations at right angles both distances err together, by 3000 m sigma(c)/c: along the line between."""
    water = Profile([0.0, 300.0], [1500.0, 1500.0], [1.0, 1.0])
    sites = around(4, 3000.0, 100.0)
    two, four = (
        dilution_map(water, chosen, latitude=[32.0], longitude=[-64.0], target_depth=100.0, timing=PLAIN).squeeze()
        for chosen in (sites[:2], sites)
    )
    expected = math.sqrt(-2.0 * math.log(0.05)) * math.sqrt(2.0) * 3000.0 / 1500.0
    assert float(two["sound_speed_error_95"]) == pytest.approx(expected, rel=1e-5)
    # from all sides it makes all distances too long, and moves nothing
    assert float(four["sound_speed_error_95"]) < 1e-4


def test_slanted_lines_dilute_by_their_cosine():
    sites = around(4, 200.0, 300.0)
    found = dilution_map(STILL, sites, latitude=[32.0], longitude=[-64.0], target_depth=0.0, timing=PLAIN)
    assert float(found["dilution"].squeeze()) == pytest.approx(math.hypot(200.0, 300.0) / 200.0, rel=1e-5)


def test_stations_that_are_not_heard_say_nothing():
    sites = [*around(3, 1500.0, 590.0), Site("far", 32.5, -64.0, 590.0)]
    few, all_four = (
        dilution_map(BENT, chosen, latitude=[32.001], longitude=[-64.0], target_depth=10.0).squeeze()
        for chosen in (sites[:3], sites)
    )
    assert int(all_four["stations_heard"]) == 3
    for name in ("dilution", "error_major_95"):
        assert float(all_four[name]) == pytest.approx(float(few[name]), rel=1e-4)


def test_monte_carlo_agrees_with_the_covariance():
    """Times drawn with errors of timing, speed, depth and stations' places; where they are found scatters as told."""
    rng = np.random.default_rng(20)
    draws = 500
    water = Profile([0.0, 300.0], [1500.0, 1500.0], [1.2, 1.2])
    clock = Timing(two_way=False, timing_uncertainty=3e-4, offset_uncertainty=2e-4)
    sites = [*around(4, 2000.0, 280.0)[:3], Site("D", 32.002, -64.004, 150.0)]
    lon, lat, _ = GEOD.fwd(-64.0, 32.0, 60.0, 1100.0)
    known = {"target_depth": 20.0, "target_depth_uncertainty": 3.0, "station_uncertainty": 0.5, "timing": clock}
    level, heights = distances(sites, lat, lon), np.array([site.depth for site in sites]) - 20.0
    speed = 1500.0 + 1.2 * rng.standard_normal((draws, 1))
    moved = level + 0.5 * rng.standard_normal((draws, 4))
    times = np.hypot(moved, heights + 3.0 * rng.standard_normal((draws, 1))) / speed
    times += 2e-4 * rng.standard_normal((draws, 1)) + 3e-4 * rng.standard_normal((draws, 4))
    found = locate(water, sites, times, **known)
    azimuth, _, away = GEOD.inv(np.full(draws, lon), np.full(draws, lat), found["longitude"], found["latitude"])
    turn = np.radians(azimuth - float(found["error_azimuth"].mean()))
    for name, part in (("error_major_95", away * np.cos(turn)), ("error_minor_95", away * np.sin(turn))):
        expected = float(found[name].mean()) / math.sqrt(-2.0 * math.log(0.05))
        assert np.std(part) == pytest.approx(expected, rel=0.05)
    assert float(found["misfit"].mean()) == pytest.approx(1.0, abs=0.12)
    mapped = dilution_map(water, sites, latitude=[lat], longitude=[lon], **known).squeeze()
    assert float(mapped["error_major_95"]) == pytest.approx(float(found["error_major_95"].mean()), rel=0.02)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"sites": 1}, "1 stations for 2 unknowns"),
        ({"timing": Timing(timing_uncertainty=0.0)}, "timing_uncertainty is 0 s"),
        ({"unknown_offset": True}, "a clock's offset is unknown one way only"),
        ({"target_depth_uncertainty": -1.0}, "target_depth_uncertainty is -1 m"),
        ({"times": [1.0, np.nan, np.nan]}, "fix 0: 1 times for 2 unknowns"),
        ({"times": [1.0, 1.0]}, r"times have the shape \(1, 2\): one for each of 3 stations"),
    ],
)
def test_impossible_fixes_are_refused(change, message):
    options = {"target_depth": 50.0, **change}
    sites = around(options.pop("sites", 3), 1000.0, 100.0)
    with pytest.raises(InputError, match=message):
        locate(STILL, sites, options.pop("times", [1.0] * len(sites)), **options)


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        ({"timing_uncertainty": -1.0}, "timing_uncertainty is -1"),
        ({"offset": 1.0}, "offset is 1, which means nothing two ways"),
        ({"two_way": False, "turn_around": 1.0}, "turn_around is 1, which means nothing one way"),
        ({"drift": 0.5}, "drift is 0.5: seconds in a second"),
        ({"drift": math.nan}, "drift is nan"),
    ],
)
def test_impossible_clocks_are_refused(fields, message):
    with pytest.raises(InputError, match=message):
        Timing(**fields)


def test_impossible_ranges_are_refused():
    with pytest.raises(InputError, match="ranges: one or more distances of 0 m or more"):
        travel_times(STILL, source_depth=1.0, receiver_depth=2.0, ranges=[-1.0])
    with pytest.raises(InputError, match="mean_speed is 15 m/s: 1000 to 3000"):
        travel_times(STILL, source_depth=1.0, receiver_depth=2.0, ranges=[1.0], mean_speed=15.0)
    with pytest.raises(InputError, match="elapsed: 2 for 3 times"):
        ranges_from_times(STILL, [1.0] * 3, source_depth=1.0, receiver_depth=2.0, elapsed=[1.0, 2.0])
