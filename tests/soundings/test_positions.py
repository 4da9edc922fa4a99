"""Positions on the Earth: against pyproj's geodesics, straight lines over a sphere, an integrator, and arithmetic."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pyproj import Geod, Transformer
from scipy.integrate import solve_ivp

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions
from ocean_sound.soundings.positions import (
    earth_radius,
    flat_depth,
    flattened,
    midpoint_error,
    offsets,
    reduced_depth,
    sounding_height,
    sounding_positions,
    true_depth,
)

GEOD = Geod(ellps="WGS84")
EARTH = 6371000.0


def apart(latitude, longitude, other_latitude, other_longitude):
    return GEOD.inv(longitude, latitude, other_longitude, other_latitude)[2]


@pytest.mark.parametrize(("limit", "within"), [(1e3, 1e-6), (1e4, 1e-4), (3e4, 1e-3)])
def test_positions_against_geodesics(limit, within):
    rng = np.random.default_rng(1)
    n = 5000
    latitude = np.concatenate((rng.uniform(-85, 85, n - 4), [85.0, -85.0, 0.0, 85.0]))
    longitude = np.concatenate((rng.uniform(-180, 180, n // 2), rng.uniform(179.9, 180.1, n - n // 2)))
    heading = np.concatenate((rng.uniform(0, 360, n - 4), [0.0, 180.0, 90.0, 270.0]))
    distance, relative = limit * np.sqrt(rng.uniform(0, 1, n)), rng.uniform(-180, 180, n)
    distance[-4:] = limit
    across, along = distance * np.sin(np.radians(relative)), distance * np.cos(np.radians(relative))
    found = sounding_positions(latitude, longitude, heading, across, along)
    expected_longitude, expected_latitude, _ = GEOD.fwd(longitude, latitude, heading + relative, distance)
    assert apart(*found, expected_latitude, expected_longitude).max() < within
    assert ((found[1] >= -180.0) & (found[1] <= 180.0)).all()
    back = offsets(latitude, longitude, *found, heading)
    shorter = distance**3 / (6.0 * 6.3e6**2)  # in the plane that touches the ellipsoid
    assert (np.hypot(back[0] - across, back[1] - along) <= 1.05 * shorter + 1e-6 + within).all()


@given(
    latitude=st.floats(-85, 85),
    longitude=st.floats(-180, 180),
    heading=st.floats(0, 360),
    across=st.floats(-7000, 7000),
    along=st.floats(-7000, 7000),
)
def test_positions_of_any_sounding(latitude, longitude, heading, across, along):
    found = sounding_positions(latitude, longitude, heading, across, along)
    azimuth, distance = heading + np.degrees(np.arctan2(across, along)), np.hypot(across, along)
    expected_longitude, expected_latitude, _ = GEOD.fwd(longitude, latitude, azimuth, distance)
    assert apart(*found, expected_latitude, expected_longitude) < 1e-3
    turned = sounding_positions(latitude, longitude + 360.0, heading, across, along)
    assert turned[0] == found[0]
    assert abs((turned[1] - found[1] + 180.0) % 360.0 - 180.0) < 1e-9


def test_across_the_date_line_and_at_the_pole():
    latitude, longitude = sounding_positions(-85.0, 179.999, 90.0, 0.0, 1000.0)
    assert longitude == pytest.approx(-179.898, abs=0.002)
    latitude, longitude = sounding_positions(
        90.0, 0.0, 0.0, 5000.0, 0.0
    )  # over the pole, "north" is along longitude 180
    assert apart(latitude, longitude, 90.0, 0.0) == pytest.approx(5000.0, abs=1e-4)
    assert longitude == pytest.approx(90.0, abs=1e-9)


def test_height_of_the_water_surface():
    # On a surface 4 km up a distance covers R/(R + h) of it on the ellipsoid (a mountain lake, say).
    latitude, longitude, heading, distance = 40.0, -100.0, 30.0, 5000.0
    found = sounding_positions(latitude, longitude, heading, 0.0, distance, height=4000.0)
    share = float(earth_radius(latitude, heading)) / (float(earth_radius(latitude, heading)) + 4000.0)
    expected_longitude, expected_latitude, _ = GEOD.fwd(longitude, latitude, heading, distance * share)
    assert apart(*found, expected_latitude, expected_longitude) < 1e-4


def test_nothing_is_made_up():
    latitude, longitude = sounding_positions(
        [91.0, np.nan, 10.0, 10.0], 0.0, [0.0, 0.0, np.nan, 0.0], [1.0, 1.0, 1.0, np.nan]
    )
    assert np.isnan(latitude).all()
    assert np.isnan(longitude).all()
    assert np.isnan(earth_radius(90.1))
    same = sounding_positions(50.0, 8.0, 12.0, 0.0, 0.0)
    assert same == pytest.approx((50.0, 8.0), abs=1e-13)
    pings = sounding_positions(np.array([[10.0], [20.0]]), 5.0, np.array([[0.0], [90.0]]), np.linspace(-50, 50, 7))
    assert pings[0].shape == pings[1].shape == (2, 7)


def test_offsets_against_a_topocentric_frame():
    to_frame = Transformer.from_pipeline(
        "+proj=pipeline +step +proj=cart +ellps=WGS84 +step +proj=topocentric +ellps=WGS84 +lon_0=-70 +lat_0=62 +h_0=0"
    )
    longitude, latitude = np.array([-70.1, -69.99, -70.0]), np.array([62.01, 61.995, 62.0])
    east, north, _ = to_frame.transform(np.radians(longitude), np.radians(latitude), np.zeros(3), radians=True)
    across, along = offsets(62.0, -70.0, latitude, longitude, 0.0)
    assert across == pytest.approx(east, abs=1e-6)
    assert along == pytest.approx(north, abs=1e-6)
    across, along = offsets(62.0, -70.0, latitude, longitude + 360.0, 90.0)
    assert across == pytest.approx(-north, abs=1e-6)
    assert along == pytest.approx(east, abs=1e-6)


def test_radius_of_the_earth():
    # a²/b at the poles; a and b²/a at the equator, for azimuths east and north: properties of the ellipse.
    a, f = 6378137.0, 1.0 / 298.257223563
    b = a * (1.0 - f)
    assert earth_radius(90.0) == pytest.approx(a * a / b, rel=1e-14)
    assert earth_radius(0.0, [90.0, 0.0, 270.0]) == pytest.approx([a, b * b / a, a], rel=1e-14)
    assert earth_radius(30.0, 45.0) == pytest.approx(2.0 / (1.0 / earth_radius(30.0, 0) + 1.0 / earth_radius(30.0, 90)))
    # The arc over 2 km of meridian, by pyproj.
    half = np.degrees(1000.0 / float(earth_radius(57.0, 0.0)))
    assert apart(57.0 - half, 3.0, 57.0 + half, 3.0) == pytest.approx(2000.0, abs=1e-3)


def test_one_position_for_two():
    assert midpoint_error([4.0, 0.1], [-5.0, 5.0]) == pytest.approx([10.0, 0.25])


# Curvature


def over_a_sphere(source, angle, length, radius):
    """Depth and distance along the surface of the end of a straight line from a source below it."""
    out, up = length * np.sin(np.radians(angle)), radius - source - length * np.cos(np.radians(angle))
    return radius - np.hypot(out, up), radius * np.arctan2(out, up)


@pytest.mark.parametrize("depth", [100.0, 1000.0, 6000.0])
def test_curvature_against_straight_lines_over_a_sphere(depth):
    angle, source = np.array([0.0, 20.0, 45.0, 65.0, 75.0]), 6.0
    length = (depth - source) / np.cos(np.radians(angle))
    water = flattened(Profile([0, 7000], [1500, 1500]), EARTH)
    found = beam_positions(water, angle, length / 1500.0, transducer_depth=float(flat_depth(source, EARTH)))
    expected = over_a_sphere(source, angle, length, EARTH)
    assert true_depth(found.depth, EARTH) == pytest.approx(expected[0], abs=1e-4)
    assert found.across == pytest.approx(expected[1], abs=1e-4)


def test_size_of_curvature():
    # x²/(2 R), 0.4 m.
    length = 1000.0 / np.cos(np.radians(65.0))
    found = beam_positions(flattened(Profile([0, 2000], [1500, 1500]), EARTH), 65.0, length / 1500.0)
    risen = 1000.0 - float(true_depth(found.depth, EARTH))
    assert risen == pytest.approx((length * np.sin(np.radians(65.0))) ** 2 / (2 * EARTH), rel=1e-3)
    assert round(risen, 1) == 0.4


@pytest.mark.parametrize("angle", [10.0, 65.0])
def test_curvature_in_layered_water_against_an_integrator(angle):
    # On a sphere, with φ the angle at the centre, r' = -c cos i, r φ' = c sin i and r sin i/c constant.
    depth, speed = np.array([0.0, 150.0, 1000.0, 5000.0]), np.array([1520.0, 1490.0, 1482.0, 1550.0])
    constant, time = EARTH * np.sin(np.radians(angle)) / speed[0], 1.2

    def rate(_, state):
        c = np.interp(EARTH - state[0], depth, speed)
        sine = constant * c / state[0]
        return [-c * np.sqrt(1.0 - sine * sine), c * sine / state[0]]

    run = solve_ivp(rate, (0.0, time), [EARTH, 0.0], method="DOP853", rtol=1e-13, atol=1e-9, max_step=2e-3)
    found = beam_positions(flattened(Profile(depth, speed), EARTH), angle, time)
    assert true_depth(found.depth, EARTH) == pytest.approx(EARTH - run.y[0, -1], abs=1e-3)
    assert found.across == pytest.approx(EARTH * run.y[1, -1], abs=1e-3)


def test_a_flattened_profile():
    water = Profile(
        [5.0, 50.0, 5000.0], [1500.0, 1490.0, 1540.0], shapes={"equation": np.full(3, 0.2)}, noise=[0.1, 0.1, 0.0]
    )
    flat = flattened(water, EARTH)
    assert true_depth(flat.depth, EARTH) == pytest.approx([0.0, 5.0, *np.linspace(50.0, 5000.0, 11)])
    factor = EARTH / (EARTH - 5000.0)
    assert flat.speed[-1] == pytest.approx(1540.0 * factor)
    assert flat.shapes["equation"][-1] == pytest.approx(0.2 * factor)
    assert "flattened: the Earth's radius is 6371000 m" in flat.notes
    assert flat.depth[-1] == pytest.approx(EARTH * np.log(factor))
    assert water.depth[-1] == 5000.0
    for radius in (np.nan, 9000.0, -1.0):
        with pytest.raises(InputError, match=r"radius of the Earth is .* about 6371000 would be right"):
            flattened(water, radius)


@given(st.floats(0.0, 11000.0))
def test_depths_there_and_back(depth):
    assert true_depth(flat_depth(depth, EARTH), EARTH) == pytest.approx(depth, abs=1e-9)


# Levels


def test_water_level_and_heights():
    assert reduced_depth([12.0, 1.5, np.nan], [2.0, 2.0, 1.0]) == pytest.approx([10.0, -0.5, np.nan], nan_ok=True)
    # Heave lifts transducer and depth below the surface alike: the seabed stays.
    still, lifted = sounding_height(30.0, 4.0, 41.5), sounding_height(29.0, 3.0, 41.5)
    assert still == lifted == 15.5
